"""Files in and out, through the real routes on a real store."""

import contextlib
import io
import threading
from urllib.parse import quote

import flask
import pytest

from app import files
from app.answers import MOST_BYTES_A_REQUEST
from app.files import safe_name
from core import steps
from core.store import Store


def sweep_text(photocurrent=22.0, points=25):
    """A made-up sweep as a bench might write it."""
    volts = [1.1 * n / (points - 1) for n in range(points)]
    rows = (f"{v:.4f},{photocurrent * (1 - (v / 1.05) ** 9):.5f}" for v in volts)
    return ("Voltage (V),Current density (mA/cm2)\n" + "\n".join(rows) + "\n").encode()


@pytest.fixture
def store(tmp_path):
    with contextlib.closing(Store(tmp_path)) as store:
        yield store


@pytest.fixture
def workspace(store):
    return store.first()


@pytest.fixture
def client(store):
    server = flask.Flask(__name__)
    server.config["MAX_CONTENT_LENGTH"] = MOST_BYTES_A_REQUEST
    files.register(server, store)
    return server.test_client()


def drop(client, path, named):
    parts = [(io.BytesIO(data), quote(name, safe="")) for name, data in named.items()]
    return client.post(path, data={"files": parts}, content_type="multipart/form-data")


def test_a_drop_is_one_step_and_keeps_the_originals(client, store, workspace):
    given = {"a.csv": sweep_text(21), "b.csv": sweep_text(22), "c.csv": sweep_text(23)}
    answer = drop(client, f"/files/{workspace}", given).json
    assert [added["file"] for added in answer["added"]] == list(given)
    assert (answer["refused"], answer["already"]) == ([], [])
    now = store.current(workspace)
    assert now.revision == answer["revision"] == 1
    assert [e for added in answer["added"] for e in added["entries"]] == list(now.entries)
    for entry in now.entries.values():
        assert store.file(entry.source) == given[entry.source_name]
    assert store.history(workspace).undo == "add 3 sweeps"
    assert not store.undo(workspace, 1).entries


def test_names_keep_their_letters_and_folders(client, store, workspace):
    name = "Füße 太阳 100%/Probe „7“; x.csv"
    assert drop(client, f"/files/{workspace}", {name: sweep_text()}).json["added"][0]["file"] == name
    assert [entry.source_name for entry in store.current(workspace).entries.values()] == [name]


def test_a_name_that_climbs_out_of_its_folder_does_not(client, workspace):
    answer = drop(client, f"/files/{workspace}", {"../../etc/./pass\nwd.csv": sweep_text()}).json
    assert answer["added"][0]["file"] == "etc/passwd.csv"


def test_one_bad_file_does_not_take_the_others_along(client, store, workspace):
    given = {
        "good.csv": sweep_text(21),
        "empty.csv": b"",
        "picture.png": b"\x89PNG\r\n\x1a\n" + bytes(64),
        "letter.txt": b"Dear all, the sweeps come tomorrow.\n",
        "also good.csv": sweep_text(22),
    }
    answer = drop(client, f"/files/{workspace}", given).json
    assert [added["file"] for added in answer["added"]] == ["good.csv", "also good.csv"]
    assert [refused["file"] for refused in answer["refused"]] == ["empty.csv", "picture.png", "letter.txt"]
    assert all(refused["file"] in refused["sentence"] for refused in answer["refused"])
    assert store.current(workspace).revision == 1


def test_a_bug_in_reading_refuses_its_file_and_goes_to_the_log(client, workspace, monkeypatch, caplog):
    reads = files.read_sweeps
    monkeypatch.setattr(files, "read_sweeps", lambda data, name: 1 / 0 if name == "a.csv" else reads(data, name))
    answer = drop(client, f"/files/{workspace}", {"a.csv": sweep_text(21), "b.csv": sweep_text(22)}).json
    assert [added["file"] for added in answer["added"]] == ["b.csv"]
    assert "went wrong" in answer["refused"][0]["sentence"] and "ZeroDivision" not in answer["refused"][0]["sentence"]
    assert "ZeroDivisionError" in caplog.text


def test_the_same_bytes_are_loaded_once(client, store, workspace):
    answer = drop(client, f"/files/{workspace}", {"a.csv": sweep_text(), "copy of a.csv": sweep_text()}).json
    assert answer["already"] == ["copy of a.csv"]
    again = drop(client, f"/files/{workspace}", {"a.csv": sweep_text()}).json
    assert (again["already"], again["added"], again["revision"]) == (["a.csv"], [], 1)
    assert len(store.current(workspace).entries) == 1


def test_only_bad_files_change_nothing(client, store, workspace):
    assert drop(client, f"/files/{workspace}", {"empty.csv": b""}).json["revision"] == 0
    assert store.history(workspace).undo is None


def test_a_drop_is_added_even_if_the_workspace_moves_on_meanwhile(client, store, workspace, monkeypatch):
    first = drop(client, f"/files/{workspace}", {"a.csv": sweep_text(21)}).json["added"][0]["entries"][0]
    build, moves = steps.add_sweeps, iter(["renamed meanwhile"])

    def add_while_another_tab_renames(now, *args, **named):
        for name in moves:
            store.commit(workspace, steps.rename_entry(now, first, name), now.revision)
        return build(now, *args, **named)

    monkeypatch.setattr(files.steps, "add_sweeps", add_while_another_tab_renames)
    answer = drop(client, f"/files/{workspace}", {"b.csv": sweep_text(22)}).json
    now = store.current(workspace)
    assert answer["revision"] == now.revision == 3
    assert len(now.entries) == 2 and now.entries[first].name == "renamed meanwhile"


def test_drops_at_the_same_time_all_arrive(client, store, workspace):
    def one(number):
        drop(client.application.test_client(), f"/files/{workspace}", {f"{number}.csv": sweep_text(20 + number / 10)})

    threads = [threading.Thread(target=one, args=(number,)) for number in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert {e.source_name for e in store.current(workspace).entries.values()} == {f"{n}.csv" for n in range(6)}


def test_an_original_comes_back_byte_for_byte_under_a_safe_name(client, store, workspace):
    data = sweep_text().replace(b"\n", b"\r\n")
    drop(client, f"/files/{workspace}", {"a.csv": data})
    (entry,) = store.current(workspace).entries.values()
    answer = client.get(f"/files/originals/{entry.source}?name=..%2Fa%0Ab.csv")
    assert answer.data == data
    assert answer.headers["Content-Disposition"] == "attachment; filename=a_b.csv"
    assert answer.mimetype == "application/octet-stream"


def test_an_exported_workspace_opens_as_another_one_with_the_same_sweeps(client, store, workspace):
    drop(client, f"/files/{workspace}", {"a.csv": sweep_text()})
    archive = client.get(f"/files/export/{workspace}")
    assert archive.headers["Content-Disposition"].startswith("attachment; filename=")
    assert ".sweepbench.zip" in archive.headers["Content-Disposition"]
    opened = drop(client, "/files/import", {"w.zip": archive.data}).json["workspace"]
    assert opened != workspace
    assert store.current(opened).records() == store.current(workspace).records()


def test_the_sample_sweeps_load_without_a_refusal_and_as_one_step(client, store, workspace):
    answer = client.post(f"/files/samples/{workspace}").json
    assert answer["refused"] == [] and answer["already"] == []
    assert len(answer["added"]) == len(list(files.samples())) > 0
    assert store.current(workspace).revision == 1
    again = client.post(f"/files/samples/{workspace}").json
    assert again["added"] == [] and len(again["already"]) == len(answer["added"])


@pytest.mark.parametrize(
    ("path", "given", "status"),
    [
        ("/files/nowhere", {"a.csv": b"1,2"}, 400),
        ("/files/WORKSPACE", {}, 400),
        ("/files/WORKSPACE", {f"{n}.csv": b"" for n in range(101)}, 400),
        ("/files/import", {"a.csv": b"1,2"}, 400),
        ("/files/import", {}, 400),
    ],
    ids=["no such workspace", "no file", "too many files", "not an archive", "no archive"],
)
def test_what_cannot_be_done_is_told_in_a_sentence(client, store, workspace, path, given, status):
    answer = drop(client, path.replace("WORKSPACE", workspace), given)
    assert answer.status_code == status
    assert answer.json["sentence"].endswith(".")
    assert len(store.workspaces()) == 1 and store.current(workspace).revision == 0


@pytest.mark.parametrize("path", ["/files/originals/" + "0" * 64, "/files/originals/secret", "/files/export/nowhere"])
def test_what_is_not_there_is_told_in_a_sentence(client, path):
    answer = client.get(path)
    assert 400 <= answer.status_code < 500
    assert answer.json["sentence"].endswith(".")


def test_a_drop_beyond_the_limit_is_refused_with_the_limit(client, workspace):
    client.application.config["MAX_CONTENT_LENGTH"] = 1000
    answer = drop(client, f"/files/{workspace}", {"a.csv": sweep_text(points=500)})
    assert answer.status_code == 413 and "64 MB" in answer.json["sentence"]


def test_a_bug_is_told_plainly_and_logged(client, store, workspace, monkeypatch, caplog):
    monkeypatch.setattr(store, "export", lambda workspace: {}["missing"])
    answer = client.get(f"/files/export/{workspace}")
    assert answer.status_code == 500
    assert "KeyError" not in answer.text and "went wrong" in answer.json["sentence"]
    assert "KeyError" in caplog.text


@pytest.mark.parametrize(
    ("given", "safe"),
    [
        ("a.csv", "a.csv"),
        ("/etc/passwd", "passwd"),
        ("C:\\bench\\a.csv", "a.csv"),
        ("..", "file"),
        ("", "file"),
        (".hidden", "hidden"),
        ("a\r\nSet-Cookie: x.csv", "a__Set-Cookie_ x.csv"),
        ("nul.csv", "_nul.csv"),
        ("a. ", "a"),
        ("x" * 300 + ".csv", "x" * 116 + ".csv"),
    ],
)
def test_names_of_downloads_are_safe(given, safe):
    assert safe_name(given) == safe
