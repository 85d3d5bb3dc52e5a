"""What journals ask to be reported of current–voltage measurements: what the files say, and what is missing.

The list is common practice of the field's reporting checklists, without one source.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from app.units import celsius
from app.wording import field, number
from core.sweep import Sweep
from core.workspace import Workspace

MISSING = "missing"

# Words by which the keys of a file's header are known; the longest text that a cell of the table takes.
_LIGHT_SOURCE = re.compile(r"(?i)\b(light source|lamp( type)?|solar simulator|simulator|lichtquelle|sonnensimulator)\b")
_NO_SOURCE = re.compile(r"(?i)^\W*(on|off|yes|no|ein|aus)?\W*$|\d\s*(m?w\b|suns?\b|sonnen?\b|%)")  # a lamp's state or power, not its kind
_SPECTRUM = re.compile(r"(?i)spectrum|spektrum|\bam ?1\.5|filter")
_SETTING = re.compile(r"(?i)reference (cell|diode|device)|calibrat|mismatch|referenz|kalibri")
_APERTURE, _ACTIVE = re.compile(r"(?i)apertur|mask|blende"), re.compile(r"(?i)active|aktiv")
_DELAY = re.compile(r"(?i)\bdelay|settling|dwell|integration|verzögerung|wartezeit|haltezeit")
_PRECONDITION = re.compile(r"(?i)pre-?condition|light ?soak|vorbehandlung|vorbeleuchtung|konditionierung")
_STABILISED = re.compile(r"(?i)stabili[sz]ed|steady[ -]state|tracking|stabilisiert")
_LONGEST = 120

Says = Callable[[Sweep], str]


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
    """

    name: str
    values: tuple[tuple[str, tuple[str, ...]], ...]
    missing: bool
    assumed: bool


def reporting_items(workspace: Workspace, entries: Sequence[str]) -> list[Item]:
    """The table for these sweeps, an item a line."""
    sweeps = [workspace.sweep(entry) for entry in entries]
    light = [sweep for sweep in sweeps if sweep.lit]
    return [
        _item("light source", light, _header(_LIGHT_SOURCE, but=_NO_SOURCE)),
        _item("spectrum", light, _header(_SPECTRUM)),
        _item("irradiance", light, lambda s: _unless_assumed(s, "irradiance", f"{field(1e3 * s.irradiance)} mW cm⁻²")),
        _item("how irradiance was set", light, _header(_SETTING)),
        _item("area", sweeps, _area),
        _item("scan rate", sweeps, lambda s: MISSING if s.scan_rate is None else f"{field(1e3 * s.scan_rate)} mV s⁻¹"),
        _item("scan direction", sweeps, lambda s: f"{s.direction}, {'light' if s.lit else 'dark'}"),
        _item("voltage range and step", sweeps, _range),
        _item("delay", sweeps, _header(_DELAY)),
        _item("preconditioning", sweeps, _header(_PRECONDITION)),
        _item("temperature", sweeps, lambda s: _unless_assumed(s, "temperature", f"{field(celsius(s.temperature))} °C")),
        _item("stabilised output", light, _header(_STABILISED)),
        _devices(workspace, entries),
    ]


def _item(name: str, sweeps: Sequence[Sweep], says: Says) -> Item:
    said: dict[str, list[str]] = {}
    for sweep in sweeps:
        said.setdefault(says(sweep), []).append(sweep.name)
    values = tuple((words, tuple(names)) for words, names in said.items())
    return Item(name, values, MISSING in said, any(words.endswith("(assumed)") for words in said))


def _unless_assumed(sweep: Sweep, condition: str, words: str) -> str:
    return f"{words} (assumed)" if condition in sweep.assumed else words


def _header(key: re.Pattern[str], but: re.Pattern[str] = re.compile(r"^\s*$")) -> Says:
    """What the header says under such keys, leaving out values that say nothing of it."""

    def says(sweep: Sweep) -> str:
        found = [f"{name}: {value}" for name, value in sweep.header.items() if key.search(name) and not but.search(value)]
        return "; ".join(found)[:_LONGEST] or MISSING

    return says


def _area(sweep: Sweep) -> str:
    if sweep.area is None:
        return MISSING
    words = f"{field(sweep.area)} cm²"
    keys = " ".join(sweep.header)
    kind = "aperture" if _APERTURE.search(keys) else "active" if _ACTIVE.search(keys) else ""
    return f"{words}, {kind} area" if kind else f"{words}; whether aperture or active area is not said"


def _range(sweep: Sweep) -> str:
    steps = np.abs(np.diff(sweep.voltage))
    step = f", median step {number(1e3 * float(np.median(steps)), digits=2)} mV" if steps.size else ""
    return f"{number(float(sweep.voltage[0]), digits=3)} to {number(float(sweep.voltage[-1]), digits=3)} V{step}"


def _devices(workspace: Workspace, entries: Sequence[str]) -> Item:
    reported = {workspace.entry(entry).device for entry in entries}
    words = f"{len(reported)} in this report, {len(workspace.devices)} in the workspace"
    return Item("number of devices", ((words, ()),), False, False)
