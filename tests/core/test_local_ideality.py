"""Local ideality: the diode's n where the diode carries the current, nothing where it does not."""

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from core.diode import OneDiode
from core.local_ideality import local_ideality
from core.sweep import Conditions, Sweep

DARK = Conditions(lit=False, irradiance=0.0)
TRUTH = OneDiode(0.0, 1e-12, 1.6, 0.0, np.inf)


def dark_sweep(truth, noise=0.0, conditions=DARK, points=141):
    random, voltage = np.random.default_rng(0), np.linspace(-0.2, 0.9, points)
    current = truth.current(voltage) * (1 + noise * random.standard_normal(points))
    return Sweep(voltage, current + 1e-11 * random.standard_normal(points), per_area=True, conditions=conditions)


def test_an_ideal_dark_diode_shows_its_ideality_everywhere():
    voltage, ideality = local_ideality(dark_sweep(TRUTH))
    diode = voltage > 0.35  # below, noise and the −1 of the diode equation
    assert np.count_nonzero(diode) > 50
    np.testing.assert_allclose(ideality[diode], 1.6, rtol=0.02)


def test_noise_widens_the_window_and_keeps_the_mean():
    voltage, ideality = local_ideality(dark_sweep(TRUTH, noise=0.02))
    assert np.mean(ideality[voltage > 0.4]) == pytest.approx(1.6, rel=0.02)
    assert np.std(ideality[voltage > 0.4]) < 0.1


def test_series_resistance_raises_it_at_the_top_and_a_shunt_at_the_bottom():
    device = dataclasses.replace(TRUTH, series_resistance=5.0, shunt_resistance=1e6)
    voltage, ideality = local_ideality(dark_sweep(device, noise=0.003))
    step = 1e-4
    slope = np.log(device.current(voltage + step) / device.current(voltage - step)) / (2 * step)
    upper = voltage > 0.3
    np.testing.assert_allclose(ideality[upper], (1 / (slope * 0.025692579))[upper], rtol=0.12)
    lowest = np.min(ideality[upper])
    assert 1.6 < lowest < 2.0
    assert ideality[-1] > 1.2 * lowest and ideality[upper][0] > 2 * lowest


def test_a_module_is_counted_per_cell():
    conditions = dataclasses.replace(DARK, series_cells=2, temperature=320.0)
    _, one = local_ideality(dark_sweep(TRUTH))
    _, string = local_ideality(dark_sweep(TRUTH, conditions=conditions))
    assert string[-20:] == pytest.approx(one[-20:] * 298.15 / 640.0)


def test_under_light_it_comes_from_the_loss_of_photocurrent():
    device = OneDiode(0.022, 1e-13, 1.6, 0.0, np.inf)
    voltage = np.linspace(-0.05, 1.1, 150)
    noise = 1e-5 * np.random.default_rng(0).standard_normal(150)
    place, ideality = local_ideality(Sweep(voltage, device.current(voltage) + noise, per_area=True))
    assert np.min(place) > 0.6  # on the plateau nothing can be told
    np.testing.assert_allclose(ideality[place > 0.9], 1.6, rtol=0.1)
    assert np.mean(ideality[place > 0.9]) == pytest.approx(1.6, rel=0.02)


def test_without_short_circuit_or_points_there_is_nothing():
    device = OneDiode(0.022, 1e-13, 1.6, 0.0, np.inf)
    voltage = np.linspace(0.3, 1.1, 100)
    late, two = Sweep(voltage, device.current(voltage)), Sweep([0.0, 0.5], [-1e-9, -1e-3], conditions=DARK)
    for sweep in (late, two, Sweep([], [])):
        place, ideality = local_ideality(sweep)
        assert place.shape == ideality.shape == (0,)


numbers = st.floats(-10, 10, allow_subnormal=False) | st.sampled_from([0.0, 0.5, 1.0])


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 15).flatmap(lambda n: st.tuples(*[arrays.arrays(float, n, elements=numbers)] * 2)), st.booleans())
def test_any_points_give_finite_numbers(points, lit):
    voltage, current = points
    place, ideality = local_ideality(Sweep(np.sort(voltage), current, conditions=Conditions(lit=lit)))
    assert place.shape == ideality.shape
    assert np.all(np.isfinite(place)) and np.all(ideality > 0)
