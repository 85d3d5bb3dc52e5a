"""A real browser on a real server: one of each for the whole run, a fresh workspace and a fresh tab for each test."""

from __future__ import annotations

import logging
import os
import shutil
from collections.abc import Callable, Iterator
from itertools import count
from pathlib import Path

import pytest
from playwright.sync_api import Browser, BrowserContext, Playwright, sync_playwright

from app.serving import Running, serve
from tests.browser.tab import Tab

CHROMIUM = "SWEEPBENCH_CHROMIUM"
NAMES = ("chromium", "chromium-browser", "google-chrome")
FLAGS = ("--disable-quic", "--disable-background-networking", "--disable-component-update", "--disable-sync", "--no-first-run")
NO_BROWSER = f"No Chromium was found: install it, or name its program in {CHROMIUM}."
SIZE = {"width": 1280, "height": 720}

skipped = pytest.StashKey[bool]()


def browser_is_required() -> bool:
    return os.environ.get("CI", "").lower() in ("1", "true") or os.environ.get("SWEEPBENCH_BROWSER") == "required"


def chromium() -> str | None:
    """The browser's program: the one that the environment names, else Debian's, else none."""
    named = os.environ.get(CHROMIUM)
    return named or next((path for path in map(shutil.which, NAMES) if path), None)


def pytest_terminal_summary(terminalreporter, config) -> None:
    if config.stash.get(skipped, False):
        terminalreporter.write_line(f"!!! BROWSER TESTS WERE SKIPPED. {NO_BROWSER} !!!", red=True, bold=True)


@pytest.fixture(scope="session")
def program(pytestconfig) -> str:
    path = chromium()
    if path is None:
        if browser_is_required():
            pytest.fail(f"{NO_BROWSER} Here a browser is required, so this is a failure and no skip.")
        pytestconfig.stash[skipped] = True
        pytest.skip(NO_BROWSER)
    return path


@pytest.fixture(scope="session")
def playwright() -> Iterator[Playwright]:
    with sync_playwright() as started:
        yield started


@pytest.fixture(scope="session")
def browser(program: str, playwright: Playwright) -> Iterator[Browser]:
    # The browser refuses its own sandbox to the superuser.
    as_root = ["--no-sandbox"] if getattr(os, "geteuid", lambda: 1)() == 0 else []
    started = playwright.chromium.launch(executable_path=program, args=[*FLAGS, *as_root])
    yield started
    started.close()


@pytest.fixture(scope="session")
def running(program: str, tmp_path_factory) -> Iterator[Running]:
    with serve(tmp_path_factory.mktemp("work")) as running:
        yield running


@pytest.fixture(scope="session")
def context(browser: Browser, running: Running) -> Iterator[BrowserContext]:
    """One browser profile, let in by the key; the framework's scripts stay in its cache."""
    context = browser.new_context(viewport=SIZE, accept_downloads=True)
    door = context.new_page()
    door.goto(running.entry_url)
    door.wait_for_url(f"{running.url}/")
    door.close()
    yield context
    context.close()


@pytest.fixture
def workspace(running: Running, names=count(1)) -> str:
    """A new empty workspace, the one that the next tab opens."""
    return running.store.create(f"Workspace {next(names)}")


@pytest.fixture
def open_tab(running: Running, context: BrowserContext, workspace: str, caplog) -> Iterator[Callable[[], Tab]]:
    """Opens tabs on the test's workspace; at the end neither they nor the server may have met an error."""
    tabs: list[Tab] = []

    def open_one() -> Tab:
        tab = Tab(context.new_page(), running.store, workspace)
        tabs.append(tab)
        tab.open(running.url)
        return tab

    yield open_one
    for tab in tabs:
        tab.close()
    for tab in tabs:
        assert tab.troubles == []
    told = [record for record in caplog.get_records("call") if record.levelno >= logging.ERROR]
    assert told == []


@pytest.fixture
def tab(open_tab) -> Tab:
    """A tab on the empty workspace."""
    return open_tab()


@pytest.fixture
def files(tmp_path: Path) -> Path:
    """A folder for files to drop."""
    folder = tmp_path / "files"
    folder.mkdir()
    return folder
