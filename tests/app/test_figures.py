"""The bench's figure: what is drawn on which axis, framed how, and harmless whatever a file is called."""

import json
import re
from dataclasses import replace

import numpy as np
import pytest

from app.curves import STRIPS
from app.figures.bench import bench_figure, empty_figure, plot_ranges
from app.layout.bench import PLOT_CONFIG
from app.units import ABSOLUTE, DENSITY
from tests.app.benches import AMPERES, CELL, IN_THE_DARK, LIT, OTHER, REVERSE, sweep_of

LINES = ("model", "power", "corner", "strip-model")
DARK_CELL = replace(CELL, photocurrent=0.0)


def traces(figure):
    by_uid = {trace.uid: trace for trace in figure.data}
    assert len(by_uid) == len(figure.data)
    return by_uid


def test_the_measured_points_are_filled_marks_where_they_were_measured():
    points = traces(bench_figure(LIT, CELL))["points"]
    np.testing.assert_array_equal(points.x, LIT.voltage)
    np.testing.assert_allclose(points.y, 1e3 * LIT.current)
    assert points.mode == "markers" and not points.marker.color.startswith("rgba")


def test_each_line_hangs_on_its_axis():
    drawn = traces(bench_figure(LIT, CELL))
    assert {uid: drawn[uid].yaxis or "y" for uid in (*LINES, "strip-points")} == {
        "model": "y",
        "power": "y2",
        "corner": "y",
        "strip-model": "y3",
        "strip-points": "y3",
    }
    assert all(len(drawn[uid].x) for uid in LINES)


@pytest.mark.parametrize("sweep", [LIT, IN_THE_DARK], ids=["lit", "dark"])
@pytest.mark.parametrize("strip", STRIPS)
def test_without_a_model_the_same_traces_wait_empty(sweep, strip):
    with_model, without = (traces(bench_figure(sweep, model, strip=strip)) for model in (CELL, None))
    assert list(with_model) == list(without)
    assert all(len(without[uid].x) == 0 for uid in LINES)


def test_sweeps_of_the_same_device_are_hollow_and_those_of_others_thin_lines():
    drawn = traces(bench_figure(LIT, CELL, companions=(REVERSE,), overlay=(OTHER,)))
    companion, overlay = drawn["companion0"], drawn["overlay0"]
    assert companion.mode == "markers" and companion.marker.color == "rgba(255,255,255,0)"
    assert companion.marker.line.width > 0
    np.testing.assert_allclose(companion.y, 1e3 * REVERSE.current)
    assert overlay.mode == "lines" and overlay.name == "other"
    assert list(drawn)[-1] == "strip-model"  # the active sweep and its model lie on top


def test_only_what_the_axes_can_hold_is_laid_beside():
    drawn = traces(bench_figure(LIT, CELL, overlay=(AMPERES, IN_THE_DARK, OTHER)))
    assert [uid for uid in drawn if uid.startswith("overlay")] == ["overlay0"]
    assert drawn["overlay0"].name == "other"


@pytest.mark.parametrize(
    ("sweep", "current", "power"),
    [(LIT, "current density J (mA cm⁻²)", "power (mW cm⁻²)"), (AMPERES, "current I (A)", "power (W)")],
    ids=["with area", "without"],
)
def test_the_axes_say_what_they_show(sweep, current, power):
    layout = bench_figure(sweep, None).layout
    assert layout.xaxis.title.text == "voltage (V)"
    assert (layout.yaxis.title.text, layout.yaxis2.title.text) == (current, power)


def test_a_dark_sweep_is_drawn_over_decades_with_the_size_of_its_current():
    figure = bench_figure(IN_THE_DARK, DARK_CELL)
    assert (figure.layout.yaxis.type, figure.layout.yaxis.title.text) == ("log", "|J| (mA cm⁻²), dark")
    np.testing.assert_allclose(traces(figure)["points"].y, -1e3 * IN_THE_DARK.current)
    assert figure.layout.yaxis2.title.text == ""


@pytest.mark.parametrize(("sweep", "units"), [(LIT, DENSITY), (AMPERES, ABSOLUTE)], ids=["with area", "without"])
def test_the_view_frames_the_part_that_delivers_power(sweep, units):
    (left, right), (bottom, top) = plot_ranges(sweep, units)
    assert left < 0 and CELL.landmarks().voc < right < 1.4 * CELL.landmarks().voc
    jsc = sweep.current.max() * units.current_factor
    assert jsc < top < 1.3 * jsc and -0.5 * jsc < bottom < 0


def test_the_view_of_a_dark_sweep_frames_its_decades():
    (left, right), (bottom, top) = plot_ranges(IN_THE_DARK, DENSITY)
    assert left < IN_THE_DARK.voltage.min() and right > IN_THE_DARK.voltage.max()
    size = np.log10(-1e3 * IN_THE_DARK.current)
    assert bottom < size.min() and size.max() < top


def test_a_sweep_that_never_delivers_power_is_framed_all_the_same():
    lowered = replace(LIT, current=LIT.current - 1.0)
    nothing = replace(LIT, current=np.zeros_like(LIT.current))
    for sweep in (lowered, nothing, replace(nothing, conditions=IN_THE_DARK.conditions)):
        for low, high in plot_ranges(sweep, DENSITY):
            assert np.isfinite([low, high]).all() and low < high


def test_zero_power_stands_at_the_height_of_zero_current():
    layout = bench_figure(LIT, CELL).layout
    current, power = layout.yaxis.range, layout.yaxis2.range
    assert current[0] / current[1] == pytest.approx(power[0] / power[1])
    assert power[1] > 1e3 * CELL.landmarks().pmp


@pytest.mark.parametrize("strip", STRIPS)
def test_the_strip_shows_what_was_chosen_on_an_axis_that_says_so(strip):
    figure = bench_figure(LIT, CELL, strip=strip)
    title = figure.layout.yaxis3.title.text
    assert title == {"residuals": "residual / noise", "log": "Jsc − J", "ideality": "local ideality"}[strip]
    assert (figure.layout.yaxis3.type == "log") == (strip == "log")
    assert (len(traces(figure)["strip-points"].x) > 0) == (strip != "residuals")


def test_the_users_zoom_lives_as_long_as_its_key():
    assert bench_figure(LIT, CELL, zoom_key="k").layout.uirevision == "k"


def test_no_more_points_are_drawn_than_can_be_seen():
    many = sweep_of(CELL, "many", points=20_000)
    drawn = traces(bench_figure(many, CELL, companions=(many,), overlay=(many,)))
    assert len(drawn["points"].x) == 1000
    assert len(drawn["companion0"].x) == len(drawn["overlay0"].x) == 150


PSEUDO = '<a href="https://example.org">K<sub>7</sub></a> %{x} <img src=x onerror=alert(1)>'


def test_names_from_files_are_harmless():
    """Plotly reads pseudo-HTML in names and templates; in customdata it shows text as it stands once that is escaped."""
    named = replace(LIT, name=PSEUDO)
    figure = bench_figure(named, CELL, companions=(named,), overlay=(named,))
    for trace in figure.data:
        trace = trace.to_plotly_json()
        assert "example.org" not in trace.get("hovertemplate", "")
        for row in trace.pop("customdata", ()):
            assert "<" not in row[0]
        assert "<a" not in json.dumps(trace, default=str) and "<img" not in json.dumps(trace, default=str)
    assert "example.org" not in figure.to_json().partition("\"layout\"")[2]


def test_a_figure_names_no_other_host():
    assert not re.search(r"https?://", bench_figure(LIT, CELL, companions=(REVERSE,)).to_json())
    assert PLOT_CONFIG["showSendToCloud"] is False


def test_the_empty_figure_has_the_axes_of_the_full_one():
    empty, full = empty_figure(), bench_figure(LIT, CELL)
    axes = {name for name in full.layout.to_plotly_json() if re.match(r"[xy]axis", name)}
    assert axes <= set(empty.layout.to_plotly_json())
    for axis in axes - {"xaxis"}:
        assert empty.layout[axis].domain == full.layout[axis].domain
    assert all(len(trace.x) == 0 for trace in empty.data)
