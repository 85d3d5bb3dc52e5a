"""Lines of the model for the screen: which, where, in which unit, and short enough to send."""

import json
from dataclasses import replace

import numpy as np
import pytest

from app.curves import (
    STRIPS,
    Curve,
    model_curves,
    noise_of_points,
    squeezed,
    strip_points,
    thinned,
)
from app.units import Units
from core.noise import noise_level
from core.weighting import point_noise
from tests.app.benches import AMPERES, CELL, IN_THE_DARK, LIT, WITH_ERRORS, sweep_of

DARK_CELL = replace(CELL, photocurrent=0.0)


def curves(sweep, model, strip="residuals"):
    return {curve.uid: curve for curve in model_curves(sweep, model, strip)}


def test_a_lit_sweep_has_current_power_and_the_rectangle_of_the_maximum_power_point():
    lines = curves(LIT, CELL)
    assert {uid: line.axis for uid, line in lines.items()} == {
        "model": "y",
        "power": "y2",
        "corner": "y",
        "strip-model": "y3",
    }
    model, power, corner = lines["model"], lines["power"], lines["corner"]
    np.testing.assert_allclose(model.y, 1e3 * CELL.current(model.x), rtol=1e-12)  # mA cm⁻²
    np.testing.assert_allclose(power.y, power.x * model.y, rtol=1e-12, atol=1e-12)  # mW cm⁻²
    marks = CELL.landmarks()
    assert corner.x.tolist() == [0, marks.vmp, marks.vmp]
    np.testing.assert_allclose(corner.y, [1e3 * marks.jmp, 1e3 * marks.jmp, 0])


def test_without_an_area_the_lines_are_in_amperes_and_watts():
    model = CELL.scaled(0.1)
    lines = curves(AMPERES, model)
    np.testing.assert_allclose(lines["model"].y, model.current(lines["model"].x), rtol=1e-12)
    assert lines["power"].y.max() == pytest.approx(model.landmarks().pmp, rel=1e-3)


def test_a_dark_sweep_has_the_size_of_the_current_and_no_power():
    lines = curves(IN_THE_DARK, DARK_CELL)
    assert set(lines) == {"model", "strip-model"}
    forward = lines["model"].x > 0
    np.testing.assert_allclose(lines["model"].y[forward], -1e3 * DARK_CELL.current(lines["model"].x[forward]), rtol=1e-12)
    assert not (lines["model"].y <= 0).any()  # a logarithmic axis has no place for the rest


def test_the_line_frames_the_sweep_and_reaches_voc():
    short = sweep_of(CELL, "short", high=0.5)
    line = curves(short, CELL)["model"]
    assert line.x.min() <= 0.0 and line.x.max() > CELL.landmarks().voc
    assert (np.diff(line.x) > 0).all()


def test_residuals_are_in_units_of_the_noise():
    level = noise_level(LIT)
    line = curves(LIT, CELL)["strip-model"]
    np.testing.assert_allclose(line.y, squeezed((LIT.current - CELL.current(LIT.voltage)) / level))
    shifted = replace(LIT, current=LIT.current + 9 * level)
    assert np.median(curves(shifted, CELL)["strip-model"].y) == pytest.approx(np.log10(1 + 9), abs=0.1)


def test_residuals_are_in_units_of_the_files_standard_deviations_where_these_set_the_weights():
    sweep = replace(WITH_ERRORS, current_error=np.where(np.arange(56) == 4, 0.0, WITH_ERRORS.current_error))
    (line,) = [c for c in model_curves(sweep, CELL, "residuals", "from the file") if c.uid == "strip-model"]
    shown = np.arange(56) != 4
    expected = squeezed((sweep.current - CELL.current(sweep.voltage))[shown] / sweep.current_error[shown])
    np.testing.assert_allclose(line.y[shown], expected)
    assert line.to_dict()["y"][4] is None
    others = [c for c in model_curves(sweep, CELL, "residuals", "effective") if c.uid == "strip-model"]
    np.testing.assert_array_equal(others[0].y, curves(sweep, CELL)["strip-model"].y)


def test_the_noise_of_a_sweep_is_judged_once():
    assert (noise_of_points(LIT) == point_noise(LIT)).all()
    before = noise_of_points.cache_info().misses
    model_curves(LIT, CELL, "residuals")
    assert noise_of_points.cache_info().misses == before


def test_the_residuals_scale_is_even_near_zero_and_bends_beyond():
    assert squeezed(np.array([0.0]))[0] == 0
    np.testing.assert_allclose(squeezed(np.array([-9.0, 9.0, 99.0])), [-1, 1, 2])
    assert squeezed(np.array([1e6]))[0] == squeezed(np.array([1e9]))[0]


@pytest.mark.parametrize("sweep", [LIT, IN_THE_DARK, AMPERES], ids=["lit", "dark", "amperes"])
def test_on_the_semilogarithmic_strip_points_and_model_agree(sweep):
    model = {LIT: CELL, IN_THE_DARK: DARK_CELL, AMPERES: CELL.scaled(0.1)}[sweep]
    points = strip_points(sweep, model, "log", Units.of(sweep.per_area))
    line = curves(sweep, model, "log")["strip-model"]
    at_points = np.interp(points.x, line.x, np.log10(line.y))
    high = points.x > 0.4
    np.testing.assert_allclose(np.log10(points.y[high]), at_points[high], atol=0.02)
    assert not (points.y <= 0).any()


def test_the_ideality_strip_shows_that_of_the_points_and_of_the_model():
    points = strip_points(IN_THE_DARK, DARK_CELL, "ideality", Units.of(True))
    line = curves(IN_THE_DARK, DARK_CELL, "ideality")["strip-model"]
    middle = (points.x > 0.5) & (points.x < 0.7)
    assert middle.sum() > 3
    np.testing.assert_allclose(points.y[middle], np.interp(points.x[middle], line.x, line.y), rtol=0.06)


@pytest.mark.parametrize("strip", STRIPS)
@pytest.mark.parametrize("sweep", [LIT, IN_THE_DARK, AMPERES], ids=["lit", "dark", "amperes"])
def test_every_line_can_be_sent_even_of_a_model_without_photocurrent(sweep, strip):
    for model in (CELL, replace(CELL, photocurrent=0.0), replace(CELL, series_resistance=0.0, shunt_resistance=np.inf)):
        for curve in model_curves(sweep, model, strip):
            sent = json.loads(json.dumps(curve.to_dict(), allow_nan=False))
            assert len(sent["x"]) == len(sent["y"]) == len(curve.x)


def test_a_line_is_sent_short_but_finer_than_a_screen():
    y = np.array([np.nan, 1 / 3, -200 / 3])
    sent = Curve("u", "y", np.arange(3.0), y).to_dict()
    assert sent["y"][0] is None
    np.testing.assert_allclose(np.array(sent["y"][1:], dtype=float), y[1:], atol=1e-6 * 66.7)
    assert max(len(repr(value)) for value in sent["y"][1:]) <= 10


def test_a_line_over_decades_keeps_digits_in_each_of_them():
    y = np.geomspace(1e-12, 1e2, 15) / 3
    np.testing.assert_allclose(np.array(Curve("u", "y", y, y).to_dict()["y"]), y, rtol=1e-5)


def test_many_points_are_thinned_to_what_can_be_seen_with_both_ends_kept():
    many = sweep_of(CELL, "many", points=5000)
    voltage, current = thinned(many, 300)
    assert len(voltage) == len(current) == 300
    assert (voltage[0], voltage[-1], current[-1]) == (many.voltage[0], many.voltage[-1], many.current[-1])
    assert set(current) <= set(many.current)
    np.testing.assert_array_equal(thinned(LIT, 300), (LIT.voltage, LIT.current))
    sent = [curve.to_dict() for curve in model_curves(many, CELL, "residuals")]
    assert max(len(curve["x"]) for curve in sent) <= 300
