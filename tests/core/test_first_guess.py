"""The first guess: close enough to refine, whatever the size of the device."""

import dataclasses
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from core.diode import PARAMETERS, OneDiode
from core.errors import FitFailed
from core.first_guess import first_guess
from core.sweep import Conditions, Sweep
from tests.core import published

CELL = OneDiode(0.022, 1e-13, 1.6, 3.0, 2000.0)


def lit_sweep(device, points=120, noise=1e-3, seed=0):
    marks = device.landmarks()
    voltage = np.linspace(-0.05, 1.1, points) * marks.voc
    current = device.current(voltage) + noise * marks.jsc * np.random.default_rng(seed).standard_normal(points)
    return Sweep(voltage, current, conditions=Conditions(series_cells=device.series_cells))


def relative_miss(model, sweep):
    return np.sqrt(np.mean((model.current(sweep.voltage) - sweep.current) ** 2)) / np.max(sweep.current)


@pytest.mark.parametrize("scale", [1e-6, 1.0, 1e3])
@pytest.mark.parametrize("points", [12, 30, 120, 700])
def test_the_guess_lies_on_the_points_for_any_unit_of_current(points, scale):
    assert relative_miss(first_guess(s := lit_sweep(CELL.scaled(scale), points)), s) < 0.03


def test_a_module_in_amperes_with_its_cells_and_temperature():
    guess = first_guess(published.module())
    assert (guess.series_cells, guess.temperature) == (36, 318.15)
    assert relative_miss(guess, published.module()) < 0.02
    assert 1.0 < guess.ideality < 1.8


def test_a_module_that_is_taken_for_one_cell_is_still_met():
    sweep = published.module()
    alone = dataclasses.replace(sweep, conditions=dataclasses.replace(sweep.conditions, series_cells=1))
    assert relative_miss(first_guess(alone), sweep) < 0.02


def test_a_dark_sweep_over_seven_decades():
    truth = OneDiode(0.0, 1e-12, 1.6, 1.5, 1e6)
    random, voltage = np.random.default_rng(1), np.linspace(-0.3, 1.1, 141)
    current = truth.current(voltage) * (1 + 0.01 * random.standard_normal(141)) + 2e-10 * random.standard_normal(141)
    guess = first_guess(Sweep(voltage, current, conditions=Conditions(lit=False, irradiance=0.0)))
    assert guess.photocurrent == 0
    assert guess.ideality == pytest.approx(truth.ideality, rel=0.15)
    at_the_diode = voltage[(voltage > 0.6) & (voltage < 0.9)]
    assert np.max(np.abs(np.log(guess.current(at_the_diode) / truth.current(at_the_diode)))) < 0.5
    assert 0 < guess.series_resistance < 2 * truth.series_resistance
    assert guess.shunt_resistance == pytest.approx(truth.shunt_resistance, rel=0.2)


@pytest.mark.parametrize("name", PARAMETERS)
def test_given_parameters_are_kept(name):
    value = getattr(CELL, name) * 1.01
    guess = first_guess(lit_sweep(CELL), {name: value})
    assert getattr(guess, name) == pytest.approx(value, rel=1e-12)
    assert relative_miss(guess, lit_sweep(CELL)) < 0.06


def test_a_held_infinite_shunt():
    assert first_guess(lit_sweep(CELL), {"shunt_resistance": math.inf}).shunt_resistance == math.inf


def test_both_directions_give_the_same_guess():
    sweep = lit_sweep(CELL)
    turned = dataclasses.replace(sweep, voltage=sweep.voltage[::-1], current=sweep.current[::-1], direction="reverse")
    assert first_guess(turned).ideality == pytest.approx(first_guess(sweep).ideality, rel=1e-6)


def test_two_points_are_refused_with_a_sentence():
    with pytest.raises(FitFailed, match="fewer than three points"):
        first_guess(Sweep([0.0, 0.5], [0.02, 0.01]))


def test_a_sweep_without_voltage_or_current_is_refused_with_a_sentence():
    with pytest.raises(FitFailed, match="one voltage"):
        first_guess(Sweep([0.5] * 4, [0.02, 0.01, 0.0, 0.01]))
    with pytest.raises(FitFailed, match="No current flows"):
        first_guess(Sweep([0.0, 0.1, 0.2, 0.3], [0.0] * 4))


numbers = st.floats(-50, 50, allow_subnormal=False) | st.sampled_from([0.0, 0.5, 1.0])


@settings(max_examples=60, deadline=None)
@given(st.integers(3, 12).flatmap(lambda n: st.tuples(*[arrays.arrays(float, n, elements=numbers)] * 2)), st.booleans())
def test_any_points_give_a_curve_of_finite_numbers(points, lit):
    voltage, current = points
    try:
        guess = first_guess(Sweep(np.sort(voltage), current, conditions=Conditions(lit=lit)))
    except FitFailed:
        assert np.ptp(voltage) < 1e-6 or np.max(np.abs(current)) < 1e-20
        return
    assert guess.photocurrent >= 0 and guess.saturation_current > 0 and guess.ideality > 0
    assert guess.series_resistance >= 0 and guess.shunt_resistance > 0
    assert np.all(np.isfinite(guess.current(voltage)))
