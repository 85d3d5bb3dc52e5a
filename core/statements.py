"""What a user states of a whole piece of work, where no file says it: how it was measured, and how well.

A statement holds for every sweep of the workspace that its own file says nothing of.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

from .errors import ConditionRefused

# What each is called in a sentence, by name; the kind of its value follows from where it stands.
UNCERTAINTIES: Mapping[str, str] = MappingProxyType(
    {"area_uncertainty": "uncertainty of the area", "lamp_uncertainty": "uncertainty of the lamp"}
)
SWITCHES: Mapping[str, str] = MappingProxyType({"area_shared": "one aperture for all"})
TEXTS: Mapping[str, str] = MappingProxyType(
    {
        "light_source": "light source",
        "spectrum": "spectrum",
        "irradiance_setting": "how irradiance was set",
        "area_kind": "kind of area",
        "delay": "delay",
        "preconditioning": "preconditioning",
        "stabilised_output": "stabilised output",
    }
)
STATEMENTS: Mapping[str, str] = MappingProxyType({**UNCERTAINTIES, **SWITCHES, **TEXTS})
LONGEST_TEXT = 300  # characters; a line of a table, not a protocol


@dataclass(frozen=True, slots=True)
class Statement:
    """One thing that the user states.

    Attributes
    ----------
    id : str
        A name in ``STATEMENTS``.
    value : float, bool or str
        Relative standard uncertainty [-], 0 to 1; True; or one line of text.
    """

    id: str
    value: float | bool | str

    def __post_init__(self):
        if self.id not in STATEMENTS:
            raise ConditionRefused(f"Nothing called “{self.id}” can be stated.")
        kind = float if self.id in UNCERTAINTIES else bool if self.id in SWITCHES else str
        if not isinstance(self.value, kind):
            raise ConditionRefused(f"The {STATEMENTS[self.id]} cannot be {self.value!r}.")
        if kind is float and not (math.isfinite(self.value) and 0 <= self.value <= 1):
            raise ConditionRefused(f"The {STATEMENTS[self.id]} must be between 0 and 100 %.")
        if kind is str and not 0 < len(self.value) <= LONGEST_TEXT:
            raise ConditionRefused(f"The {STATEMENTS[self.id]} must be told in 1 to {LONGEST_TEXT} characters.")

    def to_dict(self) -> dict[str, Any]:
        return {"id": self.id, "value": self.value}

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Statement:
        return cls(**values)
