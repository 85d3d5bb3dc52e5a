"""How a sweep was measured, as far as its file's header or the user says it.

What the file says of a sweep goes before what the user states of the whole workspace. Words by which the keys of
a header are known: common practice, no source.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from .sweep import Sweep
from .workspace import Workspace

_NOTHING = re.compile(r"^\s*$")
# A lamp's state or power is not its kind.
_NO_SOURCE = re.compile(r"(?i)^\W*(on|off|yes|no|ein|aus)?\W*$|\d\s*(m?w\b|suns?\b|sonnen?\b|%)")
_KEYS: dict[str, tuple[re.Pattern[str], re.Pattern[str]]] = {
    "light_source": (
        re.compile(r"(?i)\b(light source|lamp( type)?|solar simulator|simulator|lichtquelle|sonnensimulator)\b"),
        _NO_SOURCE,
    ),
    "spectrum": (re.compile(r"(?i)spectrum|spektrum|\bam ?1\.5|filter"), _NOTHING),
    "irradiance_setting": (re.compile(r"(?i)reference (cell|diode|device)|calibrat|mismatch|referenz|kalibri"), _NOTHING),
    "delay": (re.compile(r"(?i)\bdelay|settling|dwell|integration|verzögerung|wartezeit|haltezeit"), _NOTHING),
    "preconditioning": (
        re.compile(r"(?i)pre-?condition|light ?soak|vorbehandlung|vorbeleuchtung|konditionierung"),
        _NOTHING,
    ),
    "stabilised_output": (re.compile(r"(?i)stabili[sz]ed|steady[ -]state|tracking|stabilisiert"), _NOTHING),
}
_AREA_KINDS = {"aperture": re.compile(r"(?i)apertur|mask|blende"), "active": re.compile(r"(?i)active|aktiv")}
_LONGEST = 120  # characters


@dataclass(frozen=True, slots=True)
class Said:
    """What is said, and by whom."""

    words: str
    by: Literal["file", "user"]


def said(workspace: Workspace, entry_id: str, name: str) -> Said | None:
    """What is known of one sweep under a name of ``core.statements.TEXTS``; None: nobody says it."""
    words = said_by_file(workspace.entry(entry_id).reading, name)
    if words:
        return Said(words, "file")
    stated = workspace.stated(name)
    return Said(str(stated), "user") if stated else None


def said_by_file(sweep: Sweep, name: str) -> str:
    """What the header says, with its own keys before it; "" for nothing."""
    if name == "area_kind":
        keys = " ".join(sweep.header)
        return next((kind for kind, known in _AREA_KINDS.items() if known.search(keys)), "")
    known, empty = _KEYS[name]
    return "; ".join(f"{k}: {v}" for k, v in sweep.header.items() if known.search(k) and not empty.search(v))[:_LONGEST]
