"""Steps: applied, inverted, refused."""

import json
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from core import steps
from core.diode import PARAMETERS
from core.errors import ConditionRefused, StepRefused, SweepbenchError
from core.records import plain
from core.refine import FitSettings
from core.sweep import Conditions
from core.workspace import Workspace
from tests.core.workspaces import (
    MODEL,
    counted_ids,
    entry_named,
    invented_sweep,
    refinement,
    workspace_with,
)

DENSITY = Conditions(area=None, file_area=None)


def only_plain_types(value):
    if isinstance(value, dict):
        return all(type(key) is str and only_plain_types(item) for key, item in value.items())
    if isinstance(value, list):
        return all(only_plain_types(item) for item in value)
    return type(value) in (str, int, float, bool, type(None))


def content(workspace):
    """All that a workspace holds, but for its revision."""
    readings = {name: sweep.to_dict() for name, sweep in workspace.readings().items()}
    return workspace.id, workspace.name, workspace.records(), readings


# Any step that the builders make, chosen by drawn numbers.
numbers = st.integers(0, 10**6)
positive = st.floats(1e-3, 1e3)


@st.composite
def builders(draw):
    kind, pick, number = draw(st.integers(0, 11)), draw(numbers), draw(positive)
    text = draw(st.text(max_size=8))

    def build(workspace):
        tray = workspace.in_tray_order()
        if not tray or kind == 0:
            sweep = invented_sweep(
                f"device {pick % 3}",
                text,
                points=2 + pick % 5,
                offset=number * 1e-6,
                read_as="density" if pick % 2 else "current",
                conditions=Conditions(area=[None, 0.1, 0.2][pick % 3], file_area=[None, 0.1][pick % 2]),
            )
            return steps.add_sweeps(workspace, [sweep], source="a" * 64, source_name=text)
        entry = tray[pick % len(tray)]
        conditions = workspace.conditions(entry.id)
        model = replace(MODEL, series_cells=conditions.series_cells, temperature=conditions.temperature)
        return [
            lambda: steps.remove_entries(workspace, [entry.id]),
            lambda: steps.remove_entries(workspace, [e.id for e in tray]),
            lambda: steps.rename_entry(workspace, entry.id, text),
            lambda: steps.rename_device(workspace, entry.device, text),
            lambda: steps.set_group(workspace, [entry.device], text),
            lambda: steps.set_conditions(workspace, entry.id, area=number),
            lambda: steps.set_conditions(workspace, entry.id, series_cells=1 + pick % 70, temperature=250 + pick % 99),
            lambda: steps.confirm_conditions(workspace, entry.id, ["series_cells", "irradiance"]),
            lambda: steps.set_model(workspace, entry.id, replace(model, series_resistance=number)),
            lambda: steps.set_hold(workspace, entry.id, PARAMETERS[pick % 5], pick % 2 == 0),
            lambda: steps.record_refinement(workspace, entry.id, refinement(model)),
        ][kind - 1]()

    return build


@settings(max_examples=60, deadline=None)
@given(st.lists(builders(), min_size=1, max_size=12))
def test_every_step_survives_json_and_its_inverse_takes_it_back(drawn):
    workspace = Workspace("w", "test")
    for build in drawn:
        try:
            step = build(workspace)
        except SweepbenchError:
            continue
        assert only_plain_types(step)
        sent = json.loads(json.dumps(step, allow_nan=False))
        assert sent == step
        after = steps.apply(workspace, sent)
        back = json.loads(json.dumps(steps.inverse(workspace, sent), allow_nan=False))
        restored = steps.apply(after, back)
        assert content(restored) == content(workspace)
        assert restored.revision == workspace.revision + 2
        again = steps.apply(restored, steps.inverse(after, back))
        assert content(again) == content(after)
        for entry in after.in_tray_order():  # and what it leads to can be shown
            sweep = after.sweep(entry.id)
            assert sweep.conditions == after.conditions(entry.id) or sweep.read_as == "density"
        workspace = after


def test_infinite_shunt_resistance_survives_a_step():
    workspace = workspace_with(invented_sweep())
    entry = workspace.in_tray_order()[0].id
    step = json.loads(json.dumps(steps.set_model(workspace, entry, replace(MODEL, shunt_resistance=math.inf))))
    assert steps.apply(workspace, step).fit(entry).model.shunt_resistance == math.inf


def test_numpy_numbers_do_not_leak_into_a_step():
    model = replace(MODEL, photocurrent=np.float64(0.02), series_cells=np.int64(1), ideality=np.float32(1.5))
    workspace = workspace_with(invented_sweep(scan_rate=np.float64(0.1), header={"n": "1"}))
    entry = workspace.in_tray_order()[0].id
    assert only_plain_types(steps.set_model(workspace, entry, model))
    settings_ = FitSettings(excluded=tuple(np.arange(3)), window=(np.float64(0), np.float64(1)))
    assert only_plain_types(steps.set_fit_settings(workspace, entry, settings_))
    assert only_plain_types(plain({"a": (np.bool_(True), np.array([1, 2]), {3, 1})}))
    for wrong in (math.nan, math.inf, object()):
        with pytest.raises(StepRefused):
            plain({"x": [wrong]})


# What apply refuses

def refused(workspace, put):
    with pytest.raises(StepRefused) as refusal:
        steps.apply(workspace, {"label": "x", "put": put})
    return str(refusal.value)


@pytest.mark.parametrize(
    "step",
    [None, [], {}, {"label": "x"}, {"label": 3, "put": {}}, {"label": "x", "put": []},
     {"label": "x", "put": {}, "more": 1}, {"label": "x", "put": {"devices": []}},
     {"label": "x", "put": {"devices": {"": None}}}, {"label": "x", "put": {"devices": {"d": 5}}}],
)  # fmt: skip
def test_what_is_no_step_is_refused(step):
    with pytest.raises(StepRefused):
        steps.apply(Workspace("w", "test"), step)


def test_unknown_kinds_malformed_records_and_dangling_ids_are_refused():
    workspace = workspace_with(invented_sweep())
    entry = workspace.in_tray_order()[0]
    record, device = entry.to_dict(), workspace.record("devices", entry.device)
    assert "spaceships" in refused(workspace, {"spaceships": {"x": {}}})
    assert "device" in refused(workspace, {"devices": {"d": {"id": "d"}}})
    assert "own" in refused(workspace, {"devices": {"d": device}})
    assert "colour" in refused(workspace, {"devices": {entry.device: {**device, "colour": "red"}}})
    assert "device" in refused(workspace, {"devices": {entry.device: {**device, "series_cells": "many"}}})
    assert "cm²" in refused(workspace, {"devices": {entry.device: {**device, "area": 0}}})
    assert "without its device" in refused(workspace, {"devices": {entry.device: None}})
    assert "without its device" in refused(workspace, {"entries": {entry.id: {**record, "device": "gone"}}})
    assert "points" in refused(workspace, {"entries": {entry.id: {**record, "reading": "0" * 64}}})
    assert "sweep" in refused(workspace, {"entries": {entry.id: {**record, "order": None}}})
    fit = workspace.fit(entry.id).to_dict()
    assert "without its sweep" in refused(workspace, {"fits": {"gone": fit}})
    assert "fit" in refused(workspace, {"fits": {entry.id: {**fit, "model": {"photocurrent": 1}}}})
    negative = {**MODEL.to_dict(), "saturation_current": -1.0}
    assert "sign" in refused(workspace, {"fits": {entry.id: {**fit, "model": negative}}})
    held = {**fit["settings"], "hold": ["colour"]}
    assert "unknown parameter" in refused(workspace, {"fits": {entry.id: {**fit, "settings": held}}})
    fitted = steps.apply(workspace, steps.set_model(workspace, entry.id, MODEL))
    assert "without its sweep" in refused(fitted, {"entries": {entry.id: None}})


@pytest.mark.parametrize(
    "wrong",
    [{"voltage": [0.0]}, {"voltage": [], "current": []}, {"current": None}, {"direction": "up"}, {"per_area": 1},
     {"notes": [1]}, {"header": {"a": 1}}, {"conditions": {"area": -1}}, {"name": None}, {"scan_rate": "fast"}],
)  # fmt: skip
def test_a_malformed_reading_is_refused(wrong):
    workspace = Workspace("w", "test")
    step = steps.add_sweeps(workspace, [invented_sweep()])
    ((name, record),) = step["put"]["readings"].items()
    step["put"]["readings"] = {name: {**record, **wrong}}
    with pytest.raises(StepRefused):
        steps.apply(workspace, step)


def test_points_must_be_those_that_their_id_stands_for():
    workspace = Workspace("w", "test")
    step = steps.add_sweeps(workspace, [invented_sweep()])
    ((_, record),) = step["put"]["readings"].items()
    record["current"][0] += 1e-9
    with pytest.raises(StepRefused, match="points"):
        steps.apply(workspace, step)


# Adding, removing, naming

def test_sweeps_of_one_device_join_it_and_get_distinct_names():
    workspace = workspace_with(invented_sweep("A", "fwd"), invented_sweep("A", "fwd", offset=1e-5))
    (device,) = workspace.devices.values()
    assert (device.name, device.area) == ("A", 0.1)
    assert [entry.name for entry in workspace.in_tray_order()] == ["fwd", "fwd 2"]


def test_a_device_without_a_name_is_called_after_its_file():
    workspace = workspace_with(invented_sweep("", ""), source_name="night shift.txt")
    assert [device.name for device in workspace.devices.values()] == ["night shift"]
    assert workspace.in_tray_order()[0].name == "forward"


def test_a_different_known_area_makes_a_device_of_its_own():
    first, second = invented_sweep("A"), invented_sweep("A", conditions=Conditions(area=0.25))
    workspace = workspace_with(first, second)
    assert {device.name: device.area for device in workspace.devices.values()} == {"A": 0.1, "A (0.25 cm²)": 0.25}
    third = invented_sweep("A", "again", conditions=Conditions(area=0.25))
    workspace = steps.apply(workspace, steps.add_sweeps(workspace, [third]))
    assert len(workspace.devices) == 2
    assert workspace.devices[entry_named(workspace, "again").device].area == 0.25


def test_a_different_known_number_of_cells_makes_a_device_of_its_own():
    known = frozenset({"temperature", "irradiance"})
    sweeps = [invented_sweep("M", conditions=Conditions(series_cells=n), assumed=known) for n in (1, 36)]
    workspace = workspace_with(*sweeps)
    assert {device.name: device.series_cells for device in workspace.devices.values()} == {"M": 1, "M (36 cells)": 36}
    assert not any("series_cells" in workspace.assumed(entry) for entry in workspace.entries)


def test_an_area_that_the_user_corrected_does_not_keep_the_next_file_out():
    workspace = workspace_with(invented_sweep("A", "fwd"))
    entry = workspace.in_tray_order()[0].id
    workspace = steps.apply(workspace, steps.set_conditions(workspace, entry, area=0.09))
    workspace = steps.apply(workspace, steps.add_sweeps(workspace, [invented_sweep("A", "rev")]))
    (device,) = workspace.devices.values()
    assert device.area == 0.09


def test_an_area_that_only_a_later_file_gives_holds_for_the_device_and_its_models():
    workspace = workspace_with(invented_sweep("A", "fwd", conditions=Conditions()))
    entry = workspace.in_tray_order()[0].id
    workspace = steps.apply(workspace, steps.set_model(workspace, entry, MODEL))
    workspace = steps.apply(workspace, steps.add_sweeps(workspace, [invented_sweep("A", "rev")]))
    assert workspace.sweep(entry).area == 0.1
    assert workspace.fit(entry).model == MODEL.scaled(10)


def test_a_file_dropped_twice_is_added_once():
    source = "ab" * 32
    sweeps = [invented_sweep("A", "fwd"), invented_sweep("A", "rev", offset=1e-5)]
    workspace = workspace_with(*sweeps, source=source)
    assert steps.already_loaded(workspace, source)
    assert not steps.already_loaded(workspace, "cd" * 32)
    assert steps.add_sweeps(workspace, sweeps, source=source)["put"] == {}
    gone = entry_named(workspace, "fwd").id
    workspace = steps.apply(workspace, steps.remove_entries(workspace, [gone]))
    again = steps.apply(workspace, steps.add_sweeps(workspace, sweeps, source=source))
    assert {entry.name for entry in again.entries.values()} == {"fwd", "rev"}


def test_ids_do_not_collide():
    workspace = workspace_with(invented_sweep("A"))  # id1: its device, id2: the sweep
    more = steps.apply(workspace, steps.add_sweeps(workspace, [invented_sweep("B")], new_id=counted_ids()))
    assert len(more.devices) == len(more.entries) == 2


def test_removing_the_last_sweep_removes_its_device_and_fit():
    workspace = workspace_with(invented_sweep("A"), invented_sweep("B"))
    a, b = (entry.id for entry in workspace.in_tray_order())
    workspace = steps.apply(workspace, steps.set_model(workspace, a, MODEL))
    workspace = steps.apply(workspace, steps.remove_entries(workspace, [a]))
    assert [device.name for device in workspace.devices.values()] == ["B"]
    assert (list(workspace.entries), dict(workspace.fits)) == ([b], {})


def test_names_are_cleaned_and_kept_distinct():
    workspace = workspace_with(invented_sweep("A", "1"), invented_sweep("A", "2"), invented_sweep("B", "1"))
    one = entry_named(workspace, "1", "A")
    renamed = steps.apply(workspace, steps.rename_entry(workspace, one.id, "  best\n one\x00 "))
    assert renamed.entries[one.id].name == "best one"
    for name in ("", " \t", "2"):
        with pytest.raises(StepRefused):
            steps.rename_entry(workspace, one.id, name)
    with pytest.raises(StepRefused, match="B"):
        steps.rename_device(workspace, one.device, "B")
    grouped = steps.apply(workspace, steps.set_group(workspace, workspace.devices, "annealed"))
    assert {device.group for device in grouped.devices.values()} == {"annealed"}


# Fits

def test_a_model_of_other_conditions_than_the_sweep_is_refused():
    workspace = workspace_with(invented_sweep())
    entry = workspace.in_tray_order()[0].id
    with pytest.raises(StepRefused, match="temperature"):
        steps.set_model(workspace, entry, replace(MODEL, temperature=320.0))
    with pytest.raises(StepRefused, match="cells"):
        steps.record_refinement(workspace, entry, refinement(replace(MODEL, series_cells=36)))


def test_holds_and_settings_stay_with_the_fit():
    workspace = workspace_with(invented_sweep())
    entry = workspace.in_tray_order()[0].id
    workspace = steps.apply(workspace, steps.set_hold(workspace, entry, "ideality", True))
    workspace = steps.apply(workspace, steps.set_model(workspace, entry, MODEL))
    assert workspace.fit(entry).settings.hold == {"ideality"}
    workspace = steps.apply(workspace, steps.set_hold(workspace, entry, "ideality", False))
    assert workspace.fit(entry).settings.hold == frozenset()
    with pytest.raises(StepRefused, match="colour"):
        steps.set_hold(workspace, entry, "colour", True)


def test_refinements_of_several_sweeps_are_one_step():
    workspace = workspace_with(invented_sweep("A"), invented_sweep("B"))
    step = steps.record_refinements(workspace, {entry: refinement() for entry in workspace.entries})
    assert step["label"] == "refine 2 sweeps"
    after = steps.apply(workspace, step)
    assert all(after.refined(entry).points == 12 for entry in after.entries)


# Conditions

def fitted_workspace(**fields):
    workspace = workspace_with(invented_sweep("A", "fwd", **fields), invented_sweep("A", "rev", offset=1e-5, **fields))
    chosen = FitSettings(
        window=(0.1, 0.9),
        excluded=(1, 4),
        bounds={"saturation_current": (1e-15, 1e-9), "shunt_resistance": (100.0, math.inf), "ideality": (1.0, 2.0)},
    )
    for entry in list(workspace.entries):
        workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refinement(settings=chosen)))
    return workspace, entry_named(workspace, "fwd").id, entry_named(workspace, "rev").id


def test_a_new_area_rescales_the_models_of_all_sweeps_of_the_device_with_their_points():
    workspace, fwd, rev = fitted_workspace()
    after = steps.apply(workspace, steps.set_conditions(workspace, fwd, area=0.25))
    for entry in (fwd, rev):
        before, sweep, fit = workspace.sweep(entry), after.sweep(entry), after.fit(entry)
        assert sweep.area == 0.25
        apart = before.current - MODEL.current(before.voltage)
        np.testing.assert_allclose(sweep.current - fit.model.current(sweep.voltage), apart * 0.4, rtol=1e-9, atol=1e-16)
        assert fit.model.series_resistance == pytest.approx(MODEL.series_resistance / 0.4, rel=1e-14)
        assert fit.settings.bounds["saturation_current"] == pytest.approx((4e-16, 4e-10), rel=1e-14)
        assert fit.settings.bounds["shunt_resistance"] == pytest.approx((250.0, math.inf), rel=1e-14)
        assert (fit.settings.window, fit.settings.excluded) == ((0.1, 0.9), (1, 4))
        assert fit.refinement is None  # its errors belong to the old area


@pytest.mark.parametrize(("change", "factor"), [({"temperature": 340.0}, 298.15 / 340), ({"series_cells": 4}, 1 / 4)])
def test_temperature_and_cells_move_the_ideality_and_nothing_else(change, factor):
    workspace, fwd, rev = fitted_workspace()
    after = steps.apply(workspace, steps.set_conditions(workspace, fwd, **change))
    model, voltage = after.fit(fwd).model, workspace.sweep(fwd).voltage
    np.testing.assert_allclose(model.current(voltage), MODEL.current(voltage), rtol=1e-9)
    assert model.ideality == pytest.approx(MODEL.ideality * factor, rel=1e-14)
    assert model.saturation_current == MODEL.saturation_current
    assert after.fit(fwd).settings.bounds["ideality"] == pytest.approx((factor, 2 * factor), rel=1e-14)
    touched = "series_cells" in change  # the device's, hence of both sweeps
    assert (after.fit(rev).model != MODEL) == touched


def test_confirming_or_repeating_a_condition_leaves_the_refinement_alone():
    workspace, fwd, _ = fitted_workspace()
    after = steps.apply(workspace, steps.set_conditions(workspace, fwd, area=0.1, temperature=298.15, irradiance=0.08))
    assert after.refined(fwd) is not None
    assert after.assumed(fwd) == {"series_cells"}


def test_a_density_needs_the_area_of_its_file_before_another_area():
    workspace, fwd, rev = fitted_workspace(conditions=DENSITY, read_as="density")
    with pytest.raises(ConditionRefused, match="area that the file used"):
        steps.set_conditions(workspace, fwd, area=0.2)
    after = steps.apply(workspace, steps.set_conditions(workspace, fwd, area=0.2, file_area=0.1))
    np.testing.assert_allclose(after.sweep(rev).current, workspace.sweep(rev).current / 2, rtol=1e-15)
    assert after.fit(fwd).model == MODEL.scaled(0.5)


def test_currents_without_an_area_become_densities_with_one():
    workspace, fwd, _ = fitted_workspace(conditions=Conditions())
    assert not workspace.sweep(fwd).per_area
    after = steps.apply(workspace, steps.set_conditions(workspace, fwd, area=0.5))
    assert after.sweep(fwd).per_area
    assert after.fit(fwd).model == MODEL.scaled(2)
    back = steps.apply(after, steps.set_conditions(after, fwd, area=None))
    assert back.fit(fwd).model == MODEL
    assert not back.sweep(fwd).per_area


def test_no_irradiance_means_dark_and_dark_has_none():
    workspace, fwd, rev = fitted_workspace()
    dark = steps.apply(workspace, steps.set_conditions(workspace, fwd, irradiance=0))
    assert (dark.sweep(fwd).lit, dark.sweep(fwd).irradiance) == (False, 0.0)
    assert dark.sweep(rev).lit
    assert dark.refined(fwd) is None
    with pytest.raises(ConditionRefused, match="dark"):
        steps.set_conditions(dark, fwd, irradiance=0.1)
    with pytest.raises(ConditionRefused, match="above zero"):
        steps.set_conditions(dark, fwd, irradiance=0, lit=True)
    lit = steps.apply(dark, steps.set_conditions(dark, fwd, irradiance=0.1, lit=True))
    assert lit.sweep(fwd).irradiance == 0.1


@pytest.mark.parametrize(
    "change",
    [{}, {"colour": 1.0}, {"area": 0}, {"area": -1}, {"area": math.nan}, {"area": "wide"}, {"area": True},
     {"temperature": 5}, {"temperature": math.inf}, {"series_cells": 2.5}, {"series_cells": 0}, {"irradiance": -0.1}],
)  # fmt: skip
def test_a_condition_that_makes_no_sense_is_refused(change):
    workspace, fwd, _ = fitted_workspace()
    with pytest.raises(ConditionRefused):
        steps.set_conditions(workspace, fwd, **change)


def test_only_known_conditions_can_be_confirmed():
    workspace, fwd, _ = fitted_workspace()
    with pytest.raises(ConditionRefused, match="colour"):
        steps.confirm_conditions(workspace, fwd, ["colour"])
