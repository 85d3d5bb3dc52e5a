"""A walk over every screen with every request written down: none leaves this machine, and nothing the policy forbids."""

from pathlib import Path
from urllib.parse import urlsplit

import pytest
from playwright.sync_api import BrowserContext, expect

from app.layout.page import SCREENS
from app.places import SAMPLE_SWEEPS
from app.scene import PANELS
from tests.browser.loading import DARK, DARK_MODEL, LIT, LIT_MODEL, add_sample
from tests.browser.screens import go, saved, slide, until
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


def drop_wicked(tab: Tab, folder: Path) -> str:
    """A sweep of a device whose name would fetch something or run if any screen took it for more than text; its id."""
    wicked = folder / "wicked.csv"
    lines = (SAMPLE_SWEEPS / "K07_rev.csv").read_text(encoding="utf-8").splitlines(keepends=True)
    kept = (line for line in lines if "ample" not in line and "evice" not in line)
    wicked.write_text("".join([f"Sample: {WICKED}\n", *kept]), encoding="utf-8")
    before = set(tab.stored.entries)
    tab.drop(wicked)
    tab.until("rows", 3)
    tab.settle()
    (entry,) = set(tab.stored.entries) - before
    return entry


def sweep_over(tab: Tab, graph: str) -> None:
    """The pointer over a plot: what appears under it is drawn from names too."""
    frame = tab.find(f"#{graph} .js-plotly-plot").bounding_box()
    for x in range(10):
        tab.page.mouse.move(frame["x"] + frame["width"] * (x + 0.5) / 10, frame["y"] + frame["height"] * 0.3)


def walk_the_bench(tab: Tab) -> None:
    for strip in tab.find("[data-strip]").evaluate_all("(all) => all.map((one) => one.dataset.strip)"):
        tab.find(f"[data-strip={strip}]").click()
        tab.until("strip", strip)
        tab.settle()
    panels = tab.find("[data-panel-choice]").evaluate_all("(all) => all.map((one) => one.dataset.panelChoice)")
    assert set(panels) == set(PANELS)
    for panel in panels:
        tab.find(f"[data-panel-choice={panel}]").click()
        expect(tab.find(f".panel[data-panel={panel}]")).to_be_visible()
        tab.settle()
        if panel == "fit":
            until(tab, "document.querySelector('#intervals-table').textContent !== ''")
    sweep_over(tab, "plot")
    tab.pull("series_resistance" if tab.sweep.lit else "saturation_current", (-6, 6))
    tab.settle()
    with tab.one_change():
        tab.button("refine").click()


def walk_the_pair(tab: Tab, a: str, b: str, folder: Path) -> dict[str, Path]:
    go(tab, "pair")
    for slot, entry in (("a", a), ("b", b)):
        tab.find(f"[data-slot={slot}] select").select_option(entry)
        until(tab, "sweepbench.pair[argument[0]] === argument[1]", [slot, entry])
    until(tab, "sweepbench.pair.a === argument[0] && sweepbench.pair.b === argument[1]", [a, b])
    expect(tab.find("#pair-story")).to_contain_text("evil.example")
    for scale in ("normalised", "absolute"):
        tab.find(f"[data-pair-scale={scale}]").click()
        expect(tab.find(f"[data-pair-scale={scale}]")).to_have_attribute("aria-checked", "true")
    slide(tab, ".what-if:not(.target)[data-parameter=series_resistance] input", 0.6)
    expect(tab.find("#what-if-line")).not_to_be_empty()
    for graph in ("pair-plot", "pair-bars"):
        sweep_over(tab, graph)
    return {
        "pair.svg": saved(tab, "[data-save=svg][data-graph=pair-plot]", folder),
        "bars.svg": saved(tab, "[data-save=svg][data-graph=pair-bars]", folder),
        "pair.png": saved(tab, "[data-save=png][data-graph=pair-plot]", folder),
        "pair.html": saved(tab, ".pair-room [data-act=save-report]", folder),
    }


def walk_the_losses(tab: Tab, entry: str, folder: Path) -> dict[str, Path]:
    go(tab, "losses")
    tab.find(f"#sweep-{entry} .sweep-name").click()
    expect(tab.find("#losses-title")).to_contain_text("evil.example")
    for ladder in ("steps", "shares"):
        tab.find(f"[data-ladder={ladder}]").click()
        expect(tab.find(f"[data-ladder={ladder}]")).to_have_attribute("aria-checked", "true")
    slide(tab, ".target[data-parameter=series_resistance] input", 0.1)
    expect(tab.find("#target-line")).to_contain_text("with these targets")
    sweep_over(tab, "ladder")
    tab.button("projector").click()
    until(tab, "document.body.classList.contains('projector')")
    expect(tab.find("#losses-story p")).to_have_count(3)
    tab.page.keyboard.press("Escape")
    until(tab, "!document.body.classList.contains('projector')")
    return {
        "losses.svg": saved(tab, "[data-save=svg][data-graph=ladder]", folder),
        "losses.png": saved(tab, "[data-save=png][data-graph=ladder]", folder),
    }


def take_all_along(tab: Tab, folder: Path) -> dict[str, Path]:
    go(tab, "bench")
    acts = ("svg", "png", "report", "csv", "xlsx", "json")
    files = {f"bench.{act}": saved(tab, f".view[data-view=bench] [data-act=save-{act}], .tray [data-act=save-{act}]", folder) for act in acts}
    tab.find("#workspace-name").click()
    files["workspace.zip"] = saved(tab, "[data-act=export-workspace]", folder)
    tab.page.keyboard.press("Escape")
    return files


# What each part of the walk asks the server for; without these the walk was not made.
ASKED = ("/live", "/files/report/", "/files/table/", ".csv", ".xlsx", "/files/parameters/", "/files/export/", "_dash-update-component")


def test_a_walk_over_every_screen_asks_nobody_else_and_breaks_no_rule(tab: Tab, running, context, tmp_path):
    tab.page.on("download", lambda download: tab.requests.append(download.url))  # which the browser counts as no request
    wicked = drop_wicked(tab, tmp_path)
    lit, dark = (next(e for e in tab.stored.entries if e != wicked and tab.stored.sweep(e).lit == light) for light in (True, False))
    for entry in (lit, dark, wicked):
        tab.choose(entry)
        walk_the_bench(tab)
    for act in ("theme", "help", "help", "workspaces"):
        tab.find(f"[data-act={act}]").first.click()
    tab.page.keyboard.press("Escape")
    files = walk_the_pair(tab, lit, wicked, tmp_path)
    files |= walk_the_losses(tab, wicked, tmp_path)
    files |= take_all_along(tab, tmp_path)
    assert {name for name, _, _ in SCREENS} == {"bench", "pair", "losses"}, "a screen is left out of the walk"

    strangers = [url for url in tab.requests if urlsplit(url).scheme not in ("data", "blob") and not url.startswith(f"{running.url}/")]
    assert strangers == []
    assert [part for part in ASKED if not any(part in url for url in tab.requests)] == []
    assert tab.page.evaluate("window.violations") == []
    assert tab.page.evaluate("window.ran") is None
    assert tab.page.locator('a[href*="evil"], img[src*="evil"], [onerror]').count() == 0
    assert tab.page.locator("svg a").count() == 0
    shared = tab.page.locator("[data-title*=loud], [data-title*=hare], .modebar-btn--logo")
    assert shared.count() == 0  # no button that would carry a chart away

    for name, path in files.items():
        assert path.stat().st_size > 0, name
        if name.endswith((".svg", ".html", ".report")):
            assert_only_text(context, path)


def assert_only_text(context: BrowserContext, path: Path) -> None:
    """A saved picture or report, opened: it holds the name as text, asks for nothing and runs nothing."""
    shown = path.with_name(f"shown-{path.name}").with_suffix(path.suffix)
    shown.write_bytes(path.read_bytes())
    page = context.new_page()
    asked = []
    page.on("request", lambda request: asked.append(request.url))
    page.goto(shown.as_uri())
    assert [url for url in asked if not url.startswith(("file:", "data:", "blob:"))] == []
    assert page.evaluate("window.ran ?? null") is None
    assert page.locator('a[href*="evil"], img[src*="evil"], image[href*="evil"], [onerror]').count() == 0
    page.close()


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
