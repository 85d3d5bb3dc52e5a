"""When answers get lost, callbacks fail or the disk fills up: over HTTP, on a server of this process.

A step is made once however often the page sends it; a bug is a sentence for the user and a traceback for the log, and
the page goes on; a full disk is told and takes nothing back.
"""

import json
import logging
import os
import threading
from contextlib import closing

import pytest

from app import places
from app.callbacks import hand
from app.callbacks.hand import take
from app.serving import serve
from core import steps
from core.errors import StaleRevision, StoreFailed
from core.store import DATABASE
from tests.app.test_main import Command, link_in
from tests.app.visitor import Visitor

K11 = (places.SAMPLE_SWEEPS / "K11.csv").read_bytes()


@pytest.fixture(scope="module")
def running(tmp_path_factory):
    with serve(tmp_path_factory.mktemp("kept")) as running:
        yield running


@pytest.fixture(scope="module")
def visitor(running):
    with closing(Visitor(running.entry_url)) as visitor:
        yield visitor


@pytest.fixture
def store(running):
    return running.store


@pytest.fixture
def bench(running, visitor):
    """A fresh workspace with one sweep; its id and the sweep's."""
    workspace = visitor.new_workspace(visitor.first(), "mishaps")
    (added,) = visitor.drop(workspace, {"K11.csv": K11})["added"]
    return workspace, added["entries"][0]


def rename(bench, text, revision, event, tries=1):
    workspace, entry = bench
    where = {"workspace": workspace, "revision": revision, "event": event, "tries": tries}
    return {"kind": "rename-sweep", "entry": entry, "text": text, **where}


def hold(bench, revision, event, tries=1):
    return {**rename(bench, "", revision, event, tries), "kind": "hold", "parameter": "ideality", "on": True}


# Once, however often it is sent


def test_an_answer_that_got_lost_is_given_again_and_nothing_is_made_twice(store, visitor, bench):
    first = visitor.hand(rename(bench, "one", 1, "e1"))
    again = visitor.hand(rename(bench, "one", 1, "e1", tries=2))
    assert first == again == {"workspace": bench[0], "revision": 2, "event": "e1", "outcome": "done", "sentence": ""}
    assert store.undo(bench[0], 2).entries[bench[1]].name != "one"
    assert store.history(bench[0]).undo == "add sweep"


def test_a_try_that_never_arrived_is_made_by_the_next(store, visitor, bench):
    assert visitor.hand(rename(bench, "two", 1, "e2", tries=7))["revision"] == 2
    assert store.current(bench[0]).entries[bench[1]].name == "two"


def test_a_repeated_step_is_known_although_another_tab_went_on(store, visitor, bench):
    """To say “your last change was not made” of a change that was made would be false."""
    visitor.hand(rename(bench, "mine", 1, "e3"))
    visitor.hand(hold(bench, 2, "other"))
    answer = visitor.hand(rename(bench, "mine", 1, "e3", tries=2))
    assert (answer["revision"], answer["event"], answer["sentence"]) == (3, "e3", "")


def test_a_repeated_step_does_not_undo_what_was_done_since(store, visitor, bench):
    """The page may have learnt of the newer revision and send that along."""
    visitor.hand(rename(bench, "mine", 1, "e4"))
    visitor.hand(rename(bench, "theirs", 2, "other"))
    answer = visitor.hand(rename(bench, "mine", 3, "e4", tries=3))
    assert (answer["revision"], answer["sentence"]) == (3, "")
    assert store.current(bench[0]).entries[bench[1]].name == "theirs"


def test_a_repeated_step_that_was_undone_meanwhile_stays_undone(store, visitor, bench):
    visitor.hand(rename(bench, "mine", 1, "e5"))
    visitor.travel("undo", bench[0], 2)
    assert visitor.hand(rename(bench, "mine", 3, "e5", tries=2))["revision"] == 3
    assert store.current(bench[0]).entries[bench[1]].name != "mine"
    assert store.history(bench[0]).redo is not None


def test_an_undo_sent_twice_takes_one_step_back_and_a_redo_makes_one_again(store, visitor, bench):
    workspace, entry = bench
    visitor.hand(rename(bench, "one", 1, "r1"))
    visitor.hand(rename(bench, "two", 2, "r2"))
    for kind, revision, name in (("undo", 3, "one"), ("redo", 4, "two")):
        event = {"kind": kind, "workspace": workspace, "revision": revision, "event": f"travel {kind}"}
        first, again = visitor.hand(event), visitor.hand({**event, "tries": 2})
        assert first == again and (first["revision"], first["outcome"]) == (revision + 1, "done")
        assert store.current(workspace).entries[entry].name == name
        assert visitor.hand({**event, "event": "late"})["outcome"] == "stale"


def test_a_fit_sent_twice_is_one_step(store, visitor, bench):
    workspace, entry = bench
    for revision, kind in ((1, "refine"), (2, "first-guess")):
        event = {"kind": kind, "entry": entry, "workspace": workspace, "revision": revision, "event": f"fit {kind}"}
        first, again = visitor.hand(event), visitor.hand({**event, "tries": 2})
        assert first == again and first["revision"] == revision + 1
    assert store.current(workspace).refined(entry) is None
    assert store.undo(workspace, 3).refined(entry) is not None
    assert store.undo(workspace, 4).refined(entry) is None


def test_a_fit_without_a_sweep_is_refused_with_a_sentence(visitor):
    empty = visitor.new_workspace(visitor.first(), "empty")
    for kind in ("first-guess", "refine", "refine-all"):
        answer = visitor.hand({"kind": kind, "entry": None, "workspace": empty, "revision": 0})
        assert answer["outcome"] == "refused" and "Drop a file first" in answer["sentence"]


def test_refining_the_tray_asked_for_twice_is_one_job(visitor, bench):
    event = {"kind": "refine-all", "workspace": bench[0], "revision": 1, "event": "all of it"}
    answers = [visitor.call("hand.data", {"hand.data": {**event, "tries": tries}})["response"] for tries in (1, 2)]
    assert answers[0] == answers[1] and answers[0]["job"]["data"]["job"] == "all of it"


def test_a_stale_step_is_refused_and_acknowledged(store, visitor, bench):
    visitor.hand(hold(bench, 1, "other"))
    answer = visitor.hand(rename(bench, "late", 1, "e6", tries=2))
    assert "changed elsewhere" in answer["sentence"] and (answer["revision"], answer["event"]) == (2, "e6")
    assert answer["outcome"] == "stale", "what waits in the page behind it must not be made"
    assert store.current(bench[0]).entries[bench[1]].name != "late"


def test_two_tries_at_one_moment_make_one_step_and_neither_says_it_failed(store, bench):
    """The first was slow, not lost: the second arrives while it is at work."""
    answers, together = [], threading.Barrier(6)

    def send(tries):
        together.wait()
        answers.append(take(store, rename(bench, "once", 1, "e7", tries)))

    threads = [threading.Thread(target=send, args=(tries,)) for tries in range(1, 7)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert [(workspace.revision, sentence) for workspace, sentence in answers] == [(2, "")] * 6


def test_a_slow_first_try_that_wins_is_no_stale_step(store, bench, monkeypatch):
    """The step of the first try reaches the disk just after the second one has read the workspace."""
    real = hand.step_for

    def overtaken(workspace, event):
        monkeypatch.setattr(hand, "step_for", real)
        take(store, rename(bench, "once", 1, "e8"))
        return real(workspace, event)

    monkeypatch.setattr(hand, "step_for", overtaken)
    workspace, sentence = take(store, rename(bench, "once", 1, "e8", tries=2))
    assert (workspace.revision, sentence) == (2, "")


def test_a_step_on_a_workspace_that_was_deleted_is_answered_with_the_one_to_go_on_with(store, visitor, bench):
    """Without an answer the page would send it for ever, and every later step would wait behind it."""
    store.delete(bench[0])
    answer = visitor.hand(rename(bench, "gone", 1, "e9"))
    assert (answer["event"], answer["outcome"]) == ("e9", "refused") and "deleted" in answer["sentence"]
    assert answer["workspace"] == store.first() != bench[0]
    store.restore(bench[0])


# Bugs


def broken(*_args, **_options):
    raise ZeroDivisionError("a bug of ours")


def test_a_bug_in_a_step_is_told_logged_acknowledged_and_changes_nothing(store, visitor, bench, monkeypatch, caplog):
    with monkeypatch.context() as patch:
        patch.setattr("app.callbacks.hand.step_for", broken)
        answer = visitor.hand(rename(bench, "x", 1, "e10"))
    assert (answer["revision"], answer["event"]) == (1, "e10")
    assert "went wrong" in answer["sentence"] and "bug of ours" not in answer["sentence"]
    assert "ZeroDivisionError: a bug of ours" in caplog.text
    assert visitor.hand(rename(bench, "x", 1, "e11"))["revision"] == 2


@pytest.mark.parametrize(
    ("place", "trigger"),
    [
        ("app.scene.figure", "view.data"),
        ("app.scene.scene", "view.data"),
        ("app.scene.tray", "revision.data"),
        ("app.callbacks.compare.pair_screen", "pair"),
        ("app.callbacks.compare.losses_screen", "losses"),
    ],
)
def test_a_bug_in_a_screen_is_told_and_logged_and_the_screen_comes_back(visitor, bench, monkeypatch, caplog, place, trigger):
    revision = {"workspace": bench[0], "revision": 1}
    view = {"screen": trigger} if trigger in ("pair", "losses") else {}
    outputs = {"app.scene.tray": "tray", "app.callbacks.compare.pair_screen": "pair", "app.callbacks.compare.losses_screen": "losses"}
    output = outputs.get(place, "scene")

    def ask():
        return visitor.show(output, {"revision.data": revision, "view.data": view, "drawn.data": ""})

    with monkeypatch.context() as patch:
        patch.setattr(place, broken)
        told = ask()
    assert output not in told.get("response", {})
    assert "went wrong" in told["sideUpdate"]["notice"]["data"]["sentence"]
    assert "bug of ours" not in json.dumps(told)
    assert "ZeroDivisionError: a bug of ours" in caplog.text
    assert ask()["response"][output]["data"]


@pytest.mark.parametrize(
    ("place", "trigger", "event"),
    [
        ("core.store.Store.undo", "hand.data", {"kind": "undo"}),
        ("app.hand.guess_step", "hand.data", {"kind": "first-guess"}),
        ("app.callbacks.hand.begin", "hand.data", {"kind": "refine-all"}),
        ("app.callbacks.workspaces.ERRANDS", "errand.data", {"kind": "new", "name": "x"}),
    ],
)
def test_a_bug_behind_a_button_is_told_and_the_page_hears_where_it_stands(visitor, bench, monkeypatch, caplog, place, trigger, event):
    seen = {"workspace": bench[0], "revision": 1}
    event = {**event, **seen, "entry": bench[1], "event": "e"}
    with monkeypatch.context() as patch:
        patch.setattr(place, {"new": broken} if place.endswith("ERRANDS") else broken)
        answer = visitor.call(trigger, {trigger: event, "revision.data": seen, "view.data": {}})["response"]["revision"]["data"]
    assert (answer["workspace"], answer["revision"]) == (bench[0], 1) and "went wrong" in answer["sentence"]
    assert "ZeroDivisionError" in caplog.text


def test_a_bug_on_the_live_route_is_told_and_logged(visitor, bench, monkeypatch, caplog):
    event = {"kind": "drag", "entry": bench[1], "parameter": "ideality", "x": 0.5, "y": 10, "workspace": bench[0], "revision": 1}
    with monkeypatch.context() as patch:
        patch.setattr("app.live.answer", broken)
        status, told = visitor.post("/live", event)
    assert status == 500 and "went wrong" in told["sentence"] and "bug" not in told["sentence"]
    assert "ZeroDivisionError" in caplog.text
    assert visitor.post("/live", event)[0] == 200


@pytest.mark.parametrize("body", [b"", b"{", b"[]", b"5", b'"x"', b"null", b"{}", b'{"workspace": [], "revision": {}}'])
def test_what_is_no_event_is_refused_on_the_live_route(visitor, body, caplog):
    status, answer = visitor.ask("POST", "/live", body, Content_Type="application/json")
    assert status in (400, 422) and json.loads(answer)["sentence"]
    assert not [record for record in caplog.records if record.levelno >= logging.ERROR]


def test_a_damaged_workspace_does_not_keep_the_page_from_opening(running, visitor, bench, monkeypatch):
    real = type(running.store).current

    def damaged(store, workspace_id):
        if workspace_id == bench[0]:
            raise StoreFailed("The workspace cannot be read.")
        return real(store, workspace_id)

    running.store.opened(bench[0])
    with monkeypatch.context() as patch:
        patch.setattr("core.store.Store.current", damaged)
        assert visitor.first() != bench[0]
    assert visitor.first() == bench[0]


# A disk that takes no more


@pytest.mark.skipif(not hasattr(os, "sched_getaffinity"), reason="only Linux limits another process while it runs")
def test_a_full_disk_is_told_to_the_page_and_loses_nothing_acknowledged(tmp_path):
    import resource

    with Command(tmp_path, "--port", "0") as program:
        program.until("Press Ctrl+C")
        with closing(Visitor(link_in(program.page))) as visitor:
            workspace = visitor.first()
            (added,) = visitor.drop(workspace, {"K11.csv": K11})["added"]
            bench = workspace, added["entries"][0]
            # No file of the program may grow beyond what the log of the database has now.
            room = (tmp_path / f"{DATABASE}-wal").stat().st_size
            before = resource.prlimit(program.process.pid, resource.RLIMIT_FSIZE, (room, resource.RLIM_INFINITY))
            answers = [visitor.hand(rename(bench, f"name {n}", 1, f"e{n}")) for n in range(2)]
            assert all("not saved" in answer["sentence"] for answer in answers)
            assert [answer["revision"] for answer in answers] == [1, 1]
            status, told = visitor.ask("POST", f"/files/samples/{workspace}")
            assert status == 400 and "not saved" in json.loads(told)["sentence"]
            kept = visitor.kept(workspace)
            assert kept.revision == 1 and kept.entries[bench[1]].name != "name 1"
            resource.prlimit(program.process.pid, resource.RLIMIT_FSIZE, before)
            assert visitor.hand(rename(bench, "there is room", 1, "e9"))["revision"] == 2
            assert visitor.kept(workspace).entries[bench[1]].name == "there is room"


def test_a_history_that_is_full_still_knows_what_was_made_last(store, bench):
    workspace, entry = bench
    event = rename(bench, "last", 1, "e12")
    take(store, event)
    for number in range(5):
        current = store.current(workspace)
        store.commit(workspace, steps.rename_entry(current, entry, f"name {number}"), current.revision)
    assert take(store, {**event, "tries": 2})[0].revision == 7
    with pytest.raises(StaleRevision):
        take(store, rename(bench, "never made", 1, "e13", tries=2))
