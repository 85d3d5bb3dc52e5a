"""The tray of a long workspace: its lines come slice by slice, and only when one of them may have changed."""

import contextlib
import math
from dataclasses import replace

import pytest
from dash import no_update

from app import scene
from app.door import Door
from app.jobs import Jobs
from app.server import create_app
from core import steps
from core.store import Store
from tests.app.benches import CELL, LIT, OTHER, REVERSE, bench

READ = ("value", "flag", "flags", "spark")


def lines(tray):
    return {sweep["entry"]: sweep for device in tray for sweep in device["sweeps"]}


@pytest.fixture(scope="module")
def three():
    return bench(LIT, REVERSE, OTHER, models=(CELL,))


def test_what_there_was_no_time_for_is_left_open_and_comes_on_asking(three):
    workspace, entries = three
    whole = lines(scene.tray(workspace))
    assert all(line["read"] and line["spark"] for line in whole.values())
    in_haste = lines(scene.tray(workspace, until=-math.inf))
    assert list(in_haste) == list(whole)
    assert not any(line["read"] or any(line[name] for name in READ) for line in in_haste.values())
    readings = scene.tray_readings(workspace, entries)
    assert {entry: {**in_haste[entry], **readings[entry]} for entry in entries} == whole


def test_an_answer_without_time_still_reads_one_sweep_of_those_that_are_there(three):
    workspace, (first, second, third) = three
    assert list(scene.tray_readings(workspace, ["gone", second, third], until=-math.inf)) == [second]
    assert scene.tray_readings(workspace, ["gone"]) == {}


def test_a_model_that_moves_leaves_the_tray_as_it_is(three):
    workspace, (lit, *_) = three
    moved = steps.apply(workspace, steps.set_model(workspace, lit, replace(CELL, ideality=1.7)))
    assert moved.revision > workspace.revision
    assert scene.tray_key(moved) == scene.tray_key(workspace)


@pytest.mark.parametrize(
    "change",
    [
        lambda w, entry: steps.rename_entry(w, entry, "again"),
        lambda w, entry: steps.rename_device(w, w.entries[entry].device, "another"),
        lambda w, entry: steps.set_conditions(w, entry, irradiance=0.05),
        lambda w, entry: steps.set_conditions(w, entry, area=0.2),
        lambda w, entry: steps.set_group(w, [w.entries[entry].device], "annealed"),
        lambda w, entry: steps.remove_entries(w, [entry]),
        lambda w, entry: steps.confirm_conditions(w, entry, ["irradiance"]),
    ],
    ids=["name", "device", "irradiance", "area", "group", "removed", "confirmed"],
)
def test_whatever_a_line_says_changes_the_key_with_it(three, change):
    workspace, (lit, *_) = three
    assert scene.tray_key(steps.apply(workspace, change(workspace, lit))) != scene.tray_key(workspace)


def test_a_tab_that_shows_the_tray_does_not_get_it_again_after_a_drag(tmp_path):
    with contextlib.closing(Store(tmp_path)) as store, contextlib.closing(Jobs()) as jobs:
        wired = create_app(store, Door(8417), jobs).callback_map
        show_tray = wired["..tray.data...tray-drawn.data.."]["callback"].__wrapped__
        read_on = wired["tray-read.data"]["callback"].__wrapped__
        name = store.first()
        added = store.commit(name, steps.add_sweeps(store.current(name), [LIT, REVERSE]), seen=0)
        seen = {"workspace": name}
        rows, drawn = show_tray(revision=seen, drawn="")
        assert set(lines(rows)) == set(added.entries)
        entry = next(iter(added.entries))
        store.commit(name, steps.set_model(added, entry, CELL), seen=added.revision)
        assert show_tray(revision=seen, drawn=drawn) == (no_update, no_update)
        assert list(read_on({"workspace": name, "entries": [entry]})) == [entry]
