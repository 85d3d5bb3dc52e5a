"""Conditions, theme, help, pictures, refining everything, and a finger instead of a mouse."""

import re
from pathlib import Path

import numpy as np
import pytest
from playwright.sync_api import expect

from core.diode import PARAMETERS, OneDiode
from tests.browser.loading import FEW, LIT, LIT_MODEL, add_sample
from tests.browser.places import Place
from tests.browser.tab import Tab

K26_MODEL = OneDiode(5.2e-3, 1.2e-13, 1.7, 16.0, 6000)  # A and Ω: no area in the file

FIGURE = """() => {
  const { data, layout } = sweepbench.graph();
  return JSON.stringify([data, layout]) + document.querySelector("#plot .scatterlayer .tracemodel path").getAttribute("d");
}"""


@pytest.fixture
def lit(running, workspace, open_tab) -> Tab:
    add_sample(running.store, workspace, LIT, LIT_MODEL)
    return open_tab()


def test_an_area_rescales_the_model_with_the_points_and_confirming_takes_the_mark_away(running, workspace, open_tab):
    (entry,) = add_sample(running.store, workspace, "K26.csv", K26_MODEL)
    tab = open_tab()
    before, model = tab.sweep, tab.model
    assert not before.per_area
    assert tab.dial("photocurrent").locator(".unit").inner_text() == "A"
    assert tab.dial("photocurrent").locator(".symbol").inner_text() == "Iph"

    area = tab.find("[data-condition=area] input")
    area.fill("0.25")
    with tab.one_change():
        area.press("Enter")
    after = tab.sweep
    assert after.per_area and after.area == 0.25
    np.testing.assert_allclose(after.current, before.current / 0.25, rtol=1e-12)
    np.testing.assert_allclose(tab.model.current(after.voltage), model.current(before.voltage) / 0.25, rtol=1e-9)
    assert tab.model == model.scaled(4)
    assert [tab.dial(p).locator(".unit").inner_text() for p in PARAMETERS] == ["mA cm⁻²", "mA cm⁻²", "", "Ω cm²", "Ω cm²"]
    assert tab.dial("photocurrent").locator(".symbol").inner_text() == "Jph"
    tab.assert_agreement()

    mark = tab.find("[data-condition=temperature] .assumed")
    assert mark.is_visible()
    with tab.one_change():
        mark.click()
    assert mark.is_hidden()
    assert "temperature" not in tab.stored.assumed(entry)
    assert "irradiance" in tab.stored.assumed(entry)

    celsius = tab.find("[data-condition=temperature] input")
    celsius.fill("40")
    with tab.one_change():
        celsius.press("Enter")
    assert tab.model.ideality == pytest.approx(1.7 * 298.15 / 313.15, rel=1e-9)
    tab.assert_agreement()

    area.fill("-3")
    area.press("Enter")
    tab.until("says", "Area has to be from")
    expect(area).to_have_value("0.25")
    assert tab.sweep.area == 0.25


def test_theme_help_and_pictures(lit: Tab):
    figure, paper = lit.page.evaluate(FIGURE), lit.page.evaluate("getComputedStyle(document.body).backgroundColor")
    theme = lit.page.evaluate("document.documentElement.dataset.theme")
    lit.button("theme").click()
    assert lit.page.evaluate("document.documentElement.dataset.theme") != theme
    assert lit.page.evaluate("getComputedStyle(document.body).backgroundColor") != paper
    assert lit.page.evaluate(FIGURE) == figure
    lit.assert_agreement()

    sheet = lit.find(".help")
    assert sheet.is_hidden()
    lit.button("Help and keys").click()
    assert sheet.is_visible()
    assert "Results are not a certified calibration." in sheet.inner_text()
    lit.page.keyboard.press("Escape")
    assert sheet.is_hidden()
    lit.button("Help and keys").click()
    sheet.get_by_role("button", name="close").click()
    assert sheet.is_hidden()

    with lit.page.expect_download() as saving:
        lit.button("SVG").click()
    drawing = Path(saving.value.path()).read_text(encoding="utf-8")
    assert saving.value.suggested_filename.startswith("K07") and saving.value.suggested_filename.endswith(".svg")
    assert drawing.startswith("<svg") and "voltage (V)" in drawing
    assert {address for address in re.findall(r"https?://[^\s\"'<>]+", drawing) if "www.w3.org" not in address} == set()
    with lit.page.expect_download() as saving:
        lit.button("PNG").click()
    assert Path(saving.value.path()).read_bytes().startswith(b"\x89PNG\r\n\x1a\n")


def test_refining_the_whole_tray_shows_progress_and_is_one_step(running, workspace, open_tab):
    for name in FEW:
        add_sample(running.store, workspace, name, LIT_MODEL)
    tab = open_tab()
    revision = tab.stored.revision
    tab.button("refine all").click()
    tab.until("progress")
    tab.until("says", "3 of 3 sweeps refined", 60_000)
    tab.settle()
    assert tab.stored.revision == revision + 1
    assert all(tab.stored.refined(entry) is not None for entry in tab.stored.entries)
    assert tab.button("refine all").is_enabled()
    tab.assert_agreement()
    with tab.one_change():
        tab.page.keyboard.press("Control+z")
    assert {tab.stored.fit(entry).model for entry in tab.stored.entries} == {LIT_MODEL}
    tab.assert_agreement()


def test_a_finger_drags_a_grip_the_whole_way(lit: Tab):
    revision, start = lit.stored.revision, lit.grip("saturation_current")
    way = [Place(start.x - 2 * number, start.y + 0.5 * number) for number in range(30)]
    lit.touch(*way)
    lit.settle()
    assert lit.stored.revision == revision + 1
    assert abs(lit.grip("saturation_current").x - way[-1].x) < 2
    assert lit.model.saturation_current > LIT_MODEL.saturation_current
    lit.assert_agreement()


def test_the_record_is_typed_kept_and_undone(lit):
    tab = lit
    tab.find("[data-panel-choice=record]").click()
    delay = tab.find(".told[data-stated=delay] input")
    delay.fill("20 ms")
    with tab.one_change():
        delay.press("Enter")
    with tab.one_change():
        tab.find(".told[data-stated=area_kind] select").select_option("aperture")
    assert (tab.stored.stated("delay"), tab.stored.stated("area_kind")) == ("20 ms", "aperture")
    lamp = tab.find(".panel [data-stated=lamp_uncertainty] input")
    lamp.fill("0.5")
    with tab.one_change():
        lamp.press("Enter")
    switch = tab.find(".panel [data-stated-switch]")
    with tab.one_change():
        switch.click()
    expect(switch).to_have_attribute("aria-checked", "true")
    assert (tab.stored.stated("lamp_uncertainty"), tab.stored.stated("area_shared")) == (0.005, True)
    tab.reload()
    assert delay.input_value() == "20 ms" and lamp.input_value() == "0.5"
    with tab.one_change():
        switch.click()
    assert tab.stored.stated("area_shared") is None
    with tab.one_change():
        tab.button("undo").click()
    expect(switch).to_have_attribute("aria-checked", "true")


def test_a_file_without_units_is_read_in_the_unit_that_is_chosen(tab, files):
    bare = files / "bare.txt"
    voltage = np.linspace(-0.05, 1.1, 40)
    bare.write_text("\n".join(f"{v:.4f}\t{1e3 * LIT_MODEL.current(v):.6f}" for v in voltage), encoding="utf-8")
    tab.drop(bare)
    tab.until("rows", 1)
    tab.settle()
    row = tab.find("[data-condition=units]")
    assert row.locator("select").input_value() == "mA cm⁻²" and row.locator(".assumed").is_visible()
    with tab.one_change():
        row.locator("select").select_option("mA")
    assert not tab.sweep.per_area and tab.dial("photocurrent").locator(".unit").inner_text() == "A"
    assert row.locator(".assumed").is_hidden()
    assert abs(tab.sweep.current).max() == pytest.approx(abs(1e3 * LIT_MODEL.current(voltage)).max() * 1e-3, rel=1e-4)
    with tab.one_change():
        tab.button("undo").click()
    assert tab.sweep.per_area and row.locator(".assumed").is_visible()


def test_a_group_is_typed_where_the_conditions_are(lit):
    field = lit.find("[data-condition=group] input")
    field.fill("run 7")
    with lit.one_change():
        field.press("Enter")
    assert {device.group for device in lit.stored.devices.values()} == {"run 7"}
