"""A workspace keeps two-diode models, their settings and their refinements as it does one-diode ones."""

import dataclasses
import json

import numpy as np
import pytest

from core import steps
from core.diode import OneDiode
from core.errors import StepRefused
from core.refine import FitSettings, refine
from core.two_diode import TwoDiode
from tests.core.workspaces import entry_named, workspace_with
from tests.core.workspaces import invented_sweep as invented

TWO = TwoDiode(0.021, 3e-13, 2e-9, 2.5, 4000.0)
VOLTAGE = np.linspace(0, 1.1, 12)


@pytest.fixture
def workspace():
    sweep = dataclasses.replace(invented(points=60), voltage=np.linspace(-0.05, 0.68, 60))
    current = TWO.current(sweep.voltage) + 1e-5 * np.random.default_rng(0).standard_normal(60)
    return workspace_with(dataclasses.replace(sweep, current=current))


def after(workspace, step):
    return steps.apply(workspace, json.loads(json.dumps(step, allow_nan=False)))


def test_a_two_diode_refinement_is_kept_and_found_again(workspace):
    entry = entry_named(workspace, "forward").id
    refined = refine(workspace.sweep(entry), settings=FitSettings(model="two diodes"))
    done = after(workspace, steps.record_refinement(workspace, entry, refined))
    assert done.fit(entry).model == refined.model
    assert done.refined(entry).intervals == refined.intervals
    assert done.fit(entry).settings.hold == {"ideality_1", "ideality_2"}
    undone = steps.apply(done, steps.inverse(workspace, steps.record_refinement(workspace, entry, refined)))
    assert undone.fit(entry).model is None


def test_holds_are_those_of_the_model(workspace):
    entry = entry_named(workspace, "forward").id
    two = after(workspace, steps.switch_model(workspace, entry, "two diodes"))
    freed = after(two, steps.set_hold(two, entry, "ideality_2", False))
    assert freed.fit(entry).settings.hold == {"ideality_1"}
    with pytest.raises(StepRefused, match="no parameter"):
        steps.set_hold(two, entry, "ideality", True)
    back = after(freed, steps.switch_model(freed, entry, "one diode"))
    assert back.fit(entry).settings.hold == frozenset()


def test_a_curve_survives_the_change_of_model(workspace):
    entry = entry_named(workspace, "forward").id
    one = OneDiode(0.021, 3e-12, 1.4, 2.5, 4000.0)
    laid = after(workspace, steps.set_model(workspace, entry, one))
    two = after(laid, steps.switch_model(laid, entry, "two diodes"))
    assert isinstance(two.fit(entry).model, TwoDiode)
    voc = one.landmarks().voc
    assert two.fit(entry).model.landmarks().voc == pytest.approx(voc, abs=1e-3)


def test_conditions_rescale_both_diodes(workspace):
    entry = entry_named(workspace, "forward").id
    bounds = {"ideality_2": (1.5, 2.5), "saturation_current_2": (0.0, 1e-8), "series_resistance": (0.0, 10.0)}
    laid = after(workspace, steps.set_model(workspace, entry, TWO))
    laid = after(laid, steps.set_fit_settings(laid, entry, FitSettings(model="two diodes", bounds=bounds, current_noise=1e-5)))
    wide = after(laid, steps.set_conditions(laid, entry, area=0.2, temperature=310.0))
    model, settings = wide.fit(entry).model, wide.fit(entry).settings
    ratio = 298.15 / 310.0
    assert (model.ideality_1, model.ideality_2) == (pytest.approx(ratio), pytest.approx(2 * ratio))
    assert model.saturation_current_2 == pytest.approx(0.5 * TWO.saturation_current_2)
    assert settings.bounds["ideality_2"] == pytest.approx((1.5 * ratio, 2.5 * ratio))
    assert settings.bounds["saturation_current_2"][1] == pytest.approx(5e-9)
    assert settings.bounds["series_resistance"][1] == pytest.approx(20.0)
    assert settings.current_noise == pytest.approx(5e-6)
    curves = [w.fit(entry).model.current(VOLTAGE) for w in (laid, wide)]
    np.testing.assert_allclose(curves[1], 0.5 * curves[0], rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("wrong", [{"saturation_current_1": -1e-12}, {"ideality_2": 0.0}, {"series_resistance": -1.0}])
def test_parameters_of_the_wrong_sign_are_refused(workspace, wrong):
    entry = entry_named(workspace, "forward").id
    step = steps.set_model(workspace, entry, TWO)
    step["put"]["fits"][entry]["model"] |= wrong
    with pytest.raises(StepRefused):
        steps.apply(workspace, step)


def test_an_absent_diode_is_allowed_but_not_two(workspace):
    entry = entry_named(workspace, "forward").id
    one_absent = dataclasses.replace(TWO, saturation_current_2=0.0)
    assert after(workspace, steps.set_model(workspace, entry, one_absent)).fit(entry).model == one_absent
    step = steps.set_model(workspace, entry, one_absent)
    step["put"]["fits"][entry]["model"]["saturation_current_1"] = 0.0
    with pytest.raises(StepRefused):
        steps.apply(workspace, step)


def test_settings_that_name_a_parameter_of_the_other_model_are_refused(workspace):
    entry = entry_named(workspace, "forward").id
    step = steps.set_fit_settings(workspace, entry, FitSettings(model="two diodes"))
    step["put"]["fits"][entry]["settings"]["hold"] = ["ideality"]
    with pytest.raises(StepRefused):
        steps.apply(workspace, step)
