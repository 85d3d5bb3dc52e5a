"""The pair's figures: what is drawn is what was measured and computed, and bars add up."""

from dataclasses import replace

import numpy as np
import pytest

from app.figures.pair import Side, pair_figure, shares_figure, what_if_line
from app.mechanisms import MECHANISMS
from core.diode import PARAMETERS
from core.metrics import measure
from core.shares import difference_shares
from tests.app.benches import AMPERES, CELL, LIT, OTHER, sweep_of

OTHER_CELL = replace(CELL, photocurrent=0.02)
A, B = Side(LIT, CELL, "K <1>"), Side(OTHER, OTHER_CELL, "B")
MANY = {name: 1e3 * share for name, share in difference_shares(CELL, replace(CELL, series_resistance=6.0, photocurrent=0.021)).by_mechanism.items()}


def traces(figure):
    return {trace.uid: trace for trace in figure.data}


def test_a_is_filled_and_solid_and_b_hollow_and_dashed():
    drawn = traces(pair_figure(A, B))
    assert (drawn["model-a"].line.dash, drawn["model-b"].line.dash) == ("solid", "dash")
    assert drawn["points-a"].marker.line.width == 0 and drawn["points-b"].marker.line.width > 0
    assert drawn["points-b"].marker.color == "rgba(255,255,255,0)"
    assert drawn["points-a"].marker.color != drawn["points-b"].marker.color


def test_points_and_lines_are_in_milliamperes_per_square_centimetre():
    drawn = traces(pair_figure(A, B))
    np.testing.assert_allclose(drawn["points-a"].y, 1e3 * LIT.current)
    np.testing.assert_allclose(drawn["model-b"].y, 1e3 * OTHER_CELL.current(drawn["model-b"].x), rtol=1e-9)
    assert len(drawn["what-if"].x) == 0


def test_normalised_curves_meet_the_axes_at_one():
    figure = pair_figure(A, B, normalised=True)
    assert (figure.layout.xaxis.title.text, figure.layout.yaxis.title.text) == ("V / Voc", "J / Jsc")
    for uid, sweep in (("points-a", LIT), ("points-b", OTHER)):
        trace, marks = traces(figure)[uid], measure(sweep)
        np.testing.assert_allclose(trace.x, sweep.voltage / marks.voc.value)
        assert trace.y[0] == pytest.approx(1.0, abs=2e-3)
        assert np.interp(1.0, trace.x, trace.y) == pytest.approx(0.0, abs=1e-2)


def test_a_density_and_a_current_share_only_the_normalised_axes():
    amperes = Side(AMPERES, CELL.scaled(0.1), "C")
    with pytest.raises(ValueError, match="share an axis"):
        pair_figure(A, amperes)
    both = traces(pair_figure(A, amperes, normalised=True))
    np.testing.assert_allclose(np.max(both["points-a"].y), np.max(both["points-b"].y), rtol=1e-2)


def test_the_view_holds_both_curves():
    figure = pair_figure(A, Side(sweep_of(replace(CELL, photocurrent=0.03), "large"), None, "large"))
    low, high = figure.layout.yaxis.range
    assert low < 0 and 30 < high < 40
    assert figure.layout.xaxis.range[0] < 0


def test_a_side_without_model_has_points_and_no_line():
    drawn = traces(pair_figure(A, Side(OTHER, None, "B")))
    assert len(drawn["model-b"].x) == 0 and len(drawn["points-b"].x) == OTHER.voltage.size


@pytest.mark.parametrize("normalised", [False, True])
def test_a_what_if_that_moves_nothing_lies_on_the_curve_of_a(normalised):
    drawn = traces(pair_figure(A, B, normalised=normalised))["model-a"]
    x, y = what_if_line(A, CELL, normalised)
    np.testing.assert_allclose(x, drawn.x, atol=1e-6)
    np.testing.assert_allclose(y, drawn.y, atol=1e-6)


def test_names_are_text_and_no_markup():
    assert traces(pair_figure(A, B))["points-a"].customdata[0][0] == "K &lt;1&gt;"


def test_the_bars_add_up_to_the_bar_that_says_together():
    rest = -0.07
    total = sum(MANY.values()) + rest
    bars = traces(shares_figure(MANY, total, rest=rest))["shares"]
    assert list(bars.y) == [*(m.loss for m in MECHANISMS), "not in the model", "together"]
    assert sum(bars.x[:-1]) == pytest.approx(bars.x[-1], abs=1e-12)
    assert dict(zip(PARAMETERS, bars.x, strict=False)) == MANY


def test_each_bar_has_the_hue_and_hatch_of_its_mechanism():
    bars = traces(shares_figure(MANY, sum(MANY.values())))["shares"]
    assert list(bars.marker.color[:5]) == [m.hue for m in MECHANISMS]
    assert list(bars.marker.pattern.shape[:5]) == [m.hatch for m in MECHANISMS]
    assert "not in the model" not in bars.y


def test_whiskers_span_the_intervals_and_words_stand_beyond_them():
    intervals = {name: (share - 0.3, share + 0.2) for name, share in MANY.items() if name != "shunt_resistance"}
    drawn = traces(shares_figure(MANY, sum(MANY.values()), intervals=intervals))
    whiskers, words = drawn["whiskers"], drawn["share-words"]
    assert list(whiskers.y) == [m.loss for m in MECHANISMS if m.parameter in intervals]
    ends = zip(whiskers.x, whiskers.error_x.arrayminus, whiskers.error_x.array, strict=True)
    assert [(v - down, v + up) for v, down, up in ends] == [pytest.approx(span) for span in intervals.values()]
    for place, name in enumerate(intervals):
        left = MANY[name] < 0
        assert words.textposition[place] == ("middle left" if left else "middle right")
        assert words.x[place] == pytest.approx(intervals[name][0 if left else 1])
    low, high = shares_figure(MANY, 0.0, intervals={"ideality": (-9.0, 9.0)}).layout.xaxis.range
    assert low < -0.0 < 9.0 < high


def test_without_intervals_there_are_no_whiskers_and_the_words_are_the_values():
    drawn = traces(shares_figure({**dict.fromkeys(PARAMETERS, 0.0), "ideality": -1.2345}, -1.2345))
    assert len(drawn["whiskers"].x) == 0
    assert [text.strip() for text in drawn["share-words"].text] == ["0.00", "0.00", "−1.23", "0.00", "0.00", "−1.23"]
