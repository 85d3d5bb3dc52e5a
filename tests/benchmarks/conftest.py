"""The browser tests' server, browser and tab, for what is measured in a page."""

from tests.browser.conftest import (  # noqa: F401
    browser,
    context,
    open_tab,
    playwright,
    program,
    pytest_terminal_summary,
    running,
    workspace,
)
