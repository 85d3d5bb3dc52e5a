"""Whether the difference between two measured devices stands out, metric by metric.

Contributions are combined in quadrature and expanded to 95 % with the effective degrees of freedom. Noise of the points
alone never makes a difference stand out: a device measured again tomorrow differs by more than that. Nor does one stand
out that is smaller than the gap between forward and reverse of either device. What is known of one device only counts as
a lower bound: it widens the uncertainty, and lends a difference no weight. What is not known is named, and how much of
it would turn the verdict round is said.

References
----------
JCGM 100:2008, Guide to the expression of uncertainty in measurement: 4.3.7 (rectangular contributions), 5.1.2
(quadrature), G.4.1 (effective degrees of freedom); clause numbers from memory. Median absolute deviation as a robust
scale: F. R. Hampel, J. Am. Stat. Assoc. 69 (1974) 383; its factor for few values, n/(n − 0.8): C. Croux,
P. J. Rousseeuw, in Computational Statistics 1 (1992) 411 (both from memory; the factor holds to 4 % by simulation).
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.special import stdtrit

from .budget import Budget, budget_of
from .constants import thermal_voltage
from .quantity import Metrics

__all__ = ["METRICS", "Budget", "Contribution", "MetricVerdict", "Verdict", "budget_of", "stands_out"]

Word = Literal["stands out", "may be chance", "cannot be told"]

METRICS = ("jsc", "voc", "fill_factor", "pmp", "efficiency")
_TITLES = {
    "jsc": "Jsc",
    "voc": "Voc",
    "fill_factor": "FF",
    "pmp": "Pmp",
    "efficiency": "PCE",
}
_PER_AREA = frozenset({"jsc", "pmp", "efficiency"})
# The lamp moves these in proportion; Voc by m·u(G)/G, FF by next to nothing.
_WITH_LAMP = frozenset({"jsc", "pmp", "efficiency"})
_COVERAGE = 0.95
# From so many pixels on a median tells the scatter; among fewer an odd one cannot be told from the rest.
_ROBUST = 5
# Median of |x| for a standard normal x, and the efficiency of the median absolute deviation beside the standard deviation.
_MEDIAN_DEVIATION, _EFFICIENCY = 0.6744897501960817, 0.3674

NOISE, AREA, LAMP, DIRECTION, SCATTER = (
    "noise of the points",
    "area",
    "lamp",
    "forward–reverse gap",
    "scatter of pixels",
)

# Standard uncertainty and degrees of freedom of one device; None where not known.
_Side = tuple[float, float] | None


@dataclass(frozen=True, slots=True)
class Contribution:
    """One part of the uncertainty of a difference.

    Attributes
    ----------
    name : str
    uncertainty : float
        Standard uncertainty; a lower bound where ``whole`` is False.
    freedom : float
        Degrees of freedom.
    whole : bool
        Known of both devices.
    """

    name: str
    uncertainty: float
    freedom: float = math.inf
    whole: bool = True


@dataclass(frozen=True, slots=True)
class MetricVerdict:
    """What can be said on the difference of one metric.

    Attributes
    ----------
    metric : str
        Name as in ``Metrics``.
    difference : float or None
        Second less first, in the metric's unit; None where one is not reached.
    uncertainty : float or None
        Combined standard uncertainty of the difference from what is known.
    reach : float or None
        Expanded uncertainty at 95 %, or the gap between the directions of either device if that is larger: a difference
        beyond it is not chance alone.
    contributions : tuple of Contribution
        The largest first.
    missing : tuple of str
        Names of contributions that are not known, with the device where only one side is not.
    word : "stands out", "may be chance" or "cannot be told"
    sentence : str
    """

    metric: str
    difference: float | None
    uncertainty: float | None
    reach: float | None
    contributions: tuple[Contribution, ...]
    missing: tuple[str, ...]
    word: Word
    sentence: str


@dataclass(frozen=True, slots=True)
class Verdict:
    """Verdicts by metric."""

    by_metric: Mapping[str, MetricVerdict]


def stands_out(
    measured_a: Metrics, measured_b: Metrics, budget: Budget = Budget(), names: tuple[str, str] = ("A", "B")
) -> Verdict:
    """Weigh the differences between two measured sweeps.

    Parameters
    ----------
    measured_a, measured_b : Metrics
        From the points; a difference between models has no verdict.
    budget : Budget
    names : tuple of str
        What the two are called in the sentences.

    Returns
    -------
    Verdict
        For Jsc, Voc, FF, Pmp and PCE.
    """
    return Verdict({metric: _weigh(metric, measured_a, measured_b, budget, names) for metric in METRICS})


def _weigh(metric: str, measured_a: Metrics, measured_b: Metrics, budget: Budget, names: tuple[str, str]) -> MetricVerdict:
    first, second = getattr(measured_a, metric), getattr(measured_b, metric)
    title = _TITLES[metric]
    if first.value is None or second.value is None:
        reason = (first.reason if first.value is None else second.reason) or "no value"
        sentence = f"Whether {title} differs cannot be told: one of the two has no value ({reason})."
        return MetricVerdict(metric, None, None, None, (), (), "cannot be told", sentence)
    known, missing = _contributions(metric, measured_a, measured_b, budget, names)
    difference = second.value - first.value
    uncertainty = math.sqrt(sum(part.uncertainty**2 for part in known))
    gap = _widest_gap(metric, measured_a, measured_b, budget)
    reach = max(_coverage(known, uncertainty) * uncertainty, gap)
    beyond = abs(difference) > reach
    common = {NOISE, AREA} if budget.area_shared or budget.same_device else {NOISE}
    more_than_noise = any(part.name not in common and part.whole and part.uncertainty > 0 for part in known)
    if not known or (beyond and not more_than_noise):
        word: Word = "cannot be told"
    else:
        word = "stands out" if beyond else "may be chance"
    sentence = _sentence(title, word, difference, reach, gap, known, missing, 0.5 * (abs(first.value) + abs(second.value)))
    return MetricVerdict(metric, difference, uncertainty if known else None, reach if known else None, known, missing, word, sentence)


def _contributions(
    metric: str, measured_a: Metrics, measured_b: Metrics, budget: Budget, names: tuple[str, str]
) -> tuple[tuple[Contribution, ...], tuple[str, ...]]:
    """Known contributions, the largest first, and names of those not known."""
    first, second = getattr(measured_a, metric), getattr(measured_b, metric)
    parts: list[Contribution] = []
    missing: list[str] = []

    def book(name: str, *sides: _Side) -> None:
        known = [side for side in sides if side is not None]
        if known:
            parts.append(_together(name, known, whole=len(known) == len(sides)))
        if not known:
            missing.append(name)
        elif len(known) < len(sides):
            missing.append(f"{name} of {names[sides.index(None)]}")

    def both(relative_a: float | None, relative_b: float | None, sizes: tuple[float, float]) -> tuple[_Side, _Side]:
        sides = zip((relative_a, relative_b), sizes, strict=True)
        first_side, second_side = (None if relative is None else (relative * abs(size), math.inf) for relative, size in sides)
        return first_side, second_side

    book(NOISE, *(None if q.uncertainty is None else (q.uncertainty, math.inf) for q in (first, second)))
    if metric in _PER_AREA:
        if budget.area_shared or budget.same_device:
            # A common factor 1 + δ changes the difference by δ times itself, and that is small beside it.
            relative = budget.area_a if budget.area_a is not None else budget.area_b
            shared = 0.0 if relative is None else relative * abs(second.value - first.value)
            parts.append(Contribution(AREA, shared))
        else:
            book(AREA, *both(budget.area_a, budget.area_b, (first.value, second.value)))
    if metric in _WITH_LAMP:
        book(LAMP, *both(budget.lamp, budget.lamp, (first.value, second.value)))
    elif metric == "voc":
        slope = budget.ideality * thermal_voltage(budget.temperature)
        book(LAMP, *both(budget.lamp, budget.lamp, (slope, slope)))
    if not budget.same_device:
        gaps = _gaps(metric, measured_a, measured_b, budget)
        # Half the gap between the directions is the half-width of a rectangular distribution.
        book(DIRECTION, *(None if gap is None else (0.5 * gap / math.sqrt(3.0), math.inf) for gap in gaps))
        book(SCATTER, *(_scatter(metric, group) for group in (budget.group_a, budget.group_b)))
    return tuple(sorted(parts, key=lambda part: -part.uncertainty)), tuple(missing)


def _together(name: str, sides: list[tuple[float, float]], *, whole: bool) -> Contribution:
    """Independent uncertainties of the devices in quadrature, with their effective degrees of freedom."""
    total = math.hypot(*(uncertainty for uncertainty, _ in sides))
    weights = sum(uncertainty**4 / freedom for uncertainty, freedom in sides)
    return Contribution(name, total, total**4 / weights if weights > 0 else math.inf, whole)


def _gaps(metric: str, measured_a: Metrics, measured_b: Metrics, budget: Budget) -> list[float | None]:
    """How far the directions of each device lie apart; None where one is not known."""
    gaps = []
    for measured, other in ((measured_a, budget.other_direction_a), (measured_b, budget.other_direction_b)):
        values = [getattr(metrics, metric).value for metrics in (measured, other) if metrics is not None]
        gaps.append(None if len(values) < 2 or None in values else abs(values[0] - values[1]))
    return gaps


def _widest_gap(metric: str, measured_a: Metrics, measured_b: Metrics, budget: Budget) -> float:
    if budget.same_device:
        return 0.0
    return max((gap for gap in _gaps(metric, measured_a, measured_b, budget) if gap is not None), default=0.0)


def _scatter(metric: str, group: tuple[Metrics, ...]) -> _Side:
    """Scatter of one device within its group, such that a pixel under the mask or a loose clip does not set it.

    The median absolute deviation, scaled as for a normal distribution; with few pixels the standard deviation.
    """
    values = [value for member in group if (value := getattr(member, metric).value) is not None]
    if len(values) < 2:
        return None
    if len(values) < _ROBUST:
        return float(np.std(values, ddof=1)), len(values) - 1.0
    deviation = float(np.median(np.abs(np.array(values) - np.median(values)))) / _MEDIAN_DEVIATION
    return deviation * len(values) / (len(values) - 0.8), _EFFICIENCY * (len(values) - 1.0)


def _coverage(known: tuple[Contribution, ...], uncertainty: float) -> float:
    """Student's factor for the effective degrees of freedom (Welch–Satterthwaite), rounded down as the guide asks."""
    weights = sum(part.uncertainty**4 / part.freedom for part in known)
    freedom = uncertainty**4 / weights if weights > 0 else math.inf
    freedom = 1e9 if freedom > 1e9 else max(1.0, math.floor(freedom + 1e-9))
    return float(stdtrit(freedom, 0.5 + 0.5 * _COVERAGE))


def _sentence(
    title: str,
    word: Word,
    difference: float,
    reach: float,
    gap: float,
    known: tuple[Contribution, ...],
    missing: tuple[str, ...],
    size: float,
) -> str:
    if not known:
        return f"Whether the difference in {title} is chance cannot be told: nothing is known of {_list(missing)}."
    if word == "may be chance":
        cause = (
            f"it is within its uncertainty, most of which is {known[0].name}"
            if abs(difference) > gap
            else "forward and reverse sweep of one device differ by as much"
        )
        tail = f" Not known, and only adding to that: {_list(missing)}." if missing else ""
        return f"The difference in {title} may be chance: {cause}.{tail}"
    said = (
        f"The difference in {title} stands out from its uncertainty, most of which is {known[0].name}."
        if word == "stands out"
        else f"Whether the difference in {title} is chance cannot be told: "
        "another day, or another device of the kind, may differ as much."
    )
    if not missing:
        return said
    # How large what is not known would have to be at 95 % to make chance of the difference.
    spare = math.sqrt(max(difference**2 - reach**2, 0.0))
    margin = f" If that came to ±{100 * spare / size:.2g} % of {title}, the difference might be chance." if size > 0 else ""
    return f"{said} Not known: {_list(missing)}.{margin}"


def _list(names: tuple[str, ...]) -> str:
    if len(names) < 2:
        return "".join(names)
    return f"{', '.join(names[:-1])} and {names[-1]}"
