"""The list of workspaces: each errand answers with the workspace that the page shows next."""

import contextlib

import pytest

from app.callbacks import workspaces
from core import steps
from core.store import Store
from tests.app.benches import LIT, OTHER
from tests.app.desk import Desk


@pytest.fixture
def store(tmp_path):
    with contextlib.closing(Store(tmp_path)) as store:
        yield store


@pytest.fixture
def here(store):
    """A workspace with two sweeps."""
    name = store.create("Monday")
    store.commit(name, steps.add_sweeps(store.current(name), [LIT, OTHER]), 0)
    return name


@pytest.fixture
def desk(store):
    return Desk(workspaces, store)


def errand(desk, here, kind, **more):
    return desk.run_errand({"kind": kind, **more}, {"workspace": here, "revision": 1})


def listed(desk, here):
    found = desk.list_workspaces({"workspace": here})
    return found["here"], {w["name"]: w["sweeps"] for w in found["there"]}, {w["name"]: w["sweeps"] for w in found["deleted"]}


def test_the_list_counts_sweeps_and_knows_which_one_is_here(desk, here):
    assert listed(desk, here) == (here, {"Monday": 2}, {})


def test_a_new_workspace_is_empty_and_opens_the_next_time_too(desk, store, here):
    answer = errand(desk, here, "new", name="Tuesday")
    assert answer["workspace"] not in ("", here) and answer["revision"] == 0 and answer["sentence"] == ""
    assert store.current(answer["workspace"]).name == "Tuesday"
    assert store.first() == answer["workspace"]
    assert listed(desk, here)[1] == {"Monday": 2, "Tuesday": 0}


def test_opening_goes_there_with_the_revision_that_stands(desk, store, here):
    other = store.create("Tuesday")
    assert errand(desk, other, "open", workspace=here) == {"workspace": here, "revision": 1, "event": None, "outcome": "done", "sentence": ""}
    assert store.first() == here


def test_renaming_stays_here(desk, store, here):
    answer = errand(desk, here, "rename", workspace=here, name="Tuesday")
    assert answer["workspace"] == here and store.current(here).name == "Tuesday"
    assert answer["revision"] == store.current(here).revision
    assert listed(desk, here)[1] == {"Tuesday": 2}


def test_a_duplicate_is_another_one_with_the_same_content(desk, store, here):
    answer = errand(desk, here, "duplicate", workspace=here)
    there = store.current(answer["workspace"])
    assert there.id != here and there.name != "Monday" and len(there.entries) == 2
    entry = next(iter(there.entries))
    store.commit(there.id, steps.remove_entries(there, [entry]), there.revision)
    assert len(store.current(here).entries) == 2


def test_a_deleted_workspace_says_how_it_comes_back_and_comes_back_whole(desk, store, here):
    other = store.create("Tuesday")
    before = store.current(here)
    answer = errand(desk, here, "delete", workspace=here)
    assert answer["workspace"] == other
    assert answer["sentence"].startswith("“Monday” was deleted") and "bring it back" in answer["sentence"]
    assert listed(desk, other) == (other, {"Tuesday": 0}, {"Monday": 2})
    answer = errand(desk, other, "restore", workspace=here)
    assert answer["workspace"] == here
    assert store.current(here).entries == before.entries
    assert listed(desk, here)[2] == {}


def test_when_the_last_one_is_deleted_a_new_one_takes_its_place(desk, store, here):
    answer = errand(desk, here, "delete", workspace=here)
    assert answer["workspace"] != here and store.current(answer["workspace"]).entries == {}


@pytest.mark.parametrize("kind", ["open", "rename", "duplicate", "delete", "restore"])
def test_a_workspace_that_is_gone_is_told_in_a_sentence_and_the_page_stays(desk, here, kind):
    answer = errand(desk, here, kind, workspace="gone", name="x")
    assert answer["workspace"] == here and answer["sentence"].endswith(".")


def test_a_page_whose_own_workspace_is_gone_lands_on_the_last_used_one(desk, store, here):
    other = store.create("Tuesday")
    store.delete(here)
    answer = errand(desk, here, "open", workspace="gone")
    assert answer["workspace"] == other and answer["sentence"].endswith(".")


def test_an_errand_of_no_kind_is_told_and_changes_nothing(desk, store, here):
    before = [w.id for w in store.workspaces()]
    answer = errand(desk, here, "burn")
    assert answer["workspace"] == here and answer["sentence"].endswith(".")
    assert [w.id for w in store.workspaces()] == before
