"""Fits weighted point by point with the standard deviations that the file gives."""

import math
from dataclasses import replace

import lmfit
import numpy as np
import pytest
from scipy.constants import elementary_charge, k
from scipy.optimize import brentq

from core import steps
from core.comparing import alongside
from core.diode import PARAMETERS, OneDiode
from core.errors import FitFailed
from core.fit_settings import FitSettings
from core.joint import refine_together
from core.profile import profile_intervals
from core.refine import refine
from core.refinement import Refinement
from core.sweep import Conditions, Sweep
from core.weighting import point_noise, slope
from core.workspace import Workspace

CELL = OneDiode(0.022, 1e-13, 1.6, 3.0, 2000.0)
STATED = FitSettings(weights="from the file")


def sweep_with_errors(seed=0, points=120, truth=CELL, factor=1.0, voltage_noise=0.0):
    """A sweep whose noise changes from point to point; its file says ``factor`` times the truth."""
    random = np.random.default_rng(seed)
    voltage = np.linspace(-0.05, 1.08, points) * truth.landmarks().voc
    error = 2e-5 * np.exp(random.normal(0.0, 1.2, points))
    current = truth.current(voltage + voltage_noise * random.standard_normal(points))
    current = current + error * random.standard_normal(points)
    return Sweep(voltage, current, per_area=True, conditions=Conditions(area=1.0), current_error=factor * error)


def curve(voltage, photocurrent, log_saturation, ideality, series, conductance):
    """The one-diode equation solved point by point by bracketing."""
    scale, saturation = ideality * k * 298.15 / elementary_charge, math.exp(log_saturation)

    def miss(current, volts):
        inner = volts + current * series
        return photocurrent - saturation * math.expm1(inner / scale) - inner * conductance - current

    return np.array([brentq(miss, -1.0, 1.0, args=(volts,), xtol=1e-16, rtol=1e-14) for volts in voltage])


@pytest.mark.parametrize("seed", range(2))
def test_parameters_and_standard_errors_agree_with_an_independent_fit(seed):
    sweep, values = sweep_with_errors(seed), lmfit.Parameters()
    for name, start in (("photocurrent", 0.022), ("log_saturation", math.log(1e-13)), ("ideality", 1.6), ("series", 3.0), ("conductance", 5e-4)):
        values.add(name, start)

    def residual(parameters):
        return (curve(sweep.voltage, *parameters.valuesdict().values()) - sweep.current) / sweep.current_error

    fit = lmfit.minimize(residual, values, xtol=1e-12, ftol=1e-12, epsfcn=1e-10)
    theirs, ours = fit.params, refine(sweep, settings=STATED)
    assert ours.weights == "from the file"
    assert ours.chi_square == pytest.approx(fit.redchi, rel=1e-6)
    errors, model = ours.standard_errors, ours.model
    pairs = (
        ("photocurrent", model.photocurrent, errors["photocurrent"]),
        ("log_saturation", math.log(model.saturation_current), errors["saturation_current"] / model.saturation_current),
        ("ideality", model.ideality, errors["ideality"]),
        ("series", model.series_resistance, errors["series_resistance"]),
        ("conductance", 1 / model.shunt_resistance, errors["shunt_resistance"] / model.shunt_resistance**2),
    )
    for name, value, error in pairs:
        assert error == pytest.approx(theirs[name].stderr, rel=1e-2), name
        assert value == pytest.approx(theirs[name].value, abs=0.01 * error), name
    uniform = refine(sweep)
    assert all(errors[name] < uniform.standard_errors[name] for name in PARAMETERS), "the weights are worth something"


def test_only_the_ratios_of_the_standard_deviations_count_and_a_finding_tells_their_size():
    right, small = refine(sweep_with_errors(), settings=STATED), refine(sweep_with_errors(factor=0.25), settings=STATED)
    assert right.chi_square == pytest.approx(1.0, abs=0.4)
    assert small.chi_square == pytest.approx(16 * right.chi_square, rel=1e-6)
    for name in PARAMETERS:
        assert getattr(small.model, name) == pytest.approx(getattr(right.model, name), rel=1e-7)
        assert small.standard_errors[name] == pytest.approx(right.standard_errors[name], rel=1e-5)
    assert not any("standard deviations" in sentence for sentence in right.findings)
    assert any("4" in sentence and "times as large as the standard deviations in the file" in sentence for sentence in small.findings)


def test_the_errors_hold_what_they_promise():
    misses = []
    for seed in range(60):
        found = refine(sweep_with_errors(seed, points=60), CELL, STATED)
        misses.append([(getattr(found.model, n) - getattr(CELL, n)) / found.standard_errors[n] for n in ("photocurrent", "series_resistance")])
    inside = np.mean(np.abs(misses) < 2.0, axis=0)
    assert np.all(inside > 0.85) and np.all(inside <= 1.0)


def test_with_noise_of_the_voltage_its_variance_is_added_along_the_slope():
    sweep = sweep_with_errors(3, voltage_noise=1e-3)
    plain, both = refine(sweep, settings=STATED), refine(sweep, settings=replace(STATED, voltage_noise=1e-3))
    noise = np.hypot(sweep.current_error, slope(both.model, sweep.voltage) * 1e-3)
    misses = (both.model.current(sweep.voltage) - sweep.current) / noise
    assert both.chi_square == pytest.approx(float(misses @ misses) / (sweep.voltage.size - 5), rel=1e-6)
    assert both.chi_square == pytest.approx(1.0, abs=0.4) and plain.chi_square > 3
    assert refine(sweep, settings=replace(STATED, voltage_noise=0.0)).model == plain.model


@pytest.mark.parametrize("bad", [0.0, -1e-5, math.nan])
def test_a_point_without_a_standard_deviation_above_zero_is_refused_unless_it_is_left_out(bad):
    sweep = sweep_with_errors()
    error = sweep.current_error.copy()
    error[[5, 9]] = bad
    spoilt = replace(sweep, current_error=error)
    with pytest.raises(FitFailed, match="no standard deviation above zero for 2 points"):
        refine(spoilt, settings=STATED)
    found = refine(spoilt, settings=replace(STATED, excluded=(5, 9)))
    assert found.points == sweep.voltage.size - 2
    assert refine(spoilt).points == sweep.voltage.size
    assert np.flatnonzero(np.isnan(point_noise(spoilt, "from the file"))).tolist() == [5, 9]


def test_a_sweep_without_the_column_refuses_the_choice_in_a_sentence():
    sweep = replace(sweep_with_errors(), current_error=None)
    with pytest.raises(FitFailed, match="no column with the standard deviation"):
        refine(sweep, settings=STATED)
    workspace = Workspace("w", "new")
    workspace = steps.apply(workspace, steps.add_sweeps(workspace, [sweep, sweep_with_errors()]))
    bare, stated = workspace.entries
    with pytest.raises(FitFailed, match="no column with the standard deviation"):
        steps.set_fit_settings(workspace, bare, STATED)
    assert steps.apply(workspace, steps.set_fit_settings(workspace, stated, STATED)).fit(stated).settings == STATED


def test_it_is_kept_with_its_fit_and_profile_intervals_know_the_weights():
    sweep = sweep_with_errors()
    found = refine(sweep, settings=STATED)
    again = Refinement.from_dict(found.to_dict())
    assert (again.chi_square, again.weights, again.settings) == (found.chi_square, "from the file", STATED)
    old = found.to_dict()
    del old["chi_square"]
    assert Refinement.from_dict(old).chi_square is None
    interval = profile_intervals(sweep, again, parameters=["photocurrent"])["photocurrent"]
    low, high = found.intervals["photocurrent"]
    assert (interval.low, interval.high) == (pytest.approx(low, rel=1e-4), pytest.approx(high, rel=1e-4))


def test_in_a_joint_fit_each_sweep_has_its_own_weights():
    bright, plain = sweep_with_errors(1), replace(sweep_with_errors(2), current_error=None)
    joint = refine_together([bright, plain], settings=[STATED, FitSettings()])
    assert [one.weights for one in joint.refinements] == ["from the file", "uniform"]
    assert joint.refinements[0].chi_square == pytest.approx(1.0, abs=0.4) and joint.refinements[1].chi_square is None
    assert joint.refinements[0].model.series_resistance == pytest.approx(3.0, abs=0.2)


@pytest.mark.parametrize("weights", ["effective", "from the file"])
def test_one_diode_beside_two_has_the_same_weights(weights):
    settings = FitSettings(model="two diodes", weights=weights, voltage_noise=1e-3)
    two = refine(sweep_with_errors(), settings=settings)
    one, _ = alongside(sweep_with_errors(), two)
    assert (one.settings.weights, one.settings.voltage_noise) == (weights, 1e-3)


@pytest.mark.filterwarnings("error")
def test_wild_standard_deviations_end_in_a_curve_or_a_sentence():
    sweep = sweep_with_errors()
    for low, high in ((1e-30, 1e30), (5e-324, 1e30), (1e-300, 1e-300)):
        error = np.where(np.arange(sweep.voltage.size) % 2, low, high)
        try:
            found = refine(replace(sweep, current_error=error), settings=STATED)
            found.to_dict()
        except FitFailed as refused:
            assert str(refused).endswith(".")
