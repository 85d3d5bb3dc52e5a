"""What a new user meets: an invitation, the samples one click away, and nothing that leads off this computer."""

import re

import pytest

from core.metrics import measure
from tests.browser.loading import LIT, LIT_MODEL, add_sample

WAYS_OUT = re.compile(r"cloud|\bshare\b|upload|log ?in|sign ?(in|up)|plotly", re.IGNORECASE)

# Name as a screen reader forms it: label, else text, else title.
NAMELESS = """() => [...document.querySelectorAll("button, input, select, [role=slider], [role=switch], [role=option], summary")]
  .filter((one) => !(one.getAttribute("aria-label") ?? "").trim() && !one.textContent.trim() && !one.title.trim())
  .map((one) => one.outerHTML.slice(0, 120))"""

LOOKS = """() => {
  const look = (one) => {
    const style = getComputedStyle(one);
    const ring = one.querySelector?.(".ring");
    const outlined = style.outlineStyle === "none" || style.outlineWidth === "0px" ? "none" : style.outline;
    return [outlined, style.borderBottomColor, style.backgroundColor, ring && getComputedStyle(ring).stroke].join(" | ");
  };
  // The tray's list marks its chosen row, which stands for it.
  window.lookOf = (one) => look(one) + (one.id === "tray-list" ? look(one.querySelector("[aria-selected=true]")) : "");
  window.restingLooks = new Map(
    [...document.querySelectorAll("button, input, select, summary, .grip, [tabindex]")].map((one) => [one, lookOf(one)]));
}"""

FOCUSED = """() => {
  const one = document.activeElement;
  if (one === document.body) return [null, true];
  const name = one.getAttribute("aria-label") || one.textContent.trim().slice(0, 40) || one.id || one.tagName;
  return [name, restingLooks.get(one) !== lookOf(one)];
}"""


def shown_ways_out(tab) -> list[str]:
    """Words of buttons and links that would lead off this computer."""
    words = tab.page.evaluate(
        """() => [...document.querySelectorAll("a, button, [data-title], [data-val]")]
          .map((one) => [one.textContent, one.title, one.href ?? "", one.dataset.title ?? "", one.dataset.name ?? ""].join(" "))"""
    )
    return [word for word in words if WAYS_OUT.search(word)]


def test_the_first_visit_invites_and_one_click_opens_the_samples(tab):
    assert tab.find(".invitation").is_visible()
    assert "Drop a sweep file here" in tab.text(".invitation")
    assert shown_ways_out(tab) == []

    tab.button("open the sample sweeps").click()
    tab.until("moved", 0)
    tab.until("rows", len(tab.stored.entries))
    tab.settle()

    assert not tab.find(".invitation").is_visible()
    assert tab.sentences() == []
    entries = tab.stored.in_tray_order()
    assert len(entries) > 55
    devices = tab.find("#tray-list .device-name").all_text_contents()
    assert {"K07", "K11", "K15", "S02", "K21", "K26", "K33", "R01-1", "R08-6"} <= set(devices)

    sparks = tab.find("#tray-list .spark path").evaluate_all("(all) => all.map((path) => path.getTotalLength())")
    assert len(sparks) == len(entries) and min(sparks) > 40
    shown = dict(
        tab.find("#tray-list .sweep").evaluate_all(
            "(rows) => rows.map((row) => [row.dataset.entry, row.querySelector('.value').textContent])"
        )
    )
    for entry in entries:
        sweep = tab.stored.sweep(entry.id)
        efficiency = measure(sweep).efficiency.value
        if sweep.lit and efficiency is not None:
            assert shown[entry.id] == f"{100 * efficiency:.1f} %", entry.name
    assert sum(text.endswith("%") for text in shown.values()) > 50

    assert shown_ways_out(tab) == []
    assert tab.page.evaluate("sweepbench.graph()._context.showSendToCloud") is False
    assert tab.find(".modebar-btn").count() == 0
    assert len(tab.requests) > 10  # each of them was looked at as it went out


@pytest.fixture
def lit(running, workspace, open_tab):
    add_sample(running.store, workspace, LIT, LIT_MODEL)
    return open_tab()


def test_everything_to_press_has_a_name_and_shows_its_focus(lit):
    assert lit.page.evaluate(NAMELESS) == []
    lit.page.evaluate(LOOKS)
    seen, unmarked = [], []
    for _ in range(100):
        lit.page.keyboard.press("Tab")
        name, marked = lit.page.evaluate(FOCUSED)
        if name is None:
            break  # once through the page
        seen.append(name)
        if not marked:
            unmarked.append(name)
    assert unmarked == []
    for part in ("Help and keys", "Sweeps", "photocurrent, vertical handle", "ideality factor", "shunt resistance, value"):
        assert part in seen, "the Tab key does not reach it"
