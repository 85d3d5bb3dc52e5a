"""One fit over several sweeps of a device, which share what physics shares.

A dark sweep and a lit one have the same diode and resistances; a series over light intensity has one diode and one Rs, with
a photocurrent each and, as collection may depend on voltage, a shunt each. Every switch is the user's.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import fdtrc

from .errors import FitFailed
from .fit_problem import Problem
from .fit_settings import FitSettings
from .intervals import Curvature
from .joint_problem import JointProblem
from .least_squares import Minimum
from .models import Model
from .refine import refine, refinement_of
from .refinement import Bond, Refinement
from .sweep import Sweep

_TEMPERATURES = 1.0  # [K], as far apart as sweeps of one J0 may be
_RARE = 1e-3  # a disagreement that chance alone would give this seldom is said
_WORDS = {
    "photocurrent": "Jph",
    "saturation_current": "J0",
    "saturation_current_1": "J0₁",
    "saturation_current_2": "J0₂",
    "ideality": "n",
    "ideality_1": "n₁",
    "ideality_2": "n₂",
    "series_resistance": "Rs",
    "shunt_resistance": "Rsh",
}


@dataclass(frozen=True, slots=True, eq=False)
class JointRefinement:
    """The outcome of one fit over several sweeps.

    Attributes
    ----------
    refinements : list of Refinement
        One for each sweep, in their order; errors and intervals are those of the joint fit.
    shared : dict of str to bool
        Which parameters had one value for all sweeps.
    findings : tuple of str
        Sentences on whether the sweeps agree.
    """

    refinements: list[Refinement]
    shared: dict[str, bool]
    findings: tuple[str, ...]


def usually_shared(sweeps: Sequence[Sweep], model: str = "one diode") -> dict[str, bool]:
    """What sweeps of one device share unless the user says otherwise.

    The diode and Rs always; Rsh of one dark sweep and one lit one, but not of several light levels; Jph never.
    """
    levels = sum(sweep.lit for sweep in sweeps)
    shared = dict.fromkeys(FitSettings(model=model).parameters, True)
    return shared | {"photocurrent": False, "shunt_resistance": levels <= 1}


def refine_together(
    sweeps: Sequence[Sweep],
    starts: Sequence[Model | None] | None = None,
    settings: FitSettings | Sequence[FitSettings] = FitSettings(),
    shared: Mapping[str, bool] | None = None,
) -> JointRefinement:
    """Refine several sweeps of one device at once.

    Parameters
    ----------
    sweeps : sequence of Sweep
        Two or more, lit or dark.
    starts : sequence of (model or None), or None
        Where each stands; None starts from the first guess.
    settings : FitSettings, or one for each sweep
        Of one model, with the same holds and bounds; points, weights and windows may differ.
    shared : mapping of str to bool, or None
        Switches that differ from ``usually_shared``.

    Returns
    -------
    JointRefinement

    Raises
    ------
    FitFailed
        If the sweeps cannot share what is asked for, or none can be refined.

    Notes
    -----
    Each sweep is refined alone first. Its residual there is the noise that it is weighed with, so that no sweep drowns the
    others by its unit, its number of points or its size; effective and robust weights stay as that fit left them.
    """
    settings = [settings] * len(sweeps) if isinstance(settings, FitSettings) else list(settings)
    switches = _switches(sweeps, settings, shared)
    alone = _alone(sweeps, starts or [None] * len(sweeps), settings)
    with np.errstate(all="ignore"):  # on the scale of one sweep another may leave the range of floats
        joint = JointProblem.of(sweeps, alone, settings, switches)
        minimum = joint.lowest()
        conflict = _conflict(joint, minimum, sweeps, alone, settings, switches)
    return JointRefinement(_refinements(joint, sweeps, alone, minimum, switches), switches, tuple(conflict))


def _switches(
    sweeps: Sequence[Sweep], settings: Sequence[FitSettings], shared: Mapping[str, bool] | None
) -> dict[str, bool]:
    if len(sweeps) < 2:
        raise FitFailed("A joint fit needs at least two sweeps of one device.")
    if len(settings) != len(sweeps):
        raise FitFailed("A joint fit needs one set of settings for all sweeps, or one for each.")
    first = settings[0]
    if any((s.model, s.hold, dict(s.bounds)) != (first.model, first.hold, dict(first.bounds)) for s in settings[1:]):
        raise FitFailed("Sweeps that are refined together must have the same model, holds and bounds.")
    switches = usually_shared(sweeps, first.model)
    for name, on in (shared or {}).items():
        if name not in switches:
            raise FitFailed(f"The model has no parameter called “{name}” to share.")
        switches[name] = bool(on)
    if len({sweep.per_area for sweep in sweeps}) > 1:
        raise FitFailed("Some of these sweeps are per area and some are not; give all an area, or none.")
    if len({sweep.series_cells for sweep in sweeps}) > 1:
        raise FitFailed("These sweeps differ in the number of cells in series, so they are not of one device.")
    temperatures = [sweep.temperature for sweep in sweeps]
    of_temperature = [name for name, on in switches.items() if on and name.startswith("saturation_current")]
    if of_temperature and max(temperatures) - min(temperatures) > _TEMPERATURES:
        raise FitFailed(
            f"These sweeps differ in temperature by {max(temperatures) - min(temperatures):.3g} K, so they cannot share J0; "
            "leave it to each sweep, or choose sweeps of one temperature."
        )
    return switches


def _alone(
    sweeps: Sequence[Sweep], starts: Sequence[Model | None], settings: Sequence[FitSettings]
) -> list[Model | None]:
    alone: list[Model | None] = []
    last: FitFailed | None = None
    for sweep, start, each in zip(sweeps, starts, settings, strict=True):
        try:
            alone.append(refine(sweep, start, each).model)
        except FitFailed as failed:
            # A sweep that cannot stand alone may still say something beside others.
            last = failed
            alone.append(None)
    if all(model is None for model in alone):
        raise last or FitFailed("None of these sweeps can be refined.")
    return alone


def _refinements(
    joint: JointProblem,
    sweeps: Sequence[Sweep],
    alone: Sequence[Model | None],
    minimum: Minimum,
    switches: Mapping[str, bool],
) -> list[Refinement]:
    curvature, first, made = Curvature.of(minimum), 0, []
    free = {name for name, _ in joint.names}
    common = [_WORDS[name] for name in switches if switches[name] and name in free]
    others = "one other sweep" if len(sweeps) == 2 else f"{len(sweeps) - 1} other sweeps"
    said = f"Refined together with {others}{f', sharing {_listed(common)}' if common else ''}."
    shared = frozenset(name for name, on in switches.items() if on)
    for index, (sweep, problem, columns) in enumerate(zip(sweeps, joint.problems, joint.columns, strict=True)):
        rows = slice(first, first + problem.sweep.voltage.size)
        first = rows.stop
        residual = minimum.residual[rows]
        part = replace(
            minimum,
            place=minimum.place[columns],
            residual=residual,
            jacobian=minimum.jacobian[rows][:, columns],
            cost=float(residual @ residual),
        )
        one = refinement_of(sweep, problem, part, curvature.of_these(columns), problem.pattern(part))
        bond = Bond(index, shared, alone[index])
        made.append(replace(one, findings=(said, *one.findings), others=len(sweeps) - 1, bond=bond))
    return made


def _conflict(
    joint: JointProblem,
    minimum: Minimum,
    sweeps: Sequence[Sweep],
    alone: Sequence[Model | None],
    settings: Sequence[FitSettings],
    switches: Mapping[str, bool],
) -> list[str]:
    """Whether sharing costs more than noise explains, and which parameter disagrees most."""
    if any(model is None for model in alone):
        return ["Not every sweep can be refined alone, so whether they agree was not weighed."]
    free = {name for name, _ in joint.names}
    common = [name for name in switches if switches[name] and sum(name in p.unknowns.free for p in joint.problems) > 1]
    separate = sum(len(problem.unknowns.free) for problem in joint.problems)
    saved, freedom = separate - len(joint.names), joint.count - separate
    if saved < 1 or freedom < 1 or not free:
        return ["Nothing is shared, so each sweep was refined by itself."]
    # Each sweep was weighed by its own residual, so that refined apart they would leave their degrees of freedom.
    apart = sum(_cost_alone(problem, model) for problem, model in zip(joint.problems, joint.models, strict=True))
    extra = max(minimum.cost - apart, 0.0)
    ratio = (extra / saved) / max(apart / freedom, 1e-300)
    words = _listed([_WORDS[name] for name in common])
    if fdtrc(saved, freedom, ratio) >= _RARE:
        return [f"The sweeps agree on {words} within noise."]
    growth = 100 * (math.sqrt(minimum.cost / max(apart, 1e-300)) - 1)
    gains = {}
    for name in common:
        try:
            apart_in = JointProblem.of(sweeps, alone, settings, {**switches, name: False})
            gains[name] = minimum.cost - apart_in.lowest().cost
        except FitFailed:
            continue
    worst = max(gains, key=gains.__getitem__, default=None)
    advice = ""
    if worst is not None and gains[worst] > 0.3 * extra:
        advice = f" {_WORDS[worst]} disagrees most: let it differ, or ask why it does."
    return [
        f"The sweeps do not agree on {words}: sharing them raises the residual by {growth:.2g} %, more than noise explains."
        f"{advice} Errors and intervals are too small here."
    ]


def _cost_alone(problem: Problem, model: Model) -> float:
    residual = problem.evaluate(problem.unknowns.place(model))[0]
    return float(residual @ residual)


def _listed(words: Sequence[str]) -> str:
    return " and ".join([", ".join(words[:-1]), words[-1]] if len(words) > 1 else words)
