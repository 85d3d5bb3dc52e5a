"""What journals ask to be reported of current–voltage measurements: what files and user say, and what is missing.

The list is common practice of the field's reporting checklists, without one source.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from app.units import celsius
from app.wording import field, number
from core.protocol import said
from core.statements import TEXTS
from core.sweep import Sweep
from core.workspace import Workspace

MISSING = "missing"


@dataclass(frozen=True)
class Item:
    """One line of the table.

    Attributes
    ----------
    name : str
    values : tuple of (str, tuple of str)
        Each different statement with the names of the sweeps that it holds for.
    missing, assumed : bool
        For at least one of the sweeps.
    stated : frozenset of str
        Those of the statements that the user makes and no file.
    """

    name: str
    values: tuple[tuple[str, tuple[str, ...]], ...]
    missing: bool
    assumed: bool
    stated: frozenset[str] = frozenset()


def reporting_items(workspace: Workspace, entries: Sequence[str]) -> list[Item]:
    """The table for these sweeps, an item a line."""
    light = [entry for entry in entries if workspace.sweep(entry).lit]

    def item(name: str, of: Sequence[str], says: Callable[[Sweep], str]) -> Item:
        return _item(workspace, name, of, lambda entry: says(workspace.sweep(entry)))

    def stated(name: str, of: Sequence[str]) -> Item:
        return _item(workspace, TEXTS[name], of, lambda entry: _said(workspace, entry, name), name)

    return [
        stated("light_source", light),
        stated("spectrum", light),
        item("irradiance", light, lambda s: _unless_assumed(s, "irradiance", f"{field(1e3 * s.irradiance)} mW cm⁻²")),
        stated("irradiance_setting", light),
        _item(workspace, "area", entries, lambda entry: _area(workspace, entry), "area_kind"),
        item("scan rate", entries, lambda s: MISSING if s.scan_rate is None else f"{field(1e3 * s.scan_rate)} mV s⁻¹"),
        item("scan direction", entries, lambda s: f"{s.direction}, {'light' if s.lit else 'dark'}"),
        item("voltage range and step", entries, _range),
        stated("delay", entries),
        stated("preconditioning", entries),
        item("temperature", entries, lambda s: _unless_assumed(s, "temperature", f"{field(celsius(s.temperature))} °C")),
        stated("stabilised_output", light),
        _devices(workspace, entries),
    ]


def _item(workspace: Workspace, name: str, entries: Sequence[str], says: Callable[[str], str], statement: str = "") -> Item:
    found: dict[str, list[str]] = {}
    stated = set()
    for entry in entries:
        found.setdefault(words := says(entry), []).append(workspace.sweep(entry).name)
        if statement and words != MISSING and (known := said(workspace, entry, statement)) and known.by == "user":
            stated.add(words)
    values = tuple((words, tuple(names)) for words, names in found.items())
    return Item(name, values, MISSING in found, any(words.endswith("(assumed)") for words in found), frozenset(stated))


def _said(workspace: Workspace, entry: str, name: str) -> str:
    known = said(workspace, entry, name)
    return known.words if known else MISSING


def _unless_assumed(sweep: Sweep, condition: str, words: str) -> str:
    return f"{words} (assumed)" if condition in sweep.assumed else words


def _area(workspace: Workspace, entry: str) -> str:
    area, kind = workspace.sweep(entry).area, said(workspace, entry, "area_kind")
    if area is None:
        return MISSING
    words = f"{field(area)} cm²"
    return f"{words}, {kind.words} area" if kind else f"{words}; whether aperture or active area is not said"


def _range(sweep: Sweep) -> str:
    steps = np.abs(np.diff(sweep.voltage))
    step = f", median step {number(1e3 * float(np.median(steps)), digits=2)} mV" if steps.size else ""
    return f"{number(float(sweep.voltage[0]), digits=3)} to {number(float(sweep.voltage[-1]), digits=3)} V{step}"


def _devices(workspace: Workspace, entries: Sequence[str]) -> Item:
    reported = {workspace.entry(entry).device for entry in entries}
    words = f"{len(reported)} in this report, {len(workspace.devices)} in the workspace"
    return Item("number of devices", ((words, ()),), False, False)
