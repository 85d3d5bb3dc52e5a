"""Where the power goes: gap, ladder, targets, the projector from device to device, and pictures."""

import re

import pytest
from playwright.sync_api import expect

from core.detailed_balance import limit, limiting_diode
from core.diode import PARAMETERS
from core.metrics import measure
from core.shares import ladder, mechanism_value, target
from tests.browser.loading import DARK, DARK_MODEL, add_sample
from tests.browser.screens import (
    assert_nothing_hangs_over,
    go,
    load,
    png_size,
    saved,
    slide,
    trace,
    until,
)
from tests.browser.tab import Tab

RUNGS = "document.querySelector('#ladder .js-plotly-plot')?._fullData?.find((one) => one.uid === 'rungs')?.y?.[0] === argument"
TITLE = "document.querySelector('#losses-title').textContent === argument && sweepbench.losses.title === argument"


@pytest.fixture
def three(running, workspace, open_tab) -> tuple[Tab, list[str]]:
    entries = load(running.store, workspace, "K07_rev.csv")
    tab = open_tab()
    go(tab, "losses")
    until(tab, RUNGS, "photocurrent")
    return tab, entries


def type_gap(tab: Tab, text: str) -> None:
    before = tab.stored.revision
    field = tab.find("[data-condition=band_gap] input")
    field.fill(text)
    field.press("Enter")
    tab.until("moved", before)


def rows(tab: Tab) -> list[str]:
    return tab.find("#losses-table tr").evaluate_all("(all) => all.map((row) => row.dataset.loss)")


def loss(tab: Tab, parameter: str) -> float:
    return float(tab.text(f"#losses-table tr[data-loss={parameter}] td").replace("−", "-"))


def power_told(tab: Tab) -> float:
    return float(re.search(r"^The model[^:]*: ([\d.]+) mW cm⁻²", tab.text("#target-line"))[1])


def test_a_typed_gap_takes_the_mark_away_and_the_losses_are_core_s(three):
    tab, (entry, *_) = three
    assumed = tab.find("[data-condition=band_gap] .assumed")
    expect(assumed).to_be_visible()
    assert "gap assumed" in tab.find("#ladder").inner_text() and "assumed band gap" in tab.text("#losses-story")
    type_gap(tab, "1.6")
    expect(assumed).to_be_hidden()
    expect(tab.find("#losses-story p").first).to_contain_text(f"of the {1e3 * limit(1.6).pmp:.2f} mW cm⁻² that a band gap of 1.6 eV")
    expect(tab.find("#ladder")).not_to_contain_text("assumed")
    assert tab.find("#losses-story p").count() == 3
    power = measure(tab.stored.sweep(entry)).pmp.value
    assert loss(tab, "total") == pytest.approx(1e3 * (power - limit(1.6).pmp), abs=0.006)
    assert sum(loss(tab, name) for name in (*PARAMETERS, "rest")) == pytest.approx(loss(tab, "total"), abs=0.03)
    tab.button("undo").click()
    expect(assumed).to_be_visible()
    assumed.click()  # taken as it stands
    expect(assumed).to_be_hidden()
    gap = tab.find("[data-condition=band_gap] input")
    gap.fill("1600")
    gap.press("Enter")
    tab.until("says", "outside 0.3 to 5 eV")
    for side in (".losses-room", ".view[data-view=losses] .side"):
        assert_nothing_hangs_over(tab, side)


def test_the_order_of_the_ladder_changes_by_buttons_and_by_dragging_a_row(three):
    tab, (entry, *_) = three
    type_gap(tab, "1.6")
    steps = tab.find("[data-ladder=steps]")
    steps.click()
    expect(tab.find("#losses-table .order")).to_have_count(10)
    assert rows(tab)[:5] == list(PARAMETERS)
    assert_nothing_hangs_over(tab, ".view[data-view=losses] .side")
    model = tab.stored.fit(entry).model

    tab.find("#losses-table tr[data-loss=ideality]").get_by_role("button", name="earlier").press("Enter")
    order = ["photocurrent", "ideality", "saturation_current", "series_resistance", "shunt_resistance"]
    until(tab, "JSON.stringify(sweepbench.losses.order) === argument", '["' + '","'.join(order) + '"]')
    until(tab, "document.querySelectorAll('#losses-table tr')[1].dataset.loss === 'ideality'")
    expected = ladder(limiting_diode(1.6), model, order)
    assert [loss(tab, name) for name in order] == pytest.approx([1e3 * expected[name] for name in order], abs=0.006)

    tab.find("#losses-table tr[data-loss=shunt_resistance]").drag_to(tab.find("#losses-table tr[data-loss=photocurrent]"))
    until(tab, RUNGS, "shunt or collection")
    assert rows(tab)[:5] == ["shunt_resistance", *order[:4]]
    expected = ladder(limiting_diode(1.6), model, rows(tab)[:5])
    assert loss(tab, "shunt_resistance") == pytest.approx(1e3 * expected["shunt_resistance"], abs=0.006)
    labels, _ = reversed(trace(tab, "ladder", "rungs"))
    assert labels[:2] == ["shunt or collection", "photocurrent"]
    expect(tab.find("#losses-story p").nth(1)).to_contain_text("One after another: shunt or collection, photocurrent")
    tab.find("[data-ladder=shares]").click()
    expect(tab.find("#losses-table .order")).to_have_count(0)


def test_targets_follow_the_hand_and_come_to_rest_again(three):
    tab, (entry, *_) = three
    model, revision = tab.stored.fit(entry).model, tab.stored.revision
    assert power_told(tab) == pytest.approx(1e3 * model.landmarks().pmp, abs=0.006)
    field = ".target[data-parameter=series_resistance] input"
    slide(tab, field, 0.1, release=False)
    until(tab, "document.querySelector('#target-line').textContent.startsWith('The model with these targets')")
    value = float(tab.find(field).input_value()) * 2 * mechanism_value(model, "series_resistance")
    moved = target(model, "series_resistance", value)
    assert power_told(tab) == pytest.approx(1e3 * moved.landmarks().pmp, abs=0.006)
    assert tab.text(".target[data-parameter=series_resistance] .target-value") == f"{value:#.4g} Ω cm²"
    (marked,), _ = trace(tab, "ladder", "target")
    assert marked == pytest.approx(1e3 * moved.landmarks().pmp, abs=0.006)
    tab.page.mouse.up()
    tab.find(".target[data-parameter=photocurrent] input").press("End")
    tab.until("followed")
    both = target(moved, "photocurrent", 1.25 * model.photocurrent)
    until(tab, "document.querySelector('#target-line').textContent.includes(argument)", f"{1e3 * both.landmarks().pmp:.2f} mW")
    assert tab.stored.revision == revision, "a target is no change of the work"


def test_the_projector_goes_from_device_to_device_by_arrow_keys(three):
    tab, _ = three
    tab.button("projector").click()
    until(tab, "document.body.classList.contains('projector')")
    for gone in (".header", ".tray", ".view[data-view=losses] .side", ".losses-room .picture"):
        expect(tab.find(gone)).to_be_hidden()
    expect(tab.find("#losses-story p")).to_have_count(3)
    until(tab, TITLE, "K07")
    for key, device in (("ArrowRight", "K11"), ("ArrowRight", "K15"), ("ArrowRight", "K07"), ("ArrowLeft", "K15")):
        tab.page.keyboard.press(key)
        until(tab, TITLE, device)
    until(tab, "document.querySelector('#ladder .js-plotly-plot')._fullLayout.yaxis.tickfont.size > 20")
    room, window = tab.find("#ladder").bounding_box(), tab.page.evaluate("[innerWidth, innerHeight]")
    assert room["width"] > 0.9 * window[0] and room["height"] > 0.5 * window[1]
    until(tab, "document.querySelector('#ladder .js-plotly-plot')._fullLayout.width > argument", 0.9 * window[0])
    assert tab.page.evaluate("document.documentElement.scrollWidth <= innerWidth")
    tab.page.keyboard.press("Escape")
    until(tab, "!document.body.classList.contains('projector')")
    expect(tab.find(".header")).to_be_visible()
    tab.page.keyboard.press("p")
    until(tab, "document.body.classList.contains('projector')")
    tab.page.keyboard.press("p")
    until(tab, "!document.body.classList.contains('projector')")
    until(tab, TITLE, "K15")


def test_pictures_are_named_after_the_device_and_a_reload_stays_here(three, tmp_path):
    tab, (_, second, _) = three
    tab.find(f"#sweep-{second} .sweep-name").click()
    until(tab, TITLE, "K11")
    until(tab, "document.querySelector('#ladder .js-plotly-plot')._fullLayout.yaxis.ticktext.includes('K11')")
    svg = saved(tab, "[data-save=svg][data-graph=ladder]", tmp_path)
    assert svg.name == "K11-losses.svg"
    drawn = svg.read_text(encoding="utf-8")
    assert drawn.startswith("<svg") and "(gap assumed)" in drawn and "K11" in drawn and "power (mW cm⁻²)" in drawn
    png = saved(tab, "[data-save=png][data-graph=ladder]", tmp_path)
    assert png.name == "K11-losses.png" and png_size(png) == (3200, 1800)
    tab.page.reload()
    tab.until("painted")
    tab.until("screen", "losses")
    until(tab, f"sweepbench.losses && {TITLE}", "K11")
    assert tab.page.url.endswith("/losses")


def test_an_s_shaped_sweep_keeps_the_whole_gap_and_is_not_broken_down(running, workspace, open_tab):
    entry, _ = add_sample(running.store, workspace, "K21.csv")
    tab = open_tab()
    tab.find("nav [data-screen=losses]").click()
    until(tab, RUNGS, "not broken down")
    expect(tab.find("#losses-story")).to_contain_text("S-shaped")
    assert rows(tab) == ["total"]
    power = measure(tab.stored.sweep(entry)).pmp.value
    expect(tab.find("#losses-story p").first).to_contain_text(f"delivers {1e3 * power:.2f} mW cm⁻²")
    for field in tab.find(".target input").all():
        expect(field).to_be_disabled()


def test_a_dark_sweep_has_no_losses_and_says_so(running, workspace, open_tab):
    add_sample(running.store, workspace, DARK, DARK_MODEL)
    tab = open_tab()
    tab.find("nav [data-screen=losses]").click()
    expect(tab.find("#losses-refusal")).to_contain_text("dark sweep")
    expect(tab.find("#losses-table tr")).to_have_count(0)
