"""What a fit says, and cannot say, in plain sentences."""

from __future__ import annotations

import math

import numpy as np
from scipy.special import chdtr, chdtrc

from .intervals import AnyUnknowns, Knowledge
from .models import Model
from .residuals import Structure
from .two_diode import TwoDiode

_WORDS = {
    "photocurrent": "photocurrent Jph",
    "saturation_current": "saturation current J0",
    "saturation_current_1": "saturation current J0₁",
    "saturation_current_2": "saturation current J0₂",
    "ideality": "ideality factor n",
    "ideality_1": "ideality factor n₁",
    "ideality_2": "ideality factor n₂",
    "series_resistance": "series resistance Rs",
    "shunt_resistance": "shunt resistance Rsh",
}
# Also how others recognise such a fit, kept with it.
UNSETTLED = "The fit did not come to rest; refine again from here, or hold a parameter."
# ln J0 is known to better than a factor of ten if its interval is narrower than this on either side.
_FACTOR_TEN = math.log(10.0)
_SHARE_OPEN = 0.5  # an interval wider than this share of n leaves n open
# Parameters trade off if they are so correlated and one of them has an interval wider than this share of its value.
_TRADE_OFF, _WIDE = 0.9, 0.2
_USUAL_IDEALITY = (0.8, 5.0)
_RARE = 1e-3  # a χ² that standard deviations explain this seldom is said


def findings(
    model: Model,
    known: Knowledge,
    unknowns: AnyUnknowns,
    structure: Structure,
    limits: dict[str, tuple[float, float]],
    *,
    confidence: float,
    resistance_unit: str,
    settled: bool,
    s_shaped: bool,
    lit: bool,
    reaches_voc: bool,
    chi_square: float | None = None,
) -> tuple[str, ...]:
    """Sentences on a fit, the most serious first; ``chi_square`` is per degree of freedom, by the file's standard deviations."""
    said: list[str] = []
    if s_shaped:
        said.append(
            "The sweep bends upward before Voc (an S-shape), which no curve of this model can do, so its parameters are no "
            "properties of the device and have no errors; look for a barrier at a contact, and take metrics from the points."
        )
    if structure.systematic:
        excess = f" ({structure.excess:.1f} times)" if structure.excess > 1.2 else ""
        said.append(
            f"The model misses the data by more than the noise{excess}: the residuals hang together in "
            f"{structure.runs} runs of one sign. Errors and intervals describe noise only and are too small here."
        )
    if not settled:
        said.append(UNSETTLED)
    if s_shaped:
        return tuple(said)  # what follows would speak of parameters that mean nothing here
    freedom = structure.count - len(unknowns.free)
    if freedom < 1:
        said.append(
            f"There are as many free parameters as points ({structure.count}), so the curve passes through the points "
            "whatever they mean and no uncertainty can be given; hold parameters or measure more points."
        )
        return tuple(said)
    if chi_square is not None:
        said.extend(_about_scatter(chi_square, freedom))
    free = set(unknowns.free)
    diode = {name for name in free if name.startswith(("saturation_current", "ideality", "series_resistance"))}
    open_diode = not reaches_voc and bool(diode) and diode <= known.undetermined
    if open_diode:
        said.append(
            "The sweep ends before Voc and does not determine the diode, so J0, n and Rs have no errors; "
            "sweep beyond Voc, or hold n and Rs."
        )
    elif not reaches_voc and diode:
        said.append(
            "The sweep ends before Voc, so the diode and Rs rest on the points of the knee alone; "
            "sweep beyond Voc, or hold n."
        )
    level = f"{100 * confidence:g} %"
    for name in unknowns.free:
        if open_diode and name in diode:
            continue
        said.extend(_about(name, model, known, limits, level, resistance_unit, lit))
    said.extend(_trade_offs(model, known, unknowns, lit))
    said.extend([] if open_diode else _two_diodes(model, known, unknowns, limits, resistance_unit))
    if "ideality" in unknowns.free and not open_diode and not _USUAL_IDEALITY[0] <= model.ideality <= _USUAL_IDEALITY[1]:
        said.append(
            f"An ideality factor of {model.ideality:.3g} is unusual; "
            "check the number of cells in series and the temperature."
        )
    if not lit and "series_resistance" in unknowns.free and known.intervals["series_resistance"][0] <= 0:
        said.append("The dark sweep does not go high enough in voltage to show Rs; go beyond the knee or hold Rs.")
    return tuple(said)


def _about_scatter(chi_square: float, freedom: int) -> list[str]:
    """Whether the residuals are as large as the file's standard deviations say."""
    if min(chdtr(freedom, chi_square * freedom), chdtrc(freedom, chi_square * freedom)) >= _RARE:
        return []
    return [
        f"The residuals are {_figure(math.sqrt(chi_square))} times as large as the standard deviations in the file say "
        f"(χ² per degree of freedom {_figure(chi_square)}); errors and intervals follow the residuals."
    ]


def _about(
    name: str,
    model: Model,
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
    if name.startswith("saturation_current_") and low <= 0 and math.isfinite(high):
        return []  # said of the diode as a whole
    if name == "shunt_resistance" and math.isinf(high):
        cause = "no shunt shows" if math.isinf(model.shunt_resistance) else "the shunt may be absent"
        return [f"The data bound Rsh only from below: {cause}, Rsh > {_figure(low)} {unit} ({level}, fit noise only)."]
    if name == "series_resistance" and low <= 0:
        return [f"The data bound Rs only from above: Rs < {_figure(high)} {unit} ({level}, fit noise only)."]
    if name in known.at_bound:
        value = getattr(model, name)
        side = "lower" if math.isclose(value, limits[name][0], rel_tol=1e-5, abs_tol=1e-30) else "upper"
        return [f"The {word} lies at its {side} bound and the other parameters have adjusted to it; question the model."]
    if name.startswith("saturation_current") and high > 0 and (low <= 0 or math.log(high / low) > 2 * _FACTOR_TEN):
        return [f"The {word} is not known to better than a factor of ten either way; hold n, or add a dark sweep."]
    if name.startswith("ideality") and high - low > _SHARE_OPEN * getattr(model, name):
        return [f"The {word} is poorly determined: {_figure(low)} to {_figure(high)} ({level}, fit noise only)."]
    return []


def _trade_offs(model: Model, known: Knowledge, unknowns: AnyUnknowns, lit: bool) -> list[str]:
    remedy = "or add a dark sweep" if lit else "or extend the sweep"
    pairs = {
        ("ideality", "series_resistance"): f"Rs and n trade off here: hold n, {remedy}.",
        ("ideality_1", "series_resistance"): f"Rs and n₁ trade off here: hold n₁, {remedy}.",
        ("saturation_current_1", "saturation_current_2"): f"The two diodes trade off here: hold n₁ and n₂, {remedy}.",
    }
    said = []
    for pair, sentence in pairs.items():
        if not set(pair) <= set(unknowns.free) or known.undetermined & set(pair):
            continue
        ends = {name: known.intervals[name] for name in pair}
        if all(high - low <= _WIDE * abs(getattr(model, name)) for name, (low, high) in ends.items()):
            continue
        first, second = (unknowns.free.index(name) for name in pair)
        spread = np.sqrt(known.covariance[[first, second], [first, second]])
        if np.all(spread > 0) and abs(known.covariance[first, second]) >= _TRADE_OFF * spread[0] * spread[1]:
            said.append(sentence)
    return said


def _two_diodes(
    model: Model, known: Knowledge, unknowns: AnyUnknowns, limits: dict[str, tuple[float, float]], resistance_unit: str
) -> list[str]:
    """Whether both diodes show in the data."""
    if not isinstance(model, TwoDiode):
        return []
    said = []
    for diode, ordinal, word in (("1", "first", "J0₁"), ("2", "second", "J0₂")):
        saturation, ideality = f"saturation_current_{diode}", f"ideality_{diode}"
        if saturation in unknowns.free and known.intervals[saturation][0] <= 0:
            high = known.intervals[saturation][1]
            # As on the screens: mA cm⁻², or A where no area is known.
            shown = f"{_figure(1e3 * high)} mA cm⁻²" if resistance_unit.endswith("cm²") else f"{_figure(high)} A"
            bound = f": {word} < {shown}" if math.isfinite(high) else ""
            said.append(f"The data do not show the {ordinal} diode{bound}; one diode says as much.")
        elif ideality in known.at_bound and math.isclose(getattr(model, ideality), limits[ideality][1], rel_tol=1e-5):
            said.append(
                f"The {ordinal} diode is not identified: its ideality runs to the upper bound, and would run further; "
                f"hold n{'₁' if diode == '1' else '₂'}, or fit one diode."
            )
    return said


def _figure(value: float) -> str:
    """Three digits, without an exponent where a person would not write one."""
    if value == 0 or not math.isfinite(value) or 1e-3 <= abs(value) < 1e5:
        return f"{float(f'{value:.3g}'):g}"
    return f"{value:.2e}"
