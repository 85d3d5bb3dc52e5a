"""One diode or two: whether the data pay for the second.

References
----------
H. Akaike, IEEE Trans. Autom. Control 19 (1974) 716; correction for few points: C. M. Hurvich, C.-L. Tsai, Biometrika 76
(1989) 297; bands of the difference as usually read: K. P. Burnham, D. R. Anderson, "Model Selection and Multimodel
Inference", Springer 2002 (all from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from .errors import FitFailed
from .fit_problem import Problem, points_used
from .fit_settings import FitSettings
from .refine import refine
from .refinement import Refinement
from .sweep import Sweep

# Differences of AICc: below the first neither model is preferred, above the second the other has hardly any support.
_WEAK, _STRONG = 2.0, 10.0


@dataclass(frozen=True, slots=True, eq=False)
class ModelChoice:
    """Both models refined on one sweep.

    Attributes
    ----------
    aicc_one, aicc_two : float
        Akaike's criterion, corrected for few points; the lower, the better.
    sentence : str
        What the difference says.
    one, two : Refinement
    """

    aicc_one: float
    aicc_two: float
    sentence: str
    one: Refinement
    two: Refinement


def compare_models(sweep: Sweep, settings: FitSettings = FitSettings()) -> ModelChoice:
    """Refine one and two diodes with the same points and weights, and weigh the gain against the parameters it costs.

    Parameters
    ----------
    sweep : Sweep
    settings : FitSettings
        Of either model; holds and bounds are taken over where the other model has the parameter. The loss is least
        squares in any case, for a robust one has no likelihood.

    Raises
    ------
    FitFailed
        If either cannot be refined, or there are too few points for the comparison.
    """
    settings = replace(settings, loss="linear")
    # Held values of either model are those of its first guess; only n₁ and n₂ are held at values that mean something.
    one = refine(sweep, None, settings.of_model("one diode"))
    two = refine(sweep, None, settings.of_model("two diodes"))
    aicc_one, aicc_two = _aicc(sweep, one), _aicc(sweep, two)
    return ModelChoice(aicc_one, aicc_two, _sentence(aicc_two - aicc_one, one, two), one, two)


def _aicc(sweep: Sweep, refinement: Refinement) -> float:
    settings = refinement.settings
    problem = Problem.of(points_used(sweep, settings), settings, refinement.model).around(refinement.model)
    residual = problem.evaluate(problem.unknowns.place(refinement.model))[0]
    count, parameters = residual.size, len(refinement.free) + 1  # the noise is one more
    if count < parameters + 2:
        raise FitFailed(f"{count} points are too few to choose between one diode and two; measure at least 10.")
    # What is left on exact curves is rounding, in which no model is better.
    rounding = count * (1e-12 * float(np.max(np.abs(problem.weight * problem.sweep.current)))) ** 2
    cost = max(float(residual @ residual), rounding, 1e-300)
    likelihood = count * math.log(cost / count) - 2.0 * float(np.sum(np.log(problem.weight)))
    return likelihood + 2.0 * parameters * count / (count - parameters - 1)


def _sentence(difference: float, one: Refinement, two: Refinement) -> str:
    size = f"AICc {'lower' if difference < 0 else 'higher'} by {abs(difference):.3g}"
    n = "n₁ and n₂ free" if {"ideality_1", "ideality_2"} & set(two.free) else (
        f"n₁ = {two.model.ideality_1:.3g} and n₂ = {two.model.ideality_2:.3g}"
    )  # fmt: skip
    if difference <= -_STRONG:
        said = f"Two diodes ({n}) describe this sweep clearly better than one ({size})"
    elif difference < -_WEAK:
        said = f"Two diodes ({n}) describe this sweep somewhat better than one ({size})"
    elif difference <= _WEAK:
        said = f"This sweep does not tell one diode from two ({n}; {size}); keep the simpler one"
    elif difference < _STRONG:
        said = f"One diode describes this sweep somewhat better than two ({n}; for two, {size})"
    else:
        said = f"One diode describes this sweep clearly better than two ({n}; for two, {size})"
    misses = [any("misses the data" in sentence for sentence in fit.findings) for fit in (one, two)]
    if all(misses):
        return f"{said}. Both miss the data by more than the noise, so neither is the whole story."
    if difference < 0 and misses[1]:
        return f"{said}. Even two miss the data by more than the noise."
    return f"{said}."
