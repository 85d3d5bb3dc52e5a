"""The store: every acknowledged step is on disk, and nothing else is."""

import hashlib
import os
import shutil
import sqlite3
import subprocess
import sys
import tempfile
import threading
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import pytest

from core import database, steps
from core.errors import StaleRevision, StepRefused, StoreFailed
from core.history import Limits
from core.store import DATABASE, Store
from core.tables import FIRST_NAME
from tests.core.workspaces import MODEL, invented_sweep, refinement


@pytest.fixture
def store(tmp_path):
    with closing(Store(tmp_path / "home")) as store:
        yield store


def with_sweep(store, **fields):
    """Id of the first workspace, with one sweep in it, and the id of that sweep."""
    workspace_id = store.first()
    workspace = store.current(workspace_id)
    data = b"V,J\n0,1\n"
    source = store.keep_file(data, "a.csv")
    step = steps.add_sweeps(workspace, [invented_sweep(**fields)], source=source, source_name="a.csv")
    workspace = store.commit(workspace_id, step, workspace.revision)
    return workspace_id, workspace.in_tray_order()[-1].id


def rename(store, workspace_id, entry, name):
    workspace = store.current(workspace_id)
    return store.commit(workspace_id, steps.rename_entry(workspace, entry, name), workspace.revision)


def same(one, other):
    def content(workspace):
        points = {name: sweep.to_dict() for name, sweep in workspace.readings().items()}
        return workspace.id, workspace.name, workspace.revision, workspace.records(), points

    return content(one) == content(other)


# Steps

def test_a_new_store_offers_one_empty_workspace(store):
    workspace = store.current(store.first())
    assert (workspace.name, workspace.revision, len(workspace.entries)) == (FIRST_NAME, 0, 0)
    assert store.first() == workspace.id


def test_everything_is_there_after_a_restart(store):
    workspace_id, entry = with_sweep(store)
    workspace = store.commit(workspace_id, steps.record_refinement(store.current(workspace_id), entry, refinement()), 1)
    with closing(Store(store.folder)) as again:
        read = again.current(workspace_id)
        assert same(read, workspace)
        assert again.history(workspace_id).undo == "refine"
        assert again.file(read.entries[entry].source) == b"V,J\n0,1\n"
        assert read.refined(entry).findings == ()


def test_the_current_workspace_stays_the_same_object_while_nothing_changes(store):
    workspace_id, entry = with_sweep(store)
    held = store.current(workspace_id)
    assert store.current(workspace_id) is held
    store.create("another")
    assert store.current(workspace_id) is held
    assert rename(store, workspace_id, entry, "x") is store.current(workspace_id)


def test_a_stale_step_is_refused_and_changes_nothing(store):
    workspace_id, entry = with_sweep(store)
    seen = store.current(workspace_id)
    rename(store, workspace_id, entry, "first")
    with pytest.raises(StaleRevision) as refusal:
        store.commit(workspace_id, steps.rename_entry(seen, entry, "second"), seen.revision)
    assert (refusal.value.seen, refusal.value.current) == (1, 2)
    for travel in (store.undo, store.redo):
        with pytest.raises(StaleRevision):
            travel(workspace_id, seen.revision)
    assert store.current(workspace_id).entries[entry].name == "first"
    assert store.current(workspace_id).revision == 2


def test_a_refused_step_changes_nothing(store):
    workspace_id, entry = with_sweep(store)
    before = store.current(workspace_id)
    with pytest.raises(StepRefused):
        store.commit(workspace_id, {"label": "x", "put": {"devices": {before.entries[entry].device: None}}}, 1)
    fit = before.fit(entry).to_dict()
    endless = {**refinement().to_dict(), "rmse": float("nan")}
    for wrong in ({"model": object()}, {**fit, "refinement": endless}):
        with pytest.raises(StepRefused):
            store.commit(workspace_id, {"label": "x", "put": {"fits": {entry: wrong}}}, 1)
    with closing(Store(store.folder)) as again:
        assert same(again.current(workspace_id), before)
        assert again.history(workspace_id).undo == "add sweep"


def test_a_step_that_changes_nothing_is_no_step(store):
    workspace_id, entry = with_sweep(store)
    before = store.current(workspace_id)
    assert store.commit(workspace_id, steps.rename_entry(before, entry, before.entries[entry].name), 1) is before
    assert store.history(workspace_id).undo == "add sweep"


def test_only_what_changed_is_written(store):
    workspace_id, entry = with_sweep(store, points=2000)
    with closing(sqlite3.connect(store.folder / DATABASE)) as other:
        readings = other.execute("SELECT max(rowid), count(*) FROM readings").fetchone()
        rename(store, workspace_id, entry, "renamed")
        assert other.execute("SELECT max(rowid), count(*) FROM readings").fetchone() == readings
        (size,) = other.execute("SELECT size FROM history ORDER BY position DESC LIMIT 1").fetchone()
    assert size < 2000  # bytes: no points in the step


# Undo and redo

def test_undo_and_redo_walk_through_all_steps_and_across_restarts(store):
    workspace_id, entry = with_sweep(store)
    states = [store.current(workspace_id)]
    model = steps.set_model(states[-1], entry, MODEL)
    states.append(store.commit(workspace_id, model, 1))
    states.append(store.commit(workspace_id, steps.set_conditions(states[-1], entry, area=0.3), 2))
    states.append(store.commit(workspace_id, steps.remove_entries(states[-1], [entry]), 3))
    revision = 4
    for expected in reversed(states[:-1]):
        with closing(Store(store.folder)) as again:
            got = again.undo(workspace_id, revision)
        revision += 1
        assert got.records() == expected.records()
        assert got.revision == revision
        assert store.current(workspace_id).records() == expected.records()
    assert store.history(workspace_id).redo == "change model"
    for expected in states[1:]:
        with closing(Store(store.folder)) as again:
            got = again.redo(workspace_id, revision)
        revision += 1
        assert got.records() == expected.records()
    assert store.history(workspace_id).redo is None
    with pytest.raises(StepRefused, match="nothing to redo"):
        store.redo(workspace_id, revision)


def test_a_removed_sweep_comes_back_with_its_points_and_file(store):
    workspace_id, entry = with_sweep(store)
    before = store.current(workspace_id)
    store.commit(workspace_id, steps.remove_entries(before, [entry]), 1)
    store.close()
    for _ in range(2):  # opening tidies up: it must not take what undo needs
        Store(store.folder).close()
    with closing(Store(store.folder)) as again:
        after = again.undo(workspace_id, 2)
        assert same(replace(after, revision=1), before)
        assert again.file(after.entries[entry].source)


def test_a_new_step_after_undo_drops_what_could_be_redone(store):
    workspace_id, entry = with_sweep(store)
    rename(store, workspace_id, entry, "one")
    store.undo(workspace_id, 2)
    rename(store, workspace_id, entry, "two")
    assert store.history(workspace_id).redo is None
    with pytest.raises(StepRefused):
        store.redo(workspace_id, store.current(workspace_id).revision)
    assert store.undo(workspace_id, 4).entries[entry].name == "forward"


def test_nothing_to_undo_is_a_sentence(store):
    with pytest.raises(StepRefused, match="nothing to undo"):
        store.undo(store.first(), 0)


def test_history_keeps_the_newest_steps(tmp_path):
    with closing(Store(tmp_path, limits=Limits(steps=3))) as store:
        workspace_id, entry = with_sweep(store)
        for number in range(6):
            rename(store, workspace_id, entry, f"name {number}")
        for number in (4, 3, 2):
            undone = store.undo(workspace_id, store.current(workspace_id).revision)
            assert undone.entries[entry].name == f"name {number}"
        with pytest.raises(StepRefused, match="nothing to undo"):
            store.undo(workspace_id, store.current(workspace_id).revision)


def history_size(store):
    with closing(sqlite3.connect(store.folder / DATABASE)) as other:
        return other.execute("SELECT count(*), sum(length(step) + length(inverse)) FROM history").fetchone()


def test_history_keeps_within_its_size_but_always_the_last_step(tmp_path):
    with closing(Store(tmp_path, limits=Limits(size=6000))) as store:
        workspace_id, entry = with_sweep(store)
        for number in range(40):
            rename(store, workspace_id, entry, f"name {number}")
        count, size = history_size(store)
        assert 2 < count < 20
        assert size <= 6000
        long = steps.record_refinement(store.current(workspace_id), entry, refinement(findings=["x" * 10_000]))
        store.commit(workspace_id, long, store.current(workspace_id).revision)
        assert history_size(store)[0] == 1
        assert store.undo(workspace_id, store.current(workspace_id).revision).refined(entry) is None


def test_readings_that_nothing_names_any_more_are_forgotten(tmp_path):
    with closing(Store(tmp_path, limits=Limits(steps=1))) as store:
        workspace_id, entry = with_sweep(store)
        store.commit(workspace_id, steps.remove_entries(store.current(workspace_id), [entry]), 1)
        store.rename(workspace_id, "emptied")
        with_sweep(store, device="B", offset=1e-3)
        rename(store, workspace_id, store.current(workspace_id).in_tray_order()[0].id, "x")

    def readings():
        with closing(sqlite3.connect(tmp_path / DATABASE)) as other:
            return other.execute("SELECT count(*) FROM readings").fetchone()[0]

    assert readings() == 2
    Store(tmp_path).close()
    assert readings() == 1


# Several users at once

def test_two_stores_on_one_folder_lose_no_update(store):
    workspace_id, entry = with_sweep(store)
    with closing(Store(store.folder)) as other:
        seen = other.current(workspace_id)
        rename(store, workspace_id, entry, "mine")
        with pytest.raises(StaleRevision):
            other.commit(workspace_id, steps.rename_entry(seen, entry, "theirs"), seen.revision)
        assert other.current(workspace_id).entries[entry].name == "mine"
        rename(other, workspace_id, entry, "theirs")
        assert store.current(workspace_id).entries[entry].name == "theirs"
        assert store.current(workspace_id).entries[entry].reading is not None
        assert store.undo(workspace_id, 3).entries[entry].name == "mine"


def test_steps_from_many_threads_and_two_stores_are_all_kept(store):
    workspace_id, entry = with_sweep(store)
    done, failures = [], []

    def work(own, number):
        try:
            made = 0
            while made < 5:
                workspace = own.current(workspace_id)
                device = workspace.devices[workspace.entries[entry].device]
                step = steps.set_group(workspace, [device.id], device.group + chr(97 + number))
                try:
                    own.commit(workspace_id, step, workspace.revision)
                except StaleRevision:
                    continue
                made += 1
                own.history(workspace_id)
            done.append(number)
        except BaseException as failure:  # shown by the assert below, in the thread that can fail the test
            failures.append(failure)
            raise

    with closing(Store(store.folder)) as other:
        threads = [threading.Thread(target=work, args=((store, other)[n % 2], n)) for n in range(8)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
    assert failures == []
    final = store.current(workspace_id)
    assert final.revision == 1 + 40
    (device,) = final.devices.values()
    assert sorted(device.group) == sorted("abcdefgh" * 5)


# Workspaces

def test_workspaces_are_created_renamed_duplicated_and_listed_by_use(store):
    first = store.first()
    second = store.create("batch 7")
    assert [info.name for info in store.workspaces()] == ["batch 7", FIRST_NAME]
    with_sweep(store)
    assert store.first() == second
    store.opened(first)
    assert store.first() == first
    copy = store.duplicate(second)
    assert store.current(copy).name == "batch 7 copy"
    assert store.current(copy).records() == store.current(second).records()
    assert store.history(copy).undo is None
    assert store.workspaces()[0][:2] == (copy, "batch 7 copy")
    assert {info.id: info.sweeps for info in store.workspaces()} == {first: 0, second: 1, copy: 1}
    assert store.current(store.create("batch 7")).name == "batch 7 2"


def test_a_copy_goes_its_own_way(store):
    workspace_id, entry = with_sweep(store)
    copy = store.duplicate(workspace_id)
    rename(store, copy, entry, "changed")
    assert store.current(workspace_id).entries[entry].name == "forward"


def test_renaming_a_workspace_is_seen_by_every_tab(store):
    workspace_id, entry = with_sweep(store)
    renamed = store.rename(workspace_id, " night shift ")
    assert (renamed.name, renamed.revision) == ("night shift", 2)
    with closing(Store(store.folder)) as again:
        assert again.current(workspace_id).name == "night shift"
    rename(store, workspace_id, entry, "x")
    assert store.current(workspace_id).name == "night shift"
    assert store.undo(workspace_id, 3).name == "night shift"
    store.create("taken")
    for name in ("", "taken"):
        with pytest.raises(StepRefused):
            store.rename(workspace_id, name)


def test_a_deleted_workspace_can_be_brought_back_with_its_history(store):
    workspace_id, entry = with_sweep(store)
    before = store.current(workspace_id)
    store.delete(workspace_id)
    assert [info.id for info in store.deleted()] == [workspace_id]
    for ask in (store.current, store.delete, store.export, store.opened, store.duplicate):
        with pytest.raises(StoreFailed, match="not there"):
            ask(workspace_id)
    with pytest.raises(StoreFailed, match="not there"):
        store.commit(workspace_id, steps.rename_entry(before, entry, "x"), 1)
    replacement = store.first()
    assert replacement != workspace_id
    store.close()
    with closing(Store(store.folder)) as again:
        again.restore(workspace_id)
        assert again.current(workspace_id).records() == before.records()
        assert again.current(workspace_id).name == FIRST_NAME + " 2"  # the replacement has taken its name
        assert again.history(workspace_id).undo == "add sweep"
        with pytest.raises(StoreFailed, match="brought back"):
            again.restore(workspace_id)


def test_a_workspace_deleted_elsewhere_is_gone_here_too(store):
    workspace_id, _ = with_sweep(store)
    store.current(workspace_id)
    with closing(Store(store.folder)) as other:
        other.delete(workspace_id)
    with pytest.raises(StoreFailed, match="deleted"):
        store.current(workspace_id)


# Original files

def test_originals_are_kept_byte_for_byte_and_verified(store):
    data = bytes(range(256)) * 40
    name = store.keep_file(data, "a.bin")
    assert name == hashlib.sha256(data).hexdigest() == store.keep_file(data, "b.bin")
    assert store.file(name) == data
    with closing(sqlite3.connect(store.folder / DATABASE)) as other, other:
        other.execute("UPDATE files SET data = ? WHERE sha256 = ?", (data[:-1] + b"?", name))
    with pytest.raises(StoreFailed, match="damaged"):
        store.file(name)
    with pytest.raises(StoreFailed, match="not kept"):
        store.file("0" * 64)


# When things break

def snapshot(folder):
    """Files and their content, without the scratch files (empty, or shared memory) that SQLite needs to look inside."""
    files = {path.name: path.read_bytes() for path in folder.iterdir() if not path.name.endswith("-shm")}
    return {name: content for name, content in files.items() if content}


def test_a_newer_database_is_refused_and_left_alone(store):
    with_sweep(store)
    store.close()
    with closing(sqlite3.connect(store.folder / DATABASE)) as other:
        other.execute(f"PRAGMA user_version={len(database.MIGRATIONS) + 1}")
    before = snapshot(store.folder)
    with pytest.raises(StoreFailed, match="newer version"):
        Store(store.folder)
    assert snapshot(store.folder) == before


def test_a_newer_version_that_stands_in_the_log_alone_is_refused_too(store, tmp_path):
    with_sweep(store)
    with closing(sqlite3.connect(store.folder / DATABASE)) as other:
        other.execute(f"PRAGMA user_version={len(database.MIGRATIONS) + 1}")
        shutil.copytree(store.folder, tmp_path / "copy")  # as a killed process would have left it
    assert (tmp_path / "copy" / f"{DATABASE}-wal").stat().st_size > 0
    before = snapshot(tmp_path / "copy")
    with pytest.raises(StoreFailed, match="newer version"):
        Store(tmp_path / "copy")
    assert snapshot(tmp_path / "copy") == before


def test_a_first_start_that_was_killed_is_rolled_back(tmp_path):
    (tmp_path / "first").mkdir()
    with closing(sqlite3.connect(tmp_path / "first" / DATABASE, isolation_level=None)) as other:
        other.execute("PRAGMA cache_size=1")  # writes reach the file before the transaction ends
        other.execute("BEGIN")
        other.execute("CREATE TABLE workspaces (half)")
        other.executemany("INSERT INTO workspaces VALUES (?)", [("x" * 5000,)] * 20)
        shutil.copytree(tmp_path / "first", tmp_path / "killed")
    assert (tmp_path / "killed" / DATABASE).stat().st_size > 4096
    assert (tmp_path / "killed" / f"{DATABASE}-journal").exists()
    with closing(Store(tmp_path / "killed")) as store:
        assert with_sweep(store)


@pytest.mark.parametrize("damage", ["text", "short", "zeroed", "scrambled"])
def test_a_damaged_database_is_refused_and_left_alone(store, damage):
    with_sweep(store, points=3000)
    store.close()
    path = store.folder / DATABASE
    sound = path.read_bytes()
    middle = len(sound) // 2
    path.write_bytes(
        {
            "text": b"not a database at all, but long enough to have a header" * 10,
            "short": sound[:50],
            "zeroed": sound[:4096] + bytes(len(sound) - 4096),
            "scrambled": sound[:4096] + sound[middle:] + sound[4096:middle],
        }[damage]
    )
    before = snapshot(store.folder)
    with pytest.raises(StoreFailed, match="damaged"):
        Store(store.folder)
    assert snapshot(store.folder) == before


def test_a_database_of_another_program_is_refused(tmp_path):
    with closing(sqlite3.connect(tmp_path / DATABASE)) as other, other:
        other.execute("CREATE TABLE recipes (name)")
    before = snapshot(tmp_path)
    with pytest.raises(StoreFailed, match="another program"):
        Store(tmp_path)
    assert snapshot(tmp_path) == before


@pytest.mark.parametrize(
    "damage",
    ["UPDATE records SET json = '{'", "UPDATE records SET json = '{}' WHERE kind = 'entries'",
     "UPDATE readings SET json = replace(json, '0.1', '0.2')", "DELETE FROM readings"],
)  # fmt: skip
def test_a_damaged_record_is_told_in_a_sentence_and_the_others_stay_open(store, damage):
    workspace_id, _ = with_sweep(store)
    sound = store.create("sound")
    with closing(sqlite3.connect(store.folder / DATABASE)) as other, other:
        other.execute(damage)
    store.close()
    with closing(Store(store.folder)) as again:
        with pytest.raises(StoreFailed, match="cannot be read|damaged"):
            again.current(workspace_id)
        assert again.current(sound).name == "sound"


def test_older_databases_are_brought_up_to_date(store, monkeypatch):
    workspace_id, _ = with_sweep(store)
    before = store.current(workspace_id)
    store.close()
    failing = (*database.MIGRATIONS, ("ALTER TABLE files ADD COLUMN kind TEXT", "ALTER TABLE nowhere ADD COLUMN x"))
    monkeypatch.setattr(database, "MIGRATIONS", failing)
    with pytest.raises(StoreFailed):
        Store(store.folder)
    working = (*database.MIGRATIONS[:-1], ("ALTER TABLE files ADD COLUMN kind TEXT",), ("CREATE TABLE more (x)",))
    monkeypatch.setattr(database, "MIGRATIONS", working)
    with closing(Store(store.folder)) as again:
        assert same(again.current(workspace_id), before)
    with closing(sqlite3.connect(store.folder / DATABASE)) as other:
        assert other.execute("PRAGMA user_version").fetchone() == (len(working),)
        assert other.execute("SELECT kind FROM files").fetchall() == [(None,)]
        assert other.execute("SELECT * FROM more").fetchall() == []


def test_a_folder_that_cannot_be_made_is_told(tmp_path):
    (tmp_path / "file").write_text("in the way")
    with pytest.raises(StoreFailed, match="folder"):
        Store(tmp_path / "file" / "home")


def run_in_child(code, *arguments):
    ran = subprocess.run([sys.executable, "-c", code, *map(str, arguments)], capture_output=True, text=True, timeout=60)
    assert ran.returncode == 0, ran.stderr
    return ran.stdout


READ_ONLY = """
import os, sys
from core.errors import StoreFailed
from core.store import Store
if os.geteuid() == 0:
    os.setuid(65534)  # the rights of a folder do not bind the superuser
for folder in sys.argv[1:]:
    try:
        Store(folder)
    except StoreFailed as failure:
        print(failure)
"""


@pytest.mark.skipif(os.name == "nt", reason="rights of folders work otherwise on Windows")
def test_a_read_only_folder_is_told_and_left_alone():
    home = Path(tempfile.mkdtemp())  # pytest's own folders are closed to the user that the child becomes
    try:
        empty, used = home / "empty", home / "used"
        empty.mkdir()
        with closing(Store(used)) as store:
            with_sweep(store)
        before = snapshot(used)
        for folder in (home, empty, used):
            folder.chmod(0o555)
        (used / DATABASE).chmod(0o444)
        sentences = run_in_child(READ_ONLY, empty, used, home / "new").splitlines()
        for folder in (home, empty, used):
            folder.chmod(0o755)
        assert len(sentences) == 3
        assert all("written to" in sentence or "write to" in sentence for sentence in sentences)
        assert snapshot(used) == before
        assert list(empty.iterdir()) == []
    finally:
        shutil.rmtree(home)


FULL_DISK = """
import resource, sys
from core import steps
from core.errors import StoreFailed
from core.store import Store
store = Store(sys.argv[1])
workspace_id = store.first()
(entry,) = store.current(workspace_id).entries
resource.setrlimit(resource.RLIMIT_FSIZE, (int(sys.argv[2]),) * 2)
for number in range(10_000):
    workspace = store.current(workspace_id)
    try:
        store.commit(workspace_id, steps.rename_entry(workspace, entry, f"name {number}"), workspace.revision)
    except StoreFailed as failure:
        print(workspace.revision, store.current(workspace_id).revision, failure)
        break
"""


@pytest.mark.skipif(os.name == "nt", reason="no limit on the size of files there")
def test_a_disk_that_takes_no_more_is_told_and_loses_nothing_acknowledged(store):
    workspace_id, entry = with_sweep(store)
    store.close()
    seen, current, sentence = run_in_child(FULL_DISK, store.folder, 400_000).split(maxsplit=2)
    assert "not saved" in sentence
    assert seen == current
    assert int(seen) > 5
    with closing(Store(store.folder)) as again:
        workspace = again.current(workspace_id)
        assert workspace.revision == int(seen)
        assert workspace.entries[entry].name == f"name {int(seen) - 2}"
        rename(again, workspace_id, entry, "goes on")


def test_a_full_disk_is_told_and_the_store_goes_on_when_there_is_room(store):
    workspace_id, entry = with_sweep(store)
    pages = store._writer.execute("PRAGMA page_count").fetchone()[0]
    store._writer.execute(f"PRAGMA max_page_count={pages}")  # SQLite's own way to a full disk
    before = store.current(workspace_id)
    with pytest.raises(StoreFailed, match="full.*not saved.*safe"):
        store.keep_file(bytes(100_000), "big.bin")
    assert store.current(workspace_id) is before
    store._writer.execute("PRAGMA max_page_count=100000")
    assert rename(store, workspace_id, entry, "goes on").revision == 2


def test_a_database_held_by_another_program_is_told(store, monkeypatch):
    workspace_id, entry = with_sweep(store)
    store._writer.execute("PRAGMA busy_timeout=1")
    with closing(sqlite3.connect(store.folder / DATABASE)) as other:
        other.execute("BEGIN IMMEDIATE")
        with pytest.raises(StoreFailed, match="[Aa]nother program"):
            rename(store, workspace_id, entry, "x")
        assert store.current(workspace_id).revision == 1  # reading goes on
    assert rename(store, workspace_id, entry, "x").revision == 2


@pytest.mark.skipif(os.name == "nt", reason="an open file cannot be moved there")
def test_no_step_is_acknowledged_into_a_file_that_was_taken_away(store):
    workspace_id, entry = with_sweep(store)
    for path in list(store.folder.iterdir()):
        path.unlink()
    with pytest.raises(StoreFailed, match="moved"):
        rename(store, workspace_id, entry, "x")


def test_every_step_is_flushed_to_the_disk(store):
    assert store._writer.execute("PRAGMA synchronous").fetchone() == (2,)  # 2 is FULL
    assert store._writer.execute("PRAGMA journal_mode").fetchone() == ("wal",)
