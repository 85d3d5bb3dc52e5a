"""The voltage at which a measured sweep lies a given current below a reference, as light and dark are compared."""

from __future__ import annotations

import math

import numpy as np

from .noise import merged_points, noise_level
from .sweep import Sweep

_NEIGHBOURS = 4  # points on each side
_ORDER = 3
_CLEAR = 2.0  # drops below this many noise widths have no logarithm to speak of


def voltage_at_drop(sweep: Sweep, reference: float, drop: float) -> tuple[float, float] | None:
    """The voltage where the current is ``reference − drop``.

    Parameters
    ----------
    sweep : Sweep
    reference : float
        Jsc under light, 0 in the dark [unit of current].
    drop : float
        Above zero [unit of current].

    Returns
    -------
    (voltage, uncertainty) or None
        [V]; from a cubic of V in ln(reference − J) through the nearest points, in which a diode is nearly a straight
        line. None where the sweep does not reach that far.
    """
    points, noise = merged_points(sweep), noise_level(sweep)
    below = reference - points.current
    usable = (below > max(_CLEAR * noise, 1e-3 * drop)) & (points.voltage > 0)
    voltage, below = points.voltage[usable], below[usable]
    if not drop > 0 or voltage.size < 4 or not below.min() <= drop <= below.max():
        return None
    # Noise makes a sweep cross a level more than once; the middle of the crossings is the fairest place.
    crossings = np.flatnonzero((below[:-1] <= drop) & (below[1:] >= drop))
    if crossings.size == 0:
        return None
    place = int(crossings[crossings.size // 2]) + 1
    window = slice(max(place - _NEIGHBOURS, 0), place + _NEIGHBOURS)
    height = np.log(below[window] / drop)
    order = min(_ORDER, height.size - 1)
    reach = max(float(np.max(np.abs(height))), 1e-12)
    design = np.vander(height / reach, order + 1, increasing=True)
    gain = np.linalg.pinv(design)
    coefficients = gain @ voltage[window]
    steepness = np.polynomial.polynomial.polyval(height / reach, np.polynomial.polynomial.polyder(coefficients)) / reach
    # Each point's noise in current, seen as noise in voltage.
    spread = math.hypot(*(gain[0] * steepness * noise / below[window]))
    return float(coefficients[0]), spread
