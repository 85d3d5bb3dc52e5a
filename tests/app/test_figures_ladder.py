"""The ladder from the limit to the device: each rung begins where the one before it ends."""

import pytest

from app.figures.ladder import FOOT, LONGEST_LABEL, TOP, ladder_figure
from app.mechanisms import BY_PARAMETER, MECHANISMS
from core.diode import PARAMETERS

LOSSES = {"photocurrent": -3.5, "saturation_current": -5.0, "ideality": 0.4, "series_resistance": -1.5, "shunt_resistance": -0.6}
LIMIT, REST = 30.0, 0.1
DEVICE = LIMIT + sum(LOSSES.values()) + REST
NAMES = {"limit_name": "limit at 1.6 eV", "device_name": "K07"}


def drawn(**more):
    arguments = {"limit": LIMIT, "device": DEVICE, "losses": LOSSES, "order": PARAMETERS, "rest": REST, **NAMES, **more}
    figure = ladder_figure(**arguments)
    return figure, {trace.uid: trace for trace in figure.data}


def ends_of(rungs):
    """Level before and after each rung, from the bars alone and the signs of the losses."""
    level, levels = LIMIT, []
    for base, width in zip(rungs.base, rungs.x, strict=True):
        down = base + width == pytest.approx(level)
        after = base if down else base + width
        assert (base + width if down else base) == pytest.approx(level), "a rung hangs in the air"
        levels.append((level, after))
        level = after
    return levels


@pytest.mark.parametrize("order", [PARAMETERS, PARAMETERS[::-1], ("ideality", *(p for p in PARAMETERS if p != "ideality"))])
def test_the_rungs_join_the_limit_to_the_device_in_the_order_asked_for(order):
    _, traces = drawn(order=order)
    rungs = traces["rungs"]
    assert list(rungs.y) == [*(BY_PARAMETER[name].loss for name in order), "not in the model"]
    levels = ends_of(rungs)
    assert levels[-1][1] == pytest.approx(DEVICE)
    assert [after - before for before, after in levels] == pytest.approx([*(LOSSES[name] for name in order), REST])
    assert list(traces["ends"].x) == [LIMIT, DEVICE]


def test_each_rung_has_the_hue_and_hatch_of_its_mechanism():
    _, traces = drawn(order=PARAMETERS[::-1])
    assert list(traces["rungs"].marker.color[:5]) == [m.hue for m in MECHANISMS[::-1]]
    assert list(traces["rungs"].marker.pattern.shape[:5]) == [m.hatch for m in MECHANISMS[::-1]]


def test_a_plumb_line_goes_from_each_level_to_the_next_row():
    figure, traces = drawn()
    levels = [before for before, _ in ends_of(traces["rungs"])] + [DEVICE]
    assert [shape.x0 for shape in figure.layout.shapes] == pytest.approx(levels)
    assert all(shape.x0 == shape.x1 and shape.y1 > shape.y0 for shape in figure.layout.shapes)


def test_words_give_power_and_share_of_the_limit():
    _, traces = drawn()
    assert traces["labels"].text[0].strip() == "−3.50 (−11.7 %)"
    assert traces["labels"].text[2].strip() == "+0.40 (1.3 %)"
    assert traces["ends"].text[1] == f"19.90 mW cm⁻² ({100 * DEVICE / LIMIT:.1f} %)"


def test_words_of_a_poor_device_stand_beside_its_short_bar():
    _, traces = drawn(device=3.0, rest=3.0 - LIMIT - sum(LOSSES.values()))
    assert traces["ends"].text[1] == ""
    assert traces["labels"].y[-1] == FOOT and traces["labels"].x[-1] == 3.0
    assert traces["labels"].text[-1].strip() == "3.000 mW cm⁻² (10.0 %)"


@pytest.mark.parametrize("large", [False, True])
@pytest.mark.parametrize("share", [0.45, 0.515, 0.58, 0.65, 0.75, 0.95])
def test_words_of_the_device_have_room_wherever_they_stand(share, large):
    """By rough widths: 1280 pixels with the side, and 1900 with the projector's type."""
    figure, traces = drawn(device=share * LIMIT, losses={}, order=(), rest=(share - 1) * LIMIT, large=large)
    width = (1500 if large else 430) / (figure.layout.xaxis.range[1] / LIMIT)
    words = traces["ends"].text[1] or traces["labels"].text[-1].strip()
    room = share * width if traces["ends"].text[1] else (figure.layout.xaxis.range[1] / LIMIT - share) * width + 24
    assert len(words) * (11 if large else 6.6) < room


def test_what_rounds_to_nothing_has_no_rung():
    assert list(drawn(rest=0.004)[1]["rungs"].y) == [m.loss for m in MECHANISMS]
    assert list(drawn(rest=-0.006)[1]["rungs"].y)[-1] == "not in the model"


def test_a_gap_that_is_not_broken_down_is_one_rung():
    figure, traces = drawn(losses={}, order=(), rest=DEVICE - LIMIT, rest_name="not broken down")
    assert list(traces["rungs"].y) == ["not broken down"]
    assert ends_of(traces["rungs"]) == [(LIMIT, pytest.approx(DEVICE))]


def test_a_confirmed_shunt_is_called_so():
    assert "shunt or collection" in drawn()[1]["rungs"].y
    assert "shunt" in drawn(shunt_confirmed=True)[1]["rungs"].y


def test_rows_stay_apart_whatever_a_device_is_called():
    figure, _ = drawn(device_name="shunt")
    rows, shown = list(figure.layout.yaxis.tickvals), list(figure.layout.yaxis.ticktext)
    assert rows[0] == TOP and rows[-1] == FOOT and len(set(rows)) == len(rows) == 8
    assert shown[-1] == "shunt" and shown[0] == "limit at 1.6 eV"
    figure, _ = drawn(device_name="<b>" + "x" * 80)
    assert figure.layout.yaxis.ticktext[-1].startswith("&lt;b&gt;xx")
    assert len(figure.layout.yaxis.ticktext[-1].replace("&lt;", "<").replace("&gt;", ">")) == LONGEST_LABEL


def test_the_axis_begins_at_zero_and_holds_what_rises_above_the_limit():
    figure, _ = drawn(losses={**LOSSES, "photocurrent": 4.0})
    low, high = figure.layout.xaxis.range
    assert low == 0 and high > LIMIT + 4.0


def test_the_projector_has_larger_type():
    large, small = drawn(large=True)[1], drawn()[1]
    for uid in ("ends", "labels"):
        assert large[uid].textfont.size > 1.5 * small[uid].textfont.size
