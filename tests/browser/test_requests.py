"""A walk over every screen with every request written down: none leaves this machine, and nothing the policy forbids."""

from urllib.parse import urlsplit

import pytest

from app.layout.page import SCREENS
from app.places import SAMPLE_SWEEPS
from tests.browser.loading import DARK, DARK_MODEL, LIT, LIT_MODEL, add_sample
from tests.browser.tab import Tab

WICKED = '<img src="https://evil.example/x.png" onerror="window.ran=1"><a href="https://evil.example">x</a>%{x}'
WATCH = """
window.violations = [];
document.addEventListener("securitypolicyviolation", (event) => window.violations.push(`${event.violatedDirective} ${event.blockedURI}`));
"""


@pytest.fixture
def tab(running, workspace, open_tab) -> Tab:
    for name, model in ((LIT, LIT_MODEL), (DARK, DARK_MODEL)):
        add_sample(running.store, workspace, name, model)
    tab = open_tab()
    tab.page.evaluate(WATCH)  # what is broken while the page loads stands on the console, which every tab watches
    return tab


def test_a_walk_over_every_screen_asks_nobody_else_and_breaks_no_rule(tab: Tab, running, tmp_path):
    # Names that would fetch something or run if any screen took them for more than text.
    wicked = tmp_path / "wicked.csv"
    lines = (SAMPLE_SWEEPS / "K07_rev.csv").read_text(encoding="utf-8").splitlines(keepends=True)
    wicked.write_text("".join([f"Sample: {WICKED}\n", *(line for line in lines if "ample" not in line and "evice" not in line)]), encoding="utf-8")
    tab.drop(wicked)
    tab.until("rows", 3)
    tab.settle()
    order = [entry.id for entry in tab.stored.in_tray_order()]

    for entry in (order[0], order[-1]):
        tab.choose(entry)
        for strip in tab.find("[data-strip]").evaluate_all("(all) => all.map((one) => one.dataset.strip)"):
            tab.find(f"[data-strip={strip}]").click()
            tab.until("strip", strip)
            tab.settle()
        for button in tab.find("[data-panel]").all():
            if button.is_visible():
                button.click()
                tab.settle()
    tab.pull("series_resistance", (-6, 0)) if tab.sweep.lit else tab.pull("saturation_current", (0, -6))
    tab.settle()
    tab.page.mouse.move(640, 300)
    for act in ("theme", "help", "help", "workspaces"):
        tab.find(f"[data-act={act}]").first.click()
    tab.page.keyboard.press("Escape")

    for name, _, _ in SCREENS:
        tab.find(f"nav [data-screen={name}]").click()
        tab.until("screen", name)
        frame = tab.find(f".view[data-view={name}] .js-plotly-plot").first.bounding_box()
        for x in range(10):  # what appears under the pointer is drawn from names too
            tab.page.mouse.move(frame["x"] + frame["width"] * (x + 0.5) / 10, frame["y"] + frame["height"] * 0.3)
    with tab.page.expect_download() as saved:
        tab.find(f"nav [data-screen={SCREENS[0][0]}]").click()
        tab.find("[data-act=save-svg]").first.click()
    assert "evil.example/x.png" not in saved.value.path().read_text(encoding="utf-8").replace("&lt;img src=\"https://evil.example/x.png", "")

    strangers = [url for url in tab.requests if urlsplit(url).scheme not in ("data", "blob") and not url.startswith(f"{running.url}/")]
    assert len(tab.requests) > 20 and strangers == []
    assert tab.page.evaluate("window.violations") == []
    assert tab.page.evaluate("window.ran") is None
    assert tab.page.locator('a[href*="evil"], img[src*="evil"], [onerror]').count() == 0
    assert tab.page.locator("svg a").count() == 0
    shared = tab.page.locator("[data-title*=loud], [data-title*=hare], .modebar-btn--logo")
    assert shared.count() == 0  # no button that would carry a chart away


def test_the_policy_stops_what_a_page_might_be_made_to_do(tab: Tab):
    """The watch of the test above does see a violation: the policy is in force, and stands alone where all else fails."""
    tab.forgiven.extend(["Content Security Policy", "violates", "Refused"])
    arrived = []
    tab.page.on("response", lambda response: "evil.example" in response.url and arrived.append(response.url))
    # Asked from within the page; the browser itself must refuse before anything is sent.
    outcome = tab.page.evaluate(
        """async () => {
          const failed = await fetch("https://evil.example/").then(() => false, () => true);
          const script = document.createElement("script");
          script.textContent = "window.ran = 1";
          document.body.append(script);
          const image = new Image();
          image.src = "https://evil.example/x.png";
          await new Promise((next) => image.addEventListener("error", next));
          return [failed, window.ran ?? null, window.violations.length];
        }"""
    )
    assert outcome[:2] == [True, None] and outcome[2] >= 3
    assert arrived == []
    tab.troubles[:] = [trouble for trouble in tab.troubles if "evil.example" not in trouble]  # asked for, and blocked
