"""Zoom, pan and window size: the grips stay on the curve, by a mapping of their own."""

import json

import pytest

from core.diode import OneDiode
from tests.browser.loading import DARK, DARK_MODEL, LIT, LIT_MODEL, add_sample
from tests.browser.places import Place
from tests.browser.tab import Tab

RANGES = "() => JSON.stringify([sweepbench.graph().layout.xaxis.range, sweepbench.graph().layout.yaxis.range])"

# The page's mapping of some values, as places in the window.
MAPPED = """(values) => {
  const box = document.getElementById("overlay").getBoundingClientRect();
  return values.map(([x, y]) => [box.left + sweepbench.axis("x").pixel(x), box.top + sweepbench.axis("y").pixel(y)]);
}"""


def assert_in_place(tab: Tab) -> None:
    """The page's mapping agrees with frame and ranges, and the grips stand on the stored model."""
    frame = tab.frame()
    low, high = frame.y_range
    heights = [low + share * (high - low) for share in (0.03, 0.5, 0.97)]
    values = [
        (frame.x_range[0] + share * (frame.x_range[1] - frame.x_range[0]), 10**y if frame.logarithmic else y)
        for share, y in zip((0.05, 0.6, 0.9), heights, strict=True)
    ]
    for (x, y), value in zip(tab.page.evaluate(MAPPED, values), values, strict=True):
        assert Place(x, y).distance(frame.place(*value)) < 0.5
    assert len(tab.grips_in_sight()) >= 2
    tab.assert_agreement()


def empty_spot(tab: Tab) -> Place:
    frame = tab.frame()
    return Place(frame.left + 0.3 * frame.width, frame.top + 0.6 * frame.height)


@pytest.mark.parametrize(("name", "model"), [(LIT, LIT_MODEL), (DARK, DARK_MODEL)], ids=["lit", "dark, logarithmic"])
def test_grips_stay_on_the_curve_through_zoom_pan_and_window_size(
    running, workspace, open_tab, name: str, model: OneDiode
):
    add_sample(running.store, workspace, name, model)
    tab = open_tab()
    assert_in_place(tab)
    assert tab.frame().logarithmic == (name == DARK)
    start, spot = tab.page.evaluate(RANGES), empty_spot(tab)

    tab.page.mouse.move(spot.x, spot.y)
    tab.page.mouse.wheel(0, -120)
    tab.until("ranged", start)
    tab.settle()
    zoomed = tab.page.evaluate(RANGES)
    (x_low, x_high), _ = json.loads(zoomed)
    assert x_high - x_low < json.loads(start)[0][1] - json.loads(start)[0][0]
    assert_in_place(tab)

    in_sight = tab.grips_in_sight()
    grip = next(parameter for parameter in ("series_resistance", "saturation_current") if parameter in in_sight)
    held = in_sight[grip]
    tab.press(spot)
    tab.move(spot + (-40, 25))
    tab.until("grip_at", [grip, held.x - 40, held.y + 25])  # while the hand still pans
    tab.release()
    tab.until("ranged", zoomed)
    tab.settle()
    assert_in_place(tab)

    panned = tab.page.evaluate(RANGES)
    over = tab.grip(grip)
    tab.page.mouse.move(over.x, over.y)
    tab.page.mouse.wheel(0, 60)  # over a grip it zooms the plot beneath
    tab.until("ranged", panned)
    tab.settle()
    assert_in_place(tab)

    tab.pull(grip, (-12, 8))
    tab.settle()
    assert tab.model != model
    assert_in_place(tab)

    tab.page.mouse.dblclick(spot.x, spot.y)
    tab.until("ranges", start)
    tab.settle()
    assert_in_place(tab)

    width = tab.frame().width
    tab.page.set_viewport_size({"width": 1500, "height": 800})
    tab.until("frame_is_not", width)
    tab.settle()
    assert_in_place(tab)


def test_every_screen_opens_by_its_link_and_the_bench_comes_back_as_it_was(running, workspace, open_tab):
    add_sample(running.store, workspace, LIT, LIT_MODEL)
    add_sample(running.store, workspace, "K11.csv", LIT_MODEL)
    tab = open_tab()
    start = tab.page.evaluate(RANGES)
    screens = tab.find("nav [data-screen]").evaluate_all("(all) => all.map((link) => link.dataset.screen)")
    assert "bench" in screens and len(screens) == len(set(screens)) > 1
    for screen in [*screens, "bench"]:
        tab.find(f"nav [data-screen={screen}]").click()
        tab.until("screen", screen)
        assert tab.find(f".view[data-view={screen}]").is_visible()
        assert tab.find(".view:visible").count() == 1
    tab.settle()
    assert tab.page.evaluate(RANGES) == start
    assert_in_place(tab)
