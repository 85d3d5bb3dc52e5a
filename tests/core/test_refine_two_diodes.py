"""Refining two diodes: the best known residuals of the published cell, each in its own box, and a second diode that may be absent."""

import dataclasses
import json
import math

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from core.diode import OneDiode
from core.errors import FitFailed
from core.refine import FitSettings, Refinement, refine
from core.sweep import Conditions, Sweep
from core.two_diode import TWO_DIODE_PARAMETERS, TwoDiode
from core.two_diode_guess import guess_two_diodes
from tests.core import published

TWO = FitSettings(model="two diodes")
FREE = frozenset()
CELL = TwoDiode(0.035, 3e-13, 4e-9, 0.8, 2500.0)


def sweep_of(device, points=150, noise=3e-4, seed=0, **fields):
    marks = device.landmarks()
    voltage = np.linspace(-0.1, 1.04, points) * marks.voc
    current = device.current(voltage) + noise * marks.jsc * np.random.default_rng(seed).standard_normal(points)
    return Sweep(voltage, current, **{"per_area": True, "conditions": Conditions(area=1.0)} | fields)


def box(lowest_n, highest_n, highest_saturation):
    return {
        "saturation_current_1": (0.0, highest_saturation),
        "saturation_current_2": (0.0, highest_saturation),
        "ideality_1": (lowest_n, highest_n),
        "ideality_2": (lowest_n, highest_n),
    }


# Residuals in the explicit current (measured voltages, exact model current) over the 26 points of the published cell, by
# box: every published figure follows from its author's bounds. All recomputed independently with scipy; 7.4194e-4 is also
# known from the literature (from memory), and 7.1827e-4 stands near 7.182306e-4 read in a review (Sustainability 15 (2023)
# 3312), whose box is not given there.
@pytest.mark.parametrize(
    ("bounds", "rmse", "tolerance", "ideality_1", "ideality_2"),
    [
        (box(1.0, 2.0, 1e-6), 7.4193705e-4, 1e-7, 1.36420, 1.79628),
        (box(1.0, 2.0, 1e-5), 7.3264801e-4, 2e-7, 1.372779, 2.0),
        (box(1.0, 2.5, 1e-5), 7.1827020e-4, 2e-7, 1.40369, 2.5),
        (box(0.5, 4.0, 1e-3), 6.98195e-4, 1e-6, 1.4293, 4.0),
    ],
    ids=["n to 2, J0 to 1 µA", "n to 2, J0 to 10 µA", "n to 2.5, J0 to 10 µA", "n to 4, J0 to 1 mA"],
)
def test_the_published_cell_reaches_its_best_known_residual_in_each_box(bounds, rmse, tolerance, ideality_1, ideality_2):
    result = refine(published.cell(), settings=FitSettings(model="two diodes", hold=FREE, bounds=bounds))
    assert result.rmse == pytest.approx(rmse, rel=tolerance)
    assert result.model.ideality_1 == pytest.approx(ideality_1, abs=6e-5)
    assert result.model.ideality_2 == pytest.approx(ideality_2, abs=6e-5)
    ends = result.model.ideality_2, result.model.saturation_current_2
    if ends[0] == pytest.approx(bounds["ideality_2"][1]):  # the residual keeps falling as n₂ is allowed to grow
        assert any("second diode is not identified" in sentence for sentence in result.findings)


def test_n_1_and_2_are_held_unless_freed():
    assert TWO.hold == {"ideality_1", "ideality_2"} and FitSettings().hold == FREE
    result = refine(sweep_of(CELL), settings=TWO)
    assert (result.model.ideality_1, result.model.ideality_2) == (1.0, 2.0)
    assert result.free == tuple(name for name in TWO_DIODE_PARAMETERS if not name.startswith("ideality"))
    for name in result.free:
        low, high = result.intervals[name]
        assert low < getattr(CELL, name) < high and result.standard_errors[name] > 0


def test_intervals_hold_the_truth_as_often_as_they_say():
    inside = np.zeros(5)
    for seed in range(60):
        result = refine(sweep_of(CELL, seed=seed), settings=TWO)
        inside += [result.intervals[name][0] <= getattr(CELL, name) <= result.intervals[name][1] for name in result.free]
    assert np.all(inside >= 52)  # 57 ± 1.7 expected


def test_standard_errors_of_held_n_are_those_of_a_linear_fit_of_the_currents():
    sweep = sweep_of(CELL)
    result = refine(sweep, settings=TWO)
    steps = np.array([1e-6 * getattr(result.model, name) for name in result.free])
    columns = [
        (dataclasses.replace(result.model, **{name: getattr(result.model, name) + step}).current(sweep.voltage)
         - dataclasses.replace(result.model, **{name: getattr(result.model, name) - step}).current(sweep.voltage))
        / (2 * step)
        for name, step in zip(result.free, steps, strict=True)
    ]  # fmt: skip
    jacobian = np.column_stack(columns) * steps
    variance = result.rmse**2 * result.points / (result.points - len(result.free))
    errors = np.sqrt(np.diag(np.linalg.inv(jacobian.T @ jacobian)) * variance) * steps
    np.testing.assert_allclose([result.standard_errors[name] for name in result.free], errors, rtol=1e-4)


def test_a_second_diode_that_is_absent_is_bounded_from_above_only():
    one = OneDiode(0.035, 3e-13, 1.0, 0.8, 2500.0)
    seen = 0
    for seed in range(6):
        result = refine(sweep_of(one, seed=seed), settings=TWO)
        low, high = result.intervals["saturation_current_2"]
        seen += low == 0.0
        if low == 0.0:
            assert 0 < high < 1e-7
            assert any("do not show the second diode" in sentence for sentence in result.findings)
    assert seen >= 5


def test_a_start_of_the_other_model_is_turned_into_the_same_curve():
    sweep = sweep_of(CELL)
    cold, one = refine(sweep, settings=TWO), refine(sweep)
    assert refine(sweep, one.model, TWO).rmse == pytest.approx(cold.rmse, rel=1e-9)
    assert refine(sweep, cold.model).rmse == pytest.approx(one.rmse, rel=1e-9)
    assert cold.rmse < 0.9 * one.rmse


def test_a_module_and_another_unit_of_current_fit_alike():
    sweep = sweep_of(CELL)
    cell = refine(sweep, settings=TWO)
    module = dataclasses.replace(
        sweep, voltage=36 * sweep.voltage, current=1e3 * sweep.current, conditions=Conditions(series_cells=36)
    )
    result = refine(module, settings=TWO)
    assert result.rmse == pytest.approx(1e3 * cell.rmse, rel=1e-7)
    assert result.model.saturation_current_2 == pytest.approx(1e3 * cell.model.saturation_current_2, rel=1e-4)


def test_a_dark_sweep_shows_both_diodes():
    truth = TwoDiode(0.0, 3e-13, 4e-9, 0.8, 1e6)
    voltage, random = np.linspace(-0.2, 0.72, 120), np.random.default_rng(3)
    current = truth.current(voltage) * (1 + 0.01 * random.standard_normal(120)) + 1e-10 * random.standard_normal(120)
    dark = Sweep(voltage, current, per_area=True, conditions=Conditions(lit=False, irradiance=0.0))
    result = refine(dark, settings=TWO)
    assert result.weights == "relative" and result.model.photocurrent == 0
    for name in ("saturation_current_1", "saturation_current_2", "series_resistance"):
        low, high = result.intervals[name]
        assert 0.9 * low < getattr(truth, name) < 1.1 * high and high / low < 1.5


def test_everything_can_be_held_and_unknown_names_are_refused():
    sweep = sweep_of(CELL)
    held = refine(sweep, CELL, FitSettings(model="two diodes", hold=frozenset(TWO_DIODE_PARAMETERS)))
    assert held.model == CELL and held.free == ()
    for name in ("ideality", "saturation_current"):
        with pytest.raises(FitFailed, match="two-diode model has no parameter"):
            refine(sweep, settings=FitSettings(model="two diodes", hold=frozenset({name})))


def test_settings_of_another_model_keep_what_both_have():
    before = FitSettings(hold=frozenset({"ideality", "series_resistance"}), bounds={"ideality": (1, 2), "photocurrent": (0, 1)})
    after = before.of_model("two diodes")
    assert after.hold == {"series_resistance", "ideality_1", "ideality_2"}
    assert after.bounds == {"photocurrent": (0, 1)}
    assert after.of_model("one diode").hold == {"series_resistance"}


def test_the_first_guess_lies_close_to_the_points():
    sweep = sweep_of(CELL)
    guess = guess_two_diodes(sweep)
    assert np.max(np.abs(guess.current(sweep.voltage) - sweep.current)) < 0.05 * CELL.photocurrent
    assert guess_two_diodes(sweep, {"series_resistance": 0.5}).series_resistance == 0.5


def test_a_refinement_of_two_diodes_survives_the_way_through_json():
    before = refine(sweep_of(dataclasses.replace(CELL, shunt_resistance=math.inf)), settings=TWO)
    after = Refinement.from_dict(json.loads(json.dumps(before.to_dict(), allow_nan=False)))
    assert after.model == before.model and after.settings == before.settings and after.intervals == before.intervals


numbers = st.floats(-50, 50, allow_subnormal=False) | st.sampled_from([0.0, 0.5, 1.0])


@settings(max_examples=10, deadline=None)
@given(st.integers(3, 12).flatmap(lambda n: st.tuples(*[arrays.arrays(float, n, elements=numbers)] * 2)), st.booleans())
# Found by searching: the one-diode fit that a start is made from has a J0 beyond what the solver's exponents hold.
@example((np.array([-0.02, 0.0, 0.0, 0.0, 0.5, 0.5]), np.array([0.0, 0.0, 0.0, -0.02, 0.5, 0.5])), True)
def test_any_points_end_in_a_curve_or_a_sentence(points, lit):
    voltage, current = points
    try:
        result = refine(Sweep(np.sort(voltage), current, conditions=Conditions(lit=lit)), settings=TWO)
    except FitFailed as failure:
        assert str(failure)
    else:
        assert np.isfinite(result.rmse)
        json.dumps(result.to_dict(), allow_nan=False)
        for name, (low, high) in result.intervals.items():
            assert low <= getattr(result.model, name) <= high


def test_a_saturation_current_never_falls_to_where_the_solver_takes_the_diode_for_absent():
    """Found by searching: points that no diode describes, whose fit without shunt then had no Voc."""
    voltage = np.array([0.0, 0.0, 0.05, 0.5, 0.5, 0.5, 44.4, 44.9, 49.4])
    current = np.array([0.5, 0.05, 0.5, 49.4, 44.9, 0.0, 0.5, 0.0, 44.4])
    result = refine(Sweep(voltage, current), settings=FitSettings(model="two diodes", hold=FREE))
    assert math.isfinite(result.model.landmarks().voc)
