"""Several sweeps stacked to one least-squares problem."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from .errors import FitFailed
from .first_guess import scales
from .fit_problem import Problem, laid_over, points_used
from .fit_settings import FitSettings
from .least_squares import Minimum, minimise
from .models import Model
from .refinement import Refinement
from .sweep import Sweep

_LIMIT = 300
_STARTS = 4


class JointProblem:
    """The residuals of all sweeps in the unknowns that they share and in those of their own.

    Attributes
    ----------
    problems : list of Problem
        One for each sweep, its weights divided by the noise that its fit alone left.
    models : list of model
        Where each stands.
    names : list of (parameter, sweep)
        The unknowns; the sweep is None for a shared one.
    columns : list of ndarray of int
        Which of them each sweep moves, in the order of its own unknowns.
    count : int
        Points of all sweeps.
    """

    def __init__(
        self,
        sweeps: Sequence[Sweep],
        alone: Sequence[Refinement | None],
        settings: Sequence[FitSettings],
        switches: Mapping[str, bool],
    ):
        used = [points_used(sweep, each) for sweep, each in zip(sweeps, settings, strict=True)]
        some = next(fit.model for fit in alone if fit is not None)
        models = [
            laid_over(some if fit is None else fit.model, sweep, each.model)
            for fit, sweep, each in zip(alone, sweeps, settings, strict=True)
        ]
        # The diode and Vref/m have one meaning for all: the scales of the brightest sweep.
        size = max((scales(sweep) for sweep in used), key=lambda s: s.current)
        # Moved as one combination, J0 and n can be shared together or not at all.
        pairs = [(name, name.replace("saturation_current", "ideality")) for name in switches if name.startswith("satur")]
        coupled = all(switches[a] == switches[b] for a, b in pairs)
        held = {name: getattr(models[0], name) for name in settings[0].hold if switches[name]}
        self.models = [
            replace(model, **held, **({} if sweep.lit else {"photocurrent": 0.0}))
            for model, sweep in zip(models, used, strict=True)
        ]
        self.problems = []
        for model, sweep, each, fit in zip(self.models, used, settings, alone, strict=True):
            problem = Problem.of(sweep, each, model, size=size, coupled=coupled)
            if fit is not None:
                problem = problem.around(fit.model)
            self.problems.append(problem.with_weight(problem.weight / _noise(problem, model)))
        self.names: list[tuple[str, int | None]] = []
        self.columns = []
        for index, problem in enumerate(self.problems):
            keys = [(name, None if switches[name] else index) for name in problem.unknowns.free]
            self.names.extend(key for key in keys if key not in self.names)
            self.columns.append(np.array([self.names.index(key) for key in keys], dtype=int))
        self.count = sum(sweep.voltage.size for sweep in used)
        if self.count <= len(self.names):
            raise FitFailed(
                f"There are {self.count} points for {len(self.names)} free parameters of all sweeps; "
                "share or hold more of them, or measure more points."
            )
        self.lower, self.upper = np.full(len(self.names), -np.inf), np.full(len(self.names), np.inf)
        for problem, columns in zip(self.problems, self.columns, strict=True):
            self.lower[columns] = np.maximum(self.lower[columns], problem.lower)
            self.upper[columns] = np.minimum(self.upper[columns], problem.upper)

    def evaluate(self, place: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        residuals, rows = [], []
        for problem, columns in zip(self.problems, self.columns, strict=True):
            residual, jacobian = problem.evaluate(place[columns])
            wide = np.zeros((residual.size, len(self.names)))
            wide[:, columns] = jacobian
            residuals.append(residual)
            rows.append(wide)
        return np.concatenate(residuals), np.vstack(rows)

    def lowest(self) -> Minimum:
        """The lowest minimum from the shared values of one sweep after the other."""
        best: Minimum | None = None
        places = [problem.unknowns.place(model) for problem, model in zip(self.problems, self.models, strict=True)]
        order = sorted(range(len(places)), key=lambda index: -len(self.columns[index]))
        # The first and the last of a series lie farthest apart.
        for leading in dict.fromkeys([*order[:2], order[-1], *order[2:-1]][:_STARTS]):
            place = np.zeros(len(self.names))
            for index in [*range(len(places)), leading]:
                place[self.columns[index]] = places[index]
            minimum = minimise(self.evaluate, place, self.lower, self.upper, limit=_LIMIT)
            if np.isfinite(minimum.cost) and (best is None or minimum.cost < best.cost):
                best = minimum
        if best is None:
            raise FitFailed("No set of parameters could be laid over these sweeps together; refine them one by one first.")
        return best


def _noise(problem: Problem, model: Model) -> float:
    """Standard deviation of the weighted residuals of a sweep on its own."""
    residual = problem.evaluate(problem.unknowns.place(model))[0]
    freedom = max(residual.size - len(problem.unknowns.free), 1)
    rounding = 1e-12 * float(np.max(np.abs(problem.weight * problem.sweep.current)))
    return max(math.sqrt(float(residual @ residual) / freedom), rounding, 1e-300)
