"""The pair and losses screens and the bench's panels, as a test works and reads them."""

from __future__ import annotations

import struct
from pathlib import Path
from typing import Any

from core import steps
from core.refine import refine
from core.store import Store
from tests.browser.loading import LIT, LIT_MODEL, add_sample
from tests.browser.tab import PATIENCE, Tab

NAMES = (LIT, "K11.csv", "K15.txt")

# The page's own policy forbids to hand conditions to it as text to be evaluated later, so the loop travels whole.
_LOOP = """async (argument) => {
  const holds = () => (CONDITION);
  const end = performance.now() + PATIENCE;
  for (;;) {
    if (holds()) return true;
    if (performance.now() > end) return false;
    await new Promise((next) => setTimeout(next, 8));
  }
}"""


def until(tab: Tab, condition: str, argument: Any = None) -> None:
    """Wait for a condition in the page's own words; it may name ``argument``."""
    held = tab.page.evaluate(_LOOP.replace("CONDITION", condition).replace("PATIENCE", str(PATIENCE)), argument)
    assert held, f"waited in vain: {condition} {argument if argument is not None else ''}"


def load(store: Store, workspace: str, *refined: str) -> list[str]:
    """The three devices in the tray; those named are refined."""
    entries = []
    for name in NAMES:
        (entry,) = add_sample(store, workspace, name, LIT_MODEL if name == LIT else None)
        entries.append(entry)
        if name in refined:
            now = store.current(workspace)
            found = refine(now.sweep(entry), now.fit(entry).model)
            store.commit(workspace, steps.record_refinement(now, entry, found), now.revision)
    return entries


def go(tab: Tab, screen: str) -> None:
    tab.find(f"nav [data-screen={screen}]").click()
    tab.until("screen", screen)
    until(tab, "argument === 'bench' || Boolean(sweepbench[argument])", screen)


def trace(tab: Tab, graph: str, uid: str) -> tuple[list, list]:
    """A trace as Plotly holds it."""
    x, y = tab.page.evaluate(
        """([graph, uid]) => {
          const trace = document.querySelector(`#${graph} .js-plotly-plot`)._fullData.find((one) => one.uid === uid);
          return [Array.from(trace.x ?? []), Array.from(trace.y ?? [])];
        }""",
        [graph, uid],
    )
    return x, y


def slide(tab: Tab, selector: str, fraction: float, *, release: bool = True) -> None:
    """Drag the thumb of a slider from where it stands."""
    field = tab.find(selector)
    field.scroll_into_view_if_needed()
    box = field.bounding_box()
    now, thumb = float(field.input_value()), 12
    y, left, width = box["y"] + box["height"] / 2, box["x"] + thumb / 2, box["width"] - thumb
    tab.page.mouse.move(left + now * width, y)
    tab.page.mouse.down()
    tab.page.mouse.move(left + fraction * width, y, steps=6)
    tab.until("followed")
    if release:
        tab.page.mouse.up()


def saved(tab: Tab, selector: str, folder: Path) -> Path:
    with tab.page.expect_download() as download:
        tab.find(selector).click()
    path = folder / download.value.suggested_filename
    download.value.save_as(path)
    return path


def png_size(path: Path) -> tuple[int, int]:
    head = path.read_bytes()[:24]
    assert head.startswith(b"\x89PNG")
    return struct.unpack(">II", head[16:24])


def assert_nothing_hangs_over(tab: Tab, selector: str) -> None:
    """No visible part of the room is wider than the room."""
    over = tab.page.evaluate(
        """(selector) => {
          const room = document.querySelector(selector).getBoundingClientRect();
          return [...document.querySelectorAll(`${selector} :is(button, select, input, td, th, p, h2, h3)`)]
            .map((one) => [one.getBoundingClientRect(), one])
            .filter(([box]) => box.width && (box.right > room.right + 1 || box.left < room.left - 1))
            .map(([, one]) => one.outerHTML.slice(0, 120));
        }""",
        selector,
    )
    assert over == []
