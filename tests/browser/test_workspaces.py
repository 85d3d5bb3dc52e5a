"""The list of workspaces: made, named, doubled, deleted, brought back, and taken to another place as one file."""

import pytest
from playwright.sync_api import expect

from tests.browser.loading import LIT, LIT_MODEL, add_sample
from tests.browser.screens import saved, until
from tests.browser.tab import Tab


@pytest.fixture
def one(running, workspace, open_tab) -> Tab:
    """A tab on a workspace with one fitted sweep, called after the test's own."""
    add_sample(running.store, workspace, LIT, LIT_MODEL)
    return open_tab()


def name_of(tab: Tab) -> str:
    return tab.text("#workspace-name").removesuffix(" ▾")


def act(tab: Tab, words: str) -> None:
    if tab.find(".workspaces").is_hidden():
        tab.find("#workspace-name").click()
    tab.find(".workspace-acts").get_by_role("button", name=words, exact=True).click()


def typed(tab: Tab, name: str) -> None:
    field = tab.page.get_by_role("textbox", name="Name of the workspace")
    expect(field).to_be_focused()
    field.fill(name)
    field.press("Enter")


def arrived(tab: Tab, name: str) -> None:
    """Wait until the page is on the workspace of this name, and follow it there."""
    until(tab, "document.querySelector('#workspace-name').textContent === argument && sweepbench.scene.workspace === sweepbench.stamp().workspace", f"{name} ▾")
    tab.workspace_id = tab.page.evaluate("sweepbench.stamp().workspace")
    tab.settle()


def test_a_new_one_is_empty_the_old_one_a_click_away_and_its_name_is_changed_by_keys(one):
    before = name_of(one)
    act(one, "new workspace")
    typed(one, f"{before} next")
    arrived(one, f"{before} next")
    expect(one.find(".invitation")).to_be_visible()
    assert one.rows() == [] and one.stored.entries == {}
    one.find("#workspace-name").click()
    here = one.find(".workspace-list .here")
    assert here.inner_text().splitlines() == [f"{before} next", "0 sweeps"]
    one.find(".workspace-list button").filter(has=one.page.get_by_text(before, exact=True)).click()
    arrived(one, before)
    assert one.rows() == ["reverse"] and one.model == LIT_MODEL
    expect(one.find(".workspaces")).to_be_hidden()

    one.find("#workspace-name").press("Enter")
    expect(one.find(".workspaces")).to_be_visible()
    one.find("[data-act=rename-workspace]").press("Enter")
    typed(one, f"{before} renamed")
    arrived(one, f"{before} renamed")
    assert one.stored.name == f"{before} renamed"
    act(one, "rename")
    one.page.get_by_role("textbox", name="Name of the workspace").press("Escape")
    expect(one.page.get_by_role("textbox", name="Name of the workspace")).to_have_count(0)
    one.find("[data-act=rename-workspace]").press("Escape")
    expect(one.find(".workspaces")).to_be_hidden()
    assert name_of(one) == f"{before} renamed"


def test_a_duplicate_goes_its_own_way(one):
    before, first = name_of(one), one.workspace_id
    act(one, "duplicate")
    until(one, "sweepbench.stamp().workspace !== argument", first)
    until(one, "!document.querySelector('#workspace-name').textContent.startsWith(argument)", f"{before} ▾")
    arrived(one, name_of(one))
    assert one.workspace_id != first and one.rows() == ["reverse"]
    one.pull("photocurrent", (0, -12))
    one.settle()
    assert one.model != LIT_MODEL
    fits = one.store.current(first).fits
    assert [fit.model for fit in fits.values()] == [LIT_MODEL]


def test_what_is_deleted_can_be_brought_back(one):
    before, first = name_of(one), one.workspace_id
    one.forgiven.append("404")  # a look at its revision may be under way when it goes
    act(one, "delete")
    one.until("says", f"“{before}” was deleted")
    until(one, "sweepbench.stamp().workspace !== argument", first)
    arrived(one, one.store.workspaces()[0].name)
    back = one.find(".workspace-list button").filter(has=one.page.get_by_text(before, exact=True))
    assert back.inner_text().splitlines() == [before, "bring back"]
    back.click()
    arrived(one, before)
    assert one.workspace_id == first and one.rows() == ["reverse"] and one.model == LIT_MODEL
    one.assert_agreement()


def test_one_file_takes_everything_along(one, tmp_path):
    before, first = name_of(one), one.workspace_id
    one.find("#workspace-name").click()
    path = saved(one, "[data-act=export-workspace]", tmp_path)
    assert before in path.name and path.suffix == ".zip"
    assert path.read_bytes().startswith(b"PK")
    with one.page.expect_file_chooser() as chooser:
        act(one, "open a file")
    chooser.value.set_files(path)
    until(one, "sweepbench.stamp().workspace !== argument", first)
    until(one, "sweepbench.scene.workspace === sweepbench.stamp().workspace && document.querySelectorAll('#tray-list .sweep').length === 1")
    one.workspace_id = one.page.evaluate("sweepbench.stamp().workspace")
    one.settle()
    assert one.workspace_id != first and one.rows() == ["reverse"] and one.model == LIT_MODEL
    (entry,) = one.stored.entries.values()
    assert one.store.file(entry.source) == one.store.file(next(iter(one.store.current(first).entries.values())).source)
    one.assert_agreement()

    rubbish = tmp_path / "rubbish.zip"
    rubbish.write_bytes(b"no archive at all")
    one.forgiven.append("the server responded with a status of 4")  # the browser's own line
    with one.page.expect_file_chooser() as chooser:
        act(one, "open a file")
    chooser.value.set_files(rubbish)
    until(one, "/\\.$/.test(document.querySelector('#notice-line.shown')?.textContent ?? '')")
    assert one.page.evaluate("sweepbench.stamp().workspace") == one.workspace_id


def test_a_reload_stays_on_the_workspace_of_its_tab(one, running):
    before = name_of(one)
    act(one, "new workspace")
    typed(one, f"{before} second")
    arrived(one, f"{before} second")
    mine = one.workspace_id
    running.store.opened(running.store.create(f"{before} of another tab"))
    one.page.reload()
    one.until("painted")
    arrived(one, f"{before} second")
    assert one.workspace_id == mine
