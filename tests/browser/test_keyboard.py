"""Everything that the mouse can do on the bench and in the tray, by keys; and the fields and switches of the dials."""

import json
import math

import numpy as np
import pytest
from playwright.sync_api import expect

from core.dials import dial_ranges
from core.diode import PARAMETERS
from tests.browser.loading import (
    DARK,
    DARK_MODEL,
    FEW,
    LIT,
    LIT_MODEL,
    add_sample,
)
from tests.browser.tab import Tab


@pytest.fixture
def lit(running, workspace, open_tab) -> Tab:
    add_sample(running.store, workspace, LIT, LIT_MODEL)
    return open_tab()


@pytest.fixture
def three(running, workspace, open_tab) -> Tab:
    for name in FEW:
        add_sample(running.store, workspace, name)
    return open_tab()


def tab_to(tab: Tab, selector: str) -> None:
    for _ in range(100):
        tab.page.keyboard.press("Tab")
        if tab.page.evaluate("(selector) => document.activeElement.matches(selector)", selector):
            return
    raise AssertionError(f"the Tab key does not reach {selector}")


def test_arrow_keys_move_a_grip_and_one_step_follows_the_rest(lit):
    keyboard, revision = lit.page.keyboard, lit.stored.revision
    before, start = lit.model, lit.grip("photocurrent")
    tab_to(lit, ".grip[data-parameter=photocurrent]")
    for _ in range(3):
        keyboard.press("ArrowDown")
    keyboard.press("Shift+ArrowDown")
    assert lit.stored.revision == revision, "nothing is kept before the keys rest"
    lit.until("moved", revision)
    lit.settle()
    assert lit.stored.revision == revision + 1
    assert abs(lit.grip("photocurrent").y - start.y - (3 * 2 + 20)) < 2
    assert lit.model.photocurrent < before.photocurrent
    lit.assert_agreement()


def test_escape_gives_a_drag_up_and_restores_everything(lit):
    revision, start = lit.stored.revision, lit.grip("series_resistance")
    numbers = [lit.number(p) for p in PARAMETERS]
    lit.press(start)
    lit.move(start + (-25, 0))
    lit.until("followed")
    assert lit.number("series_resistance") != numbers[3]
    lit.page.keyboard.press("Escape")
    lit.release()
    lit.settle()
    assert [lit.number(p) for p in PARAMETERS] == numbers
    assert lit.grip("series_resistance").distance(start) < 0.6
    assert lit.stored.revision == revision
    lit.assert_agreement()


def test_a_slider_moves_by_keys_and_a_field_takes_a_number(lit):
    slider = lit.dial("ideality").locator("input[type=range]")
    span = dial_ranges(lit.sweep)["ideality"]
    before = span.fraction(lit.model.ideality)
    slider.focus()
    with lit.one_change():
        slider.press("ArrowRight")
    assert span.fraction(lit.model.ideality) - before == pytest.approx(0.001, abs=0.0006)
    lit.assert_agreement()

    field = lit.dial("saturation_current").locator("input[type=text]")
    field.fill("1.2e-9")
    with lit.one_change():
        field.press("Enter")
    assert lit.model.saturation_current == pytest.approx(1.2e-12, rel=1e-12)
    assert field.input_value() == "1.2e-09"
    lit.assert_agreement()

    revision = lit.stored.revision
    field.fill("much")
    field.press("Enter")
    lit.until("says", "“much” is not a number")
    expect(field).to_have_value("1.2e-09")
    lit.settle()
    assert lit.stored.revision == revision
    lit.assert_agreement()


def test_shift_with_the_keys_of_a_slider_keeps_jsc_and_voc_and_without_it_they_go(lit):
    slider = lit.dial("series_resistance").locator("input[type=range]")
    slider.focus()
    before = lit.model.landmarks()
    with lit.one_change():
        slider.press("Shift+ArrowRight")
    kept = lit.model.landmarks()
    assert lit.model.series_resistance > LIT_MODEL.series_resistance
    assert (kept.jsc, kept.voc) == (pytest.approx(before.jsc, rel=1e-6), pytest.approx(before.voc, rel=1e-6))
    assert lit.model.saturation_current != LIT_MODEL.saturation_current, "it followed"
    lit.assert_agreement()
    follower = lit.model.saturation_current
    with lit.one_change():
        slider.press("ArrowRight")
    assert lit.model.saturation_current == follower
    lit.assert_agreement()


def test_shift_with_enter_keeps_jsc_and_voc_for_a_number_and_leaving_the_field_does_not(lit):
    field = lit.dial("ideality").locator("input[type=text]")
    before = lit.model.landmarks()
    field.fill("1.8")
    with lit.one_change():
        field.press("Shift+Enter")
    kept = lit.model.landmarks()
    assert lit.model.ideality == 1.8
    assert (kept.jsc, kept.voc) == (pytest.approx(before.jsc, rel=1e-6), pytest.approx(before.voc, rel=1e-6))
    follower = lit.model.saturation_current
    field.fill("1.7")
    with lit.one_change():
        field.press("Shift+Tab")
    assert (lit.model.ideality, lit.model.saturation_current) == (1.7, follower)
    lit.assert_agreement()


RANGES = "() => JSON.stringify([sweepbench.graph().layout.xaxis.range, sweepbench.graph().layout.yaxis.range])"


def ranges(tab: Tab) -> tuple[list[float], list[float]]:
    return tuple(json.loads(tab.page.evaluate(RANGES)))


def press_and_see(tab: Tab, key: str) -> tuple[list[float], list[float]]:
    """Press a key that changes the view, wait until it has, and return the new ranges."""
    before = tab.page.evaluate(RANGES)
    tab.page.keyboard.press(key)
    tab.until("ranged", before)
    tab.settle()
    return ranges(tab)


def width(span: list[float]) -> float:
    return span[1] - span[0]


@pytest.mark.parametrize(("name", "model"), [(LIT, LIT_MODEL), (DARK, DARK_MODEL)], ids=["lit", "dark, logarithmic"])
def test_zoom_pan_and_whole_view_by_keys(running, workspace, open_tab, name, model):
    add_sample(running.store, workspace, name, model)
    tab = open_tab()
    start = ranges(tab)
    closer = press_and_see(tab, "+")
    for now, before in zip(closer, start, strict=True):
        assert width(now) == pytest.approx(0.8 * width(before)) and sum(now) == pytest.approx(sum(before))
    tab.assert_agreement()

    tab_to(tab, ".plot-room")
    for key, moved in (("Shift+ArrowRight", (0.1, 0)), ("Shift+ArrowUp", (0, 0.1)), ("Shift+ArrowLeft", (-0.1, 0)), ("Shift+ArrowDown", (0, -0.1))):
        before = ranges(tab)
        after = press_and_see(tab, key)
        for now, then, share in zip(after, before, moved, strict=True):
            assert np.subtract(now, then) == pytest.approx([share * width(then)] * 2, abs=1e-9)
        tab.assert_agreement()
    assert press_and_see(tab, "-") == tuple(pytest.approx(span) for span in start)

    # Zoomed at a grip, the grip stays where it is.
    grip = next(parameter for parameter in ("series_resistance", "saturation_current") if parameter in tab.grips_in_sight())
    tab_to(tab, f".grip[data-parameter={grip}]")
    place = tab.grip(grip)
    press_and_see(tab, "+")
    assert tab.grip(grip).distance(place) < 1
    tab.assert_agreement()
    tab.page.keyboard.press("0")
    tab.until("ranges", json.dumps(start, separators=(",", ":")))
    tab.settle()
    tab.assert_agreement()


def test_points_are_left_out_and_taken_back_by_keys(lit):
    keyboard, sweep = lit.page.keyboard, lit.sweep
    order = np.argsort(sweep.voltage)
    marker = lit.find(".point-marker")
    told = marker.locator("span")

    def excluded() -> set[int]:
        return set(lit.stored.fit(lit.entry).settings.excluded)

    keyboard.press("e")
    expect(told).to_have_text(f"1 of {len(order)}: {sweep.voltage[order[0]]:.4f} V, {1e3 * sweep.current[order[0]]:#.4g} mA cm⁻², used".replace("-", "−"))
    for _ in range(3):
        keyboard.press("ArrowRight")
    keyboard.press("PageUp")
    keyboard.press("ArrowLeft")
    expect(told).to_contain_text(f"13 of {len(order)}")
    with lit.one_change():
        keyboard.press("Space")
    assert excluded() == {int(order[12])}
    expect(told).to_contain_text("left out")
    box = marker.bounding_box()
    place = lit.pixel(sweep.voltage[order[12]], sweep.current[order[12]] * lit.factor())
    assert math.hypot(box["x"] - place.x, box["y"] - place.y) < 1, "the marker stands on its point"

    for _ in range(4):
        keyboard.press("ArrowRight")
    with lit.one_change():
        keyboard.press("Shift+Space")
    assert excluded() == {int(one) for one in order[12:17]}
    with lit.one_change():
        keyboard.press("Space")
    assert excluded() == {int(one) for one in order[12:16]}, "a point that is out is taken back"

    keyboard.press("End")
    expect(told).to_contain_text(f"{len(order)} of {len(order)}")
    press_and_see(lit, "+")
    box, place = marker.bounding_box(), lit.pixel(sweep.voltage[order[-1]], sweep.current[order[-1]] * lit.factor())
    assert math.hypot(box["x"] - place.x, box["y"] - place.y) < 1, "it follows the zoom"
    keyboard.press("Escape")
    expect(marker).to_have_count(0)
    revision = lit.stored.revision
    keyboard.press("Space")
    keyboard.press("ArrowLeft")
    lit.settle()
    assert lit.stored.revision == revision
    with lit.one_change():
        keyboard.press("Control+z")
    assert excluded() == {int(one) for one in order[12:17]}


def test_every_key_of_the_help_sheet_is_listed_and_the_sheet_opens_and_closes_by_keys(lit):
    sheet = lit.find(".help")
    button = lit.find("[data-act=help]").first
    button.focus()
    button.press("Enter")
    expect(sheet).to_be_visible()
    listed = sheet.locator("dt").all_inner_texts()
    assert {"+ −", "0", "E", "Shift and arrow keys on the plot", "Ctrl+Z, Ctrl+Shift+Z"} <= set(listed)
    lit.page.keyboard.press("Escape")
    expect(sheet).to_be_hidden()


def test_a_held_parameter_locks_its_grip_and_those_that_it_would_have_to_follow(lit):
    switch = lit.dial("saturation_current").locator(".hold")
    with lit.one_change():
        switch.click()
    assert switch.get_attribute("aria-checked") == "true"
    assert lit.stored.fit(lit.entry).settings.hold == {"saturation_current"}
    locked = lit.find("#overlay .grip.locked").evaluate_all("(all) => all.map((grip) => grip.dataset.parameter)")
    assert sorted(locked) == ["ideality", "saturation_current", "series_resistance", "shunt_resistance"]

    model, revision = lit.model, lit.stored.revision
    for parameter, sentence in (("saturation_current", "J0 is held."), ("series_resistance", "because J0 is held")):
        lit.pull(parameter, (-20, 10))
        lit.until("says", sentence)
    lit.settle()
    assert (lit.model, lit.stored.revision) == (model, revision)
    lit.assert_agreement()

    tab_to(lit, ".grip[data-parameter=saturation_current]")
    with lit.one_change():
        lit.page.keyboard.press("h")
    assert lit.stored.fit(lit.entry).settings.hold == frozenset()
    assert lit.find("#overlay .grip.locked").count() == 0


def test_single_keys_guess_refine_undo_and_choose_the_strip(three):
    keyboard = three.page.keyboard
    assert three.find("#overlay .grip").count() == 0
    with three.one_change():
        keyboard.press("g")
    guess = three.model
    three.assert_agreement()
    with three.one_change():
        keyboard.press("r")
    refined = three.model
    assert refined != guess
    assert "rms residual" in three.text("#fit-line")
    three.assert_agreement()
    with three.one_change():
        keyboard.press("Control+z")
    assert three.model == guess
    three.assert_agreement()
    with three.one_change():
        keyboard.press("Control+Shift+Z")
    assert three.model == refined
    three.assert_agreement()

    for key, strip, label in (("2", "log", "semi-log"), ("3", "ideality", "local ideality"), ("1", "residuals", "residuals")):
        keyboard.press(key)
        three.until("strip", strip)
        three.settle()
        chosen = three.find("[data-strip][aria-checked=true]")
        assert chosen.all_inner_texts() == [label]
        voltage, _ = three.trace("strip-model")
        assert len(voltage) > 20
        three.assert_agreement()


def test_the_tray_by_keys(three):
    keyboard = three.page.keyboard
    order = [entry.id for entry in three.stored.in_tray_order()]
    assert three.entry == order[0]
    three.find("#tray-list").focus()

    keyboard.press("ArrowDown")
    three.until("active", order[1])
    keyboard.press("End")
    three.until("active", order[-1])
    keyboard.press("ArrowUp")
    three.until("active", order[-2])
    three.settle()
    assert three.find(".sweep[aria-selected=true]").get_attribute("data-entry") == order[-2]

    keyboard.press("F2")
    keyboard.type("brine side")
    with three.one_change():
        keyboard.press("Enter")
    assert three.stored.entries[order[-2]].name == "brine side"
    three.until("row_named", "brine side")

    keyboard.press("Shift+F2")
    keyboard.type("Brine")
    with three.one_change():
        keyboard.press("Enter")
    assert three.stored.devices[three.stored.entries[order[-2]].device].name == "Brine"

    keyboard.press("Home")
    three.until("active", order[0])
    keyboard.press("Space")  # the active sweep stays laid out when another one takes the bench
    keyboard.press("ArrowDown")
    three.until("active", order[1])
    three.until("trace", "overlay0")
    three.settle()
    voltage, _ = three.trace("overlay0")
    assert voltage[0] == three.stored.sweep(order[0]).voltage[0]

    with three.one_change():
        keyboard.press("Delete")
    assert set(three.stored.entries) == {*order} - {order[1]}
    three.until("rows", 2)
    three.until("says", "Undo brings it back")
    with three.one_change():
        keyboard.press("Control+z")
    three.until("rows", 3)
    assert set(three.stored.entries) == {*order}
