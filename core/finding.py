"""What a check says."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Severity = Literal["note", "caution", "stop"]


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing to know before trusting a sweep.

    Attributes
    ----------
    name : str
        Short and fixed, such as "noise" or "s-shape".
    severity : "note", "caution" or "stop"
    what, meaning, remedy : str
        A sentence each.
    """

    name: str
    severity: Severity
    what: str
    meaning: str
    remedy: str
