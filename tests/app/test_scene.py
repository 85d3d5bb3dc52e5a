"""What a tab shows of a workspace: bench, tray, and when the figure itself has to be drawn anew."""

import json
import re
from dataclasses import replace

import numpy as np
import pytest

from app import scene
from app.curves import STRIPS
from app.wording import number
from core import steps
from core.diode import PARAMETERS
from core.refine import refine
from core.store import History
from core.sweep import Conditions
from tests.app.benches import (
    AMPERES,
    CELL,
    IN_THE_DARK,
    LAMP,
    LIT,
    OTHER,
    REVERSE,
    bench,
    sweep_of,
)
from tests.core.workspaces import workspace_with

HISTORY = History("refine", None)


def shown(workspace, **view):
    """The scene as the page receives it."""
    return json.loads(json.dumps(scene.scene(workspace, view, HISTORY), allow_nan=False))


@pytest.fixture(scope="module")
def full():
    return bench(LIT, REVERSE, IN_THE_DARK, AMPERES, OTHER, models=(CELL, None, replace(CELL, photocurrent=0.0)))


def test_an_empty_workspace_has_a_revision_and_nothing_on_the_bench():
    empty = workspace_with()
    painted = shown(empty)
    assert painted["entry"] is None and painted["revision"] == empty.revision
    assert painted["history"] == {"undo": "refine", "redo": None}
    assert not {"curves", "dials", "metrics"} & set(painted)
    assert scene.figure_key(empty, {}) == ""
    assert all(len(trace.x) == 0 for trace in scene.figure(empty, {}).data)
    assert scene.tray(empty) == []


def test_a_lit_sweep_with_a_model_has_lines_grips_dials_and_numbers(full):
    workspace, (lit, *_) = full
    painted = shown(workspace, active=lit)
    assert (painted["entry"], painted["title"], painted["subtitle"]) == (lit, "A", "forward")
    assert (painted["lit"], painted["letter"], painted["fitted"]) == (True, "J", True)
    assert [(line["uid"], line["axis"]) for line in painted["curves"]] == list(scene.LINES)
    assert [handle["parameter"] for handle in painted["handles"]] == list(PARAMETERS)
    assert painted["dials"]["photocurrent"]["text"] == "22"
    assert painted["metrics"]["voc"]["model"] == "0.8550"
    assert painted["fit"] == ""


def test_without_a_model_the_lines_are_wiped_and_no_grip_is_offered(full):
    workspace, (_, reverse, *_) = full
    painted = shown(workspace, active=reverse)
    assert painted["fitted"] is False and painted["handles"] == []
    assert [(line["uid"], line["axis"]) for line in painted["curves"]] == list(scene.LINES)
    assert all(line["x"] == line["y"] == [] for line in painted["curves"])
    assert painted["metrics"]["jsc"]["model"] == painted["metrics"]["jsc"]["difference"] == "–"
    assert painted["metrics"]["jsc"]["measured"].startswith("21.9")
    assert {dial["text"] for dial in painted["dials"].values()} == {""}


def test_a_dark_sweep_has_four_grips_and_no_efficiency(full):
    workspace, (_, _, dark, *_) = full
    painted = shown(workspace, active=dark)
    assert painted["lit"] is False and painted["fitted"]
    assert {handle["parameter"] for handle in painted["handles"]} == set(PARAMETERS) - {"photocurrent"}
    assert {line["uid"] for line in painted["curves"]} == {"model", "strip-model"}
    assert painted["metrics"]["efficiency"]["measured"] == painted["metrics"]["efficiency"]["model"] == "–"


def test_after_refining_the_errors_and_the_residual_are_told(full):
    workspace, (lit, *_) = full
    refinement = refine(workspace.sweep(lit), CELL)
    refined = steps.apply(workspace, steps.record_refinement(workspace, lit, refinement))
    painted = shown(refined, active=lit)
    assert painted["dials"]["ideality"]["error"].startswith("± 3.")
    assert painted["fit"].startswith(f"rms residual {number(1e3 * refinement.rmse, digits=5)} mA cm⁻² over 56 points")
    assert "fit noise only" in painted["fit"]
    moved = steps.apply(refined, steps.set_model(refined, lit, replace(refinement.model, ideality=1.7)))
    painted = shown(moved, active=lit)
    assert painted["fit"] == "" and painted["dials"]["ideality"]["error"] == ""


def test_without_an_area_the_bench_is_in_amperes(full):
    workspace, (*_, amperes, _) = full
    painted = shown(workspace, active=amperes)
    assert (painted["letter"], painted["dials"]["photocurrent"]["symbol"]) == ("I", "I")
    assert (painted["metrics"]["jsc"]["unit"], painted["metrics"]["pmp"]["unit"]) == ("A", "W")
    assert painted["metrics"]["efficiency"]["measured"] == "–"


@pytest.mark.parametrize("view", [{}, {"active": "gone"}, {"active": None, "strip": "gone", "overlay": None}])
def test_a_view_of_what_is_gone_falls_back_to_the_first_sweep(full, view):
    workspace, (lit, *_) = full
    painted = shown(workspace, **view)
    assert (painted["entry"], painted["strip"]) == (lit, STRIPS[0])
    assert scene.figure_key(workspace, view) == scene.figure_key(workspace, {"active": lit, "strip": STRIPS[0]})


def test_sweeps_of_one_device_under_the_same_light_are_shown_together(full):
    workspace, (lit, reverse, dark, amperes, other) = full
    beside = {entry: [e.id for e in scene.companions_of(workspace, entry)] for entry in (lit, reverse, dark, amperes)}
    assert beside == {lit: [reverse], reverse: [lit], dark: [], amperes: []}
    drawn = {trace.uid for trace in scene.figure(workspace, {"active": lit, "overlay": [other, "gone", lit]}).data}
    assert {"companion0", "overlay0"} <= drawn and not {"companion1", "overlay1"} & drawn


def test_other_light_and_other_units_are_not_shown_together():
    dimmed = sweep_of(CELL, "dimmed", conditions=Conditions(area=0.1, irradiance=0.05))
    density = sweep_of(CELL, "density", read_as="density", per_area=True, conditions=Conditions())
    current = sweep_of(CELL, "current", conditions=Conditions())
    workspace, (lit, *_) = bench(LIT, dimmed)
    assert scene.companions_of(workspace, lit) == []
    workspace, (first, second) = bench(density, current)
    assert workspace.sweep(first).per_area and not workspace.sweep(second).per_area
    assert scene.companions_of(workspace, first) == []


CHANGES_THE_FIGURE = {
    "other sweep": lambda w, e: (w, {"active": e[1]}),
    "other strip": lambda w, e: (w, {"active": e[0], "strip": "log"}),
    "overlay": lambda w, e: (w, {"active": e[0], "overlay": [e[4]]}),
    "area": lambda w, e: (steps.apply(w, steps.set_conditions(w, e[0], area=0.2)), {"active": e[0]}),
    "dark": lambda w, e: (steps.apply(w, steps.set_conditions(w, e[0], lit=False)), {"active": e[0]}),
    "rename": lambda w, e: (steps.apply(w, steps.rename_entry(w, e[0], "new name")), {"active": e[0]}),
    "rename beside": lambda w, e: (steps.apply(w, steps.rename_entry(w, e[1], "new name")), {"active": e[0]}),
    "remove beside": lambda w, e: (steps.apply(w, steps.remove_entries(w, [e[1]])), {"active": e[0]}),
}
LEAVES_THE_FIGURE = {
    "model": lambda w, e: steps.set_model(w, e[0], replace(CELL, ideality=1.7)),
    "model gone": lambda w, e: steps.set_model(w, e[0], None),
    "hold": lambda w, e: steps.set_hold(w, e[0], "ideality", True),
    "refinement": lambda w, e: steps.record_refinement(w, e[0], refine(w.sweep(e[0]), CELL)),
    "confirmation": lambda w, e: steps.confirm_conditions(w, e[0], ["temperature"]),
    "rename elsewhere": lambda w, e: steps.rename_entry(w, e[3], "new name"),
    "model elsewhere": lambda w, e: steps.set_model(w, e[1], CELL),
}


def points_of(figure):
    """All that a figure shows apart from the model's lines."""
    values = json.loads(figure.to_json(remove_uids=False))
    values["data"] = [trace for trace in values["data"] if trace.get("uid") not in dict(scene.LINES)]
    return values


@pytest.mark.parametrize("change", CHANGES_THE_FIGURE)
def test_the_figure_is_drawn_anew_when_what_it_shows_changes(full, change):
    workspace, entries = full
    after, view = CHANGES_THE_FIGURE[change](workspace, entries)
    before = {"active": entries[0]}
    assert scene.figure_key(after, view) != scene.figure_key(workspace, before)
    assert points_of(scene.figure(after, view)) != points_of(scene.figure(workspace, before))


@pytest.mark.parametrize("change", LEAVES_THE_FIGURE)
def test_the_figure_stays_when_only_the_model_or_something_beside_it_changes(full, change):
    workspace, entries = full
    view = {"active": entries[0]}
    after = steps.apply(workspace, LEAVES_THE_FIGURE[change](workspace, entries))
    assert scene.figure_key(after, view) == scene.figure_key(workspace, view)
    assert points_of(scene.figure(after, view)) == points_of(scene.figure(workspace, view))


def test_figures_of_two_workspaces_are_never_taken_for_each_other(full):
    workspace, _ = full
    assert scene.figure_key(replace(workspace, id="other"), {}) != scene.figure_key(workspace, {})


@pytest.mark.parametrize("strip", STRIPS)
@pytest.mark.parametrize("place", range(3))
def test_figure_and_scene_carry_the_same_lines(full, place, strip):
    """The scene's lines are written into a figure that stays, so they have to be those of a figure drawn anew."""
    workspace, entries = full
    view = {"active": entries[place], "strip": strip}
    drawn = {trace.uid: trace for trace in scene.figure(workspace, view).data}
    for line in shown(workspace, **view)["curves"]:
        for sent, there in ((line["x"], drawn[line["uid"]].x), (line["y"], drawn[line["uid"]].y)):
            sent = np.array(sent, dtype=float)
            scale = np.nanmax(np.abs(sent), initial=0.0)
            np.testing.assert_allclose(sent, np.array(there, dtype=float), rtol=1e-5, atol=1e-6 * scale)


def test_the_tray_lists_devices_with_their_sweeps_in_order(full):
    workspace, (lit, reverse, dark, *_) = full
    rows = json.loads(json.dumps(scene.tray(workspace), allow_nan=False))
    assert [row["name"] for row in rows] == ["A", "B", "C"]
    assert [sweep["entry"] for sweep in rows[0]["sweeps"]] == [lit, reverse, dark]
    forward, backward, unlit = rows[0]["sweeps"]
    assert (forward["direction"], backward["direction"], unlit["direction"]) == ("forward", "reverse", "dark")
    assert (forward["value"], unlit["value"]) == ("13.8 %", "")
    assert rows[1]["sweeps"][0]["value"].endswith(" W")  # no area, so no efficiency


def test_a_sweep_that_cannot_be_trusted_is_flagged_with_the_reason():
    short = sweep_of(CELL, "short", high=0.3)
    workspace, _ = bench(LIT, short)
    forward, unfinished = scene.tray(workspace)[0]["sweeps"]
    assert (forward["flag"], forward["flags"]) == ("", "")
    assert unfinished["flag"] in ("caution", "stop") and unfinished["flags"].endswith(".")


@pytest.mark.parametrize(
    ("device", "name", "label"),
    [("K07", "K07_rev", "rev"), ("K07", "K07", "K07"), ("K07", "rev", "rev"), ("", "rev", "rev")],
)
def test_a_sweeps_name_is_not_repeated_after_the_devices(device, name, label):
    workspace, (entry,) = bench(sweep_of(CELL, name, device="x"))
    (only,) = workspace.devices
    workspace = replace(workspace, devices={only: replace(workspace.devices[only], name=device)})
    assert scene.short_name(workspace, workspace.entries[entry]) == label


@pytest.mark.parametrize(
    "sweep",
    [LIT, IN_THE_DARK, replace(LIT, current=np.zeros_like(LIT.current)), sweep_of(CELL, "two", points=2, conditions=LAMP)],
    ids=["lit", "dark", "all zeros", "two points"],
)
def test_a_spark_line_stays_in_its_box(sweep):
    path = scene.spark_path(sweep)
    places = np.array(re.findall(r"([\d.-]+),([\d.-]+)", path), dtype=float)
    assert path.startswith("M") and 2 <= len(places) <= 28
    assert (places >= 0).all() and (places <= (scene.SPARK_WIDTH, scene.SPARK_HEIGHT)).all()


def test_an_assumed_condition_is_a_finding_until_it_is_confirmed(full):
    workspace, (lit, *_) = full

    def told(now):
        return [finding["name"] for finding in shown(now, active=lit)["findings"]]

    assert "assumed" in told(workspace)
    names = sorted(workspace.assumed(lit))
    assert "assumed" not in told(steps.apply(workspace, steps.confirm_conditions(workspace, lit, names)))


def test_a_photocurrent_above_the_limit_of_a_given_gap_stops_on_the_bench_and_in_the_tray():
    workspace, (entry,) = bench(LIT)

    def told(workspace):
        (device,) = scene.tray(workspace)
        return [f["name"] for f in shown(workspace, active=entry)["findings"]], device["sweeps"][0], scene.tray_key(workspace)

    names, row, key = told(workspace)
    assert "photocurrent above the limit" not in names and row["flag"] != "stop"
    wrong = steps.apply(workspace, steps.set_band_gap(workspace, entry, 1.9))
    names, row, other_key = told(wrong)
    assert names[0] == "photocurrent above the limit" and row["flag"] == "stop" and "allows" in row["flags"]
    assert other_key != key
    assert scene.tray_readings(wrong, [entry])[entry]["flag"] == "stop"
    names, row, _ = told(steps.apply(wrong, steps.set_band_gap(wrong, entry, 1.6)))
    assert "photocurrent above the limit" not in names and row["flag"] != "stop"
