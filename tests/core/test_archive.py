"""One workspace as one file: it reopens everything, and nothing else is taken for one."""

import hashlib
import io
import json
import struct
import zipfile
from contextlib import closing

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from core import archive, steps
from core.errors import StoreFailed
from core.store import Store
from tests.core.workspaces import invented_sweep, refinement

DATA = "V;J\n0;0,021\n".encode()


def filled(store):
    workspace_id = store.create("night shift")
    workspace = store.current(workspace_id)
    source = store.keep_file(DATA, "../cell A: 1.csv")
    sweeps = [invented_sweep("A", "fwd", header={"Ort": "Süd"}), invented_sweep("B", "rev", offset=1e-5)]
    workspace = store.commit(workspace_id, steps.add_sweeps(workspace, sweeps, source=source, source_name="a"), 0)
    entry = workspace.in_tray_order()[0].id
    workspace = store.commit(workspace_id, steps.record_refinement(workspace, entry, refinement()), 1)
    return store.commit(workspace_id, steps.set_conditions(workspace, entry, irradiance=0.08), 2)


@pytest.fixture
def store(tmp_path):
    with closing(Store(tmp_path / "home")) as store:
        yield store


@pytest.fixture(scope="module")
def packed(tmp_path_factory):
    with closing(Store(tmp_path_factory.mktemp("archive"))) as store:
        return store.export(filled(store).id)


def members_of(data):
    with zipfile.ZipFile(io.BytesIO(data)) as opened:
        return {name: opened.read(name) for name in opened.namelist()}


def zipped(members):
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w") as opened:
        for name, content in members.items():
            opened.writestr(name, content)
    return buffer.getvalue()


def relisted(members):
    """The members with a manifest that agrees with them."""
    manifest = json.loads(members["manifest.json"])
    manifest["members"] = [
        {"path": path, "size": len(content), "sha256": hashlib.sha256(content).hexdigest()}
        for path, content in members.items()
        if path != "manifest.json"
    ]
    return {**members, "manifest.json": json.dumps(manifest).encode()}


def test_an_archive_reopens_everything_in_another_store(store, tmp_path):
    workspace = filled(store)
    data = store.export(workspace.id)
    with closing(Store(tmp_path / "elsewhere")) as other:
        new = other.import_archive(data)
        read = other.current(new)
        assert (read.name, read.records()) == (workspace.name, workspace.records())
        for entry_id, entry in read.entries.items():
            expected = workspace.entries[entry_id].reading
            assert entry.reading.to_dict() == expected.to_dict()
            np.testing.assert_array_equal(read.sweep(entry_id).current, workspace.sweep(entry_id).current)
            assert other.file(entry.source) == DATA
        assert other.export(new) == data  # equal content, equal bytes
        second = other.import_archive(data)
        assert second != new
        assert other.current(second).name == "night shift 2"
        assert other.history(new).undo is None


def test_an_archive_is_a_zip_of_json_and_the_originals(packed):
    members = members_of(packed)
    manifest, body = json.loads(members["manifest.json"]), json.loads(members["workspace.json"])
    assert (manifest["format"], manifest["schema"], body["schema"]) == ("sweepbench workspace", 1, 1)
    assert {row["path"] for row in manifest["members"]} == members.keys() - {"manifest.json"}
    assert body["name"] == "night shift"
    assert sorted(device["name"] for device in body["devices"].values()) == ["A", "B"]
    (original,) = (name for name in members if name.startswith("originals/"))
    assert members[original] == DATA
    assert original.count("/") == 2  # the name of the file names no folder
    (entry, _) = sorted(body["entries"].values(), key=lambda entry: entry["order"])
    reading = json.loads(members[f"readings/{entry['reading']}.json"])
    assert reading["header"] == {"Ort": "Süd"}
    assert len(reading["voltage"]) == len(reading["current"]) == 12


def refusal(store, data):
    before = (store.workspaces(), store.deleted())
    with pytest.raises(StoreFailed) as refused:
        store.import_archive(data)
    assert (store.workspaces(), store.deleted()) == before
    return str(refused.value)


def test_what_is_no_archive_is_refused(store):
    for data in (b"", b"V,J\n0,1\n", b"PK\x03\x04 nothing", zipped({}), zipped({"a.csv": b"1"})):
        assert "not a workspace file" in refusal(store, data)
    assert "not a workspace file of" in refusal(store, zipped({"manifest.json": b'{"format": "other"}'}))
    for manifest in (b"[]", b"5", b'"sweepbench workspace"'):
        assert "not a workspace file" in refusal(store, zipped({"manifest.json": manifest}))


def test_a_newer_archive_is_refused(store, packed):
    for part in ("manifest.json", "workspace.json"):
        members = members_of(packed)
        members[part] = json.dumps({**json.loads(members[part]), "schema": 2}).encode()
        members = members if part == "manifest.json" else relisted(members)
        assert "newer version" in refusal(store, zipped(members))


def test_any_changed_missing_or_added_part_is_refused(store, packed):
    members = members_of(packed)
    for path, content in members.items():
        changed = {**members, path: content.replace(b"0", b"9", 1)}
        assert "damaged" in refusal(store, zipped(changed))
        assert refusal(store, zipped({name: c for name, c in members.items() if name != path}))
    assert "damaged" in refusal(store, zipped({**members, "more.txt": b"x"}))


@pytest.mark.parametrize("path", ["../evil.txt", "/etc/evil", "originals/x/y", "C:evil", "workspace.json/../x"])
def test_paths_that_do_not_belong_are_refused(store, packed, path):
    assert "does not belong" in refusal(store, zipped(relisted({**members_of(packed), path: b"x"})))


def test_an_original_that_names_a_folder_is_refused(store, packed):
    sha256 = hashlib.sha256(b"x").hexdigest()
    for name in ("..", "a/../../b", "a\\b"):
        assert refusal(store, zipped(relisted({**members_of(packed), f"originals/{sha256}/{name}": b"x"})))


def test_parts_must_hash_to_their_names_even_if_the_manifest_agrees(store, packed):
    for start in ("readings/", "originals/"):
        members = members_of(packed)
        path = next(path for path in members if path.startswith(start))
        members[path] = members[path].replace(b"0", b"1", 1)
        assert "not what was written" in refusal(store, zipped(relisted(members)))


@pytest.mark.parametrize(
    "change",
    [{"devices": {}}, {"devices": []}, {"name": 5}, {"entries": {"x": {}}}, {"fits": {"y": 3}}, {"schema": "1"}],
)
def test_records_that_do_not_hold_together_are_refused(store, packed, change):
    members = members_of(packed)
    members["workspace.json"] = json.dumps({**json.loads(members["workspace.json"]), **change}).encode()
    assert "damaged" in refusal(store, zipped(relisted(members)))


def test_a_missing_original_or_reading_is_refused(store, packed):
    for start in ("readings/", "originals/"):
        members = {path: content for path, content in members_of(packed).items() if not path.startswith(start)}
        assert "damaged" in refusal(store, zipped(relisted(members)))


def with_reading(members, change):
    """The members with the first reading changed, its id and the manifest agreeing with that."""
    path = next(path for path in sorted(members) if path.startswith("readings/"))
    text = json.dumps({**json.loads(members[path]), **change}).encode()
    old, new = path[len("readings/") : -len(".json")], hashlib.sha256(text).hexdigest()
    changed = {name: content for name, content in members.items() if name != path} | {f"readings/{new}.json": text}
    return relisted({**changed, "workspace.json": members["workspace.json"].replace(old.encode(), new.encode())})


@pytest.mark.parametrize(
    "change",
    [
        {"voltage": [0.1 * n for n in range(11)] + [1e200]},
        {"current": [0.01] * 11 + [1e200]},
        {"voltage": [0.1 * (n % 3) for n in range(12)]},
        {"voltage": []},
        {"conditions": {"temperature": 20.0}},
        {"conditions": {"area": 1e-300}},
    ],
)
def test_points_and_conditions_that_cannot_be_are_refused_even_if_every_hash_agrees(store, packed, change):
    assert "damaged" in refusal(store, zipped(with_reading(members_of(packed), change)))


@pytest.mark.parametrize(
    ("kind", "change"),
    [("devices", {"area": 1e-300}), ("entries", {"temperature": 0.01}), ("fits", {"settings": {"window": [0.1]}})],
)
def test_records_that_would_break_the_sweep_they_belong_to_are_refused(store, packed, kind, change):
    members = members_of(packed)
    body = json.loads(members["workspace.json"])
    for record in body[kind].values():
        for name, value in change.items():
            record[name] = {**record[name], **value} if isinstance(value, dict) else value
    members["workspace.json"] = json.dumps(body).encode()
    assert "damaged" in refusal(store, zipped(relisted(members)))


def test_text_that_json_must_not_hold_is_refused(store, packed):
    members = members_of(packed)
    for text in (b"[" * 200_000, b'{"schema": NaN}', b"\xff\xfe", b'{"schema": 1'):
        assert "damaged" in refusal(store, zipped(relisted({**members, "workspace.json": text})))
    body = members["workspace.json"].replace(b'"irradiance": 0.08', b'"irradiance": 1e999')
    assert body != members["workspace.json"]
    assert "damaged" in refusal(store, zipped(relisted({**members, "workspace.json": body})))


def test_an_archive_that_would_swell_is_refused_before_it_is_unpacked(store, packed, monkeypatch):
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as opened:
        for path, content in {**members_of(packed), "zeros": bytes(70 * 2**20)}.items():
            opened.writestr(path, content)
    assert "more than is sensible" in refusal(store, buffer.getvalue())
    monkeypatch.setattr(archive, "LARGEST_COUNT", 3)
    assert "more than is sensible" in refusal(store, packed)


def test_a_part_that_holds_more_than_it_declares_is_refused(store, packed):
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_DEFLATED) as opened:
        for path, content in {**members_of(packed), "zeros": bytes(30 * 2**20)}.items():
            opened.writestr(path, content)
    lying = buffer.getvalue().replace(struct.pack("<L", 30 * 2**20), struct.pack("<L", 10))
    assert lying != buffer.getvalue()
    assert refusal(store, lying)


def test_unusual_packing_is_refused(store, packed):
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", zipfile.ZIP_BZIP2) as opened:
        for path, content in members_of(packed).items():
            opened.writestr(path, content)
    assert "unusual method" in refusal(store, buffer.getvalue())


@settings(max_examples=300, deadline=None)
@given(st.data())
def test_a_mutated_archive_is_read_whole_or_refused_in_a_sentence(packed, data):
    mutated = bytearray(packed)
    for _ in range(data.draw(st.integers(1, 5))):
        place = data.draw(st.integers(0, len(mutated) - 1))
        match data.draw(st.integers(0, 2)):
            case 0:
                mutated[place] = data.draw(st.integers(0, 255))
            case 1:
                del mutated[place : place + data.draw(st.integers(1, 200))]
            case 2:
                mutated[place:place] = data.draw(st.binary(max_size=20))
        if not mutated:
            break
    try:
        contents = archive.unpack(bytes(mutated))
    except StoreFailed as refused:
        assert len(str(refused)) < 600
    else:
        assert contents.workspace.records() == archive.unpack(packed).workspace.records()
        assert contents.readings == archive.unpack(packed).readings
