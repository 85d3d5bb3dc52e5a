"""Several sweeps of one device refined together, and the noise that repeats tell, on the bench."""

from dataclasses import replace

import numpy as np
import pytest
from playwright.sync_api import expect

from core import steps
from core.joint import refine_together
from core.reading import read_sweeps
from tests.browser.loading import LIT_MODEL, add_sample
from tests.browser.screens import until
from tests.browser.tab import Tab

LEVELS = "K33_levels.tsv"


def open_fit_panel(tab: Tab) -> None:
    tab.find("[data-panel-choice=fit]").click()
    until(tab, "sweepbench.scene.panel === 'fit'")
    tab.settle()


def test_light_levels_are_refined_together_in_one_step(running, workspace, open_tab):
    entries = add_sample(running.store, workspace, LEVELS)
    tab = open_tab()
    open_fit_panel(tab)
    chips = tab.find("[data-along]")
    expect(chips).to_have_count(len(entries) - 1)
    for place in range(len(entries) - 1):
        chips.nth(place).click()
    expect(tab.find("[data-common=saturation_current]")).to_have_attribute("aria-checked", "true")
    expect(tab.find("[data-common=shunt_resistance]")).to_have_attribute("aria-checked", "false")
    with tab.one_change():
        tab.find("[data-act=together]").focus()
        tab.page.keyboard.press("Enter")
    fits = [tab.stored.fit(entry) for entry in entries]
    assert len({fit.model.saturation_current for fit in fits}) == 1
    assert len({fit.model.shunt_resistance for fit in fits}) == len(entries)
    expected = refine_together([tab.stored.sweep(entry) for entry in entries]).refinements
    for fit, alone in zip(fits, expected, strict=True):
        assert fit.model.series_resistance == pytest.approx(alone.model.series_resistance, rel=1e-4)
    expect(tab.find("#fit-caution")).to_contain_text("agree")


def test_a_parameter_can_be_left_to_each_sweep(running, workspace, open_tab):
    entries = add_sample(running.store, workspace, LEVELS)
    tab = open_tab()
    open_fit_panel(tab)
    tab.find("[data-along]").first.click()
    tab.find("[data-common=series_resistance]").click()
    with tab.one_change():
        tab.find("[data-act=together]").click()
    first, second, *others = (tab.stored.fit(entry) for entry in entries)
    assert first.model.ideality == second.model.ideality
    assert first.model.series_resistance != second.model.series_resistance
    assert all(fit.refinement is None for fit in others)


def test_nothing_chosen_gets_a_sentence_and_changes_nothing(running, workspace, open_tab):
    add_sample(running.store, workspace, LEVELS)
    tab = open_tab()
    open_fit_panel(tab)
    before = tab.stored.revision
    tab.find("[data-act=together]").click()
    expect(tab.find("#notice-line")).to_contain_text("at least one other sweep")
    tab.settle()
    assert tab.stored.revision == before


def test_repeats_tell_the_noise_of_the_voltage(running, workspace, open_tab):
    """Three repeats of one sweep with a noise of 0.5 mV and 5 µA cm⁻² put in."""
    (read,) = read_sweeps(b"Voltage (V),Current density (mA/cm2)\n0,1\n0.1,1\n0.2,1\n", "R.csv")
    voltage = np.linspace(-0.05, 1.12, 160)
    random = np.random.default_rng(5)
    now = running.store.current(workspace)
    for number in range(3):
        shaken = LIT_MODEL.current(voltage + random.normal(0, 5e-4, voltage.size)) + random.normal(0, 5e-6, voltage.size)
        repeat = replace(read, voltage=voltage, current=shaken, name=f"R {number}", device="R", direction="forward")
        step = steps.add_sweeps(now, [repeat], source=f"{number}" * 64, source_name=f"R{number}.csv")
        now = running.store.commit(workspace, step, now.revision)
    tab = open_tab()
    open_fit_panel(tab)
    with tab.one_change():
        tab.find("[data-act=repeats]").click()
    settings = tab.stored.fit(tab.entry).settings
    assert settings.weights == "effective"
    assert settings.voltage_noise == pytest.approx(5e-4, rel=0.4)
    assert settings.current_noise == pytest.approx(5e-6, rel=0.5)
    expect(tab.find("[data-setting=weights] select")).to_have_value("effective")
