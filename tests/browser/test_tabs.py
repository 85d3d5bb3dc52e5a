"""Reload, a second tab, and a server that goes away and comes back."""

from contextlib import closing, contextmanager

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


def typed(tab: Tab, parameter: str, text: str) -> None:
    field = tab.dial(parameter).locator("input[type=text]")
    field.fill(text)
    field.press("Enter")


@pytest.fixture
def away(program, context, tmp_path):
    """A tab whose server is gone, and what starts it again at the same place."""
    with serve(tmp_path) as running:
        workspace = running.store.create("A piece of work")
        add_sample(running.store, workspace, LIT, LIT_MODEL)
        tab = Tab(context.new_page(), running.store, workspace)
        tab.forgiven.extend(GONE)
        tab.open(running.entry_url)
        port = running.door.port

    @contextmanager
    def back():
        with serve(tmp_path, port) as again:
            assert again.door.port == port
            tab.store = again.store
            yield again

    yield tab, back
    tab.close()
    assert tab.troubles == []


def test_all_that_is_done_while_the_server_is_away_is_made_in_order_and_once(away):
    tab, back = away
    seen = tab.page.evaluate("sweepbench.stamp().revision")
    typed(tab, "series_resistance", "4.5")
    tab.until("saved_line", "not saved")
    typed(tab, "ideality", "1.7")
    tab.button("refine").click()
    tab.page.keyboard.press("Control+z")
    tab.page.keyboard.press("h")  # nothing is focused that could be held
    assert tab.page.evaluate("sweepbench.unsent()") == 4
    with back():
        tab.until("moved", seen + 3)
        tab.settle()
        assert tab.stored.revision == seen + 4, "two fields, a refinement, and that taken back; each once"
        assert (tab.model.series_resistance, tab.model.ideality) == (4.5, 1.7)
        assert tab.stored.refined(tab.entry) is None
        assert tab.text("#saved-line") == ""
        tab.assert_agreement()
        with tab.one_change():
            tab.page.keyboard.press("Control+Shift+Z")
        assert tab.stored.refined(tab.entry) is not None, "the refinement was made and taken back, not left out"


def test_undo_of_a_change_that_was_refused_takes_back_nothing_else(away):
    tab, back = away
    with back():
        with tab.one_change():
            typed(tab, "ideality", "1.7")
    seen = tab.page.evaluate("sweepbench.stamp().revision")
    typed(tab, "series_resistance", "-3")
    tab.page.keyboard.press("Control+z")
    assert tab.page.evaluate("sweepbench.unsent()") == 2
    tab.until("saved_line", "not saved")
    with back():
        tab.until("says", "has to be from 0 to")
        tab.settle()
        assert (tab.stored.revision, tab.model.ideality) == (seen, 1.7)


def test_what_waits_behind_a_change_that_came_too_late_is_given_up_and_told(away):
    tab, back = away
    typed(tab, "series_resistance", "4.5")
    tab.page.keyboard.press("Control+z")
    tab.until("saved_line", "not saved")
    tab.page.route("**/_dash-update-component", lambda route: route.abort())
    with back() as again:
        workspace = again.store.current(tab.workspace_id)
        another = steps.set_model(workspace, next(iter(workspace.entries)), LIT_MODEL.scaled(0.9))
        again.store.commit(workspace.id, another, seen=workspace.revision)
        tab.page.unroute("**/_dash-update-component")
        tab.until("says", "One change that built on it was not made either.")
        tab.settle()
        assert tab.model == LIT_MODEL.scaled(0.9), "the undo was not meant for the other change"
        tab.assert_agreement()


def test_refining_the_tray_while_the_server_is_away_starts_when_it_is_back(away):
    tab, back = away
    tab.button("refine all").click()
    tab.button("refine all").click()
    tab.until("saved_line", "not saved")
    assert tab.page.evaluate("sweepbench.unsent()") == 1
    with back():
        tab.until("says", "1 of 1 sweeps refined.", patience=60_000)
        tab.settle()
        assert tab.stored.refined(tab.entry) is not None


def test_what_cannot_wait_is_refused_at_once_while_the_server_is_away(away):
    tab, back = away
    tab.find("#workspace-name").click()
    tab.find("[data-act=duplicate-workspace]").click()
    tab.until("says", "was not done")
    with back() as again:
        tab.settle()
        with tab.one_change():
            typed(tab, "ideality", "1.7")
        assert not [there.name for there in again.store.workspaces() if "copy" in there.name]


def test_a_change_that_is_not_saved_is_told_long_before_it_is_sent_again(away):
    tab, back = away
    tab.page.evaluate(
        """() => {
          window.tries = [];
          const before = sweepbench.setProps;
          sweepbench.setProps = (id, props) => {
            if (id === "hand") window.tries.push(props.data.tries);
            before(id, props);
          };
        }"""
    )
    typed(tab, "series_resistance", "4.5")
    tab.until("saved_line", "not saved")
    assert tab.page.evaluate("window.tries") == [1], "told after the first try and before the second"
    with back():
        tab.settle()
        assert tab.model.series_resistance == 4.5


def test_a_change_that_is_made_ends_what_was_said_of_one_that_was_refused(first: Tab):
    typed(first, "ideality", "much")
    first.until("says", "“much” is not a number")
    with first.one_change():
        typed(first, "ideality", "1.7")
    assert first.find("#notice-line.shown").count() == 0


def test_a_step_made_by_another_program_on_the_same_folder_reaches_the_tab(first: Tab):
    before = first.stored
    with closing(Store(first.store.folder)) as another:
        changed = steps.set_model(before, first.entry, LIT_MODEL.scaled(0.9))
        another.commit(first.workspace_id, changed, seen=before.revision)
    first.until("moved", before.revision)
    first.settle()
    assert first.model == LIT_MODEL.scaled(0.9)
    first.assert_agreement()
