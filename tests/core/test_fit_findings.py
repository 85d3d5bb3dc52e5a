"""What a fit cannot say ends in a sentence with something to do, not in numbers."""

import dataclasses
import math

import numpy as np
import pytest

from core.diode import OneDiode
from core.errors import FitFailed
from core.profile import profile_intervals
from core.refine import FitSettings, refine
from core.sweep import Sweep
from core.two_diode import TwoDiode
from tests.core.test_refine import CELL, lit_sweep, said

DIODE = ("saturation_current", "ideality", "series_resistance")


def s_shaped(noise=1e-5):
    """A counter-diode that blocks near Voc: its voltage grows as the current vanishes."""
    current = np.linspace(0.01999, -0.008, 4000)
    voltage = OneDiode(0.02, 1e-12, 1.6, 1.0, 2000.0).voltage(current) - 0.08 * np.arcsinh(current / 5e-4)
    grid = np.linspace(-0.1, 1.2, 120)
    bent = np.interp(grid, voltage, current) + noise * np.random.default_rng(0).standard_normal(120)
    return Sweep(grid, bent, per_area=True)


@pytest.mark.parametrize("model", ["one diode", "two diodes"])
def test_an_s_shape_has_findings_and_no_errors(model):
    sweep = s_shaped()
    result = refine(sweep, settings=FitSettings(model=model))
    assert "S-shape" in result.findings[0] and "take metrics from the points" in result.findings[0]
    assert all(error is None for error in result.standard_errors.values())
    assert np.all(np.isinf(np.diag(result.covariance)))
    assert all(not i.low_bounded and not i.high_bounded for i in profile_intervals(sweep, result).values())


@pytest.mark.parametrize("reach", [0.3, 0.5])
def test_a_sweep_that_ends_on_the_plateau_has_no_diode(reach):
    marks = CELL.landmarks()
    for seed in range(4):
        voltage = np.linspace(-0.2, reach, 60) * marks.voc
        noise = 2e-5 * np.random.default_rng(seed).standard_normal(60)
        result = refine(Sweep(voltage, CELL.current(voltage) + noise, per_area=True))
        assert said(result, "ends before Voc and does not determine the diode") and said(result, "sweep beyond Voc")
        for name in DIODE:
            assert result.standard_errors[name] is None
            low, high = result.intervals[name]
            assert low <= 0.3 and high >= 10
        assert not said(result, "trade off")


def test_a_sweep_that_ends_at_the_knee_keeps_its_numbers_and_a_caution():
    sweep = lit_sweep(noise=2e-4, top=0.97)
    result = refine(sweep)
    assert said(result, "rest on the points of the knee alone")
    assert result.standard_errors["ideality"] is not None
    assert not said(refine(lit_sweep()), "ends before Voc")


def test_three_points_are_refused_or_said_to_prove_nothing():
    three = Sweep([0.0, 0.6, 0.8], [0.020, 0.018, -0.010])
    for model in ("one diode", "two diodes"):
        with pytest.raises(FitFailed, match="3 points for 5 free parameters"):
            refine(three, settings=FitSettings(model=model))
    start = OneDiode(0.02, 1e-12, 1.4, 1.0, math.inf)
    result = refine(three, start, FitSettings(hold=frozenset({"ideality", "shunt_resistance"})))
    assert said(result, "as many free parameters as points")
    assert all(error is None for error in result.standard_errors.values())
    two = Sweep([0.0, 0.6], [0.020, 0.018])
    with pytest.raises(FitFailed, match="2 points are left"):
        refine(two)


def test_rs_and_n_that_trade_off_are_named_with_what_to_do():
    small = dataclasses.replace(CELL, series_resistance=1.0)
    result = refine(lit_sweep(small, noise=5e-3, points=60, top=1.0))
    assert said(result, "Rs and n trade off here: hold n, or add a dark sweep.")
    assert not said(refine(lit_sweep(small, noise=2e-4)), "trade off")  # correlated alike, but known well


def test_two_diodes_that_trade_off_are_named_with_what_to_do():
    truth = TwoDiode(0.035, 3e-13, 4e-9, 0.8, 2500.0)
    marks = truth.landmarks()
    voltage = np.linspace(-0.1, 1.04, 60) * marks.voc
    noise = 3e-3 * marks.jsc * np.random.default_rng(0).standard_normal(60)
    free = refine(
        Sweep(voltage, truth.current(voltage) + noise, per_area=True),
        settings=FitSettings(model="two diodes", hold=frozenset()),
    )
    words = ("hold n₁ and n₂", "not identified", "do not show", "poorly determined", "do not determine", "factor of ten")
    assert any(word in sentence for sentence in free.findings for word in words)
    for sentence in free.findings:
        assert sentence.endswith(".")
