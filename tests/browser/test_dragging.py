"""Each handle dragged by the real mouse: pixels followed, its parameter changed, the rest kept."""

import math
from dataclasses import dataclass, replace

import pytest

from core.diode import PARAMETERS
from tests.browser.loading import DARK, DARK_MODEL, LIT, LIT_MODEL, add_sample
from tests.browser.places import Place
from tests.browser.tab import Tab


@pytest.fixture
def lit(running, workspace, open_tab) -> Tab:
    add_sample(running.store, workspace, LIT, LIT_MODEL)
    return open_tab()


@pytest.fixture
def dark(running, workspace, open_tab) -> Tab:
    add_sample(running.store, workspace, DARK, DARK_MODEL)
    return open_tab()


@dataclass(frozen=True)
class Pull:
    """A drag [px], and what comes of it; the table of handles in DESIGN.md, for this test's own reading."""

    parameter: str
    by: tuple[float, float]
    along: str  # x, y, or both on the ray
    grows: bool
    keeps: tuple[str, ...]
    jsc_and_voc: bool = False


RESISTANCES = ("series_resistance", "shunt_resistance")
LIT_PULLS = (
    Pull("photocurrent", (3, -14), "y", True, ("saturation_current", "ideality", *RESISTANCES)),
    Pull("saturation_current", (-30, 4), "x", True, ("photocurrent", "ideality", *RESISTANCES)),
    Pull("ideality", (-16, 0), "ray", True, RESISTANCES, True),
    Pull("series_resistance", (-15, 5), "x", True, ("ideality", "shunt_resistance"), True),
    Pull("shunt_resistance", (5, 12), "y", False, ("ideality", "series_resistance"), True),
)
DARK_PULLS = (
    Pull("saturation_current", (2, -25), "y", True, ("ideality", *RESISTANCES)),
    Pull("ideality", (2, -14), "y", False, RESISTANCES),
    Pull("series_resistance", (2, 12), "y", True, ("saturation_current", "ideality", "shunt_resistance")),
    Pull("shunt_resistance", (2, -20), "y", False, ("saturation_current", "ideality", "series_resistance")),
)


def target(tab: Tab, pull: Pull) -> Place:
    """Where the pointer goes; on the ray it goes along the ray."""
    start = tab.grip(pull.parameter)
    if pull.along != "ray":
        return start + pull.by
    marks = tab.model.landmarks()
    origin, far = tab.pixel(0, 0), tab.pixel(marks.voc, marks.jsc * 1e3)
    return start + (pull.by[0], pull.by[0] * (far.y - origin.y) / (far.x - origin.x))


def shown_while_down(tab: Tab) -> list[str]:
    """The moving line and the numbers."""
    return [
        tab.find("#overlay .line.model").get_attribute("d"),
        *(tab.dial(p).locator("input[type=text]").input_value() for p in PARAMETERS),
        *(tab.metric(name) for name in ("jsc", "voc", "fill_factor")),
    ]


def drag_and_check(tab: Tab, pull: Pull) -> None:
    before, revision, start, end = tab.model, tab.stored.revision, tab.grip(pull.parameter), target(tab, pull)

    tab.press(start)
    tab.move(Place((start.x + end.x) / 2, (start.y + end.y) / 2))
    tab.until("followed")
    half_way = shown_while_down(tab)
    tab.move(end)
    tab.until("followed")
    whole_way = shown_while_down(tab)
    assert half_way[0] != whole_way[0]
    changed = PARAMETERS.index(pull.parameter) + 1
    assert half_way[changed] != whole_way[changed]
    if tab.sweep.lit:
        assert half_way[6:] != whole_way[6:]
    assert tab.find(".plot-room.live-on").count() == 1
    held = tab.grip(pull.parameter)
    assert tab.stored.revision == revision, "the live route wrote"
    tab.release()
    tab.settle()

    assert tab.stored.revision == revision + 1, "a whole drag is one step"
    for grip in (held, tab.grip(pull.parameter)) if tab.sweep.lit else (held,):
        if pull.along in ("x", "ray"):
            assert abs(grip.x - end.x) < 2
        if pull.along in ("y", "ray"):
            assert abs(grip.y - end.y) < 2
    after = tab.model
    assert (getattr(after, pull.parameter) > getattr(before, pull.parameter)) == pull.grows
    for name in pull.keeps:
        assert getattr(after, name) == getattr(before, name), name
    if pull.jsc_and_voc:
        old, new = before.landmarks(), after.landmarks()
        assert math.isclose(new.jsc, old.jsc, rel_tol=1e-6)
        assert math.isclose(new.voc, old.voc, rel_tol=1e-6)
    tab.assert_agreement()  # a dark grip then slides along the curve to its own place


def test_each_lit_handle_follows_the_mouse_and_keeps_what_it_should(lit):
    for pull in LIT_PULLS:
        drag_and_check(lit, pull)


def test_each_dark_handle_follows_the_mouse_and_keeps_what_it_should(dark):
    assert dark.find("#overlay .grip").count() == 4
    for pull in DARK_PULLS:
        drag_and_check(dark, pull)


def test_ten_quick_drags_end_in_agreement_with_one_undo_step_each(lit):
    start, revision = lit.model, lit.stored.revision
    ways = [(0, -9), (-12, 0), (-9, 6), (-8, 0), (0, 8)]
    for number in range(10):
        sign = 1 if number < 5 else -0.5
        x, y = ways[number % 5]
        lit.pull(PARAMETERS[number % 5], (sign * x, sign * y), steps=3)
    lit.settle()
    lit.assert_agreement()
    assert lit.stored.revision == revision + 10
    end = lit.model

    for _ in range(10):
        with lit.one_change():
            lit.page.keyboard.press("Control+z")
    assert lit.model == start
    lit.assert_agreement()
    for _ in range(10):
        with lit.one_change():
            lit.page.keyboard.press("Control+Shift+Z")
    assert lit.model == end
    lit.assert_agreement()


def test_a_grip_pressed_while_a_step_is_on_its_way_leaves_the_figure_right(lit):
    """The step's answer arrives while the hand is down again and the hand then does nothing."""
    before = lit.stored.revision
    with lit.answers_held():
        lit.pull("photocurrent", (0, -14))
        lit.press(lit.grip("series_resistance"))
    lit.until("painted_revision", before + 1)
    lit.release()
    lit.settle()
    lit.assert_agreement()


def slide(tab: Tab, parameter: str, by: float) -> None:
    """The dial's slider dragged by the mouse [px]; the curve follows while the button is down."""
    slider, revision = tab.dial(parameter).locator("input[type=range]"), tab.stored.revision
    box, fraction, thumb = slider.bounding_box(), float(slider.input_value()), 12
    start = Place(box["x"] + thumb / 2 + fraction * (box["width"] - thumb), box["y"] + box["height"] / 2)
    tab.press(start)
    tab.move(start + (by / 2, 0))
    tab.until("followed")
    half_way = shown_while_down(tab)
    tab.move(start + (by, 0))
    tab.until("followed")
    whole_way = shown_while_down(tab)
    assert half_way[0] != whole_way[0]
    assert half_way[6:] != whole_way[6:]
    tab.release()
    tab.until("moved", revision)
    tab.settle()
    assert tab.stored.revision == revision + 1


def test_a_dial_moves_its_parameter_alone_and_with_shift_keeps_jsc_and_voc(lit):
    before = lit.model
    slide(lit, "series_resistance", 20)
    after = lit.model
    assert after.series_resistance > before.series_resistance
    assert replace(after, series_resistance=before.series_resistance) == before
    lit.assert_agreement()

    lit.page.keyboard.down("Shift")
    slide(lit, "ideality", 24)
    lit.page.keyboard.up("Shift")
    kept = lit.model
    assert kept.ideality > after.ideality
    assert kept.saturation_current > after.saturation_current
    assert math.isclose(kept.landmarks().jsc, after.landmarks().jsc, rel_tol=1e-6)
    assert math.isclose(kept.landmarks().voc, after.landmarks().voc, rel_tol=1e-6)
    lit.assert_agreement()


def test_a_drag_beyond_physics_stops_at_the_edge_and_says_so(lit):
    start = lit.grip("series_resistance")
    lit.press(start)
    lit.move(start + (200, 0))
    lit.until("followed")
    assert lit.text("#edge-line").startswith("Rs can go no further")
    lit.release()
    lit.settle()
    assert lit.model.series_resistance == 0
    lit.assert_agreement()
