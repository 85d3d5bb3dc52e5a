"""What the user states of the whole workspace: kept, taken back, and behind what a file says of its own sweep."""

import math
from contextlib import closing

import pytest

from core import steps
from core.archive import Contents, pack, unpack
from core.errors import ConditionRefused, StepRefused
from core.protocol import said, said_by_file
from core.statements import STATEMENTS, SWITCHES, TEXTS, UNCERTAINTIES
from core.store import Store
from core.workspace import Workspace
from tests.core.workspaces import invented_sweep, workspace_with


def after(workspace, name, value):
    return steps.apply(workspace, steps.state(workspace, name, value))


@pytest.mark.parametrize("name", STATEMENTS)
def test_each_is_stated_and_taken_back(name):
    value = 0.02 if name in UNCERTAINTIES else True if name in SWITCHES else "one line"
    before = Workspace("w", "test")
    step = steps.state(before, name, value)
    stated = steps.apply(before, step)
    assert stated.stated(name) == value and before.stated(name) is None
    assert steps.apply(stated, steps.inverse(before, step)).stated(name) is None
    assert after(stated, name, None).statements == {}
    assert steps.state(stated, name, value) is None  # nothing would change


def test_texts_are_one_line_and_an_empty_one_takes_back():
    stated = after(Workspace("w", "test"), "delay", "  20 ms \n settling ")
    assert stated.stated("delay") == "20 ms settling"
    assert after(stated, "delay", "  ").stated("delay") is None


@pytest.mark.parametrize(
    ("name", "value"),
    [("area_uncertainty", 1.5), ("area_uncertainty", -0.1), ("lamp_uncertainty", math.nan), ("delay", "x" * 301), ("colour", "red")],
)
def test_what_cannot_be_is_refused_in_a_sentence(name, value):
    with pytest.raises(ConditionRefused, match=r"\.$"):
        steps.state(Workspace("w", "test"), name, value)


@pytest.mark.parametrize("record", [{"id": "delay", "value": 3}, {"id": "delay"}, {"id": "spectrum", "value": "x"}, {"id": "area_shared", "value": "yes"}])
def test_a_record_that_is_none_is_refused(record):
    with pytest.raises(StepRefused, match="statement"):
        steps.apply(Workspace("w", "test"), {"label": "x", "put": {"statements": {"delay": record}}})


def test_store_and_archive_keep_them(tmp_path):
    with closing(Store(tmp_path / "w.sqlite")) as store:
        one = store.create("one")
        store.commit(one, steps.state(store.current(one), "area_uncertainty", 0.01), seen=0)
        kept = store.commit(one, steps.state(store.current(one), "preconditioning", "60 s in light"), seen=1)
        assert unpack(pack(Contents(kept, {}, {}))).workspace.records() == kept.records()
    with closing(Store(tmp_path / "w.sqlite")) as store:
        again = store.current(one)
        assert (again.stated("area_uncertainty"), again.stated("preconditioning")) == (0.01, "60 s in light")
        store.undo(one, seen=again.revision)
        assert store.current(one).stated("preconditioning") is None


def test_what_a_file_says_goes_before_what_the_user_states():
    talkative = invented_sweep("A", header={"Settling time": "20 ms", "Aperture area": "0.1 cm2", "Lamp": "on"})
    workspace = workspace_with(talkative, invented_sweep("B"))
    a, b = (entry.id for entry in workspace.in_tray_order())
    assert said(workspace, b, "delay") is None
    for name, value in (("delay", "5 ms"), ("light_source", "xenon"), ("area_kind", "active")):
        workspace = after(workspace, name, value)
    first, second = said(workspace, a, "delay"), said(workspace, b, "delay")
    assert (first.words, first.by) == ("Settling time: 20 ms", "file") and (second.words, second.by) == ("5 ms", "user")
    assert said(workspace, a, "light_source").by == "user"  # that the lamp is on does not say which it is
    assert (said(workspace, a, "area_kind").words, said(workspace, b, "area_kind").words) == ("aperture", "active")
    assert all(said_by_file(invented_sweep("C"), name) == "" for name in TEXTS)
