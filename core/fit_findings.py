"""What a fit says, and cannot say, in plain sentences."""

from __future__ import annotations

import math

import numpy as np

from .diode import OneDiode
from .intervals import Knowledge
from .residuals import Structure
from .unknowns import Unknowns

_WORDS = {
    "photocurrent": "photocurrent Jph",
    "saturation_current": "saturation current J0",
    "ideality": "ideality factor n",
    "series_resistance": "series resistance Rs",
    "shunt_resistance": "shunt resistance Rsh",
}
# ln J0 is known to better than a factor of ten if its interval is narrower than this on either side.
_FACTOR_TEN = math.log(10.0)
_SHARE_OPEN = 0.5  # an interval wider than this share of n leaves n open
_TRADE_OFF = 0.97
_USUAL_IDEALITY = (0.8, 5.0)


def findings(
    model: OneDiode,
    known: Knowledge,
    unknowns: Unknowns,
    structure: Structure,
    limits: dict[str, tuple[float, float]],
    *,
    confidence: float,
    resistance_unit: str,
    settled: bool,
    s_shaped: bool,
    lit: bool,
) -> tuple[str, ...]:
    """Sentences on a fit, the most serious first."""
    said: list[str] = []
    if s_shaped:
        said.append(
            "The sweep bends upward before Voc (an S-shape), which no one-diode curve can do; "
            "do not read its parameters as properties of the device."
        )
    if structure.systematic:
        excess = f" ({structure.excess:.1f} times)" if structure.excess > 1.2 else ""
        said.append(
            f"The model misses the data by more than the noise{excess}: the residuals hang together in "
            f"{structure.runs} runs of one sign. Errors and intervals describe noise only and are too small here."
        )
    if not settled:
        said.append("The fit did not come to rest; refine again from here, or hold a parameter.")
    if s_shaped:
        return tuple(said)  # what follows would speak of parameters that mean nothing here
    freedom = structure.count - len(unknowns.free)
    if freedom < 1:
        said.append(
            f"There are as many free parameters as points ({structure.count}), so the curve passes through the points "
            "whatever they mean and no uncertainty can be given; hold parameters or measure more points."
        )
        return tuple(said)
    level = f"{100 * confidence:g} %"
    for name in unknowns.free:
        said.extend(_about(name, model, known, limits, level, resistance_unit, lit))
    said.extend(_trade_offs(known, unknowns, lit))
    if "ideality" in unknowns.free and not _USUAL_IDEALITY[0] <= model.ideality <= _USUAL_IDEALITY[1]:
        said.append(
            f"An ideality factor of {model.ideality:.3g} is unusual; "
            "check the number of cells in series and the temperature."
        )
    if not lit and "series_resistance" in unknowns.free and known.intervals["series_resistance"][0] <= 0:
        said.append("The dark sweep does not go high enough in voltage to show Rs; go beyond the knee or hold Rs.")
    return tuple(said)


def _about(
    name: str,
    model: OneDiode,
    known: Knowledge,
    limits: dict[str, tuple[float, float]],
    level: str,
    unit: str,
    lit: bool,
) -> list[str]:
    word = _WORDS[name]
    low, high = known.intervals[name]
    if name in known.undetermined:
        return [f"The data do not determine the {word}; hold it, or add points where it matters."]
    if name == "shunt_resistance" and math.isinf(high):
        cause = "no shunt shows" if math.isinf(model.shunt_resistance) else "the shunt may be absent"
        return [f"The data bound Rsh only from below: {cause}, Rsh > {_figure(low)} {unit} ({level}, fit noise only)."]
    if name == "series_resistance" and low <= 0:
        return [f"The data bound Rs only from above: Rs < {_figure(high)} {unit} ({level}, fit noise only)."]
    if name in known.at_bound:
        value = getattr(model, name)
        side = "lower" if math.isclose(value, limits[name][0], rel_tol=1e-5, abs_tol=1e-30) else "upper"
        return [f"The {word} lies at its {side} bound and the other parameters have adjusted to it; question the model."]
    if name == "saturation_current" and high > 0 and (low <= 0 or math.log(high / low) > 2 * _FACTOR_TEN):
        return [f"The {word} is not known to better than a factor of ten either way; hold n, or add a dark sweep."]
    if name == "ideality" and high - low > _SHARE_OPEN * model.ideality:
        return [f"The {word} is poorly determined: {_figure(low)} to {_figure(high)} ({level}, fit noise only)."]
    return []


def _trade_offs(known: Knowledge, unknowns: Unknowns, lit: bool) -> list[str]:
    pair = "ideality", "series_resistance"
    if not set(pair) <= set(unknowns.free) or known.undetermined & set(pair):
        return []
    first, second = (unknowns.free.index(name) for name in pair)
    spread = np.sqrt(known.covariance[[first, second], [first, second]])
    if not np.all(spread > 0) or abs(known.covariance[first, second]) < _TRADE_OFF * spread[0] * spread[1]:
        return []
    remedy = "hold n, or add a dark sweep" if lit else "hold n, or extend the sweep"
    return [f"Rs and n trade off here: {remedy}."]


def _figure(value: float) -> str:
    """Three digits, without an exponent where a person would not write one."""
    if value == 0 or not math.isfinite(value) or 1e-3 <= abs(value) < 1e5:
        return f"{float(f'{value:.3g}'):g}"
    return f"{value:.2e}"


