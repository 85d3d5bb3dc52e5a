"""How far the forward and the reverse sweep of a device differ."""

from __future__ import annotations

import numpy as np

from .finding import Finding
from .noise import merged_points
from .sweep import Sweep

# Shares of the power from which a difference is worth a note and a caution; common practice, no source.
_NOTE, _CAUTION = 0.01, 0.05


def check_pair(forward: Sweep, reverse: Sweep) -> tuple[Finding, ...]:
    """Findings on a forward and a reverse sweep of one device: how far they differ, and whether they may be compared."""
    a, b = forward.conditions, reverse.conditions
    if forward.per_area != reverse.per_area or (a.lit, a.irradiance, a.area) != (b.lit, b.irradiance, b.area):
        return (
            Finding(
                "hysteresis",
                "caution",
                "The two sweeps have different conditions.",
                "Their difference is not hysteresis alone.",
                "Compare sweeps with the same area, light and unit of current.",
            ),
        )
    index = hysteresis_index(forward, reverse)
    if index is None or abs(index) < _NOTE:
        return ()
    kind = "lower" if index > 0 else "higher"
    return (
        Finding(
            "hysteresis",
            "caution" if abs(index) >= _CAUTION else "note",
            f"Forward gives {100 * abs(index):.1f} % {kind} maximum power than reverse "
            "(index: reverse minus forward, over reverse).",
            "The result depends on the direction and speed of the sweep, so neither is the stabilised efficiency.",
            "Show both, sweep more slowly, and measure the power at a fixed voltage until it is steady.",
        ),
    )


def hysteresis_index(forward: Sweep, reverse: Sweep) -> float | None:
    """(P_reverse − P_forward)/P_reverse of the largest powers; None where a sweep delivers none.

    One of several definitions in use (formula from memory); S. N. Habisreutinger, N. K. Noel, H. J. Snaith,
    ACS Energy Lett. 3 (2018) 2472, argue against any single index.
    """
    powers = []
    for sweep in (forward, reverse):
        points = merged_points(sweep)
        with np.errstate(all="ignore"):
            power = points.voltage * points.current
        inside = power[(points.voltage > 0) & np.isfinite(power)]
        powers.append(float(np.max(inside, initial=0.0)))
    if not (forward.lit and reverse.lit and min(powers) > 0):
        return None
    return (powers[1] - powers[0]) / powers[1]
