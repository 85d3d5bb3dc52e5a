"""Two devices, why the difference: chosen, read, swapped, asked what if, and taken along as pictures."""

import re

import numpy as np
import pytest
from playwright.sync_api import expect

from core.metrics import measure
from core.shares import difference_shares, what_if
from tests.browser.loading import LIT, add_sample
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

COMPARED = "sweepbench.pair?.a === argument[0] && sweepbench.pair?.b === argument[1]"
WHAT_IF = ".what-if:not(.target)[data-parameter={}] input"


@pytest.fixture
def three(running, workspace, open_tab) -> tuple[Tab, list[str]]:
    entries = load(running.store, workspace, "K07_rev.csv", "K11.csv")
    tab = open_tab()
    go(tab, "pair")
    compared(tab, entries[0], entries[1])
    return tab, entries


def compared(tab: Tab, a: str, b: str) -> None:
    """Wait until both are on the screen, with their bars where there are some."""
    until(tab, COMPARED, [a, b])
    expect(tab.find("#pair-story")).not_to_be_empty()
    until(tab, "document.querySelector('#pair-plot .js-plotly-plot')?._fullData?.find((one) => one.uid === 'points-b')?.x?.length > 0")
    assert [tab.find(f"[data-slot={slot}] select").input_value() for slot in "ab"] == [a, b]
    slotted = {row: tab.find(f"#sweep-{row}").get_attribute("data-slotted") for row in (a, b)}
    assert slotted == {a: "A", b: "B"}


def cell(tab: Tab, metric: str, column: str) -> str:
    return tab.text(f"[data-compared={metric}] [data-column={column}]")


def power_told(tab: Tab) -> float:
    return float(re.search(r"A would deliver ([\d.]+) mW cm⁻²", tab.text("#what-if-line"))[1])


def test_why_one_is_better_is_read_off_and_the_bars_add_up(three):
    tab, (a, b, _) = three
    sweeps = tab.stored.sweep(a), tab.stored.sweep(b)
    powers = [1e3 * measure(sweep).pmp.value for sweep in sweeps]
    story = tab.text("#pair-story")
    assert story.startswith(f"K07 reverse delivers {powers[0]:.2f} mW cm⁻², {powers[0] - powers[1]:.2f} mW cm⁻²")
    assert "K11" in story and "It comes from" in story
    assert cell(tab, "pmp", "a") == f"{powers[0]:.2f}" and cell(tab, "pmp", "b") == f"{powers[1]:.2f}"
    assert cell(tab, "pmp", "difference").startswith("−") and cell(tab, "pmp", "verdict") == "cannot be told"
    names, _ = reversed(trace(tab, "pair-bars", "shares"))
    values, _ = trace(tab, "pair-bars", "shares")
    assert names[-1] == "together" and sum(values[:-1]) == pytest.approx(values[-1], abs=1e-6)
    assert values[-1] == pytest.approx(powers[1] - powers[0], abs=1e-6)
    models = [tab.stored.fit(entry).model for entry in (a, b)]
    assert values[0] == pytest.approx(1e3 * difference_shares(*models).by_mechanism["photocurrent"], abs=1e-6)
    for side in (".pair-room", ".view[data-view=pair] .side"):
        assert_nothing_hangs_over(tab, side)


def test_the_two_are_chosen_by_list_and_by_tray_and_exchanged_by_key(three):
    tab, (a, b, c) = three
    revision = tab.stored.revision
    story = tab.text("#pair-story")
    tab.find("[data-slot=b] select").select_option(c)
    compared(tab, a, c)
    expect(tab.find("#pair-story")).not_to_have_text(story)
    assert "fitted for this screen" in tab.text("#pair-sources")

    tab.find(f"#sweep-{b} .sweep-name").click()
    compared(tab, a, b)
    tab.find(f"#sweep-{c} .sweep-name").click(modifiers=["Shift"])
    compared(tab, c, b)
    tab.find(f"#sweep-{b} .sweep-name").click()  # one of the two: they change places
    compared(tab, b, c)
    gap = cell(tab, "jsc", "difference")
    tab.page.keyboard.press("x")
    compared(tab, c, b)
    assert cell(tab, "jsc", "difference") == gap.translate(str.maketrans("+−", "−+"))
    tab.button("swap").click()
    compared(tab, b, c)
    tab.find("[data-slot=a] select").select_option(a)
    compared(tab, a, c)
    assert tab.stored.revision == revision, "to look is no change of the work"


def test_what_if_follows_the_hand_by_mouse_and_by_keys_on_both_axes(three):
    tab, (a, b, _) = three
    model_a, model_b = (tab.stored.fit(entry).model for entry in (a, b))
    slider = WHAT_IF.format("series_resistance")
    slide(tab, slider, 0.6, release=False)
    until(tab, "document.querySelector('#what-if-line').textContent !== ''")
    part = float(tab.find(slider).input_value())
    assert part == pytest.approx(0.6, abs=0.03)
    moved = what_if(model_a, model_b, ["series_resistance"], part)
    assert power_told(tab) == pytest.approx(1e3 * moved.landmarks().pmp, abs=0.006)
    x, y = trace(tab, "pair-plot", "what-if")
    np.testing.assert_allclose(y, 1e3 * moved.current(np.array(x)), atol=2e-3)
    assert tab.page.evaluate(
        "() => document.querySelector('#pair-plot .scatterlayer .tracewhat-if path.js-line').getTotalLength() > 200"
    )
    tab.page.mouse.up()

    tab.find(slider).press("ArrowRight")
    tab.until("followed")
    assert float(tab.find(slider).input_value()) == pytest.approx(part + 0.005)
    tab.find(slider).press("End")
    tab.find(WHAT_IF.format("shunt_resistance")).press("End")
    tab.until("followed")
    both = what_if(model_a, model_b, ["series_resistance", "shunt_resistance"])
    until(tab, "document.querySelector('#what-if-line').textContent.includes(argument)", f"{1e3 * both.landmarks().pmp:.2f} mW")
    for parameter in ("series_resistance", "shunt_resistance"):
        tab.find(WHAT_IF.format(parameter)).press("Home")
        tab.until("followed")
    until(tab, "document.querySelector('#pair-plot .js-plotly-plot')._fullData.find((one) => one.uid === 'what-if').x.length === 0")
    assert power_told(tab) == pytest.approx(1e3 * model_a.landmarks().pmp, abs=0.006)

    # The same on the axes J/Jsc over V/Voc.
    normalised = tab.find("[data-pair-scale=normalised]")
    normalised.click()
    expect(normalised).to_have_attribute("aria-checked", "true")
    until(tab, "document.querySelector('#pair-plot .js-plotly-plot')._fullLayout.xaxis.title.text === 'V / Voc'")
    for uid in ("points-a", "points-b"):
        assert max(trace(tab, "pair-plot", uid)[1]) == pytest.approx(1.0, abs=0.03)
    tab.find(WHAT_IF.format("photocurrent")).press("End")
    tab.until("followed")
    until(tab, "document.querySelector('#pair-plot .js-plotly-plot')._fullData.find((one) => one.uid === 'what-if').x.length > 100")
    marks = measure(tab.stored.sweep(a))
    x, y = (np.array(values) for values in trace(tab, "pair-plot", "what-if"))
    moved = what_if(model_a, model_b, ["photocurrent"])
    np.testing.assert_allclose(y * marks.jsc.value, moved.current(x * marks.voc.value), atol=5e-6)


def test_what_is_known_of_area_and_lamp_weighs_and_nonsense_is_told(three):
    tab, _ = three
    area, lamp = (tab.find(f".budget [data-stated={name}_uncertainty] input") for name in ("area", "lamp"))
    verdict = tab.find("[data-compared=pmp] [data-column=verdict]")
    area.fill("0.2")
    area.press("Enter")
    lamp.fill("0.2")
    lamp.press("Enter")
    until(tab, "sweepbench.pair.stated.lamp_uncertainty === '0.2'")
    expect(verdict).to_have_text("stands out")
    assert "stands out" in tab.text("#pair-story")
    assert tab.stored.stated("area_uncertainty") == tab.stored.stated("lamp_uncertainty") == 0.002
    area.fill("plenty")
    area.press("Enter")
    tab.until("says", "“plenty” is not a number")
    expect(area).to_have_value("0.2")
    row = tab.find("[data-compared=pmp]")
    area.fill("")
    area.press("Enter")
    expect(row).to_have_attribute("title", re.compile("area"))  # named as not known
    switch = tab.find(".budget [data-stated-switch=area_shared]")
    switch.click()
    expect(switch).to_have_attribute("aria-checked", "true")
    expect(row).not_to_have_attribute("title", re.compile("area"))
    tab.find("#undo").click()
    expect(switch).to_have_attribute("aria-checked", "false")
    expect(row).to_have_attribute("title", re.compile("area"))


def test_two_choices_in_quick_succession_both_count(three):
    tab, (a, b, c) = three
    with tab.answers_held():
        tab.find("[data-slot=a] select").select_option(b)
        tab.find("[data-slot=b] select").select_option(c)
    compared(tab, b, c)


def test_an_answer_leaves_alone_what_is_being_typed(three):
    tab, _ = three
    area, lamp = (tab.find(f".budget [data-stated={name}_uncertainty] input") for name in ("area", "lamp"))
    with tab.answers_held():
        area.fill("0.2")
        area.press("Enter")
        lamp.fill("0.3")
    until(tab, "sweepbench.pair.stated.area_uncertainty === '0.2'")
    assert lamp.input_value() == "0.3"
    lamp.press("Enter")
    until(tab, "sweepbench.pair.stated.lamp_uncertainty === '0.3'")
    assert area.input_value() == "0.2"


def test_pictures_are_named_after_the_two_and_the_report_holds_both(three, tmp_path):
    tab, _ = three
    svg = saved(tab, "[data-save=svg][data-graph=pair-plot]", tmp_path)
    assert svg.name == "K07-reverse-and-K11-reverse.svg"
    text = svg.read_text(encoding="utf-8")
    assert text.startswith("<svg") and "voltage (V)" in text and "mA cm⁻²" in text
    bars = saved(tab, "[data-save=svg][data-graph=pair-bars]", tmp_path)
    assert bars.name == "K07-reverse-and-K11-reverse-difference.svg"
    drawn = bars.read_text(encoding="utf-8")
    assert "together" in drawn and "voltage (recombination)" in drawn
    png = saved(tab, "[data-save=png][data-graph=pair-plot]", tmp_path)
    assert png.name.endswith(".png") and png_size(png) == (3200, 1800)
    report = saved(tab, ".pair-room [data-act=save-report]", tmp_path).read_text(encoding="utf-8")
    assert "Why the difference" in report and "K11" in report


def test_a_reload_stays_on_the_pair_as_it_was(three):
    tab, (a, b, c) = three
    tab.find(f"#sweep-{c} .sweep-name").click()
    compared(tab, a, c)
    assert tab.page.url.endswith("/pair")
    tab.page.reload()
    tab.until("painted")
    tab.until("screen", "pair")
    compared(tab, a, c)
    assert tab.page.url.endswith("/pair")
    go(tab, "bench")
    tab.settle()
    tab.page.go_back()
    tab.until("screen", "pair")


def test_an_s_shaped_sweep_is_compared_as_measured_and_not_shared_out(running, workspace, open_tab):
    bent, straight = add_sample(running.store, workspace, "K21.csv")[0], add_sample(running.store, workspace, "K11.csv")[0]
    tab = open_tab()
    go(tab, "pair")
    compared(tab, bent, straight)
    expect(tab.find("#pair-story")).to_contain_text("S-shaped")
    assert trace(tab, "pair-bars", "shares")[1] == ["together"]
    assert cell(tab, "pmp", "difference") != "–"
    for parameter in ("ideality", "shunt_resistance"):
        expect(tab.find(WHAT_IF.format(parameter))).to_be_disabled()


def test_one_sweep_alone_is_refused_in_a_sentence(running, workspace, open_tab):
    add_sample(running.store, workspace, LIT)
    tab = open_tab()
    tab.find("nav [data-screen=pair]").click()
    tab.until("screen", "pair")
    expect(tab.find("#pair-refusal")).to_contain_text("Two lit sweeps are needed")
    expect(tab.find(WHAT_IF.format("ideality"))).to_be_disabled()
