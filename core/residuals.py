"""Whether the residuals of a fit look like noise."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from .noise import noise_level
from .sweep import Sweep

# Fewer residuals than this have no structure worth speaking of.
_ENOUGH = 12
# One-sided 0.5 % of a normal distribution: rare enough not to cry wolf over a lot of sweeps.
_RARE = 2.576
# Residuals clearly below the noise they are measured by are rounding.
_LEAST_EXCESS = 0.5


@dataclass(frozen=True, slots=True)
class Structure:
    """Structure of residuals in the order of voltage.

    Attributes
    ----------
    runs : int
        Stretches of one sign.
    runs_score : float
        How far ``runs`` lies from what independent noise gives, in standard deviations; negative for long stretches.
    autocorrelation : float
        Of neighbours (lag one).
    excess : float
        Their root mean square over the noise of the points.
    """

    runs: int
    runs_score: float
    autocorrelation: float
    excess: float
    count: int

    @property
    def systematic(self) -> bool:
        """The residuals hang together in a way that independent noise does not, and exceed it."""
        if self.count < _ENOUGH or self.excess < _LEAST_EXCESS:
            return False
        together = self.autocorrelation > _RARE / math.sqrt(self.count)
        return (self.runs_score < -_RARE and together) or (together and self.excess > 2.0)


def structure(residual: np.ndarray, noise: float) -> Structure:
    """Runs and autocorrelation of residuals sorted by voltage.

    References
    ----------
    A. Wald, J. Wolfowitz, Ann. Math. Stat. 11 (1940) 147, for the runs test (from memory).
    """
    count = residual.size
    signs = residual >= 0
    above, below = int(np.count_nonzero(signs)), int(np.count_nonzero(~signs))
    runs = 1 + int(np.count_nonzero(signs[1:] != signs[:-1])) if count else 0
    score = 0.0
    if above and below and count > 2:
        expected = 1 + 2 * above * below / count
        variance = (expected - 1) * (expected - 2) / (count - 1)
        score = (runs - expected) / math.sqrt(variance) if variance > 0 else 0.0
    total = float(residual @ residual)
    lagged = float(residual[1:] @ residual[:-1]) / total if total > 0 else 0.0
    excess = math.sqrt(total / count) / noise if count and noise > 0 else 0.0
    return Structure(runs, score, lagged, excess, count)


def looks_s_shaped(sweep: Sweep) -> bool:
    """Whether the current bends upward between V = 0 and Voc, by more than noise explains.

    A lumped one-diode curve bends downward everywhere. Straight lines through three neighbouring stretches of the
    sweep show the bend; it counts if it exceeds four standard errors and half a per cent of the current per stretch.
    """
    order = np.argsort(sweep.voltage, kind="stable")
    voltage, current = sweep.voltage[order], sweep.current[order]
    inside = (voltage > 0) & (current > 0)
    voltage, current = voltage[inside], current[inside]
    if voltage.size < 12:
        return False
    noise, top = noise_level(sweep), float(np.max(current))
    size = max(4, voltage.size // 5)
    for first in range(0, voltage.size - size + 1, max(1, size // 4)):
        part = slice(first, first + size)
        place = voltage[part] - np.mean(voltage[part])
        width = float(np.ptp(place))
        if width <= 0:
            continue
        design = np.vander(place / width, 3)
        gain = np.linalg.pinv(design)
        bend = float(gain[0] @ current[part])
        spread = noise * float(np.linalg.norm(gain[0]))
        if bend > 4.5 * spread and bend > 0.02 * top:
            return True
    return False
