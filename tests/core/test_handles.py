"""Handles solve what the design's table says, keep what it says, and survive every pointer."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from core.diode import PARAMETERS, OneDiode
from core.handles import drag, handles, set_parameter, type_parameter
from core.moves import LIMITS

CELL = OneDiode(0.022, 1e-12, 1.6, 3.0, 2000.0)
NO_SHUNT = OneDiode(0.035, 3e-10, 1.3, 0.5, math.inf)
MODULE = OneDiode(1.03, 2.6e-6, 1.32, 1.24, 820.0, series_cells=36, temperature=318.15)
MODULE_READ_AS_ONE_CELL = MODULE.at(series_cells=1)
DIM = OneDiode(2e-7, 1e-12, 1.8, 3.0, 5e6)
MODELS = [CELL, NO_SHUNT, MODULE, MODULE_READ_AS_ONE_CELL, DIM]
DARK_SPANS = [(0.0, 1.2), (-0.5, 1.2), (-2.0, 0.8)]
KEEPS_JSC_VOC = ("ideality", "series_resistance", "shunt_resistance")


def decades(low, high):
    return st.floats(low, high).map(lambda exponent: 10.0**exponent)


def lab_model(jsc, voc_over_slope, ideality, series_share, shunt_share):
    """A device by its size: Rs and Rsh as shares of Voc/Jsc."""
    voc = voc_over_slope * ideality * 0.025692579
    return OneDiode(jsc, jsc * math.exp(-voc_over_slope), ideality, series_share * voc / jsc, voc / jsc / shunt_share)


lab_models = st.builds(
    lab_model, decades(-6, 1), st.floats(8.0, 45.0), st.floats(0.8, 3.0), st.floats(0.0, 0.4), st.floats(1e-9, 0.4)
)


def handle_of(model, parameter, **view):
    return next(handle for handle in handles(model, **view) if handle.parameter == parameter)


def only_changed(before, after, *names):
    return all(getattr(before, name) == getattr(after, name) for name in PARAMETERS if name not in names)


def dark_size(model, voltage):
    return abs(float(replace(model, photocurrent=0.0).current(voltage)))


# Under light


@pytest.mark.parametrize("model", MODELS)
def test_lit_handles_sit_where_the_table_says(model):
    marks = model.landmarks()
    places = {handle.parameter: handle for handle in handles(model)}
    assert tuple(places) == PARAMETERS
    assert [handle.motion for handle in places.values()] == ["vertical", "horizontal", "ray", "horizontal", "vertical"]
    for handle in places.values():
        assert model.current(handle.x) == pytest.approx(handle.y, rel=1e-9, abs=1e-10 * marks.jsc)
        assert not handle.locked and handle.reason == ""
    assert places["photocurrent"].x == 0
    assert (places["saturation_current"].x, places["saturation_current"].y) == (pytest.approx(marks.voc, rel=1e-12), 0)
    assert places["ideality"].x / marks.voc == pytest.approx(places["ideality"].y / marks.jsc, rel=1e-12)
    assert places["series_resistance"].y == pytest.approx(marks.jsc / 2, rel=1e-12)
    assert places["shunt_resistance"].x == pytest.approx(0.4 * marks.voc, rel=1e-12)


@settings(max_examples=100, deadline=None)
@given(lab_models, st.sampled_from(PARAMETERS))
@example(NO_SHUNT, "shunt_resistance")
@example(replace(CELL, series_resistance=0.0), "series_resistance")
def test_a_drag_to_where_the_handle_is_changes_nothing(model, parameter):
    handle = handle_of(model, parameter)
    move = drag(model, parameter, handle.x, handle.y)
    assert move.message == ""
    voltage = np.linspace(-0.2, 1.05, 30) * model.landmarks().voc
    np.testing.assert_allclose(
        move.model.current(voltage), model.current(voltage), rtol=1e-7, atol=1e-7 * model.photocurrent
    )


@settings(max_examples=200, deadline=None)
@given(lab_models, st.sampled_from(PARAMETERS), st.floats(-0.02, 0.02), st.floats(-0.02, 0.02))
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
        assert only_changed(model, move.model, parameter, "photocurrent", "saturation_current")
    else:
        assert only_changed(model, move.model, parameter)
    if move.message:
        assert "can go no further" in move.message
        return
    if handle.motion == "horizontal":
        assert moved.x == pytest.approx(x, abs=1e-8 * marks.voc)
    elif handle.motion == "vertical":
        assert moved.y == pytest.approx(y, abs=1e-8 * marks.jsc)
    else:
        projected = 0.5 * (x / marks.voc + y / marks.jsc)
        assert moved.x / marks.voc == pytest.approx(projected, abs=1e-8)


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("parameter", PARAMETERS)
def test_each_handle_moves_its_parameter_one_way_only(model, parameter):
    marks, handle = model.landmarks(), handle_of(model, parameter)
    found = []
    for step in np.linspace(-0.01, 0.01, 9):
        move = drag(model, parameter, handle.x + step * marks.voc, handle.y + step * marks.jsc)
        if not move.message:
            found.append(getattr(move.model, parameter))
    steps = np.diff(found)
    assert len(found) >= 4
    assert (steps > 0).all() if parameter in ("photocurrent", "shunt_resistance") else (steps < 0).all()


def test_knee_follows_the_pointer_by_its_projection_in_units_of_jsc_and_voc():
    marks, knee = CELL.landmarks(), handle_of(CELL, "ideality")
    beside = drag(CELL, "ideality", knee.x + 0.03 * marks.voc, knee.y - 0.03 * marks.jsc)
    assert beside.model.ideality == pytest.approx(CELL.ideality, rel=1e-9)


@pytest.mark.parametrize(
    ("parameter", "x", "y", "words"),
    [
        ("photocurrent", 0.0, -1.0, "Jph can go no further: under light it stays above zero."),
        ("photocurrent", 0.0, 1e9, "Jph can go no further"),
        ("saturation_current", -0.1, 0.0, "J0 can go no further: Voc has to stay above zero."),
        ("saturation_current", 1e9, 0.0, "J0 can go no further"),
        ("ideality", 2.0, 1.0, "n can go no further: the knee is as sharp as Rs and Rsh allow."),
        ("ideality", 0.0, 0.0, "n can go no further: the curve is already a straight line between Jsc and Voc."),
        ("series_resistance", 2.0, 0.0, "Rs can go no further: it is zero already"),
        ("series_resistance", 0.0, 0.0, "Rs can go no further: the drop Jsc·Rs has to stay below Voc."),
        ("shunt_resistance", 0.0, 1.0, "Rsh can go no further: it is infinite already"),
        ("shunt_resistance", 0.0, -1.0, "Rsh can go no further: a shunt this strong would set Voc alone."),
    ],
)
def test_a_drag_beyond_physics_stops_at_the_edge_and_says_so(parameter, x, y, words):
    move = drag(CELL, parameter, x, y)
    assert move.message.startswith(words)
    assert move.message.endswith(".")
    low, high = LIMITS[parameter]
    assert low <= getattr(move.model, parameter) <= high
    if parameter in KEEPS_JSC_VOC:
        before, after = CELL.landmarks(), move.model.landmarks()
        assert (after.jsc, after.voc) == (pytest.approx(before.jsc, rel=1e-9), pytest.approx(before.voc, rel=1e-9))


def test_edges_are_reached_exactly():
    assert drag(CELL, "series_resistance", 2.0, 0.0).model.series_resistance == 0
    assert drag(CELL, "shunt_resistance", 0.0, 1.0).model.shunt_resistance == math.inf


def test_a_shunt_keeps_voc_below_its_own_limit():
    move = drag(replace(CELL, shunt_resistance=60.0), "saturation_current", 1.5, 0.0)
    assert move.message == "J0 can go no further: the shunt alone keeps Voc below Jph·Rsh."
    assert move.model.landmarks().voc == pytest.approx(0.022 * 60.0, rel=1e-6)


any_number = st.floats() | st.sampled_from([math.nan, math.inf, -math.inf, 1e300, -1e300, 0.0, 5e-324])
any_model = st.builds(
    OneDiode,
    st.just(0.0) | decades(-15, 3),
    decades(-150, 3),
    st.floats(0.1, 60.0),
    st.just(0.0) | decades(-9, 15),
    st.just(math.inf) | decades(-9, 15),
    series_cells=st.sampled_from([1, 60]),
)
any_span = st.tuples(any_number, any_number) | st.sampled_from(DARK_SPANS)


@settings(max_examples=500, deadline=None)
@given(any_model, st.sampled_from(PARAMETERS), any_number, any_number, st.booleans(), any_span)
def test_no_pointer_and_no_model_raises_or_warns(model, parameter, x, y, lit, span):
    found = handles(model, lit=lit, span=span)
    assert all(math.isfinite(handle.x) and math.isfinite(handle.y) for handle in found)
    moved = drag(model, parameter, x, y, lit=lit, span=span).model
    assert moved.photocurrent >= 0 and 0 < moved.saturation_current < math.inf and 0 < moved.ideality < math.inf
    assert 0 <= moved.series_resistance < math.inf and moved.shunt_resistance > 0
    handles(moved, lit=lit, span=span)


def test_a_pointer_that_is_no_number_changes_nothing():
    assert drag(CELL, "ideality", math.nan, 0.01).model is CELL


def test_without_photocurrent_the_photocurrent_can_be_dragged_and_nothing_else():
    unlit = replace(CELL, photocurrent=0.0)
    assert [handle.parameter for handle in handles(unlit)] == ["photocurrent"]
    assert drag(unlit, "ideality", 0.8, 0.02).message == "Without photocurrent the curve has no Voc; raise Jph first."
    assert drag(unlit, "photocurrent", 0.0, 0.02).model.landmarks().jsc == pytest.approx(0.02, rel=1e-9)


# Holds


@pytest.mark.parametrize(("lit", "parameters"), [(True, PARAMETERS), (False, PARAMETERS[1:])])
def test_a_held_parameter_locks_its_handle(lit, parameters):
    for parameter in parameters:
        hold = frozenset({parameter})
        handle = handle_of(CELL, parameter, lit=lit, hold=hold)
        assert handle.locked and handle.reason.endswith("is held.")
        move = drag(CELL, parameter, handle.x * 0.9, handle.y * 0.9, lit=lit, hold=hold)
        assert move.model is CELL and move.message == handle.reason


@pytest.mark.parametrize("parameter", KEEPS_JSC_VOC)
def test_a_held_follower_locks_the_handle_and_is_named(parameter):
    handle = handle_of(CELL, parameter, hold=frozenset({"saturation_current"}))
    assert handle.locked
    assert "because J0 is held and would have to follow" in handle.reason
    both = handle_of(CELL, parameter, hold=frozenset({"saturation_current", "photocurrent"}))
    assert "J0 and Jph are held" in both.reason


def test_other_holds_do_not_lock():
    locked = {handle.parameter for handle in handles(CELL, hold=frozenset({"ideality"})) if handle.locked}
    assert locked == {"ideality"}
    dark = {h.parameter for h in handles(CELL, lit=False, hold=frozenset({"saturation_current"})) if h.locked}
    assert dark == {"saturation_current", "ideality"}


# In the dark


@pytest.mark.parametrize("span", DARK_SPANS)
@pytest.mark.parametrize("model", [CELL, NO_SHUNT, replace(CELL, series_resistance=0.0), replace(CELL, ideality=3.0)])
def test_dark_handles_sit_on_the_dark_curve_apart_and_in_order(model, span):
    found = handles(model, lit=False, span=span)
    assert {handle.parameter for handle in found} == set(PARAMETERS[1:])
    for handle in found:
        assert 0 < handle.x < span[1]
        assert handle.y == pytest.approx(dark_size(model, handle.x), rel=1e-9)
        assert handle.motion == "vertical"
    order = ["shunt_resistance", "saturation_current", "ideality", "series_resistance"]
    voltages = [handle_of(model, name, lit=False, span=span).x for name in order]
    assert min(np.diff(voltages)) >= 0.06 * (span[1] - span[0])


@settings(max_examples=200, deadline=None)
@given(lab_models, st.sampled_from(PARAMETERS[1:]), st.floats(-0.3, 0.3), st.sampled_from(DARK_SPANS))
def test_the_dark_curve_passes_through_the_pointer(model, parameter, decades_up, span):
    handle = handle_of(model, parameter, lit=False, span=span)
    y = handle.y * 10**decades_up
    move = drag(model, parameter, handle.x, y, lit=False, span=span)
    followers = {"saturation_current"} if parameter == "ideality" else set()
    assert only_changed(model, move.model, parameter, *followers)
    if move.message:
        assert "can go no further" in move.message
        return
    assert dark_size(move.model, handle.x) == pytest.approx(y, rel=1e-8)
    if parameter == "ideality":
        pivot = handle_of(model, "saturation_current", lit=False, span=span)
        assert dark_size(move.model, pivot.x) == pytest.approx(pivot.y, rel=1e-9)


def test_a_dark_drag_counts_from_where_it_began():
    """Two positions of one drag: the second does not depend on the first."""
    handle = handle_of(CELL, "ideality", lit=False, span=(0.0, 1.2))
    move = drag(CELL, "ideality", -5.0, handle.y * 2, lit=False, span=(0.0, 1.2))
    assert dark_size(move.model, handle.x) == pytest.approx(2 * handle.y, rel=1e-9)


@pytest.mark.parametrize(
    ("parameter", "factor", "words"),
    [
        ("saturation_current", 1e-9, "J0 can go no further: the shunt alone carries"),
        ("saturation_current", 1e9, "J0 can go no further: Rs alone sets"),
        ("ideality", 1e9, "n can go no further: the slope is as steep as Rs allows."),
        ("ideality", 1e-9, "n can go no further: the curve is already as flat"),
        ("series_resistance", 1e9, "Rs can go no further: it is zero already"),
        ("shunt_resistance", 1e-9, "Rsh can go no further: it is infinite already"),
        ("shunt_resistance", 1e9, "Rsh can go no further: Rs alone sets"),
    ],
)
def test_dark_edges_are_told(parameter, factor, words):
    handle = handle_of(CELL, parameter, lit=False, span=(0.0, 1.2))
    assert drag(CELL, parameter, handle.x, handle.y * factor, lit=False, span=(0.0, 1.2)).message.startswith(words)


def test_there_is_no_photocurrent_handle_in_the_dark():
    assert drag(CELL, "photocurrent", 0.0, 0.01, lit=False).message == "There is no such handle in the dark."


def test_a_dark_sweep_in_reverse_only_has_no_handles():
    assert handles(CELL, lit=False, span=(-1.0, 0.0)) == ()
    assert "no forward voltages" in drag(CELL, "ideality", 0.0, 1.0, lit=False, span=(-1.0, 0.0)).message


# Dials


def test_a_dial_moves_its_parameter_alone():
    for parameter in PARAMETERS:
        move = set_parameter(CELL, parameter, 2 * getattr(CELL, parameter))
        assert move.message == ""
        assert move.model == replace(CELL, **{parameter: 2 * getattr(CELL, parameter)})


@settings(max_examples=100, deadline=None)
@given(lab_models, st.sampled_from(KEEPS_JSC_VOC), st.floats(0.5, 2.0))
@example(CELL, "shunt_resistance", math.inf)
@example(CELL, "series_resistance", 0.0)
@example(CELL, "series_resistance", 1e6)
@example(CELL, "ideality", 1e-9)
def test_a_dial_can_keep_jsc_and_voc(model, parameter, factor):
    move = set_parameter(model, parameter, factor * getattr(model, parameter), keep_jsc_voc=True)
    before, after = model.landmarks(), move.model.landmarks()
    assert after.jsc == pytest.approx(before.jsc, rel=1e-9)
    assert after.voc == pytest.approx(before.voc, rel=1e-9)
    if not move.message:
        assert getattr(move.model, parameter) == factor * getattr(model, parameter)


def test_kept_values_stop_where_no_curve_has_this_jsc_and_voc():
    whole = CELL.landmarks().voc / CELL.landmarks().jsc
    resistive = set_parameter(CELL, "series_resistance", whole, keep_jsc_voc=True)
    assert resistive.model.series_resistance < whole and "Jsc·Rs has to stay below Voc" in resistive.message
    shunted = set_parameter(CELL, "shunt_resistance", 1.0, keep_jsc_voc=True)
    assert shunted.model.shunt_resistance == pytest.approx(whole - CELL.series_resistance, rel=1e-6)
    assert "would set Voc alone" in shunted.message


@pytest.mark.parametrize("parameter", ["photocurrent", "saturation_current"])
def test_jph_and_j0_move_alone_and_say_why(parameter):
    move = set_parameter(CELL, parameter, 1.5 * getattr(CELL, parameter), keep_jsc_voc=True)
    assert only_changed(CELL, move.model, parameter)
    assert "moves alone" in move.message


@pytest.mark.parametrize(
    ("parameter", "value", "stands"),
    [
        ("ideality", 0.01, 0.1),
        ("series_resistance", -1.0, 0.0),
        ("photocurrent", -1.0, 0.0),
        ("photocurrent", math.inf, 0.022),
        ("saturation_current", 0.0, 1e-12),
        ("saturation_current", -1.0, 1e-12),
        ("shunt_resistance", 0.0, 2000.0),
        ("ideality", math.nan, 1.6),
    ],
)
@pytest.mark.parametrize("keep", [False, True])
def test_impossible_values_are_told(parameter, value, stands, keep):
    move = set_parameter(CELL, parameter, value, keep_jsc_voc=keep)
    assert move.message.endswith(".")
    if not (keep and parameter == "ideality"):  # there, J0 may run out of numbers before n does
        assert getattr(move.model, parameter) == stands


def test_no_shunt_can_be_set():
    move = set_parameter(CELL, "shunt_resistance", math.inf)
    assert move.model.shunt_resistance == math.inf and move.message == ""


@pytest.mark.parametrize("keep", [False, True])
def test_a_held_parameter_cannot_be_set(keep):
    move = set_parameter(CELL, "ideality", 2.0, hold=frozenset({"ideality"}), keep_jsc_voc=keep)
    assert move.model is CELL and move.message == "n is held."


def test_keeping_needs_followers_that_are_free():
    move = set_parameter(CELL, "ideality", 2.0, hold=frozenset({"photocurrent"}), keep_jsc_voc=True)
    assert move.model is CELL and "Jph is held" in move.message
    assert set_parameter(CELL, "ideality", 2.0, hold=frozenset({"photocurrent"})).model.ideality == 2.0


def test_without_voc_a_dial_moves_alone():
    unlit = replace(CELL, photocurrent=0.0)
    move = set_parameter(unlit, "ideality", 2.0, keep_jsc_voc=True)
    assert move.model == replace(unlit, ideality=2.0) and "no Voc to keep" in move.message


def test_a_typed_value_is_taken_exactly_or_not_at_all():
    assert type_parameter(CELL, "ideality", 1.7).model.ideality == 1.7
    assert type_parameter(CELL, "shunt_resistance", math.inf).model.shunt_resistance == math.inf
    kept = type_parameter(CELL, "ideality", 1.7, keep_jsc_voc=True)
    assert kept.model.ideality == 1.7 and kept.message == ""
    alone = type_parameter(CELL, "photocurrent", 0.02, keep_jsc_voc=True)
    assert alone.model.photocurrent == 0.02 and "moves alone" in alone.message
    for value, keep in ((-1.0, False), (1e4, True)):
        stopped = type_parameter(CELL, "series_resistance", value, keep_jsc_voc=keep)
        assert stopped.model == CELL
        assert stopped.message.startswith("Rs cannot have this value and stays as it was: ")
    held = type_parameter(CELL, "ideality", 2.0, hold=frozenset({"ideality"}))
    assert held.model == CELL and held.message == "n is held."
