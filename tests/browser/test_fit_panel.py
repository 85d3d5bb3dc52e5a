"""What the fit is asked and what it cannot tell: points left out, settings, intervals, models, estimates."""

import numpy as np
import pytest
from playwright.sync_api import expect

from app.curves import squeezed
from app.wording import number
from core.diode import PARAMETERS, OneDiode
from core.fit_problem import used
from core.fit_settings import FitSettings
from core.two_diode import TWO_DIODE_PARAMETERS, TwoDiode
from tests.browser.loading import LIT, LIT_MODEL, add_sample
from tests.browser.screens import assert_nothing_hangs_over, load, until
from tests.browser.tab import Tab

SIDE = ".view[data-view=bench] .side"


@pytest.fixture
def fitted(running, workspace, open_tab) -> Tab:
    load(running.store, workspace, LIT)
    tab = open_tab()
    open_panel(tab, "fit")
    return tab


def open_panel(tab: Tab, panel: str) -> None:
    tab.find(f"[data-panel-choice={panel}]").click()
    until(tab, "sweepbench.scene.panel === argument && !document.querySelector(`.panel[data-panel=${argument}]`).hidden", panel)
    tab.settle()


def settings(tab: Tab) -> FitSettings:
    return tab.stored.fit(tab.entry).settings


def setting(tab: Tab, name: str):
    return tab.find(f"[data-setting={name}] :is(input, select)")


def draw_box(tab: Tab, low: tuple[float, float], high: tuple[float, float]) -> None:
    start, end = tab.pixel(*low), tab.pixel(*high)
    tab.press(start)
    tab.move(end)
    expect(tab.find(".leave-out-box")).to_be_visible()
    tab.release()


def interval(tab: Tab, name: str) -> tuple[float, float]:
    words = tab.find("#intervals-table p", ).filter(has_text=name).locator("span").nth(1).inner_text()
    low, high = words.split(" to ")
    return float(low), float(high.split()[0])


def test_a_drawn_box_leaves_points_out_and_takes_them_back(fitted):
    keyboard, sweep = fitted.page.keyboard, fitted.sweep
    fitted.find("#tray-list").focus()
    keyboard.press("e")
    switch = fitted.find("[data-act=leave-out]")
    expect(switch).to_have_attribute("aria-checked", "true")
    top = 1.06e3 * sweep.current.max()
    with fitted.one_change():
        draw_box(fitted, (0.12, 0.9 * top), (0.36, top))
    chosen = tuple(np.flatnonzero((sweep.voltage > 0.12) & (sweep.voltage < 0.36)))
    assert len(chosen) > 5 and settings(fitted).excluded == chosen
    size = sweep.voltage.size
    assert fitted.text("#left-out-line") == f"{len(chosen)} of {size} points left out"
    x, _ = fitted.trace("left-out")
    np.testing.assert_allclose(np.sort(x), np.sort(sweep.voltage[list(chosen)]), atol=1e-9)

    with fitted.one_change():
        draw_box(fitted, (0.24, 0.9 * top), (0.36, top))
    back = settings(fitted).excluded
    assert back == tuple(i for i in chosen if sweep.voltage[i] < 0.24)
    keyboard.press("Escape")
    expect(switch).to_have_attribute("aria-checked", "false")
    with fitted.one_change():
        keyboard.press("Control+z")
    assert settings(fitted).excluded == chosen
    with fitted.one_change():
        fitted.button("use all").click()
    assert settings(fitted).excluded == ()
    assert fitted.text("#left-out-line") == "all points used"
    fitted.assert_agreement()


def test_window_weights_and_loss_are_kept_and_used_by_the_next_fit(fitted):
    for name, value in (("weights", "effective"), ("loss", "robust")):
        with fitted.one_change():
            setting(fitted, name).select_option(value)
    noise = setting(fitted, "voltage_noise")
    expect(noise).to_be_visible()
    for field, text in ((noise, "0.5"), (setting(fitted, "window_low"), "0.1"), (setting(fitted, "window_high"), "1,05")):
        with fitted.one_change():
            field.fill(text)
            field.press("Enter")
    asked = settings(fitted)
    assert (asked.weights, asked.loss, asked.window, asked.voltage_noise) == ("effective", "robust", (0.1, 1.05), 5e-4)
    left = int(np.sum(~used(fitted.sweep, asked)))
    assert fitted.text("#left-out-line") == f"{left} of {fitted.sweep.voltage.size} points left out"
    with fitted.one_change():
        fitted.button("refine").click()
    found = fitted.stored.refined(fitted.entry)
    assert found.settings == asked and found.points == fitted.sweep.voltage.size - left
    assert f"over {found.points} points" in fitted.text("#fit-line")

    revision = fitted.stored.revision
    field = setting(fitted, "window_low")
    field.fill("2")
    field.press("Enter")
    fitted.until("says", "from a lower to a higher voltage")
    assert fitted.stored.revision == revision
    fitted.settle()


def test_weights_are_taken_from_a_file_that_gives_standard_deviations(fitted, files):
    without = setting(fitted, "weights").locator("option", has_text="from the file")
    assert without.is_disabled(), "the sample's file has no such column"
    device, random = OneDiode(0.021, 2e-13, 1.7, 4.0, 1500), np.random.default_rng(4)
    voltage = np.arange(-0.1, 1.13, 0.01)
    error = 2e-5 * np.exp(random.normal(0.0, 1.0, voltage.size))
    current = device.current(voltage) + error * random.standard_normal(voltage.size)
    rows = (f"{v:.4f},{1e3 * j:.6f},{1e3 * s:.6f}" for v, j, s in zip(voltage, current, error, strict=True))
    heading = "Voltage (V),Current density (mA/cm2),Std of current density (mA/cm2)\n"
    (files / "averaged.csv").write_text(heading + "\n".join(rows) + "\n", encoding="utf-8")
    before = len(fitted.rows())
    fitted.drop(files / "averaged.csv")
    fitted.until("rows", before + 1)
    (entry,) = [one.id for one in fitted.stored.entries.values() if one.source_name == "averaged.csv"]
    fitted.choose(entry)
    assert any("standard deviation of each current" in note for note in fitted.sweep.notes)
    with fitted.one_change():
        setting(fitted, "weights").select_option("from the file")
    with fitted.one_change():
        fitted.button("refine").click()
    found = fitted.stored.refined(entry)
    assert found.weights == "from the file" and settings(fitted).weights == "from the file"
    assert f"χ² per degree of freedom {number(found.chi_square, digits=3)}" in fitted.text("#fit-line")
    assert_nothing_hangs_over(fitted, SIDE)
    _, drawn = fitted.trace("strip-model")
    residual = (fitted.sweep.current - found.model.current(fitted.sweep.voltage)) / fitted.sweep.current_error
    np.testing.assert_allclose(drawn, squeezed(residual), atol=2e-3)


def test_intervals_follow_the_level_and_correlation_is_a_picture(fitted):
    expect(fitted.find("#intervals-table")).to_contain_text("95 % intervals")
    low, high = interval(fitted, "ideality")
    assert low < fitted.model.ideality < high
    level = setting(fitted, "confidence")
    with fitted.one_change():
        level.fill("68")
        level.press("Enter")
    expect(fitted.find("#intervals-table")).to_contain_text("68 % intervals")
    narrow = interval(fitted, "ideality")
    assert low < narrow[0] < narrow[1] < high

    cells = fitted.find("#correlation td").all_inner_texts()
    assert len(cells) == 25 and [cells[6 * i] for i in range(5)] == [""] * 5
    matrix = fitted.stored.refined(fitted.entry).correlation
    assert float(cells[7].replace("−", "-")) == pytest.approx(matrix[1, 2], abs=0.0051)
    inks = fitted.find("#correlation td").evaluate_all("(all) => all.map((cell) => getComputedStyle(cell).backgroundColor)")
    assert len(set(inks)) > 3, "the stronger the correlation, the darker its cell"
    assert_nothing_hangs_over(fitted, SIDE)


def test_estimates_stand_beside_the_fit_with_their_methods(fitted):
    open_panel(fitted, "estimates")
    assert "V = 0" in fitted.text("#plateau-line")
    rows = fitted.find("#estimate-rows tr[data-parameter]")
    assert rows.count() >= 4
    assert fitted.find("#estimate-rows .method").count() == rows.count()
    assert fitted.find("#derived-rows tr").count() >= 4
    assert_nothing_hangs_over(fitted, SIDE)
    open_panel(fitted, "numbers")
    expect(fitted.find("#estimate-rows")).to_be_hidden()


def test_two_diodes_are_switched_to_refined_dragged_and_left_again(fitted):
    with fitted.one_change():
        setting(fitted, "model").select_option("two diodes")
    assert isinstance(fitted.model, TwoDiode)
    dials = "(all) => all.map((dial) => dial.dataset.parameter)"
    assert fitted.find("#dials .dial").evaluate_all(dials) == list(TWO_DIODE_PARAMETERS)
    assert fitted.find("#dials .dial.held").evaluate_all(dials) == ["ideality_1", "ideality_2"]
    with fitted.one_change():
        fitted.button("refine").click()
    found = fitted.stored.refined(fitted.entry)
    assert found.settings.model == "two diodes" and fitted.model == found.model
    assert not {"ideality_1", "ideality_2"} & set(found.free)
    with fitted.one_change():
        fitted.pull("series_resistance", (-10, 0))
        fitted.until("moved", fitted.stored.revision - 1)
    assert fitted.model.series_resistance > found.model.series_resistance
    with fitted.one_change():
        setting(fitted, "model").select_option("one diode")
    assert fitted.find("#dials .dial").evaluate_all(dials) == list(PARAMETERS)
    fitted.assert_agreement()


def test_two_diodes_with_their_ideality_free_are_refined_by_a_worker_and_so_are_their_intervals(fitted):
    with fitted.one_change():
        setting(fitted, "model").select_option("two diodes")
    for parameter in ("ideality_1", "ideality_2"):
        with fitted.one_change():
            fitted.dial(parameter).locator(".hold").click()
    with fitted.one_change():
        fitted.button("refine").click()
    found = fitted.stored.refined(fitted.entry)
    assert {"ideality_1", "ideality_2"} <= set(found.free)
    rows = fitted.find("#intervals-table p")
    expect(rows).to_have_count(len(found.free) + 1, timeout=60_000)  # and the sentence below them
    expect(rows.last).to_contain_text("profile likelihood")


def test_what_is_not_determined_is_said_beside_the_hold_and_not_over_it(running, workspace, open_tab):
    add_sample(running.store, workspace, "K21.csv", LIT_MODEL)  # S-shaped: no curve of the model follows it
    tab = open_tab()
    with tab.one_change():
        tab.button("refine").click()
    expect(tab.dial("shunt_resistance").locator(".error")).to_have_text("not determined")
    for dial in tab.find("#dials .dial").all():
        error, hold = (dial.locator(part).bounding_box() for part in (".error", ".hold"))
        assert error["x"] + error["width"] <= hold["x"] + 1
        assert dial.locator(".error").evaluate("(one) => one.scrollWidth <= one.clientWidth + 1")
