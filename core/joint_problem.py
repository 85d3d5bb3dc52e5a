"""Several sweeps stacked to one least-squares problem; one sweep alone is the smallest stack."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from .errors import FitFailed
from .first_guess import scales
from .fit_problem import Problem, laid_over, points_used
from .fit_settings import FitSettings
from .least_squares import Minimum, minimise
from .models import Model
from .sweep import Sweep

_LIMIT = 300
_STARTS = 4


@dataclass(frozen=True, slots=True, eq=False)
class JointProblem:
    """The residuals of all sweeps in the unknowns that they share and in those of their own.

    Attributes
    ----------
    problems : tuple of Problem
        One for each sweep.
    models : tuple of model
        Where each stands.
    names : tuple of (parameter, sweep)
        The unknowns; the sweep is None for a shared one.
    columns : tuple of ndarray of int
        Which of them each sweep moves, in the order of its own unknowns.
    lower, upper : ndarray, shape (k,)
        Of the unknowns.
    """

    problems: tuple[Problem, ...]
    models: tuple[Model, ...]
    names: tuple[tuple[str, int | None], ...]
    columns: tuple[np.ndarray, ...]
    lower: np.ndarray
    upper: np.ndarray

    @classmethod
    def of(
        cls,
        sweeps: Sequence[Sweep],
        alone: Sequence[Model | None],
        settings: Sequence[FitSettings],
        switches: Mapping[str, bool],
    ) -> JointProblem:
        """The problem of a joint fit; each sweep weighs by the noise that its fit alone left.

        Parameters
        ----------
        sweeps : sequence of Sweep
        alone : sequence of (model or None)
            Each as refined alone; None where it could not be.
        settings : sequence of FitSettings
        switches : mapping of str to bool
            Which parameters have one value for all.

        Raises
        ------
        FitFailed
            If there are no more points than unknowns.
        """
        used = [points_used(sweep, each) for sweep, each in zip(sweeps, settings, strict=True)]
        some = next(model for model in alone if model is not None)
        models = [
            laid_over(model or some, sweep, each.model) for model, sweep, each in zip(alone, sweeps, settings, strict=True)
        ]
        # The diode and Vref/m have one meaning for all: the scales of the brightest sweep.
        size = max((scales(sweep) for sweep in used), key=lambda s: s.current)
        # Moved as one combination, J0 and n can be shared together or not at all.
        pairs = [(name, name.replace("saturation_current", "ideality")) for name in switches if name.startswith("satur")]
        coupled = all(switches[a] == switches[b] for a, b in pairs)
        held = {name: getattr(models[0], name) for name in settings[0].hold if switches[name]}
        models = [
            replace(model, **held, **({} if sweep.lit else {"photocurrent": 0.0}))
            for model, sweep in zip(models, used, strict=True)
        ]
        problems = []
        for model, sweep, each, fitted in zip(models, used, settings, alone, strict=True):
            problem = Problem.of(sweep, each, model, size=size, coupled=coupled)
            if fitted is not None:
                problem = problem.around(fitted)
            problems.append(problem.with_weight(problem.weight / _noise(problem, model)))
        joint = cls.over(problems, models, switches)
        if joint.count <= len(joint.names):
            raise FitFailed(
                f"There are {joint.count} points for {len(joint.names)} free parameters of all sweeps; "
                "share or hold more of them, or measure more points."
            )
        return joint

    @classmethod
    def over(cls, problems: Sequence[Problem], models: Sequence[Model], switches: Mapping[str, bool]) -> JointProblem:
        """Problems of one sweep each, with the weights that they have, stacked."""
        keys = [
            [(name, None if switches[name] else index) for name in problem.unknowns.free]
            for index, problem in enumerate(problems)
        ]
        names = tuple(dict.fromkeys(key for of_one in keys for key in of_one))
        columns = tuple(np.array([names.index(key) for key in of_one], dtype=int) for of_one in keys)
        lower, upper = np.full(len(names), -np.inf), np.full(len(names), np.inf)
        for problem, own in zip(problems, columns, strict=True):
            lower[own] = np.maximum(lower[own], problem.lower)
            upper[own] = np.minimum(upper[own], problem.upper)
        return cls(tuple(problems), tuple(models), names, columns, lower, upper)

    @property
    def count(self) -> int:
        """Points of all sweeps."""
        return sum(problem.sweep.voltage.size for problem in self.problems)

    def place(self, models: Sequence[Model]) -> np.ndarray:
        """Unknowns of the models of all sweeps, shape (k,); of a shared one the last sweep says it."""
        place = np.zeros(len(self.names))
        for problem, own, model in zip(self.problems, self.columns, models, strict=True):
            place[own] = problem.unknowns.place(model)
        return place

    def models_at(self, place: np.ndarray) -> tuple[Model, ...]:
        """The model of each sweep at a place."""
        return tuple(
            problem.unknowns.model(place[own]) for problem, own in zip(self.problems, self.columns, strict=True)
        )

    def evaluate(self, place: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Weighted residuals of all sweeps, one after the other, and their Jacobian in the unknowns."""
        residuals, first = [], 0
        wide = np.zeros((self.count, len(self.names)))
        for problem, own in zip(self.problems, self.columns, strict=True):
            residual, jacobian = problem.evaluate(place[own])
            wide[first : first + residual.size, own] = jacobian
            first += residual.size
            residuals.append(residual)
        return np.concatenate(residuals), wide

    def lowest(self) -> Minimum:
        """The lowest minimum from the shared values of one sweep after the other."""
        best: Minimum | None = None
        places = [problem.unknowns.place(model) for problem, model in zip(self.problems, self.models, strict=True)]
        order = sorted(range(len(places)), key=lambda index: -len(self.columns[index]))
        # The first and the last of a series lie farthest apart.
        for leading in dict.fromkeys([*order[:2], order[-1], *order[2:-1]][:_STARTS]):
            place = self.place(self.models)
            place[self.columns[leading]] = places[leading]
            minimum = minimise(self.evaluate, place, self.lower, self.upper, limit=_LIMIT)
            if np.isfinite(minimum.cost) and (best is None or minimum.cost < best.cost):
                best = minimum
        if best is None:
            raise FitFailed("No set of parameters could be laid over these sweeps together; refine them one by one first.")
        return best

    def sharing(self, name: str, index: int) -> tuple[int, ...]:
        """The sweeps that move with a free parameter of one of them, that one included."""
        if (name, None) not in self.names:
            return (index,)
        return tuple(place for place, problem in enumerate(self.problems) if name in problem.unknowns.free)

    def holding(self, name: str, sweeps: Sequence[int], models: Sequence[Model]) -> JointProblem:
        """The problem with a parameter of some sweeps held, at the values of models."""
        switches = {each: (each, None) in self.names for each in models[0].parameters}
        problems = list(self.problems)
        for index in sweeps:
            problems[index] = problems[index].holding(name, models[index])
        return JointProblem.over(problems, models, switches)

    def held_at(self, name: str, sweeps: Sequence[int], value: float) -> JointProblem:
        """The problem with another value of a held parameter of some sweeps."""
        problems = list(self.problems)
        for index in sweeps:
            problems[index] = problems[index].held_at(name, value)
        return replace(self, problems=tuple(problems))


def _noise(problem: Problem, model: Model) -> float:
    """Standard deviation of the weighted residuals of a sweep on its own."""
    residual = problem.evaluate(problem.unknowns.place(model))[0]
    freedom = max(residual.size - len(problem.unknowns.free), 1)
    rounding = 1e-12 * float(np.max(np.abs(problem.weight * problem.sweep.current)))
    return max(math.sqrt(float(residual @ residual) / freedom), rounding, 1e-300)
