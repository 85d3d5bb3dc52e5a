"""Steps on band gap and model, and the store's memory of the page's events."""

import contextlib
import json
import math
from dataclasses import replace

import numpy as np
import pytest

from core import steps
from core.diode import OneDiode
from core.errors import ConditionRefused, StepRefused
from core.fit_settings import FitSettings
from core.refine import refine
from core.store import Store
from core.two_diode import TwoDiode
from tests.core.workspaces import MODEL, entry_named, invented_sweep, workspace_with


@pytest.fixture
def pair():
    """Two sweeps of one device, and one of another."""
    workspace = workspace_with(invented_sweep(), invented_sweep(name="reverse"), invented_sweep("B", "other"))
    return workspace, entry_named(workspace, "forward").id


def gap_of(workspace, name):
    return workspace.devices[entry_named(workspace, name).device].band_gap


# Band gap

def test_a_band_gap_is_the_device_s_and_not_its_neighbour_s(pair):
    workspace, entry = pair
    step = steps.set_band_gap(workspace, entry, 1.6)
    after = steps.apply(workspace, json.loads(json.dumps(step, allow_nan=False)))
    assert [gap_of(after, name) for name in ("forward", "reverse", "other")] == [1.6, 1.6, None]
    assert step["label"] == "change band gap"
    assert steps.apply(after, steps.inverse(workspace, step)).devices == workspace.devices


def test_a_band_gap_can_be_taken_away(pair):
    workspace, entry = pair
    workspace = steps.apply(workspace, steps.set_band_gap(workspace, entry, 1.6))
    assert gap_of(steps.apply(workspace, steps.set_band_gap(workspace, entry, None)), "forward") is None


@pytest.mark.parametrize("gap", [0.3, 5.0])
def test_the_ends_of_the_range_are_gaps(pair, gap):
    workspace, entry = pair
    assert gap_of(steps.apply(workspace, steps.set_band_gap(workspace, entry, gap)), "forward") == gap


@pytest.mark.parametrize("gap", [0.0, -1.6, 0.29, 5.01, 1600.0, math.inf, math.nan])
def test_what_is_no_gap_of_a_cell_is_refused_with_a_hint(pair, gap):
    workspace, entry = pair
    with pytest.raises(ConditionRefused, match=r"outside 0\.3 to 5 eV; check the unit\.$"):
        steps.set_band_gap(workspace, entry, gap)


def test_a_band_gap_of_a_sweep_that_is_gone_is_refused(pair):
    workspace, _ = pair
    with pytest.raises(StepRefused, match=r"\.$"):
        steps.set_band_gap(workspace, "gone", 1.6)


# Model

def fitted(pair, settings=FitSettings(), model=MODEL):
    workspace, entry = pair
    workspace = steps.apply(workspace, steps.set_fit_settings(workspace, entry, settings))
    return steps.apply(workspace, steps.set_model(workspace, entry, model)), entry


def switched(bench, name):
    workspace, entry = bench
    step = json.loads(json.dumps(steps.switch_model(workspace, entry, name), allow_nan=False))
    return steps.apply(workspace, step), entry


def test_two_diodes_lie_nearly_on_the_curve_of_one(pair):
    workspace, entry = switched(fitted(pair), "two diodes")
    model = workspace.fit(entry).model
    assert isinstance(model, TwoDiode) and (model.ideality_1, model.ideality_2) == (1.0, 2.0)
    voltage = np.linspace(0, MODEL.landmarks().voc, 50)
    assert np.abs(model.current(voltage) - MODEL.current(voltage)).max() < 0.03 * MODEL.photocurrent
    assert model.landmarks().voc == pytest.approx(MODEL.landmarks().voc, abs=2e-3)


def test_one_diode_comes_back_near_where_it_was(pair):
    workspace, entry = switched(switched(fitted(pair), "two diodes"), "one diode")
    model = workspace.fit(entry).model
    assert isinstance(model, OneDiode)
    assert model.landmarks().voc == pytest.approx(MODEL.landmarks().voc, abs=5e-3)
    assert model.ideality == pytest.approx(MODEL.ideality, rel=0.1)


def test_the_model_that_lies_there_already_stays(pair):
    workspace, entry = switched(fitted(pair), "one diode")
    assert workspace.fit(entry).model == MODEL


def test_holds_that_both_models_know_go_along_and_the_idealities_are_held(pair):
    settings = FitSettings(hold=frozenset({"series_resistance", "ideality", "saturation_current"}), loss="robust", window=(0.0, 1.0))
    workspace, entry = switched(fitted(pair, settings), "two diodes")
    there = workspace.fit(entry).settings
    assert there.hold == {"series_resistance", "ideality_1", "ideality_2"}
    assert (there.loss, there.window, there.model) == ("robust", (0.0, 1.0), "two diodes")
    back = switched((workspace, entry), "one diode")[0].fit(entry).settings
    assert back == replace(settings, hold=frozenset({"series_resistance"}))


def test_bounds_on_what_the_other_model_does_not_have_are_dropped(pair):
    settings = FitSettings(bounds={"ideality": (1.0, 2.0), "series_resistance": (0.0, 9.0)})
    workspace, entry = switched(fitted(pair, settings), "two diodes")
    assert "ideality" not in workspace.fit(entry).settings.bounds


def test_a_refinement_of_the_other_model_no_longer_counts(pair):
    workspace, entry = pair
    found = refine(workspace.sweep(entry))
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, found))
    assert workspace.refined(entry) is not None
    assert switched((workspace, entry), "two diodes")[0].refined(entry) is None


def test_switching_without_a_curve_only_changes_the_setting(pair):
    workspace, entry = switched(pair, "two diodes")
    assert workspace.fit(entry).model is None and workspace.fit(entry).settings.model == "two diodes"


def test_switching_is_one_step_that_undo_takes_back(pair):
    workspace, entry = fitted(pair)
    step = steps.switch_model(workspace, entry, "two diodes")
    assert step["label"] == "switch to two diodes"
    assert steps.apply(steps.apply(workspace, step), steps.inverse(workspace, step)).fits == workspace.fits


# Events of the page

@pytest.fixture
def store(tmp_path):
    with contextlib.closing(Store(tmp_path)) as store:
        yield store


def test_the_store_knows_which_events_it_has_made(store):
    name = store.first()
    workspace = store.commit(name, {**steps.add_sweeps(store.current(name), [invented_sweep()]), "event": "first"}, 0)
    (entry,) = workspace.entries
    store.commit(name, steps.set_band_gap(workspace, entry, 1.6), 1)
    workspace = store.commit(name, {**steps.set_band_gap(store.current(name), entry, 1.7), "event": "third"}, 2)
    assert [store.made(name, event) for event in ("first", "second", "third")] == [True, False, True]
    # An answer may get lost and the step be undone before the page asks again: it was made all the same.
    store.undo(name, workspace.revision)
    assert store.made(name, "third")
    assert not store.made(store.create("another"), "first")


def test_an_event_that_is_no_name_is_no_step(store):
    name = store.first()
    with pytest.raises(StepRefused, match=r"\.$"):
        store.commit(name, {**steps.add_sweeps(store.current(name), [invented_sweep()]), "event": 7}, 0)
