"""Everything that the mouse can do, by keys; and the fields and switches of the dials."""

import pytest
from playwright.sync_api import expect

from core.dials import dial_ranges
from core.diode import PARAMETERS
from tests.browser.loading import FEW, LIT, LIT_MODEL, add_sample
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
