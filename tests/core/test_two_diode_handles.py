"""Handles and dials of the two-diode curve solve and keep what the table says, and survive every pointer."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from core.handles import drag, handles, set_parameter
from core.moves import LIMITS
from core.two_diode import TWO_DIODE_PARAMETERS, TwoDiode

CELL = TwoDiode(0.035, 1e-13, 1e-9, 0.8, 2000.0)
NO_SHUNT = TwoDiode(0.035, 3e-14, 3e-9, 0.5, math.inf)
MODULE = TwoDiode(1.03, 1e-9, 1e-6, 1.24, 820.0, 1.0, 2.0, series_cells=36, temperature=318.15)
DIM = TwoDiode(2e-6, 1e-13, 1e-11, 3.0, 5e5, 1.2, 2.3)
NO_SECOND = replace(CELL, saturation_current_2=0.0)
MODELS = [CELL, NO_SHUNT, MODULE, DIM, NO_SECOND]
LIT = ("photocurrent", "saturation_current_1", "saturation_current_2", "series_resistance", "shunt_resistance")
DARK = ("shunt_resistance", "saturation_current_2", "saturation_current_1", "series_resistance")
KEEPS_JSC_VOC = LIT[2:]
SPAN = (-0.3, 0.8)


def decades(low, high):
    return st.floats(low, high).map(lambda exponent: 10.0**exponent)


def lab_model(jsc, voc, second_share, n1, n2, series_share, shunt_share):
    """A device by its size: Rs and Rsh as shares of Voc/Jsc, the second diode's share of the current at Voc."""
    slopes = n1 * 0.025692579, n2 * 0.025692579
    first = jsc * (1 - second_share) * math.exp(-voc / slopes[0])
    second = jsc * second_share * math.exp(-voc / slopes[1])
    return TwoDiode(jsc, first, second, series_share * voc / jsc, voc / jsc / shunt_share, n1, n2)


lab_models = st.builds(
    lab_model,
    decades(-6, 1),
    st.floats(0.4, 1.2),
    st.just(0.0) | st.floats(0.001, 0.9),
    st.floats(0.9, 1.3),
    st.floats(1.6, 3.0),
    st.floats(0.0, 0.4),
    st.floats(1e-9, 0.4),
)


def handle_of(model, parameter, **view):
    return next(handle for handle in handles(model, **view) if handle.parameter == parameter)


def only_changed(before, after, *names):
    return all(getattr(before, name) == getattr(after, name) for name in TWO_DIODE_PARAMETERS if name not in names)


def dark_size(model, voltage):
    return abs(float(replace(model, photocurrent=0.0).current(voltage)))


# Under light


@pytest.mark.parametrize("model", MODELS)
def test_lit_handles_sit_where_the_table_says(model):
    marks = model.landmarks()
    places = {handle.parameter: handle for handle in handles(model)}
    assert tuple(places) == LIT
    assert [handle.motion for handle in places.values()] == ["vertical", "horizontal", "ray", "horizontal", "vertical"]
    for handle in places.values():
        assert model.current(handle.x) == pytest.approx(handle.y, rel=1e-9, abs=1e-10 * marks.jsc)
    assert places["photocurrent"].x == 0
    assert places["saturation_current_1"].x == pytest.approx(marks.voc, rel=1e-12)
    knee = places["saturation_current_2"]
    assert knee.x / marks.voc == pytest.approx(knee.y / marks.jsc, rel=1e-12)
    assert places["series_resistance"].y == pytest.approx(marks.jsc / 2, rel=1e-12)
    assert places["shunt_resistance"].x == pytest.approx(0.4 * marks.voc, rel=1e-12)


@settings(max_examples=100, deadline=None)
@given(lab_models, st.sampled_from(LIT))
@example(NO_SHUNT, "shunt_resistance")
@example(replace(CELL, series_resistance=0.0), "series_resistance")
@example(NO_SECOND, "saturation_current_2")
def test_a_drag_to_where_the_handle_is_changes_nothing(model, parameter):
    handle = handle_of(model, parameter)
    move = drag(model, parameter, handle.x, handle.y)
    assert move.message == ""
    voltage = np.linspace(-0.2, 1.05, 30) * model.landmarks().voc
    np.testing.assert_allclose(
        move.model.current(voltage), model.current(voltage), rtol=1e-7, atol=1e-7 * model.photocurrent
    )


@settings(max_examples=250, deadline=None)
@given(lab_models, st.sampled_from(LIT), st.floats(-0.02, 0.02), st.floats(-0.02, 0.02))
def test_the_moved_handle_lies_under_the_pointer_and_the_table_is_kept(model, parameter, right, up):
    marks = model.landmarks()
    handle = handle_of(model, parameter)
    x, y = handle.x + right * marks.voc, handle.y + up * marks.jsc
    move = drag(model, parameter, x, y)
    moved = handle_of(move.model, parameter)
    after = move.model.landmarks()
    if parameter in KEEPS_JSC_VOC:
        assert after.jsc == pytest.approx(marks.jsc, rel=1e-9)
        assert after.voc == pytest.approx(marks.voc, rel=1e-9)
        assert only_changed(model, move.model, parameter, "photocurrent", "saturation_current_1")
    else:
        assert only_changed(model, move.model, parameter)
    if move.message:
        assert "can go no further" in move.message
    elif handle.motion == "horizontal":
        assert moved.x == pytest.approx(x, abs=1e-8 * marks.voc)
    elif handle.motion == "vertical":
        assert moved.y == pytest.approx(y, abs=1e-8 * marks.jsc)
    else:
        assert moved.x / marks.voc == pytest.approx(0.5 * (x / marks.voc + y / marks.jsc), abs=1e-8)


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("parameter", LIT)
def test_each_handle_moves_its_parameter_one_way_only(model, parameter):
    marks, handle = model.landmarks(), handle_of(model, parameter)
    found = []
    for step in np.linspace(-0.01, 0.01, 9):
        move = drag(model, parameter, handle.x + step * marks.voc, handle.y + step * marks.jsc)
        if not move.message:
            found.append(getattr(move.model, parameter))
    steps = np.diff(found)
    assert len(found) >= 3
    assert (steps > 0).all() if parameter in ("photocurrent", "shunt_resistance") else (steps < 0).all()


@pytest.mark.parametrize(
    ("parameter", "x", "y", "words"),
    [
        ("photocurrent", 0.0, -1.0, "Jph can go no further: under light it stays above zero."),
        ("photocurrent", 0.0, 1e9, "Jph can go no further"),
        ("saturation_current_1", -0.1, 0.0, "J0₁ can go no further: Voc has to stay above zero."),
        ("saturation_current_1", 1e9, 0.0, "J0₁ can go no further: J0₂ and the shunt alone keep Voc below this."),
        ("saturation_current_2", 2.0, 1.0, "J0₂ can go no further: it is zero already, and the knee is as sharp"),
        ("saturation_current_2", 0.0, 0.0, "J0₂ can go no further: J0₂ alone would set Voc."),
        ("series_resistance", 2.0, 0.0, "Rs can go no further: it is zero already"),
        ("series_resistance", 0.0, 0.0, "Rs can go no further: the drop Jsc·Rs has to stay below Voc."),
        ("shunt_resistance", 0.0, 1.0, "Rsh can go no further: it is infinite already"),
        ("shunt_resistance", 0.0, -1.0, "Rsh can go no further: J0₂ and a shunt this strong would set Voc alone."),
    ],
)
def test_a_drag_beyond_physics_stops_at_the_edge_and_says_so(parameter, x, y, words):
    move = drag(CELL, parameter, x, y)
    assert move.message.startswith(words)
    low, high = LIMITS[parameter]
    assert low <= getattr(move.model, parameter) <= high
    if parameter in KEEPS_JSC_VOC:
        before, after = CELL.landmarks(), move.model.landmarks()
        assert (after.jsc, after.voc) == (pytest.approx(before.jsc, rel=1e-9), pytest.approx(before.voc, rel=1e-9))


def test_edges_are_reached_exactly():
    assert drag(CELL, "saturation_current_2", 2.0, 1.0).model.saturation_current_2 == 0
    assert drag(CELL, "series_resistance", 2.0, 0.0).model.series_resistance == 0
    assert drag(CELL, "shunt_resistance", 0.0, 1.0).model.shunt_resistance == math.inf


def test_two_equal_diodes_cannot_be_told_apart():
    move = drag(replace(CELL, ideality_2=1.0), "saturation_current_2", 0.5, 0.03)
    assert move.message == "J0₂ can go no further: with n₁ = n₂ the two diodes are one, so that J0₂ does not show."


any_number = st.floats() | st.sampled_from([math.nan, math.inf, -math.inf, 1e300, -1e300, 0.0, 5e-324])
any_model = st.builds(
    TwoDiode,
    st.just(0.0) | decades(-15, 3),
    decades(-150, 3),
    st.just(0.0) | decades(-150, 3),
    st.just(0.0) | decades(-9, 15),
    st.just(math.inf) | decades(-9, 15),
    st.floats(0.1, 60.0),
    st.floats(0.1, 60.0),
    series_cells=st.sampled_from([1, 60]),
)
any_span = st.tuples(any_number, any_number) | st.just(SPAN)


@settings(max_examples=250, deadline=None)
@given(any_model, st.sampled_from(LIT), any_number, any_number, st.booleans(), any_span)
def test_no_pointer_and_no_model_raises_or_warns(model, parameter, x, y, lit, span):
    found = handles(model, lit=lit, span=span)
    assert all(math.isfinite(handle.x) and math.isfinite(handle.y) for handle in found)
    moved = drag(model, parameter, x, y, lit=lit, span=span).model
    assert moved.photocurrent >= 0 and 0 < moved.saturation_current_1 < math.inf
    assert 0 <= moved.saturation_current_2 < math.inf
    assert 0 <= moved.series_resistance < math.inf and moved.shunt_resistance > 0
    handles(moved, lit=lit, span=span)


@settings(max_examples=200, deadline=None)
@given(any_model, st.sampled_from(TWO_DIODE_PARAMETERS), any_number, st.booleans())
def test_no_dial_value_raises_or_warns(model, parameter, value, keep):
    moved = set_parameter(model, parameter, value, keep_jsc_voc=keep).model
    assert moved.saturation_current_1 > 0 and moved.saturation_current_2 >= 0 and moved.shunt_resistance > 0


def test_without_photocurrent_the_photocurrent_can_be_dragged_and_nothing_else():
    unlit = replace(CELL, photocurrent=0.0)
    assert [handle.parameter for handle in handles(unlit)] == ["photocurrent"]
    assert "no Voc" in drag(unlit, "saturation_current_2", 0.5, 0.02).message
    assert drag(unlit, "photocurrent", 0.0, 0.02).model.landmarks().jsc == pytest.approx(0.02, rel=1e-9)


# Holds


@pytest.mark.parametrize("parameter", KEEPS_JSC_VOC)
def test_a_held_parameter_or_follower_locks_the_handle(parameter):
    held = handle_of(CELL, parameter, hold=frozenset({parameter}))
    assert held.locked and held.reason.endswith("is held.")
    followed = handle_of(CELL, parameter, hold=frozenset({"saturation_current_1"}))
    assert followed.locked and "because J0₁ is held and would have to follow" in followed.reason
    move = drag(CELL, parameter, 0.4, 0.02, hold=frozenset({"saturation_current_1"}))
    assert move.model is CELL and move.message == followed.reason


def test_other_holds_do_not_lock():
    hold = frozenset({"ideality_1", "ideality_2"})
    assert not any(handle.locked for handle in handles(CELL, hold=hold))
    assert not any(handle.locked for handle in handles(CELL, hold=hold, lit=False, span=SPAN))


# In the dark


@pytest.mark.parametrize("span", [(0.0, 0.8), SPAN, (-2.0, 0.7)])
@pytest.mark.parametrize("model", [CELL, NO_SHUNT, NO_SECOND])
def test_dark_handles_sit_on_the_dark_curve_apart_and_in_order(model, span):
    found = handles(model, lit=False, span=span)
    assert tuple(handle.parameter for handle in found) == DARK
    for handle in found:
        assert 0 < handle.x < span[1]
        assert handle.y == pytest.approx(dark_size(model, handle.x), rel=1e-9)
        assert handle.motion == "vertical"
    assert min(np.diff([handle.x for handle in found])) >= min(0.06 * (span[1] - span[0]), 0.19 * span[1])


@settings(max_examples=200, deadline=None)
@given(lab_models, st.sampled_from(DARK), st.floats(-0.3, 0.3), st.sampled_from([(0.0, 0.8), SPAN]))
def test_the_dark_curve_passes_through_the_pointer(model, parameter, decades_up, span):
    handle = handle_of(model, parameter, lit=False, span=span)
    y = handle.y * 10**decades_up
    move = drag(model, parameter, handle.x, y, lit=False, span=span)
    assert only_changed(model, move.model, parameter)
    if move.message:
        assert "can go no further" in move.message
    else:
        assert dark_size(move.model, handle.x) == pytest.approx(y, rel=1e-8)


@pytest.mark.parametrize(
    ("parameter", "factor", "words"),
    [
        ("saturation_current_1", 1e-6, "J0₁ can go no further: the other diode and the shunt alone carry"),
        ("saturation_current_2", 1e-6, "J0₂ can go no further: the other diode and the shunt alone carry"),
        ("saturation_current_1", 1e9, "J0₁ can go no further: Rs alone sets"),
        ("series_resistance", 1e9, "Rs can go no further: it is zero already"),
        ("shunt_resistance", 1e-9, "Rsh can go no further: it is infinite already"),
        ("shunt_resistance", 1e9, "Rsh can go no further: Rs alone sets"),
    ],
)
def test_dark_edges_are_told(parameter, factor, words):
    handle = handle_of(CELL, parameter, lit=False, span=SPAN)
    assert drag(CELL, parameter, handle.x, handle.y * factor, lit=False, span=SPAN).message.startswith(words)


def test_there_is_no_handle_for_photocurrent_or_ideality_in_the_dark():
    for parameter in ("photocurrent", "ideality_1"):
        assert drag(CELL, parameter, 0.0, 0.01, lit=False, span=SPAN).message == "There is no such handle in the dark."


# Dials


def test_a_dial_moves_its_parameter_alone():
    for parameter in TWO_DIODE_PARAMETERS:
        move = set_parameter(CELL, parameter, 2 * getattr(CELL, parameter))
        assert move.message == ""
        assert move.model == replace(CELL, **{parameter: 2 * getattr(CELL, parameter)})


def test_the_second_diode_can_be_switched_off_by_its_dial_and_the_first_cannot():
    assert set_parameter(CELL, "saturation_current_2", 0.0).model == NO_SECOND
    refused = set_parameter(CELL, "saturation_current_1", 0.0)
    assert refused.model is CELL and "has to be above zero" in refused.message


KEEPING = ("saturation_current_2", "ideality_1", "ideality_2", "series_resistance", "shunt_resistance")


@settings(max_examples=150, deadline=None)
@given(lab_models, st.sampled_from(KEEPING), st.floats(0.5, 2.0))
@example(CELL, "shunt_resistance", math.inf)
@example(CELL, "shunt_resistance", 1e-4)
@example(CELL, "series_resistance", 0.0)
@example(CELL, "series_resistance", 1e6)
@example(CELL, "saturation_current_2", 0.0)
@example(CELL, "saturation_current_2", 1e6)
@example(CELL, "ideality_2", 0.5)
@example(CELL, "ideality_1", 100.0)
def test_a_dial_can_keep_jsc_and_voc(model, parameter, factor):
    move = set_parameter(model, parameter, factor * getattr(model, parameter), keep_jsc_voc=True)
    before, after = model.landmarks(), move.model.landmarks()
    assert after.jsc == pytest.approx(before.jsc, rel=1e-9)
    assert after.voc == pytest.approx(before.voc, rel=1e-9)
    if not move.message:
        assert getattr(move.model, parameter) == factor * getattr(model, parameter)


def test_a_dial_that_keeps_stops_where_the_first_diode_would_vanish():
    move = set_parameter(CELL, "saturation_current_2", 1.0, keep_jsc_voc=True)
    assert move.message == "J0₂ can go no further: J0₂ alone would set Voc."
    carried = CELL.photocurrent / math.expm1(CELL.landmarks().voc / CELL.slope_voltages[1])
    assert move.model.saturation_current_2 == pytest.approx(carried, rel=0.05)


@pytest.mark.parametrize("parameter", ["photocurrent", "saturation_current_1"])
def test_jph_and_the_first_j0_move_alone_and_say_why(parameter):
    move = set_parameter(CELL, parameter, 1.5 * getattr(CELL, parameter), keep_jsc_voc=True)
    assert only_changed(CELL, move.model, parameter)
    assert "moves alone" in move.message


def test_keeping_needs_followers_that_are_free():
    move = set_parameter(CELL, "ideality_2", 2.2, hold=frozenset({"photocurrent"}), keep_jsc_voc=True)
    assert move.model is CELL and "Jph is held" in move.message
    assert set_parameter(CELL, "ideality_2", 2.2, hold=frozenset({"photocurrent"})).model.ideality_2 == 2.2
