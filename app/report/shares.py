"""Tables of shares: what each mechanism costs or gains, how well that is known, and the ladder beside it."""

from __future__ import annotations

import math
from collections.abc import Mapping

from app.mechanisms import MECHANISMS
from app.tables import parameter_name
from app.telling import EMISSIONS, Telling
from app.units import DENSITY
from core.shares import Shares

from .figures import FINEST, NOT_IN_MODEL, digits_of, shows, signed
from .markup import Markup, element, join, table
from .numbers import mark


def shares_table(shares: Shares, names: Mapping[str, str], whole: float, whole_name: str, rungs: Mapping[str, float] = {}) -> Markup:
    """Shares with intervals, in mW cm⁻² and as part of a whole [W cm⁻²]; beside them the rungs of a ladder where there is one."""
    digits = digits_of(shares)
    rows = []
    for mechanism in MECHANISMS:
        name = mechanism.parameter
        share, ends = shares.by_mechanism[name], shares.intervals.get(name)
        told = [signed(1e3 * share, digits), "–" if ends is None else interval_words(*ends), _part(share, whole)]
        rows.append([join([mark(name), names[name]]), *told, *([signed(1e3 * rungs[name], FINEST)] if rungs else [])])
    if shows(shares.residual):
        residual = signed(1e3 * shares.residual, digits)
        rows.append([NOT_IN_MODEL, residual, "–", _part(shares.residual, whole), *([residual] if rungs else [])])
    together = signed(1e3 * shares.difference, FINEST)
    rows.append([element("b", "together"), together, "", _part(shares.difference, whole), *([together] if rungs else [])])
    heads = ["in mW cm⁻²", "share", f"{100 * shares.confidence:g} % interval, fit noise", whole_name]
    return table([*heads, *(["one after another"] if rungs else [])], rows, "numbers shares")


def interval_words(low: float, high: float) -> str:
    """An interval [W cm⁻²] in mW cm⁻², as fine as its width allows, but never finer than a hundredth."""
    half = 0.5e3 * (high - low)
    if not math.isfinite(half):
        return "–"
    digits = FINEST if half <= 0 else min(max(1 - math.floor(math.log10(half)), 0), FINEST)
    ends = [signed(1e3 * end, digits) for end in (low, high)]
    return "within 0.01" if ends[0] == ends[1] else " … ".join(ends)


def conventions(telling: Telling) -> str:
    """Which of the conventions in print were used, on one line."""
    order = ", ".join(parameter_name(name, DENSITY) for name in telling.order)
    return f"Limit with emission from {EMISSIONS[telling.emission]}. Order of “one after another”: {order}."


def _part(share: float, whole: float) -> str:
    if not whole:
        return "–"
    return f"{round(100 * share / whole, 1) + 0.0:.1f} %".replace("-", "−")
