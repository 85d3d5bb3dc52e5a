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
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from .errors import FitFailed
from .fit_problem import Problem, points_used
from .intervals import Curvature, natural_ends, scaled
from .joint_problem import JointProblem
from .least_squares import minimise
from .models import Model
from .refinement import Refinement
from .sweep import Sweep
from .unknowns import FARTHEST, LEAST_LOG, Kind

# An end is found when the growth of the sum of squares hits its mark to this part of t.
_CLOSE = 2e-3
_STEPS = 25
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


# The other sweeps of a joint fit with their refinements, in the order of that fit.
Beside = Sequence[tuple[Sweep, Refinement]]


def profile_intervals(
    sweep: Sweep,
    refinement: Refinement,
    confidence: float | None = None,
    parameters: Iterable[str] | None = None,
    *,
    beside: Beside = (),
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
    beside : sequence of (Sweep, Refinement)
        Where the sweep was refined together with others: these, with their refinements, in the order of that fit.

    Returns
    -------
    dict of str to Interval
        Fit noise only. Weights are frozen as the refinement left them. Of a joint fit all sweeps say how far a
        parameter of this one can move.

    Raises
    ------
    FitFailed
        If a name was not free, there are no more points than free parameters, or the sweep was refined together
        with others that are not those given.
    """
    with np.errstate(all="ignore"):  # a trial may leave the range of floats; it then counts as far off
        profiler = _Profiler(sweep, refinement, confidence, beside)
        names = refinement.free if parameters is None else tuple(parameters)
        return {name: profiler.interval(name) for name in names}


def profile_curve(
    sweep: Sweep,
    refinement: Refinement,
    parameter: str,
    *,
    confidence: float | None = None,
    points: int = 25,
    beside: Beside = (),
) -> ProfileCurve:
    """The profile of one parameter over somewhat more than its interval. Parameters and errors as for ``profile_intervals``."""
    with np.errstate(all="ignore"):
        profiler = _Profiler(sweep, refinement, confidence, beside)
        return profiler.curve(parameter, points)


class _Profiler:
    """The problem of a refinement or of the joint fit it belongs to, with one parameter after the other held."""

    def __init__(self, sweep: Sweep, refinement: Refinement, confidence: float | None, beside: Beside):
        level = refinement.settings.confidence if confidence is None else confidence
        if not 0 < level < 1:
            raise FitFailed("The confidence of intervals must lie between 0 and 1, for instance 0.95.")
        self.problem, self.index, models = _problem_of(sweep, refinement, beside)
        self.own, columns = self.problem.problems[self.index], self.problem.columns[self.index]
        freedom = self.problem.count - len(self.problem.names)
        if freedom < 1:
            raise FitFailed("There are as many free parameters as points, so no interval can be given; hold some of them.")
        place = np.clip(self.problem.place(models), self.problem.lower, self.problem.upper)
        # Polished, for the model may have been read back from rounded numbers.
        self.minimum = minimise(self.problem.evaluate, place, self.problem.lower, self.problem.upper)
        self.given, self.models = refinement.model, self.problem.models_at(self.minimum.place)
        self.curvature = Curvature.of(self.minimum)
        known = np.isfinite(np.diag(refinement.covariance))
        # What the refinement found not determined is not searched for ends.
        self.open = {name for name, flag in zip(refinement.free, known, strict=True) if not flag}
        self.chain = np.zeros((columns.size, self.minimum.place.size))
        self.chain[:, columns] = self.own.unknowns.scaled_chain(self.minimum.place[columns])
        self.mark = float(stdtrit(freedom, 0.5 + level / 2))
        rounding = 1e-24 * sum(float(np.sum((each.weight * each.sweep.current) ** 2)) for each in self.problem.problems)
        self.unit = max(self.minimum.cost, rounding) / freedom

    def interval(self, name: str) -> Interval:
        if name in self.open:
            return Interval(*self.own.limits[name], low_bounded=False, high_bounded=False)
        line = self._line(name)
        low, low_bounded = line.end(-1.0, self.mark)
        high, high_bounded = line.end(+1.0, self.mark)
        ends = natural_ends(line.kind, low, high)
        bounded = (high_bounded, low_bounded) if line.kind == "inverse" else (low_bounded, high_bounded)
        limit = self.own.limits[name]
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
        unknowns = self.own.unknowns
        if name not in unknowns.free:
            raise FitFailed(f"The {name.replace('_', ' ')} was not free in this fit, so it has no interval.")
        kind, row = unknowns.kind(name), unknowns.free.index(name)
        move = self.chain[row]
        variance = float(move @ self.curvature.inverse @ move)
        step = math.sqrt(max(variance * self.curvature.variance, 0.0))
        farthest = -LEAST_LOG if kind == "log" else FARTHEST * abs(float(move[self.problem.columns[self.index][row]]))
        ends = sorted(min(max(_scaled_end(kind, value), -farthest), farthest) for value in self.own.limits[name])
        # How all unknowns go with the parameter near the minimum.
        slope = (self.curvature.inverse @ move) / variance if variance > 0 else np.zeros(move.size)
        return _Line(self, name, kind, step, (ends[0], ends[1]), slope)


def _problem_of(sweep: Sweep, refinement: Refinement, beside: Beside) -> tuple[JointProblem, int, tuple[Model, ...]]:
    """The least-squares problem of a refinement, the place of the sweep in it, and the refined models."""
    bond, settings = refinement.bond, refinement.settings
    if bond is None and refinement.others:
        raise FitFailed(
            "This sweep was refined together with others, and what its profile intervals need was not kept; "
            "refine them together again."
        )
    if bond is None:
        problem = Problem.of(points_used(sweep, settings), settings, refinement.model).around(refinement.model)
        models: tuple[Model, ...] = (refinement.model,)
        return JointProblem.over([problem], models, dict.fromkeys(settings.parameters, False)), 0, models
    whole = [*beside[: bond.place], (sweep, refinement), *beside[bond.place :]]
    if len(beside) != refinement.others or any(
        fit.others != refinement.others
        or fit.bond is None
        or (fit.bond.place, fit.bond.shared, fit.bond.entries) != (place, bond.shared, bond.entries)
        for place, (_, fit) in enumerate(whole)
    ):
        raise FitFailed(
            "This sweep was refined together with others that are gone or were refined anew since, so its profile "
            "intervals are not known; refine them together again."
        )
    joint = JointProblem.of(
        [each for each, _ in whole],
        [fit.bond.alone for _, fit in whole],
        [fit.settings for _, fit in whole],
        {name: name in bond.shared for name in settings.parameters},
    )
    return joint, bond.place, tuple(fit.model for _, fit in whole)


class _Line:
    """Sum of squares along one parameter, on the scale of its kind, all others adjusting."""

    def __init__(
        self,
        profiler: _Profiler,
        name: str,
        kind: Kind,
        step: float,
        ends: tuple[float, float],
        slope: np.ndarray,
    ):
        self.profiler, self.name, self.kind = profiler, name, kind
        self.sharing = profiler.problem.sharing(name, profiler.index)
        self.problem = profiler.problem.holding(name, self.sharing, profiler.models)
        self.low, self.high = ends
        self.centre = min(max(scaled(kind, getattr(profiler.models[profiler.index], name)), self.low), self.high)
        # Where the linear spread says nothing, a first stride that the search can lengthen.
        scale = max(abs(self.centre), 1e-12)
        most, usual = (50.0, 3.0) if kind == "log" else (1e6 * scale, 0.1 * scale)
        self.step = step if 0 < step < most else usual
        self.known: list[tuple[float, np.ndarray]] = [(self.centre, self.problem.place(profiler.models))]
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

    def _held_at(self, value: float) -> JointProblem:
        natural = natural_ends(self.kind, value, value)[0]
        return self.problem.held_at(self.name, self.sharing, natural)

    def _predicted(self, slope: np.ndarray) -> Callable[[float], np.ndarray]:
        """Places of the others near the minimum, to first order."""
        full, wide = self.profiler.minimum.place, self.profiler.problem

        def at(value: float) -> np.ndarray:
            moved = np.clip(full + slope * (value - self.centre), wide.lower, wide.upper)
            return self.problem.place(wide.models_at(moved))

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
