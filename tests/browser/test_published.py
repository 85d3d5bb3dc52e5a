"""Published sweeps through the browser: dropped as files, conditions typed in, guessed, refined."""

import math
from pathlib import Path

import pytest

from core.diode import PARAMETERS
from core.sweep import Sweep
from tests.browser.tab import Tab
from tests.core.published import CELL_OPTIMUM, MODULE_OPTIMUM, Optimum, cell, module


def dropped(tab: Tab, path: Path, sweep: Sweep) -> None:
    rows = (f"{v},{i}" for v, i in zip(sweep.voltage, sweep.current, strict=True))
    path.write_text("Voltage (V),Current (A)\n" + "\n".join(rows) + "\n", encoding="utf-8")
    tab.drop(path)
    tab.until("rows", 1)
    tab.settle()


def condition(tab: Tab, name: str, text: str) -> None:
    field = tab.find(f"[data-condition={name}] input")
    field.fill(text)
    with tab.one_change():
        field.press("Enter")


@pytest.mark.parametrize(
    ("sweep", "degrees", "cells", "residual", "optimum"),
    [
        (cell(), "33", None, "7.7301·10⁻⁴ A over 26 points", CELL_OPTIMUM),
        (module(), "45", "36", "0.0020530 A over 25 points", MODULE_OPTIMUM),
    ],
    ids=["silicon cell", "module"],
)
def test_a_published_sweep_reaches_the_best_known_fit(
    tab: Tab, files: Path, sweep: Sweep, degrees: str, cells: str | None, residual: str, optimum: Optimum
):
    dropped(tab, files / "published.csv", sweep)
    condition(tab, "temperature", degrees)
    if cells:
        condition(tab, "series_cells", cells)
    assert tab.find("[data-condition=temperature] .assumed").is_hidden()
    assert [tab.dial(p).locator(".unit").inner_text() for p in PARAMETERS] == ["A", "A", "", "Ω", "Ω"]

    with tab.one_change():
        tab.button("first guess").click()
    with tab.one_change():
        tab.button("refine").click()

    assert residual in tab.text("#fit-line")
    for name in PARAMETERS:
        value = getattr(optimum, name)
        assert math.isclose(tab.number(name), value, rel_tol=1e-4), name
        assert math.isclose(getattr(tab.model, name), value, rel_tol=1e-4), name
        assert tab.dial(name).locator(".error").inner_text().startswith("±")
    tab.assert_agreement()
