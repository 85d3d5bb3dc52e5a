"""Whether the difference between two measured devices stands out, metric by metric.

Contributions are combined in quadrature and expanded to 95 % with the effective degrees of freedom. Noise of the points
alone never makes a difference stand out: a device measured again tomorrow differs by more than that. What is not known is
named, and how much of it would turn the verdict round is said.

References
----------
JCGM 100:2008, Guide to the expression of uncertainty in measurement: 4.3.7 (rectangular contributions), 5.1.2
(quadrature), G.4.1 (effective degrees of freedom); clause numbers from memory.
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

NOISE, AREA, LAMP, DIRECTION, SCATTER = (
    "noise of the points",
    "area",
    "lamp",
    "forward–reverse gap",
    "scatter of pixels",
)


@dataclass(frozen=True, slots=True)
class Contribution:
    """One part of the uncertainty of a difference: its name, standard uncertainty and degrees of freedom."""

    name: str
    uncertainty: float
    freedom: float = math.inf


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
        Expanded uncertainty at 95 %: a difference beyond it is not chance alone.
    contributions : tuple of Contribution
        The largest first.
    missing : tuple of str
        Names of contributions that are not known.
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


def stands_out(measured_a: Metrics, measured_b: Metrics, budget: Budget = Budget()) -> Verdict:
    """Weigh the differences between two measured sweeps.

    Parameters
    ----------
    measured_a, measured_b : Metrics
        From the points; a difference between models has no verdict.
    budget : Budget

    Returns
    -------
    Verdict
        For Jsc, Voc, FF, Pmp and PCE.
    """
    return Verdict({metric: _weigh(metric, measured_a, measured_b, budget) for metric in METRICS})


def _weigh(metric: str, measured_a: Metrics, measured_b: Metrics, budget: Budget) -> MetricVerdict:
    first, second = getattr(measured_a, metric), getattr(measured_b, metric)
    title = _TITLES[metric]
    if first.value is None or second.value is None:
        reason = (first.reason if first.value is None else second.reason) or "no value"
        sentence = f"Whether {title} differs cannot be told: one of the two has no value ({reason})."
        return MetricVerdict(metric, None, None, None, (), (), "cannot be told", sentence)
    known, missing = _contributions(metric, measured_a, measured_b, budget)
    difference = second.value - first.value
    uncertainty = math.sqrt(sum(part.uncertainty**2 for part in known))
    reach = _coverage(known, uncertainty) * uncertainty
    beyond = abs(difference) > reach
    common = {NOISE, AREA} if budget.area_shared or budget.same_device else {NOISE}
    more_than_noise = any(part.name not in common and part.uncertainty > 0 for part in known)
    if not known or (beyond and not more_than_noise):
        word: Word = "cannot be told"
    else:
        word = "stands out" if beyond else "may be chance"
    sentence = _sentence(title, word, difference, reach, known, missing, 0.5 * (abs(first.value) + abs(second.value)))
    return MetricVerdict(metric, difference, uncertainty if known else None, reach if known else None, known, missing, word, sentence)


def _contributions(
    metric: str, measured_a: Metrics, measured_b: Metrics, budget: Budget
) -> tuple[tuple[Contribution, ...], tuple[str, ...]]:
    """Known contributions, the largest first, and names of those not known."""
    first, second = getattr(measured_a, metric), getattr(measured_b, metric)
    parts: list[Contribution] = []
    missing: list[str] = []

    def book(name: str, part: Contribution | None) -> None:
        if part is None:
            missing.append(name)
        else:
            parts.append(part)

    book(NOISE, _both(NOISE, first.uncertainty, second.uncertainty))
    if metric in _PER_AREA:
        if budget.area_shared or budget.same_device:
            # A common factor 1 + δ changes the difference by δ times itself, and that is small beside it.
            relative = budget.area_a if budget.area_a is not None else budget.area_b
            shared = 0.0 if relative is None else relative * abs(second.value - first.value)
            parts.append(Contribution(AREA, shared))
        else:
            book(AREA, _both(AREA, _times(budget.area_a, first.value), _times(budget.area_b, second.value)))
    if metric in _WITH_LAMP:
        book(LAMP, _both(LAMP, _times(budget.lamp, first.value), _times(budget.lamp, second.value)))
    elif metric == "voc":
        slope = budget.ideality * thermal_voltage(budget.temperature)
        book(LAMP, _both(LAMP, _times(budget.lamp, slope), _times(budget.lamp, slope)))
    if not budget.same_device:
        book(
            DIRECTION,
            _both(
                DIRECTION,
                _gap(metric, measured_a, budget.other_direction_a),
                _gap(metric, measured_b, budget.other_direction_b),
            ),
        )
        book(SCATTER, _scatter(metric, budget))
    return tuple(sorted(parts, key=lambda part: -part.uncertainty)), tuple(missing)


def _both(name: str, first: float | None, second: float | None) -> Contribution | None:
    """Independent uncertainties of the two sides; one that is not known leaves the whole unknown."""
    return None if first is None or second is None else Contribution(name, math.hypot(first, second))


def _times(relative: float | None, value: float) -> float | None:
    return None if relative is None else relative * abs(value)


def _gap(metric: str, measured: Metrics, other: Metrics | None) -> float | None:
    """Half the gap between the directions, as the half-width of a rectangular distribution."""
    if other is None:
        return None
    here, there = getattr(measured, metric).value, getattr(other, metric).value
    return None if here is None or there is None else 0.5 * abs(here - there) / math.sqrt(3.0)


def _scatter(metric: str, budget: Budget) -> Contribution | None:
    """Standard deviation of one device within its group, for both sides."""
    spreads, freedoms = [], []
    for group in (budget.group_a, budget.group_b):
        values = [value for member in group if (value := getattr(member, metric).value) is not None]
        if len(values) < 2:
            return None
        spreads.append(float(np.std(values, ddof=1)))
        freedoms.append(len(values) - 1)
    total = math.hypot(*spreads)
    weights = sum(spread**4 / freedom for spread, freedom in zip(spreads, freedoms, strict=True))
    return Contribution(SCATTER, total, total**4 / weights if weights > 0 else math.inf)


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
    known: tuple[Contribution, ...],
    missing: tuple[str, ...],
    size: float,
) -> str:
    if not known:
        return f"Whether the difference in {title} is more than chance cannot be told: nothing is known of {_list(missing)}."
    largest = known[0].name
    unknown = f"{_list(missing)} {'is' if len(missing) == 1 else 'are'} not known" if missing else ""
    if word == "may be chance":
        tail = f"; {unknown} and could only widen it" if unknown else ""
        return (
            f"The difference in {title} may be chance: it lies within what is known of the uncertainty, "
            f"most of which is {largest}{tail}."
        )
    # How large what is not known would have to be, as a standard uncertainty, to make chance of the difference.
    spare = math.sqrt(max(difference**2 - reach**2, 0.0)) / 1.96
    margin = f" of some {100 * spare / size:.2g} % of {title}" if size > 0 else ""
    if word == "cannot be told":
        said = f"The difference in {title} is beyond the {largest}, but that alone says nothing about another day or device"
        return f"{said}: {unknown}; a standard uncertainty{margin} from there would make it chance." if unknown else f"{said}."
    if not missing:
        return f"The difference in {title} stands out; most of its uncertainty is {largest}."
    return (
        f"The difference in {title} stands out from what is known, most of which is {largest}; {unknown}, "
        f"and a standard uncertainty{margin} from there would make it chance."
    )


def _list(names: tuple[str, ...]) -> str:
    if len(names) < 2:
        return "".join(names)
    return f"{', '.join(names[:-1])} and {names[-1]}"
