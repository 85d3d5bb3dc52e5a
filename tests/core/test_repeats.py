"""Noise of current and voltage from repeats, and the effective variance made of them."""

import dataclasses

import numpy as np
import pytest

from core.diode import OneDiode
from core.errors import FitFailed
from core.fit_settings import FitSettings
from core.refine import refine
from core.repeats import noise_from_repeats
from core.sweep import Conditions, Sweep
from core.two_diode import TwoDiode
from core.weighting import effective_weights, point_noise, slope

CELL = OneDiode(0.022, 1e-13, 1.6, 3.0, 2000.0)
VOLTAGE = np.linspace(-0.05, 1.1, 120)


def measured(sigma_current, sigma_voltage, random, voltage=VOLTAGE, drift=0.0):
    """The meter reports the voltage that it set; the cell feels it with an error."""
    felt = voltage + sigma_voltage * random.standard_normal(voltage.size)
    current = (1 + drift * random.standard_normal()) * CELL.current(felt)
    return Sweep(voltage, current + sigma_current * random.standard_normal(voltage.size), per_area=True)


@pytest.mark.parametrize("model", [CELL, TwoDiode(0.035, 3e-13, 4e-9, 0.8, 2500.0), dataclasses.replace(CELL, series_resistance=0.0)])
def test_the_slope_of_a_model_is_that_of_its_curve(model):
    step = 1e-6
    differences = (model.current(VOLTAGE + step) - model.current(VOLTAGE - step)) / (2 * step)
    np.testing.assert_allclose(slope(model, VOLTAGE), differences, rtol=1e-6)


@pytest.mark.parametrize(("sigma_current", "sigma_voltage"), [(2e-5, 1e-3), (2e-5, 0.0), (0.0, 1e-3)])
def test_repeats_tell_the_noise_of_current_and_voltage_apart(sigma_current, sigma_voltage):
    random = np.random.default_rng(1)
    found = noise_from_repeats([measured(sigma_current, sigma_voltage, random) for _ in range(8)])
    assert found[0] == pytest.approx(sigma_current, rel=0.12, abs=6e-6)
    assert found[1] == pytest.approx(sigma_voltage, rel=0.12, abs=1e-4)


def test_a_drifting_lamp_and_other_voltages_do_not_pass_for_noise():
    random = np.random.default_rng(2)
    sweeps = [
        measured(2e-5, 1e-3, random, voltage=np.linspace(-0.05, 1.1, 120) + random.uniform(-2e-3, 2e-3), drift=5e-3)
        for _ in range(10)
    ]
    found = noise_from_repeats(sweeps)
    assert found == (pytest.approx(2e-5, rel=0.2), pytest.approx(1e-3, rel=0.2))


def test_repeats_that_are_none_are_refused():
    random = np.random.default_rng(0)
    one = measured(1e-5, 0, random)
    with pytest.raises(FitFailed, match="at least two"):
        noise_from_repeats([one])
    dark = dataclasses.replace(one, conditions=Conditions(lit=False, irradiance=0.0))
    with pytest.raises(FitFailed, match="must be alike"):
        noise_from_repeats([one, dark])
    with pytest.raises(FitFailed, match="hardly overlap"):
        noise_from_repeats([one, dataclasses.replace(one, voltage=one.voltage + 1.14)])


def test_effective_weights_follow_the_effective_variance():
    sweep = measured(2e-5, 0.0, np.random.default_rng(0))
    weights = effective_weights(sweep, CELL, 1e-3, 2e-5)
    np.testing.assert_allclose(1 / weights**2, 1 + (slope(CELL, VOLTAGE) * 1e-3 / 2e-5) ** 2)


def test_effective_weights_are_right_more_often_where_the_voltage_is_noisy():
    settings = FitSettings(weights="effective", voltage_noise=1e-3, current_noise=1e-5)
    inside, misses = np.zeros(5), np.zeros((2, 5))
    names = CELL.parameters
    for seed in range(80):
        sweep = measured(1e-5, 1e-3, np.random.default_rng(seed))
        weighted, uniform = refine(sweep, settings=settings), refine(sweep)
        assert weighted.weights == "effective"
        for row, fit in enumerate((weighted, uniform)):
            misses[row] += [(getattr(fit.model, name) / getattr(CELL, name) - 1) ** 2 for name in names]
        inside += [weighted.intervals[name][0] <= getattr(CELL, name) <= weighted.intervals[name][1] for name in names]
    assert np.all(inside >= 70)  # 76 ± 2 expected
    # The plateau is no longer drowned by the noise of the fall.
    assert np.all(misses[0, [0, 4]] < 0.35 * misses[1, [0, 4]])


def test_without_voltage_noise_effective_weights_are_uniform_or_refused():
    sweep = measured(2e-5, 0.0, np.random.default_rng(0))
    with pytest.raises(FitFailed, match="noise of the voltage"):
        refine(sweep, settings=FitSettings(weights="effective"))
    none = refine(sweep, settings=FitSettings(weights="effective", voltage_noise=0.0))
    assert none.model.ideality == pytest.approx(refine(sweep).model.ideality, rel=1e-9)
    with pytest.raises(FitFailed, match="zero or a number above zero"):
        FitSettings(voltage_noise=-1.0)


def test_the_noise_of_points_is_that_of_the_fit_and_never_zero():
    lit = measured(2e-5, 0.0, np.random.default_rng(0))
    assert point_noise(lit).shape == VOLTAGE.shape
    assert np.ptp(point_noise(lit)) == 0 and point_noise(lit)[0] == pytest.approx(2e-5, rel=0.3)
    truth, random = OneDiode(0.0, 1e-12, 1.6, 1.5, 1e6), np.random.default_rng(1)
    current = truth.current(VOLTAGE) * (1 + 0.01 * random.standard_normal(120)) + 2e-10 * random.standard_normal(120)
    dark = Sweep(VOLTAGE, current, per_area=True, conditions=Conditions(lit=False, irradiance=0.0))
    noise = point_noise(dark)
    assert noise[-1] == pytest.approx(0.01 * abs(current[-1]), rel=0.5)
    assert 1e-10 < np.min(noise) < 3e-9
    silent = dataclasses.replace(dark, current=np.zeros(120))
    assert np.all(point_noise(silent) > 0)
