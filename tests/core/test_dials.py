"""Sliders run over values that suit the sweep, and find their way back."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from core.dials import DialRange, dial_ranges
from core.diode import PARAMETERS, OneDiode
from core.sweep import Conditions, Sweep
from core.two_diode import TwoDiode

CELL = OneDiode(0.022, 1e-12, 1.6, 3.0, 2000.0)
SILICON = OneDiode(0.76, 3.1e-7, 1.48, 0.0365, 52.9, temperature=306.15)
MODULE = OneDiode(1.03, 2.6e-6, 1.32, 1.24, 820.0, series_cells=36, temperature=318.15)
WIDE_GAP = OneDiode(0.005, 1e-45, 1.2, 5.0, 1e5)


def sweep_of(model, low, high, lit=True):
    voltage = np.linspace(low, high, 60)
    conditions = Conditions(lit=lit, series_cells=model.series_cells, temperature=model.temperature)
    return Sweep(voltage, model.current(voltage), conditions=conditions)


RANGES = [
    DialRange(0.0, 0.03, "linear"),
    DialRange(1e-30, 1e-3, "log"),
    DialRange(1e-3, 50.0, "log", stop="zero"),
    DialRange(1.0, 1e7, "log", stop="infinity"),
]


@pytest.mark.parametrize("dial", RANGES)
@given(share=st.floats(0.0, 1.0))
def test_a_value_in_the_range_comes_back(dial, share):
    value = dial.low + share * (dial.high - dial.low)
    if dial.scale == "log":
        value = min(max(dial.low * (dial.high / dial.low) ** share, dial.low), dial.high)
    assert dial.value(dial.fraction(value)) == pytest.approx(value, rel=1e-9, abs=1e-12 * dial.high)


@pytest.mark.parametrize("dial", RANGES)
def test_values_rise_along_the_slider_and_stay_in_the_range(dial):
    values = [dial.value(fraction) for fraction in np.linspace(-0.1, 1.1, 121)]
    assert all(before <= after for before, after in zip(values, values[1:], strict=False))
    assert all(dial.low <= value <= dial.high for value in values if 0 < value < math.inf)


def test_ends_are_exact():
    assert [RANGES[0].value(end) for end in (0.0, 1.0)] == [0.0, 0.03]
    assert [RANGES[1].value(end) for end in (0.0, 1.0)] == [1e-30, 1e-3]
    assert [RANGES[2].value(end) for end in (0.0, 1.0)] == [0.0, 50.0]
    assert [RANGES[3].value(end) for end in (0.0, 1.0)] == [1.0, math.inf]
    assert RANGES[2].fraction(0.0) == 0.0
    assert RANGES[3].fraction(math.inf) == 1.0


def test_the_end_stop_is_apart_from_the_smallest_and_largest_value():
    assert RANGES[2].value(RANGES[2].fraction(1e-3)) == pytest.approx(1e-3)
    assert RANGES[2].fraction(1e-3) > 0.01
    assert RANGES[3].value(RANGES[3].fraction(1e7)) == pytest.approx(1e7)
    assert RANGES[3].fraction(1e7) < 0.99


def test_a_range_is_widened_for_a_value_outside():
    assert RANGES[1].containing(1e-40) == DialRange(1e-40, 1e-3, "log")
    assert RANGES[0].containing(0.5).high == 0.5
    assert RANGES[0].containing(0.02) == RANGES[0]
    for dial, value in ((RANGES[2], 0.0), (RANGES[3], math.inf), (RANGES[1], math.nan), (RANGES[1], -1.0)):
        assert dial.containing(value) == dial


@pytest.mark.parametrize(
    ("model", "low", "high", "lit"),
    [
        (CELL, -0.1, 1.1, True),
        (SILICON, -0.2, 0.6, True),
        (MODULE, 0.0, 18.0, True),
        (WIDE_GAP, -1.0, 3.2, True),
        (OneDiode(0.0, 1e-12, 1.6, 3.0, 2000.0), -0.5, 1.2, False),
    ],
)
def test_ranges_hold_the_true_parameters_with_room_on_both_sides(model, low, high, lit):
    ranges = dial_ranges(sweep_of(model, low, high, lit))
    assert tuple(ranges) == PARAMETERS
    for name, dial in ranges.items():
        if name == "photocurrent" and not lit:
            continue
        assert 0.02 < dial.fraction(getattr(model, name)) < 0.98, name
        assert dial.low < getattr(model, name) < dial.high


@pytest.mark.parametrize("second", [1e-9, 0.0])
def test_ranges_of_two_diodes_hold_their_parameters(second):
    model = TwoDiode(0.035, 1e-13, second, 0.8, 2000.0)
    ranges = dial_ranges(sweep_of(model, -0.1, 0.7), model.parameters)
    assert tuple(ranges) == model.parameters
    for name, dial in ranges.items():
        value = getattr(model, name)
        assert dial.value(dial.fraction(value)) == pytest.approx(value, rel=1e-9)
        assert value == 0 or 0.02 < dial.fraction(value) < 0.98


def test_ranges_follow_the_size_of_the_current():
    small, large = (dial_ranges(sweep_of(CELL.scaled(factor), -0.1, 1.1)) for factor in (1.0, 1e3))
    assert large["photocurrent"].high == pytest.approx(1e3 * small["photocurrent"].high)
    assert large["saturation_current"].low == pytest.approx(1e3 * small["saturation_current"].low)
    assert large["series_resistance"].high == pytest.approx(1e-3 * small["series_resistance"].high)
    assert large["ideality"] == small["ideality"]


@pytest.mark.parametrize("current", [[0.0, 0.0], [-1e-3, -2e-3], [np.nan, np.nan]])
def test_an_odd_sweep_still_gets_ranges(current):
    for dial in dial_ranges(Sweep([0.0, 0.0], current)).values():
        assert 0 <= dial.low < dial.high < math.inf
