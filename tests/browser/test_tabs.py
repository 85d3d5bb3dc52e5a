"""Reload, a second tab, and a server that goes away and comes back."""

from contextlib import closing

import pytest

from app.serving import serve
from core import steps
from core.store import Store
from tests.browser.loading import FEW, LIT, LIT_MODEL, add_sample
from tests.browser.tab import Tab

GONE = ("ERR_CONNECTION", "Failed to fetch", "server did not respond", "Callback failed", "NetworkError")


@pytest.fixture
def first(running, workspace, open_tab) -> Tab:
    for name in FEW:
        add_sample(running.store, workspace, name, LIT_MODEL)
    return open_tab()


def test_reload_brings_sweep_model_and_view_back(first: Tab):
    order = [entry.id for entry in first.stored.in_tray_order()]
    first.find("#tray-list").focus()
    first.page.keyboard.press("Space")
    first.choose(order[1])
    first.find("[data-strip=log]").click()
    first.until("strip", "log")
    first.until("trace", "overlay0")
    first.settle()
    first.pull("photocurrent", (0, -12))
    first.settle()
    model, revision = first.model, first.stored.revision
    assert model != LIT_MODEL

    first.reload()
    first.until("trace", "overlay0")
    assert first.entry == order[1]
    assert first.page.evaluate("sweepbench.scene.strip") == "log"
    assert (first.model, first.stored.revision) == (model, revision)
    first.assert_agreement()


def test_a_second_tab_follows_and_a_stale_change_is_refused_with_a_sentence(first: Tab, open_tab):
    second = open_tab()
    second.forgiven.append("409")  # the browser's own line on a refused live request

    first.pull("photocurrent", (0, -12))
    first.settle()
    second.until("moved", 0)
    second.until("moved", first.stored.revision - 1)
    second.settle()
    second.assert_agreement()

    # From here on the second tab does not hear of changes by itself.
    seen = second.stored.revision
    second.forgiven.append("404")
    second.page.route("**/live/*", lambda route: route.fulfill(status=404, json={"sentence": "Not now."}))
    with first.one_change():
        first.find("[data-parameter=ideality] .hold").click()
    field = second.dial("series_resistance").locator("input[type=text]")
    field.fill("9.5")
    field.press("Enter")
    second.until("says", "changed elsewhere")
    second.settle()
    assert first.model.series_resistance == LIT_MODEL.series_resistance
    assert second.stored.revision == seen + 1
    assert second.dial("ideality").get_attribute("class").split()[-1] == "held"
    second.assert_agreement()

    seen = second.stored.revision
    with first.one_change():
        first.find("[data-parameter=ideality] .hold").click()
    second.find("#notice-line").click()
    start = second.grip("saturation_current")
    second.press(start)
    second.move(start + (-20, 0))
    second.until("says", "changed elsewhere")
    second.release()
    second.settle()
    assert second.stored.revision == seen + 1
    second.assert_agreement()


def test_a_server_lost_in_a_drag_is_told_and_survived_and_the_step_arrives(program, context, tmp_path):
    with serve(tmp_path) as running:
        workspace = running.store.create("A piece of work")
        add_sample(running.store, workspace, LIT, LIT_MODEL)
        tab = Tab(context.new_page(), running.store, workspace)
        tab.forgiven.extend(GONE)
        tab.open(running.entry_url)
        revision, port = tab.stored.revision, running.door.port
        start = tab.grip("series_resistance")
        tab.press(start)
        tab.move(start + (-8, 0))
        tab.until("followed")
    try:
        tab.move(start + (-14, 0))
        tab.until("followed")
        tab.until("saved_line", "the server does not answer")
        tab.release()
        tab.until("saved_line", "not saved")
        assert tab.page.evaluate("sweepbench.unsent()") == 1

        with serve(tmp_path, port) as again:
            assert again.door.port == port
            tab.store = again.store
            tab.until("moved", revision)
            tab.settle()
            assert tab.stored.revision == revision + 1
            assert tab.model.series_resistance > LIT_MODEL.series_resistance
            assert abs(tab.grip("series_resistance").x - (start.x - 14)) < 2
            assert tab.text("#saved-line") == ""
            tab.assert_agreement()
            tab.pull("photocurrent", (0, -9))
            tab.settle()
            assert tab.stored.revision == revision + 2
            tab.assert_agreement()
    finally:
        tab.close()
    assert tab.troubles == []


def test_a_step_made_by_another_program_on_the_same_folder_reaches_the_tab(first: Tab):
    before = first.stored
    with closing(Store(first.store.folder)) as another:
        changed = steps.set_model(before, first.entry, LIT_MODEL.scaled(0.9))
        another.commit(first.workspace_id, changed, seen=before.revision)
    first.until("moved", before.revision)
    first.settle()
    assert first.model == LIT_MODEL.scaled(0.9)
    first.assert_agreement()
