"""Profile likelihood: how far each parameter can move while all others adjust, before the data object.

Unlike the linear intervals of a refinement these follow the curved valleys of the sum of squares, and where the data only
bound a parameter they are open on the other side.

References
----------
D. M. Bates, D. G. Watts, "Nonlinear Regression Analysis and Its Applications", Wiley 1988, chapter 6 (from memory). An end
lies where the sum of squares has grown by the factor 1 + t²/ν, t being Student's quantile for ν degrees of freedom.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from .errors import FitFailed
from .fit_problem import Problem, points_used
from .intervals import Curvature, natural_ends, scaled
from .least_squares import minimise
from .models import Model
from .refinement import Refinement
from .sweep import Sweep
from .unknowns import FARTHEST, Kind

# An end is found when the growth of the sum of squares hits its mark to this part of t.
_CLOSE = 2e-3
_STEPS = 25
_LARGEST_LOG = 690.0
_COST_TOLERANCE, _LIMIT = 1e-9, 50


@dataclass(frozen=True, slots=True)
class Interval:
    """What the data say of one parameter.

    Attributes
    ----------
    low, high : float
        Ends; where the data set none, that of the physical or given bounds.
    low_bounded, high_bounded : bool
        Whether the data set this end.
    """

    low: float
    high: float
    low_bounded: bool = True
    high_bounded: bool = True


@dataclass(frozen=True, slots=True, eq=False)
class ProfileCurve:
    """The profile of one parameter, for a picture.

    Attributes
    ----------
    values : ndarray, shape (n,)
        Of the parameter, rising.
    growth : ndarray, shape (n,)
        √((S/S_min − 1)·ν): how far off the data hold each value, in standard errors; straight on either side where the
        linear interval is right.
    mark : float
        Student's t at the level of the interval.
    """

    values: np.ndarray
    growth: np.ndarray
    mark: float


def profile_intervals(
    sweep: Sweep, refinement: Refinement, confidence: float | None = None, parameters: Iterable[str] | None = None
) -> dict[str, Interval]:
    """Profile-likelihood intervals of free parameters.

    Parameters
    ----------
    sweep : Sweep
        The one that was refined.
    refinement : Refinement
    confidence : float or None
        Level; None: that of the refinement's settings.
    parameters : iterable of str or None
        Names; None: all that were free.

    Returns
    -------
    dict of str to Interval
        Fit noise only. Weights are frozen as the refinement left them.

    Raises
    ------
    FitFailed
        If a name was not free, there are no more points than free parameters, or the sweep was refined together
        with others.
    """
    with np.errstate(all="ignore"):  # a trial may leave the range of floats; it then counts as far off
        profiler = _Profiler(sweep, refinement, confidence)
        names = refinement.free if parameters is None else tuple(parameters)
        return {name: profiler.interval(name) for name in names}


def profile_curve(
    sweep: Sweep, refinement: Refinement, parameter: str, *, confidence: float | None = None, points: int = 25
) -> ProfileCurve:
    """The profile of one parameter over somewhat more than its interval. Parameters and errors as for ``profile_intervals``."""
    with np.errstate(all="ignore"):
        profiler = _Profiler(sweep, refinement, confidence)
        return profiler.curve(parameter, points)


class _Profiler:
    """The problem of a refinement, with one parameter after the other held."""

    def __init__(self, sweep: Sweep, refinement: Refinement, confidence: float | None):
        if refinement.others:
            raise FitFailed(
                "This sweep was refined together with others, so its intervals are those of the joint fit; "
                "refine it alone for profile intervals."
            )
        settings = refinement.settings
        level = settings.confidence if confidence is None else confidence
        if not 0 < level < 1:
            raise FitFailed("The confidence of intervals must lie between 0 and 1, for instance 0.95.")
        self.given = self.model = refinement.model
        self.problem = Problem.of(points_used(sweep, settings), settings, self.model).around(self.model)
        unknowns = self.problem.unknowns
        freedom = self.problem.sweep.voltage.size - len(unknowns.free)
        if freedom < 1:
            raise FitFailed("There are as many free parameters as points, so no interval can be given; hold some of them.")
        place = np.clip(unknowns.place(self.model), self.problem.lower, self.problem.upper)
        # Polished, for the model may have been read back from rounded numbers.
        self.minimum = minimise(self.problem.evaluate, place, self.problem.lower, self.problem.upper)
        self.model = unknowns.model(self.minimum.place)
        self.curvature = Curvature.of(self.minimum)
        known = np.isfinite(np.diag(refinement.covariance))
        # What the refinement found not determined is not searched for ends.
        self.open = {name for name, flag in zip(refinement.free, known, strict=True) if not flag}
        self.chain = unknowns.scaled_chain(self.minimum.place)
        self.mark = float(stdtrit(freedom, 0.5 + level / 2))
        rounding = 1e-24 * float(np.sum((self.problem.weight * self.problem.sweep.current) ** 2))
        self.unit = max(self.minimum.cost, rounding) / freedom

    def interval(self, name: str) -> Interval:
        if name in self.open:
            return Interval(*self.problem.limits[name], low_bounded=False, high_bounded=False)
        line = self._line(name)
        low, low_bounded = line.end(-1.0, self.mark)
        high, high_bounded = line.end(+1.0, self.mark)
        ends = natural_ends(line.kind, low, high)
        bounded = (high_bounded, low_bounded) if line.kind == "inverse" else (low_bounded, high_bounded)
        limit = self.problem.limits[name]
        here = getattr(self.given, name)
        # An end that the data do not set is that of the bounds; the refined value itself always lies inside.
        return Interval(
            min(max(ends[0], limit[0]), here) if bounded[0] else limit[0],
            max(min(ends[1], limit[1]), here) if bounded[1] else limit[1],
            *bounded,
        )

    def curve(self, name: str, points: int) -> ProfileCurve:
        line = self._line(name)
        centre = line.centre
        ends = [line.end(side, self.mark) for side in (-1.0, 1.0)]
        spread = max(abs(end - centre) for end, bounded in ends if bounded) if any(b for _, b in ends) else line.step
        low, high = (
            max(min(centre + 1.15 * (end - centre), line.high), line.low) if bounded else
            max(min(centre + side * 1.15 * spread, line.high), line.low)
            for side, (end, bounded) in zip((-1.0, 1.0), ends, strict=True)
        )  # fmt: skip
        grid = np.linspace(low, high, points)
        # Outward from the middle, so that each fit starts beside the last.
        growth = np.array([line.growth(value) for value in grid.tolist()])
        values = np.array([natural_ends(line.kind, value, value)[0] for value in grid.tolist()])
        order = np.argsort(values)
        return ProfileCurve(values[order], growth[order], self.mark)

    def _line(self, name: str) -> _Line:
        problem, unknowns = self.problem, self.problem.unknowns
        if name not in unknowns.free:
            raise FitFailed(f"The {name.replace('_', ' ')} was not free in this fit, so it has no interval.")
        kind, row = unknowns.kind(name), unknowns.free.index(name)
        held = Problem.of(problem.sweep, problem.settings, self.model, size=unknowns.scales, hold=(name,))
        held = held.with_weight(problem.weight)
        variance = float(self.chain[row] @ self.curvature.inverse @ self.chain[row])
        step = math.sqrt(max(variance * self.curvature.variance, 0.0))
        farthest = _LARGEST_LOG if kind == "log" else FARTHEST * abs(float(self.chain[row, row]))
        ends = sorted(min(max(_scaled_end(kind, value), -farthest), farthest) for value in problem.limits[name])
        # How the others go with the parameter near the minimum.
        slope = (self.curvature.inverse @ self.chain[row]) / variance if variance > 0 else np.zeros(row + 1)
        return _Line(self, held, name, kind, step, (ends[0], ends[1]), slope)


class _Line:
    """Sum of squares along one parameter, on the scale of its kind, all others adjusting."""

    def __init__(
        self,
        profiler: _Profiler,
        problem: Problem,
        name: str,
        kind: Kind,
        step: float,
        ends: tuple[float, float],
        slope: np.ndarray,
    ):
        self.profiler, self.problem, self.name, self.kind = profiler, problem, name, kind
        self.low, self.high = ends
        self.centre = min(max(scaled(kind, getattr(profiler.model, name)), self.low), self.high)
        # Where the linear spread says nothing, a first stride that the search can lengthen.
        scale = max(abs(self.centre), 1e-12)
        most, usual = (50.0, 3.0) if kind == "log" else (1e6 * scale, 0.1 * scale)
        self.step = step if 0 < step < most else usual
        self.known: list[tuple[float, np.ndarray]] = [(self.centre, problem.unknowns.place(profiler.model))]
        self.first = self._predicted(slope)

    def growth(self, value: float) -> float:
        """√((S − S_min)/(S_min/ν)) with the parameter at a value."""
        problem = self._held_at(value)
        start = np.clip(self._start(value), problem.lower, problem.upper)
        minimum = minimise(
            problem.evaluate, start, problem.lower, problem.upper, cost_tolerance=_COST_TOLERANCE, limit=_LIMIT
        )
        if not np.isfinite(minimum.cost):
            return math.inf
        self.known.append((value, minimum.place))
        return math.sqrt(max(minimum.cost - self.profiler.minimum.cost, 0.0) / self.profiler.unit)

    def end(self, side: float, mark: float) -> tuple[float, bool]:
        """Where the growth reaches its mark on one side, and whether it does before the bound."""
        limit = self.high if side > 0 else self.low
        del self.known[1:]
        if (limit - self.centre) * side <= 1e-9 * max(abs(self.centre), 1e-12):
            return limit, False
        inner, grown = self.centre, 0.0
        reach = mark * self.step
        outer = math.inf
        outer_grown = math.inf
        value = self.centre + side * reach
        for _ in range(_STEPS):
            if (value - limit) * side >= 0:
                value = limit
            here = self.growth(value)
            if abs(here - mark) <= _CLOSE * mark:
                return value, True
            if here < mark:
                if value == limit:
                    return limit, False
                inner, grown = value, here
            else:
                outer, outer_grown = value, here
                if abs(outer - inner) <= 1e-7 * abs(outer):
                    return outer, True
            if math.isinf(outer):
                # Growth is nearly straight, seldom faster; four times is the longest stride.
                stride = (value - self.centre) * (min(max(1.05 * mark / here, 1.1), 4.0) if here > 0 else 4.0)
                value = self.centre + stride
            else:
                share = (mark - grown) / (outer_grown - grown) if math.isfinite(outer_grown) else 0.5
                value = inner + min(max(share, 0.05), 0.95) * (outer - inner)
        return (limit, False) if math.isinf(outer) else (outer, True)

    def _held_at(self, value: float) -> Problem:
        natural = natural_ends(self.kind, value, value)[0]
        return self.problem.held_at(self.name, natural)

    def _predicted(self, slope: np.ndarray) -> Callable[[float], np.ndarray]:
        """Places of the others near the minimum, to first order."""
        profiler = self.profiler
        full, wide = profiler.minimum.place, profiler.problem.unknowns

        def at(value: float) -> np.ndarray:
            if slope.size != full.size:
                return self.known[0][1]
            moved = np.clip(full + slope * (value - self.centre), profiler.problem.lower, profiler.problem.upper)
            model: Model = wide.model(moved)
            return self.problem.unknowns.place(model)

        return at

    def _start(self, value: float) -> np.ndarray:
        """Where the others start: along the line through the two nearest known places."""
        if len(self.known) < 2:
            return self.first(value)
        near = sorted(self.known, key=lambda pair: abs(pair[0] - value))[:2]
        (a, place_a), (b, place_b) = near
        share = (value - a) / (b - a) if b != a else 0.0
        return place_a + min(max(share, -2.0), 2.0) * (place_b - place_a)


def _scaled_end(kind: Kind, value: float) -> float:
    if kind == "log":
        return math.log(value) if 0 < value < math.inf else (-math.inf if value <= 0 else math.inf)
    if kind == "inverse":
        return math.inf if value <= 0 else 1.0 / value
    return value
