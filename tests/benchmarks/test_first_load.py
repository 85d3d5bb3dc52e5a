"""From the address to a page that can be used, against an empty page with one graph, as a ratio measured in one run.

Both pages come from the same kind of server, behind the same door; the browser has been let in before and
has nothing in its cache. The clock is the page's own, from the beginning of the navigation.
"""

import dash
import numpy as np
import pytest
from dash import dcc, html

from app.serving import serve
from tests.browser.conftest import SIZE

LOADS = 12
# A graph is there when Plotly has drawn it; our page moreover when its own scripts have painted what the server told.
CLOCK = """
  const ready = () => document.querySelector(".js-plotly-plot .main-svg .plotly, .js-plotly-plot .main-svg .cartesianlayer")
    && (!document.querySelector("#tray-list") || window.sweepbench?.scene);
  const look = () => (ready() ? (window.readyAt = performance.now()) : requestAnimationFrame(look));
  requestAnimationFrame(look);
"""


def empty_page(store, door, jobs):
    """The least that Dash and Plotly cost."""
    app = dash.Dash("empty", assets_folder="none", enable_mcp=False, add_log_handler=False, csrf_token_name=door.csrf_cookie)
    app.layout = html.Div(dcc.Graph(figure={"data": [{"x": [], "y": []}]}))
    return app


@pytest.fixture(scope="module")
def empty(tmp_path_factory):
    with serve(tmp_path_factory.mktemp("empty"), make_app=empty_page) as running:
        yield running


def let_in(browser, running):
    """The cookies of a browser that was let in."""
    context = browser.new_context()
    page = context.new_page()
    page.goto(running.entry_url)
    page.wait_for_url(f"{running.url}/")
    cookies = context.cookies()
    context.close()
    return cookies


def load_time(browser, running, cookies) -> float:
    """One load in a fresh browser profile [ms]."""
    context = browser.new_context(viewport=SIZE)
    context.add_cookies(cookies)
    context.add_init_script(CLOCK)
    page = context.new_page()
    page.goto(running.url)
    ready = page.evaluate(
        "async () => { while (!window.readyAt) await new Promise((next) => setTimeout(next, 20)); return window.readyAt; }"
    )
    context.close()
    return ready


def test_first_load_against_an_empty_page_with_one_graph(browser, running, workspace, empty):
    pages = {"Sweepbench": running, "an empty Dash page with one graph": empty}
    cookies = {name: let_in(browser, server) for name, server in pages.items()}
    times = {name: [] for name in pages}
    for _ in range(LOADS):
        for name, server in pages.items():
            times[name].append(load_time(browser, server, cookies[name]))
    print()
    for name, taken in times.items():
        print(f"  {name:<52} median {np.median(taken):6.0f} ms   fastest {min(taken):6.0f} ms")
    ours, theirs = times.values()
    ratio = float(np.median(np.array(ours) / np.array(theirs)))
    print(f"  {'ratio, median of pairs':<52} {ratio:13.2f}")
    assert ratio <= 1.25
