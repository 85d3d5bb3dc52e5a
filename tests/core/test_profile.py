"""Profile intervals: as lmfit finds them, curved where the valley is, one-sided where the data only bound."""

import dataclasses
import math

import lmfit
import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays
from scipy.stats import t as student

from core.diode import PARAMETERS, OneDiode
from core.errors import FitFailed
from core.profile import Interval, profile_curve, profile_intervals
from core.refine import FitSettings, refine
from core.refinement import Refinement
from core.sweep import Conditions, Sweep
from core.two_diode import TwoDiode
from tests.core.test_refine import CELL, lit_sweep


def lmfit_intervals(sweep, start, level=0.95):
    """Profile intervals by lmfit, of the same five parameters on the same scales, as natural ends."""

    def residual(values):
        model = OneDiode(
            values["photocurrent"].value * 1e-2,
            math.exp(values["log_saturation"].value),
            values["ideality"].value,
            values["series_resistance"].value,
            1e4 / values["conductance"].value,
        )
        return 1e4 * (model.current(sweep.voltage) - sweep.current)

    values = lmfit.Parameters()
    values.add("photocurrent", start.photocurrent * 1e2)
    values.add("log_saturation", math.log(start.saturation_current))
    values.add("ideality", start.ideality)
    values.add("series_resistance", start.series_resistance)
    values.add("conductance", 1e4 / start.shunt_resistance)
    minimiser = lmfit.Minimizer(residual, values)
    found = minimiser.minimize(xtol=1e-12, ftol=1e-12)
    ends = {name: (rows[0][1], rows[2][1]) for name, rows in lmfit.conf_interval(minimiser, found, sigmas=[level]).items()}
    return {
        "photocurrent": tuple(1e-2 * end for end in ends["photocurrent"]),
        "saturation_current": tuple(math.exp(end) for end in ends["log_saturation"]),
        "ideality": ends["ideality"],
        "series_resistance": ends["series_resistance"],
        "shunt_resistance": tuple(1e4 / end for end in reversed(ends["conductance"])),
    }


def assert_agree(ours, theirs, share):
    """Ends agree to a share of the interval's width; J0 on its logarithm, Rsh on its inverse."""
    for name, (low, high) in theirs.items():
        turn = {"saturation_current": math.log, "shunt_resistance": lambda value: 1 / value}.get(name, float)
        width = abs(turn(high) - turn(low))
        assert turn(ours[name].low) == pytest.approx(turn(low), abs=share * width), name
        assert turn(ours[name].high) == pytest.approx(turn(high), abs=share * width), name


@pytest.mark.parametrize(("points", "noise", "seed"), [(60, 2e-3, 0), (24, 6e-3, 5)])
def test_intervals_agree_with_lmfit(points, noise, seed):
    sweep = lit_sweep(points=points, noise=noise, seed=seed)
    refined = refine(sweep)
    ours = profile_intervals(sweep, refined)
    assert_agree(ours, lmfit_intervals(sweep, refined.model), 0.01)
    assert all(interval.low_bounded and interval.high_bounded for interval in ours.values())


def test_ends_lie_where_the_sum_of_squares_has_grown_by_students_t():
    sweep = lit_sweep(points=40, noise=5e-3, seed=3)
    refined = refine(sweep)
    freedom = 40 - 5
    for level in (0.683, 0.95):
        mark = 1 + student.ppf(0.5 + level / 2, freedom) ** 2 / freedom
        for name, interval in profile_intervals(sweep, refined, confidence=level).items():
            for end in (interval.low, interval.high):
                start = dataclasses.replace(refined.model, **{name: end})
                held = refine(sweep, start, FitSettings(hold=frozenset({name})))
                assert (held.rmse / refined.rmse) ** 2 == pytest.approx(mark, rel=5e-3 * (mark - 1) + 1e-9), (name, end)


def test_a_shunt_that_may_be_absent_is_bounded_from_below_only():
    sweep = lit_sweep(dataclasses.replace(CELL, shunt_resistance=math.inf), noise=3e-3)
    interval = profile_intervals(sweep, refine(sweep), parameters=["shunt_resistance"])["shunt_resistance"]
    assert interval.low > 500 and interval.low_bounded
    assert interval.high == math.inf and not interval.high_bounded


def test_a_negligible_series_resistance_is_bounded_from_above_only():
    sweep = lit_sweep(dataclasses.replace(CELL, series_resistance=0.0), noise=3e-3)
    interval = profile_intervals(sweep, refine(sweep), parameters=["series_resistance"])["series_resistance"]
    assert interval.low == 0 and not interval.low_bounded
    assert 0 < interval.high < 5 and interval.high_bounded


def test_a_plateau_alone_leaves_the_diode_open():
    marks = CELL.landmarks()
    voltage = np.linspace(-0.2, 0.4, 60) * marks.voc
    current = CELL.current(voltage) + 2e-5 * np.random.default_rng(0).standard_normal(60)
    sweep = Sweep(voltage, current, per_area=True)
    found = profile_intervals(sweep, refine(sweep))
    assert not found["saturation_current"].low_bounded and found["saturation_current"].low == 0
    assert not found["ideality"].high_bounded and not found["ideality"].low_bounded
    assert found["photocurrent"].low_bounded and found["photocurrent"].high_bounded


def test_given_bounds_end_an_interval():
    asked = FitSettings(bounds={"ideality": (1.0, 1.601)})
    sweep = lit_sweep()
    interval = profile_intervals(sweep, refine(sweep, settings=asked), parameters=["ideality"])["ideality"]
    assert interval.high == 1.601 and not interval.high_bounded
    assert interval.low_bounded and interval.low > 1.5


def test_held_parameters_have_no_interval_and_the_rest_is_narrower():
    sweep = lit_sweep(noise=3e-3)
    free = profile_intervals(sweep, refine(sweep))
    refined = refine(sweep, CELL, FitSettings(hold=frozenset({"ideality"})))
    held = profile_intervals(sweep, refined)
    assert "ideality" not in held
    for name, interval in held.items():
        assert interval.high - interval.low < 1.2 * (free[name].high - free[name].low)
    with pytest.raises(FitFailed, match="was not free"):
        profile_intervals(sweep, refined, parameters=["ideality"])


@pytest.mark.parametrize("loss", ["linear", "robust"])
def test_linear_intervals_are_those_of_well_determined_parameters(loss):
    sweep = lit_sweep()
    refined = refine(sweep, settings=FitSettings(loss=loss))
    for name, interval in profile_intervals(sweep, refined).items():
        low, high = refined.intervals[name]
        assert interval.low == pytest.approx(low, abs=0.03 * (high - low))
        assert interval.high == pytest.approx(high, abs=0.03 * (high - low))


def test_two_diodes_have_intervals_too():
    truth = TwoDiode(0.035, 3e-13, 4e-9, 0.8, 2500.0)
    marks = truth.landmarks()
    voltage = np.linspace(-0.1, 1.04, 120) * marks.voc
    noise = 1e-3 * marks.jsc * np.random.default_rng(2).standard_normal(120)
    sweep = Sweep(voltage, truth.current(voltage) + noise, per_area=True)
    found = profile_intervals(sweep, refine(sweep, settings=FitSettings(model="two diodes")))
    for name, interval in found.items():
        assert interval.low < getattr(truth, name) < interval.high, name
    alone = OneDiode(0.035, 3e-13, 1.0, 0.8, 2500.0)
    sweep = Sweep(voltage, alone.current(voltage) + noise, per_area=True)
    refined = refine(sweep, settings=FitSettings(model="two diodes"))
    second = profile_intervals(sweep, refined, parameters=["saturation_current_2"])["saturation_current_2"]
    assert (second.low, second.low_bounded, second.high_bounded) == (0.0, False, True)


def test_a_refinement_read_back_gives_the_same_intervals():
    sweep = lit_sweep()
    refined = refine(sweep)
    again = Refinement.from_dict(refined.to_dict())
    assert profile_intervals(sweep, again) == profile_intervals(sweep, refined)


def test_the_profile_curve_crosses_its_mark_at_the_ends_of_the_interval():
    sweep = lit_sweep(points=60, noise=3e-3)
    refined = refine(sweep)
    for name in PARAMETERS:
        curve, interval = profile_curve(sweep, refined, name), profile_intervals(sweep, refined, parameters=[name])[name]
        assert curve.values.shape == curve.growth.shape == (25,)
        assert np.all(np.diff(curve.values) > 0)
        assert np.min(curve.growth) < 0.3 * curve.mark
        beyond = (curve.values < interval.low) | (curve.values > interval.high)
        assert np.any(beyond)
        assert np.all(curve.growth[beyond] > 0.99 * curve.mark)
        assert np.all(curve.growth[~beyond] < 1.01 * curve.mark)


def test_as_many_points_as_parameters_have_no_interval():
    sweep = lit_sweep(points=5)
    with pytest.raises(FitFailed, match="as many free parameters"):
        profile_intervals(sweep, refine(sweep))
    with pytest.raises(FitFailed, match="between 0 and 1"):
        profile_intervals(lit_sweep(), refine(lit_sweep()), confidence=2.0)


def test_an_interval_is_a_plain_value():
    assert Interval(1.0, 2.0) == Interval(1.0, 2.0, True, True)


numbers = st.floats(-50, 50, allow_subnormal=False) | st.sampled_from([0.0, 0.5, 1.0])


@settings(max_examples=20, deadline=None)
@given(st.integers(6, 12).flatmap(lambda n: st.tuples(*[arrays.arrays(float, n, elements=numbers)] * 2)), st.booleans())
# Found by searching: n at its bound came back a rounding beyond it, and strides to where no float reaches.
@example((np.array([0.5, 1.0] + 8 * [0.0]), np.array([1.0] + 9 * [0.0])), True)
@example((np.array(8 * [0.0] + [0.5, 0.7, 1.0]), np.full(11, -31.0)), True)
def test_any_points_have_intervals_that_hold_the_refined_value_or_a_sentence(points, lit):
    voltage, current = points
    sweep = Sweep(np.sort(voltage), current, conditions=Conditions(lit=lit))
    try:
        refined = refine(sweep)
        found = profile_intervals(sweep, refined)
    except FitFailed as failure:
        assert str(failure)
        return
    for name, interval in found.items():
        assert interval.low <= getattr(refined.model, name) <= interval.high
