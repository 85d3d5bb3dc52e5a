"""The report as a person gets it: saved from the bench, opened from disk, offline."""

import io
from urllib.parse import urlsplit

import pandas as pd
import pytest

from core import steps
from core.refine import refine
from tests.browser.loading import LIT, LIT_MODEL, add_sample
from tests.browser.screens import assert_nothing_hangs_over, go, until
from tests.browser.tab import Tab

HEADINGS = ("Metrics", "Parameters", "Losses", "Checks", "Conditions",
            "Reporting table", "Methods", "Files", "Versions", "Cautions")  # fmt: skip


@pytest.fixture
def fitted(running, workspace, open_tab) -> Tab:
    """Two devices in the tray, refined, with a band gap."""
    entries = [entry for name in (LIT, "K11.csv") for entry in add_sample(running.store, workspace, name, LIT_MODEL)]
    for entry in entries:
        now = running.store.current(workspace)
        found = refine(now.sweep(entry), LIT_MODEL)
        now = running.store.commit(workspace, steps.record_refinement(now, entry, found), now.revision)
        running.store.commit(workspace, steps.set_band_gap(now, entry, 1.6), now.revision)
    return open_tab()


def saved(tab, act, tmp_path):
    with tab.page.expect_download() as download:
        tab.page.locator(f"[data-act={act}]:visible").first.click()
    path = tmp_path / download.value.suggested_filename
    download.value.save_as(path)
    return path


def test_the_report_is_saved_and_opens_without_any_network(fitted, browser, tmp_path):
    path = saved(fitted, "save-report", tmp_path)
    assert path.name == "K07 report.html"
    asked = []
    offline = browser.new_context(offline=True)
    page = offline.new_page()
    page.on("request", lambda request: asked.append(request.url))
    troubles = []
    page.on("console", lambda message: troubles.append(message.text))
    page.on("pageerror", lambda error: troubles.append(str(error)))
    page.goto(path.as_uri())
    assert [urlsplit(url).scheme for url in asked] == ["file"]
    assert page.locator("figure svg").count() >= 2
    assert page.locator("figure svg text").count() > 20
    for heading in HEADINGS:
        assert page.get_by_role("heading", name=heading, exact=True).count() == 1
    # The style sheet is let in by its own hash, and the pictures have their size.
    assert page.evaluate("getComputedStyle(document.querySelector('main')).maxWidth") == "768px"
    assert page.locator("figure svg").first.bounding_box()["height"] > 250
    assert page.evaluate("document.documentElement.scrollWidth <= innerWidth")
    assert troubles == []
    offline.close()


def test_sweeps_laid_beside_come_with_it_and_make_a_pair(fitted, tmp_path):
    fitted.page.locator("#tray-list .sweep").nth(1).click(modifiers=["Control"])
    fitted.page.wait_for_function("sweepbench.view.overlay?.length === 1")
    page = saved(fitted, "save-report", tmp_path).read_text(encoding="utf-8")
    assert "Why the difference" in page and 'id="device-2"' in page


@pytest.mark.parametrize("kind", ["csv", "xlsx"])
def test_the_table_of_the_tray_is_saved(fitted, tmp_path, kind):
    path = saved(fitted, f"save-{kind}", tmp_path)
    data = io.BytesIO(path.read_bytes())
    table = pd.read_csv(data) if kind == "csv" else pd.read_excel(data, sheet_name="metrics", engine="calamine")
    assert list(table["device"]) == ["K07", "K11"]
    assert table["Jsc (mA cm⁻²)"].between(20, 23).all()


def test_the_losses_screen_hands_out_what_it_shows(fitted, tmp_path):
    go(fitted, "losses")
    until(fitted, "document.querySelector('#losses-title').textContent === 'K07'")
    fitted.find("#emission-choice select").select_option("both")
    until(fitted, "sweepbench.losses?.emission === 'both'")
    assert_nothing_hangs_over(fitted, ".losses-room")
    path = saved(fitted, "save-report", tmp_path)
    page = path.read_text(encoding="utf-8")
    assert path.name == "K07 report.html" and "emission from both faces of the cell" in page and "K11" not in page
    table = pd.read_csv(saved(fitted, "save-losses", tmp_path))
    assert set(table["emission"]) == {"both faces"} and set(table["device"]) == {"K07"}
    shown = fitted.find("#losses-table tr[data-loss=photocurrent] td").first.inner_text()
    assert f"{table['share (mW cm⁻²)'][0]:.2f}".replace("-", "−") == shown
    fitted.find("[data-act=projector]").click()
    until(fitted, "document.body.classList.contains('projector')")
    assert not fitted.find(".losses-room [data-act=save-report]").is_visible()
    fitted.page.keyboard.press("Escape")
    with pd.ExcelFile(saved(fitted, "save-shown", tmp_path), engine="calamine") as book:
        assert {"losses", "intervals", "estimates"} <= set(book.sheet_names) and "pair" not in book.sheet_names


def test_the_pair_screen_hands_out_what_it_shows(fitted, tmp_path):
    go(fitted, "pair")
    until(fitted, "Boolean(sweepbench.pair?.compared)")
    assert_nothing_hangs_over(fitted, ".pair-room")
    verdicts = fitted.find("[data-compared] .verdict").all_inner_texts()
    table = pd.read_csv(saved(fitted, "save-pair", tmp_path))
    assert list(table["A"].str[:3]) == ["K07"] * 5 and set(table["verdict"]) <= set(verdicts)
    shares = pd.read_csv(saved(fitted, "save-shares", tmp_path))
    assert shares["share (mW cm⁻²)"].iloc[-1] == pytest.approx(table["B − A"].iloc[3])
    with pd.ExcelFile(saved(fitted, "save-shown", tmp_path), engine="calamine") as book:
        assert {"losses", "pair", "shares"} <= set(book.sheet_names)
