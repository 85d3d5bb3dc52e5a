"""What a workspace derives from its devices, entries and fits."""

import dataclasses
import math
from dataclasses import replace

import numpy as np
import pytest

from core import steps
from core.errors import StepRefused
from core.sweep import Conditions
from core.workspace import Device, Entry, Fit
from tests.core.workspaces import (
    MODEL,
    entry_named,
    invented_sweep,
    refinement,
    workspace_with,
)


def test_nothing_of_a_workspace_can_be_changed_in_place():
    workspace = workspace_with(invented_sweep())
    with pytest.raises(dataclasses.FrozenInstanceError):
        workspace.revision = 5
    with pytest.raises(TypeError):
        workspace.entries["x"] = None
    entry = workspace.in_tray_order()[0]
    with pytest.raises(ValueError):
        entry.reading.current[0] = 1.0


def test_a_sweep_stands_under_the_conditions_of_its_device_and_its_own():
    workspace = workspace_with(invented_sweep(conditions=Conditions(area=0.1, temperature=310.0)))
    entry = workspace.in_tray_order()[0]
    workspace = steps.apply(workspace, steps.set_conditions(workspace, entry.id, area=0.2, irradiance=0.05))
    sweep = workspace.sweep(entry.id)
    assert (sweep.area, sweep.irradiance, sweep.temperature) == (0.2, 0.05, 310.0)
    np.testing.assert_allclose(sweep.current, entry.reading.current / 2, rtol=1e-15)
    assert workspace.entries[entry.id].reading.area == 0.1  # the reading stays as read


def test_a_density_of_unknown_file_area_stays_as_read_beside_a_sweep_of_known_area():
    density = invented_sweep(name="from paper", conditions=Conditions(), read_as="density")
    workspace = workspace_with(density, invented_sweep(name="own"))
    entry = entry_named(workspace, "from paper")
    assert workspace.devices[entry.device].area == 0.1
    np.testing.assert_array_equal(workspace.sweep(entry.id).current, density.current)
    assert workspace.sweep(entry.id).area is None


def test_a_derived_sweep_stays_the_same_object_until_its_conditions_change():
    workspace = workspace_with(invented_sweep("A"), invented_sweep("B"))
    a, b = (entry.id for entry in workspace.in_tray_order())
    before = workspace.sweep(a), workspace.sweep(b)
    moved = steps.apply(workspace, steps.set_model(workspace, a, MODEL))
    assert (moved.sweep(a), moved.sweep(b)) == before
    warmer = steps.apply(moved, steps.set_conditions(moved, a, temperature=320.0))
    assert warmer.sweep(b) is before[1]
    assert warmer.sweep(a).temperature == 320.0


def test_conditions_are_assumed_until_given_or_confirmed():
    workspace = workspace_with(invented_sweep(name="one"), invented_sweep(name="two"))
    one, two = (entry.id for entry in workspace.in_tray_order())
    assert workspace.assumed(one) == {"temperature", "irradiance", "series_cells"}
    workspace = steps.apply(workspace, steps.set_conditions(workspace, one, temperature=300.0))
    workspace = steps.apply(workspace, steps.confirm_conditions(workspace, one, ["series_cells"]))
    assert workspace.assumed(one) == {"irradiance"}
    assert workspace.assumed(two) == {"temperature", "irradiance"}  # cells in series are the device's
    workspace = steps.apply(workspace, steps.set_conditions(workspace, one, temperature=None))
    assert workspace.assumed(one) == {"irradiance", "temperature"}
    assert workspace.sweep(one).temperature == 298.15


def test_a_dark_sweep_assumes_no_irradiance_and_one_corrected_to_lit_does():
    dark = invented_sweep(conditions=Conditions(area=0.1, lit=False, irradiance=0.0), assumed=frozenset())
    workspace = workspace_with(dark)
    entry = workspace.in_tray_order()[0].id
    assert workspace.assumed(entry) == frozenset()
    workspace = steps.apply(workspace, steps.set_conditions(workspace, entry, lit=True))
    assert workspace.assumed(entry) == {"irradiance"}
    assert workspace.sweep(entry).irradiance == 0.1  # one sun, as assumed


def test_the_tray_keeps_the_sweeps_of_a_device_together():
    workspace = workspace_with(invented_sweep("A", "1"), invented_sweep("B", "2"), invented_sweep("A", "3"))
    names = [(workspace.devices[entry.device].name, entry.name) for entry in workspace.in_tray_order()]
    assert names == [("A", "1"), ("A", "3"), ("B", "2")]
    device = entry_named(workspace, "1").device
    assert [entry.name for entry in workspace.entries_of(device)] == ["1", "3"]


def test_a_refinement_holds_only_while_the_model_stands_where_it_left_it():
    workspace = workspace_with(invented_sweep())
    entry = workspace.in_tray_order()[0].id
    assert workspace.fit(entry) == Fit()
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refinement()))
    assert workspace.refined(entry).rmse == 2e-6
    dragged = steps.apply(workspace, steps.set_model(workspace, entry, replace(MODEL, series_resistance=3.0)))
    assert dragged.refined(entry) is None
    back = steps.apply(dragged, steps.set_model(dragged, entry, MODEL))
    assert back.refined(entry).rmse == 2e-6


def test_what_is_gone_is_told_in_a_sentence():
    workspace = workspace_with(invented_sweep())
    for ask in (workspace.sweep, workspace.fit, workspace.assumed, workspace.entry):
        with pytest.raises(StepRefused, match="no longer in this workspace"):
            ask("gone")
    with pytest.raises(StepRefused, match="no longer in this workspace"):
        workspace.device("gone")


def test_records_give_equal_values_back():
    device = Device("d", "A", 0.1, None, 60, 1.6, "batch 3", frozenset({"series_cells"}))
    assert Device.from_dict(device.to_dict()) == device
    reading = invented_sweep()
    entry = Entry("e", "d", "forward", reading, "0" * 64, "f" * 64, "a.csv", 2.0, 300.0, 0.05, True, frozenset({"lit"}))
    assert Entry.from_dict(entry.to_dict(), reading) == entry
    fit = Fit(replace(MODEL, shunt_resistance=math.inf), refinement=refinement())
    again = Fit.from_dict(fit.to_dict())
    assert again.model == fit.model
    assert again.to_dict() == fit.to_dict()


@pytest.mark.parametrize(
    "wrong",
    [{"name": 5}, {"band_gap": math.nan}, {"band_gap": True}, {"area": -1.0}, {"confirmed": ["area"]}],
)
def test_a_device_that_cannot_be_is_refused(wrong):
    with pytest.raises((TypeError, ValueError)):
        Device.from_dict({"id": "d", "name": "A", **wrong})
