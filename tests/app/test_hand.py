"""Events of the page become moves and steps, or a sentence that says why not."""

import json
from dataclasses import replace

import pytest

from app.hand import MODEL_KINDS, moved, step_for
from app.readout import condition_rows
from app.stating import statement_rows
from core import handles, steps
from core.dials import dial_ranges
from core.errors import ConditionRefused, StepRefused, SweepbenchError
from core.statements import STATEMENTS
from core.sweep import Conditions
from tests.app.benches import AMPERES, CELL, IN_THE_DARK, LIT, REVERSE, bench, sweep_of


@pytest.fixture
def lit():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    return workspace, entry


def after(workspace, event):
    step, sentence = step_for(workspace, event)
    json.dumps(step, allow_nan=False)
    return steps.apply(workspace, step), sentence


def test_a_drag_in_screen_units_is_the_drag_of_core(lit):
    workspace, entry = lit
    event = {"kind": "drag", "entry": entry, "parameter": "photocurrent", "x": 0.0, "y": 20.0}  # mA cm⁻²
    expected = handles.drag(CELL, "photocurrent", 0.0, 0.020, span=(0.0, 1.15))
    assert moved(workspace, event) == expected
    changed, sentence = after(workspace, event)
    assert changed.fit(entry).model == expected.model and sentence == ""
    assert expected.model.landmarks().jsc == pytest.approx(0.020)


def test_a_drag_without_an_area_is_in_amperes():
    workspace, (entry,) = bench(AMPERES, models=(CELL.scaled(0.1),))
    event = {"kind": "drag", "entry": entry, "parameter": "photocurrent", "x": 0.0, "y": 0.002}
    assert moved(workspace, event).model.landmarks().jsc == pytest.approx(0.002)


def test_a_drag_in_the_dark_is_one_of_the_dark_handles():
    model = replace(CELL, photocurrent=0.0)
    workspace, (entry,) = bench(IN_THE_DARK, models=(model,))
    span = (IN_THE_DARK.voltage.min(), IN_THE_DARK.voltage.max())
    event = {"kind": "drag", "entry": entry, "parameter": "series_resistance", "x": 1.1, "y": 60.0}
    assert moved(workspace, event) == handles.drag(model, "series_resistance", 1.1, 0.060, lit=False, span=span)
    assert moved(workspace, event).model.series_resistance != model.series_resistance


@pytest.mark.parametrize("fraction", [0.0, 0.3, 1.0])
@pytest.mark.parametrize("parameter", ["photocurrent", "series_resistance", "shunt_resistance"])
def test_a_dial_turns_its_parameter_alone(lit, parameter, fraction):
    workspace, entry = lit
    model = moved(workspace, {"kind": "dial", "entry": entry, "parameter": parameter, "fraction": fraction}).model
    assert model == replace(CELL, **{parameter: dial_ranges(LIT)[parameter].value(fraction)})


def test_a_dial_with_shift_keeps_jsc_and_voc(lit):
    workspace, entry = lit
    event = {"kind": "dial", "entry": entry, "parameter": "ideality", "fraction": 0.2, "keep": True}
    before, marks = CELL.landmarks(), moved(workspace, event).model.landmarks()
    assert (marks.jsc, marks.voc) == (pytest.approx(before.jsc, rel=1e-9), pytest.approx(before.voc, rel=1e-9))
    assert marks.fill_factor != pytest.approx(before.fill_factor, rel=1e-3)


def test_a_typed_number_is_in_the_unit_beside_it(lit):
    workspace, entry = lit
    event = {"kind": "field", "entry": entry, "parameter": "saturation_current", "text": "1,5·10⁻⁹"}  # mA cm⁻²
    changed, _ = after(workspace, event)
    assert changed.fit(entry).model.saturation_current == pytest.approx(1.5e-12)
    endless, _ = after(workspace, {"kind": "field", "entry": entry, "parameter": "shunt_resistance", "text": "∞"})
    assert endless.fit(entry).model.shunt_resistance == float("inf")


def test_what_changes_nothing_is_no_step_but_says_why(lit):
    workspace, entry = lit
    workspace = steps.apply(workspace, steps.set_hold(workspace, entry, "photocurrent", True))
    event = {"kind": "drag", "entry": entry, "parameter": "photocurrent", "x": 0.0, "y": 20.0}
    assert step_for(workspace, event) == (None, "Jph is held.")
    same = {"kind": "field", "entry": entry, "parameter": "ideality", "text": "1.6"}
    assert step_for(workspace, same) == (None, "")


def test_a_slider_stopped_at_an_edge_is_a_step_and_a_sentence(lit):
    workspace, entry = lit
    event = {"kind": "dial", "entry": entry, "parameter": "shunt_resistance", "fraction": 0.0, "keep": True}
    changed, sentence = after(workspace, event)
    assert changed.fit(entry).model.shunt_resistance > dial_ranges(LIT)["shunt_resistance"].value(0.0)
    assert sentence.startswith("Rsh can go no further: ") and sentence.endswith(".")


@pytest.mark.parametrize(
    ("parameter", "text", "says"),
    [
        ("photocurrent", "-3", "from 0 to 1e+07 mA cm⁻²"),
        ("photocurrent", "∞", "from 0 to 1e+07 mA cm⁻²"),
        ("photocurrent", "1,000", "can mean 1.000 or 1000"),
        ("photocurrent", "22 mA", "takes a number in mA cm⁻²"),
        ("series_resistance", "-3", "from 0 to 1e+09 Ω cm²"),
        ("series_resistance", "1e999", "too large"),
        ("saturation_current", "-3", "from 1e-197 to 1e+07 mA cm⁻²"),
        ("saturation_current", "1e-400", "too small"),
        ("shunt_resistance", "0", "at least 1e-06 Ω cm²"),
        ("shunt_resistance", "1e999", "too large"),
        ("shunt_resistance", "1,234", "can mean 1.234 or 1234"),
        ("ideality", "-3", "from 0.1 to 20"),
        ("ideality", "21", "cells in series"),
        ("ideality", "", "left empty"),
    ],
)
@pytest.mark.parametrize("keep", [False, True])
def test_a_typed_value_beyond_what_can_be_is_refused_with_the_limits_and_changes_nothing(lit, parameter, text, says, keep):
    workspace, entry = lit
    with pytest.raises(ConditionRefused) as refused:
        step_for(workspace, {"kind": "field", "entry": entry, "parameter": parameter, "text": text, "keep": keep})
    assert says in str(refused.value) and "can go no further" not in str(refused.value)


def test_a_typed_value_that_jsc_and_voc_do_not_allow_is_not_moved_to_one_that_they_do(lit):
    workspace, entry = lit
    event = {"kind": "field", "entry": entry, "parameter": "series_resistance", "text": "500", "keep": True}
    step, sentence = step_for(workspace, event)
    assert step is None
    assert sentence == "Rs cannot have this value and stays as it was: the drop Jsc·Rs has to stay below Voc."


def test_a_typed_value_may_name_its_unit(lit):
    workspace, entry = lit
    for parameter, text, value in (("photocurrent", "21 mA/cm²", 0.021), ("shunt_resistance", "900 ohm cm2", 900.0)):
        changed, _ = after(workspace, {"kind": "field", "entry": entry, "parameter": parameter, "text": text})
        assert getattr(changed.fit(entry).model, parameter) == pytest.approx(value)


@pytest.mark.parametrize(
    ("name", "text", "field", "value"),
    [
        ("temperature", "298 K", "temperature", 298.0),
        ("temperature", "30 °C", "temperature", 303.15),
        ("area", "9 mm2", "area", 0.09),
        ("area", "0,250 cm²", "area", 0.25),
        ("irradiance", "500 W/m2", "irradiance", 0.05),
        ("series_cells", "4 cells", "series_cells", 4),
    ],
)
def test_a_condition_may_name_its_unit_or_one_that_it_is_read_from(lit, name, text, field, value):
    workspace, entry = lit
    changed, _ = after(workspace, {"kind": "condition", "entry": entry, "name": name, "text": text})
    assert getattr(changed.conditions(entry), field) == pytest.approx(value)


@pytest.mark.parametrize(
    ("name", "text", "says"),
    [
        ("area", "1e9", "from 1e-08 to 1e+06 cm²"),
        ("area", "-1", "from 1e-08 to 1e+06 cm²"),
        ("area", "1,000", "can mean"),
        ("area", "3 mA", "takes a number in cm²"),
        ("temperature", "-300", "from -223 to 726 °C"),
        ("temperature", "25 F", "takes a number in °C"),
        ("temperature", "", "left empty"),
        ("irradiance", "1e999", "too large"),
        ("irradiance", "-5", "from 0 to 1e+07 mW cm⁻²"),
        ("series_cells", "0", "from 1 to 1e+04"),
        ("series_cells", "1.5", "whole number"),
    ],
)
def test_a_condition_beyond_what_can_be_is_refused_with_its_limits(lit, name, text, says):
    workspace, entry = lit
    with pytest.raises(ConditionRefused) as refused:
        step_for(workspace, {"kind": "condition", "entry": entry, "name": name, "text": text})
    assert says in str(refused.value)


def test_zero_irradiance_turns_a_sweep_dark_and_says_so_with_the_way_back(lit):
    workspace, entry = lit
    dark, sentence = after(workspace, {"kind": "condition", "entry": entry, "name": "irradiance", "text": "0"})
    assert not dark.sweep(entry).lit
    assert "dark sweep" in sentence and "undo" in sentence and "measured in" in sentence
    light, _ = after(dark, {"kind": "condition", "entry": entry, "name": "lit", "text": "light"})
    again, sentence = after(light, {"kind": "condition", "entry": entry, "name": "irradiance", "text": "100"})
    assert again.sweep(entry).lit and again.conditions(entry).irradiance == pytest.approx(0.1) and sentence == ""
    assert after(dark, {"kind": "rename-sweep", "entry": entry, "text": "dark"})[1] == ""


def test_a_step_is_called_what_the_user_did(lit):
    workspace, entry = lit
    moves = [{"kind": "drag", "x": 0.0, "y": 20.0}, {"kind": "dial", "fraction": 0.4}, {"kind": "field", "text": "20"}]
    labels = [step_for(workspace, {"entry": entry, "parameter": "photocurrent", **move})[0]["label"] for move in moves]
    assert labels == ["drag photocurrent", "turn photocurrent", "set photocurrent"]


def test_holds_names_and_removals_become_their_steps():
    workspace, (forward, reverse) = bench(LIT, REVERSE)
    device = workspace.entries[forward].device
    held, _ = after(workspace, {"kind": "hold", "entry": forward, "parameter": "ideality", "on": True})
    assert held.fit(forward).settings.hold == {"ideality"}
    free, _ = after(held, {"kind": "hold", "entry": forward, "parameter": "ideality", "on": False})
    assert free.fit(forward).settings.hold == set()
    renamed, _ = after(workspace, {"kind": "rename-sweep", "entry": forward, "text": "best"})
    assert renamed.entries[forward].name == "best"
    renamed, _ = after(workspace, {"kind": "rename-device", "device": device, "text": "K07"})
    assert renamed.devices[device].name == "K07"
    fewer, _ = after(workspace, {"kind": "remove", "entries": [reverse]})
    assert list(fewer.entries) == [forward]


@pytest.mark.parametrize(
    ("name", "text", "value"),
    [
        ("area", "0,25", 0.25),
        ("area", "", None),
        ("area", "–", None),
        ("temperature", "-10", 263.15),
        ("irradiance", "50", 0.05),
        ("series_cells", "4", 4),
        ("lit", "dark", False),
    ],
)
def test_a_condition_is_typed_in_the_units_of_the_lab(lit, name, text, value):
    workspace, entry = lit
    changed, _ = after(workspace, {"kind": "condition", "entry": entry, "name": name, "text": text})
    assert getattr(changed.conditions(entry), name) == (pytest.approx(value) if isinstance(value, float) else value)


def test_the_area_that_a_file_used_can_be_given():
    density = sweep_of(CELL, "density", read_as="density", per_area=True, conditions=Conditions())
    workspace, (entry,) = bench(density)
    changed, _ = after(workspace, {"kind": "condition", "entry": entry, "name": "file_area", "text": "0.09"})
    assert changed.conditions(entry).file_area == 0.09


def test_assumed_conditions_are_confirmed_as_they_stand(lit):
    workspace, entry = lit
    changed, _ = after(workspace, {"kind": "confirm", "entry": entry, "names": ["temperature"]})
    assert changed.assumed(entry) == workspace.assumed(entry) - {"temperature"}
    assert changed.conditions(entry) == workspace.conditions(entry)


REFUSED = [
    {},
    {"kind": "fly"},
    *({"kind": kind} for kind in MODEL_KINDS),
    {"kind": "drag", "entry": "gone", "parameter": "ideality", "x": 0.0, "y": 1.0},
    {"kind": "drag", "parameter": "charm", "x": 0.0, "y": 1.0},
    {"kind": "drag", "parameter": "ideality", "x": None, "y": 1.0},
    {"kind": "drag", "parameter": "ideality", "x": 0.0, "y": "1"},
    {"kind": "dial", "parameter": "ideality"},
    {"kind": "field", "parameter": "ideality", "text": "much"},
    {"kind": "field", "parameter": "ideality"},
    {"kind": "hold", "parameter": "charm", "on": True},
    {"kind": "hold", "entry": "gone", "parameter": "ideality", "on": True},
    {"kind": "condition", "name": "weather", "text": "1"},
    {"kind": "condition", "entry": "gone", "name": "area", "text": "1"},
    {"kind": "condition", "name": "area", "text": "-1"},
    {"kind": "condition", "name": "area", "text": "inf"},
    {"kind": "condition", "name": "temperature", "text": "warm"},
    {"kind": "condition", "name": "temperature", "text": "5000"},
    {"kind": "condition", "name": "irradiance", "text": "-1"},
    {"kind": "condition", "name": "series_cells", "text": "1.5"},
    {"kind": "condition", "name": "series_cells", "text": "inf"},
    {"kind": "confirm", "names": ["weather"]},
    {"kind": "rename-sweep", "text": "  "},
    {"kind": "rename-device", "device": "gone", "text": "x"},
    {"kind": "remove", "entries": ["gone"]},
]


@pytest.mark.parametrize("event", REFUSED, ids=str)
def test_what_cannot_be_done_is_told_in_a_sentence(lit, event):
    workspace, entry = lit
    with pytest.raises((StepRefused, ConditionRefused)) as refused:
        step_for(workspace, {"entry": entry, **event} if event else event)
    sentence = str(refused.value)
    assert sentence[0].isupper() or sentence.split(":")[0] in ("ideality factor",)
    assert sentence.endswith(".") and isinstance(refused.value, SweepbenchError)


def test_without_a_curve_there_is_nothing_to_move():
    workspace, (entry,) = bench(LIT)
    with pytest.raises(StepRefused, match="first guess"):
        moved(workspace, {"kind": "dial", "entry": entry, "parameter": "ideality", "fraction": 0.5})


def test_statements_come_in_per_cent_and_go_when_emptied(lit):
    workspace, _ = lit
    stated, _ = after(workspace, {"kind": "statement", "name": "area_uncertainty", "text": " 0,5 "})
    assert stated.stated("area_uncertainty") == pytest.approx(0.005)
    stated, _ = after(stated, {"kind": "statement", "name": "area_shared", "text": "yes"})
    stated, _ = after(stated, {"kind": "statement", "name": "preconditioning", "text": "60 s in light"})
    assert statement_rows(stated, next(iter(stated.entries)))["texts"] == {
        **dict.fromkeys(STATEMENTS, ""), "area_uncertainty": "0.5", "area_shared": "yes", "preconditioning": "60 s in light",
    }  # fmt: skip
    for name in ("area_uncertainty", "area_shared", "preconditioning"):
        stated, _ = after(stated, {"kind": "statement", "name": name, "text": ""})
    assert stated.statements == {}
    assert step_for(stated, {"kind": "statement", "name": "delay", "text": ""}) == (None, "")


@pytest.mark.parametrize(("name", "text"), [("area_uncertainty", "much"), ("lamp_uncertainty", "101"), ("lamp_uncertainty", "-1"), ("mood", "good")])
def test_a_statement_that_cannot_be_is_refused_in_a_sentence(lit, name, text):
    with pytest.raises(ConditionRefused, match=r"[.”]$"):
        step_for(lit[0], {"kind": "statement", "name": name, "text": text})


def test_a_group_is_the_device_s_and_an_empty_one_takes_it_out():
    workspace, entries = bench(LIT, REVERSE)
    named, _ = after(workspace, {"kind": "condition", "entry": entries[0], "name": "group", "text": " run 7 "})
    assert condition_rows(named, entries[1], named.sweep(entries[1]))["group"]["text"] == "run 7"
    left, _ = after(named, {"kind": "condition", "entry": entries[1], "name": "group", "text": ""})
    assert left.devices == workspace.devices


def test_a_unit_is_asked_only_where_the_file_gives_none():
    told, (entry,) = bench(LIT)
    assert not condition_rows(told, entry, told.sweep(entry))["units"]["shown"]
    with pytest.raises(ConditionRefused):
        step_for(told, {"kind": "condition", "entry": entry, "name": "units", "text": "mA"})
    bare = replace(LIT, assumed=frozenset({"units"}), read_unit="mA cm⁻²", conditions=Conditions(), read_as="density")
    workspace, (entry,) = bench(bare)
    row = condition_rows(workspace, entry, workspace.sweep(entry))["units"]
    assert row == {"text": "mA cm⁻²", "assumed": True, "shown": True}
    confirmed, _ = after(workspace, {"kind": "confirm", "entry": entry, "names": ["units"]})
    assert not condition_rows(confirmed, entry, confirmed.sweep(entry))["units"]["assumed"]
    changed, _ = after(workspace, {"kind": "condition", "entry": entry, "name": "units", "text": "mA"})
    assert not changed.sweep(entry).per_area
    assert condition_rows(changed, entry, changed.sweep(entry))["units"] == {"text": "mA", "assumed": False, "shown": True}
