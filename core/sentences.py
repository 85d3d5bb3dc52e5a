"""Numbers, names and lists as they stand in sentences."""

from __future__ import annotations

import math
from collections.abc import Collection

from .diode import PARAMETERS
from .shares import Shares

MECHANISM_WORDS = {
    "photocurrent": "photocurrent",
    "saturation_current": "voltage (recombination)",
    "ideality": "ideality",
    "series_resistance": "series resistance",
    "shunt_resistance": "shunt",
}
# A plateau that slopes under light may be a shunt or collection that depends on voltage; only the dark sweep tells.
_UNCONFIRMED_SHUNT = "shunt or collection"

UNIT = "mW cm⁻²"
MILLI = 1e3
# Without intervals a power has four digits: more than any lamp and area allow.
_SIGNIFICANT = 4

_CONDITION_WORDS = {
    "area": "area",
    "temperature": "temperature",
    "irradiance": "irradiance",
    "series_cells": "number of cells in series",
    "band_gap": "band gap",
    "units": "units",
    "lit": "light",
}


def power_digits(shares: Shares) -> int:
    """Decimals in mW cm⁻² that give the larger power four digits."""
    power = MILLI * max(abs(shares.start), abs(shares.end))
    return max(_SIGNIFICANT - 1 - math.floor(math.log10(power)), 0) if power > 0 else 2


def share_digits(shares: Shares) -> int:
    """Decimals of shares in mW cm⁻²: two digits of the widest interval's half-width, and no more than the power has."""
    usual = power_digits(shares)
    halves = [0.5 * MILLI * (high - low) for low, high in shares.intervals.values()]
    widest = max((half for half in halves if math.isfinite(half)), default=0.0)
    return min(usual, max(1 - math.floor(math.log10(widest)), 0)) if widest > 0 else usual


def in_milliwatts(power: float, digits: int) -> str:
    """A power [W cm⁻²] in mW cm⁻², with a true minus sign and no negative zero."""
    text = f"{MILLI * power:.{digits}f}"
    if float(text) == 0:
        text = text.lstrip("-")
    return text.replace("-", "−")


def as_percent(share: float) -> str:
    value = 100.0 * share
    if value != 0 and abs(value) < 1:
        return f"{value:.1f} %".replace("-", "−") if abs(value) >= 0.05 else "less than 0.1 %"
    return f"{value:.0f} %".replace("-", "−")


def by_size(amounts: dict[str, float]) -> list[str]:
    """Names by falling amount; ties in the usual order of the mechanisms."""
    return sorted(amounts, key=lambda name: (-amounts[name], PARAMETERS.index(name)))


def mechanism_word(name: str, shunt_confirmed: bool) -> str:
    return _UNCONFIRMED_SHUNT if name == "shunt_resistance" and not shunt_confirmed else MECHANISM_WORDS[name]


def conditions(names: Collection[str]) -> list[str]:
    return sorted(_CONDITION_WORDS.get(name, name.replace("_", " ")) for name in names)


def listed(parts: list[str]) -> str:
    if len(parts) < 2:
        return "".join(parts)
    return f"{', '.join(parts[:-1])} and {parts[-1]}"


def capital(text: str) -> str:
    return text[:1].upper() + text[1:]
