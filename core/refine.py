"""Least squares of a diode model on a sweep, from where the dials stand or from cold."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import replace

import numpy as np

from .diode import PARAMETERS
from .errors import FitFailed
from .first_guess import starts
from .fit_findings import findings
from .fit_problem import Problem, laid_over, points_used
from .fit_settings import FitSettings
from .intervals import Curvature, Knowledge, knowledge, opened
from .least_squares import Minimum
from .models import Model, two_diodes_like
from .refinement import Refinement
from .residuals import Structure, looks_s_shaped
from .sweep import Sweep
from .two_diode_guess import USUAL, two_diode_starts
from .unknowns import Unknowns
from .weighting import resolved, stated_noise

__all__ = ["FitSettings", "Refinement", "refine"]

# A fit whose residuals look like noise, and exceed it by no more than its estimate is uncertain, needs no second start.
_LENIENCY = 2.5
_STARTS = 4
_OF_THE_DIODE = ("saturation_current", "ideality", "series_resistance")
_DECADES = 1e8  # J0 whose interval spans more is not known at all
_SAME = 1e-8  # minima whose sums of squares differ by less are one


def refine(sweep: Sweep, start: Model | None = None, settings: FitSettings = FitSettings()) -> Refinement:
    """Refine a diode model on a sweep by least squares in the current.

    Parameters
    ----------
    sweep : Sweep
    start : OneDiode, TwoDiode or None
        Where the dials stand, and the values of held parameters; None starts from the first guess (n₁ = 1 and n₂ = 2
        of two diodes). The first guess is tried in any case if the fit from here ends above the noise. A start of the
        other model is turned into nearly the same curve.
    settings : FitSettings

    Returns
    -------
    Refinement

    Raises
    ------
    FitFailed
        If the points left are fewer than the free parameters, or no curve can be laid over them.

    Notes
    -----
    In the dark the photocurrent is held, at zero unless the start gives it and the settings hold it.
    """
    used = points_used(sweep, settings)
    if used.voltage.size < 3:
        raise FitFailed(f"Only {used.voltage.size} points are left for the fit; widen the window or exclude fewer.")
    cold = [] if start is not None else _cold(used, settings)
    base = cold[0] if start is None else laid_over(start, sweep, settings.model)
    if not sweep.lit and (start is None or "photocurrent" not in settings.hold):
        base = replace(base, photocurrent=0.0)
    problem = Problem.of(used, settings, base)
    free = problem.unknowns.free
    if used.voltage.size < len(free):
        raise FitFailed(
            f"There are {used.voltage.size} points for {len(free)} free parameters; "
            "hold some of them, or measure more points."
        )
    minimum, pattern = _best(problem, _candidates(problem, base, cold))
    problem, polished = problem.polished(minimum)
    if polished is not minimum:
        minimum, pattern = polished, problem.pattern(polished)
    return refinement_of(sweep, problem, minimum, Curvature.of(minimum), pattern)


def refinement_of(
    sweep: Sweep, problem: Problem, minimum: Minimum, curvature: Curvature, pattern: Structure
) -> Refinement:
    """What a minimum says, as the outcome of a fit."""
    used, settings, unknowns, limits = problem.sweep, problem.settings, problem.unknowns, problem.limits
    model = unknowns.final(minimum.place, limits)
    s_shaped = sweep.lit and pattern.systematic and looks_s_shaped(used)
    reaches_voc = not sweep.lit or bool(np.min(used.current) <= 0)
    known = knowledge(curvature, unknowns, limits, settings.confidence)
    if s_shaped:  # a curve that no diode can follow has no parameters to be known
        known = opened(known, unknowns.free, unknowns, limits)
    elif not reaches_voc and not (minimum.settled and _knows_the_diode(model, known)):
        known = opened(known, [name for name in unknowns.free if name.startswith(_OF_THE_DIODE)], unknowns, limits)
    residual = model.current(used.voltage) - used.current
    freedom, chi_square = used.voltage.size - len(unknowns.free), None
    if settings.weights == "from the file" and freedom > 0:
        with np.errstate(over="ignore"):
            chi_square = float(np.sum((residual / stated_noise(used, model, settings.voltage_noise)) ** 2)) / freedom
    return Refinement(
        model=model,
        settings=settings,
        standard_errors=known.standard_errors,
        covariance=known.covariance,
        free=unknowns.free,
        intervals=known.intervals,
        rmse=float(np.sqrt(np.mean(residual**2))),
        points=used.voltage.size,
        findings=findings(
            model,
            known,
            unknowns,
            pattern,
            limits,
            confidence=settings.confidence,
            resistance_unit="Ω cm²" if sweep.per_area else "Ω",
            settled=minimum.settled,
            s_shaped=s_shaped,
            lit=sweep.lit,
            reaches_voc=reaches_voc,
            chi_square=chi_square,
        ),
        weights=resolved(settings.weights, sweep),
        chi_square=chi_square,
    )


def _knows_the_diode(model: Model, known: Knowledge) -> bool:
    """Whether a fit knows every free J0 to a few decades and every free n to its half."""
    for name, (low, high) in known.intervals.items():
        if name in known.undetermined or (name.startswith("ideality") and high - low > getattr(model, name)):
            return False
        if name == "saturation_current" and not 0 < high < low * _DECADES:
            return False
    return True


def _cold(sweep: Sweep, settings: FitSettings) -> list[Model]:
    """Starts without any dials, best first."""
    if settings.model == "one diode":
        return list(starts(sweep, {}, _STARTS))
    held = {name: usual for name, usual in zip(("ideality_1", "ideality_2"), USUAL, strict=True) if name in settings.hold}
    return list(two_diode_starts(sweep, held, settings.bounds))


def _candidates(problem: Problem, base: Model, cold: list[Model]) -> Iterator[Model]:
    """Starts in the order of promise, made only as they are asked for."""
    yield base
    sweep, unknowns = problem.sweep, problem.unknowns
    held = {name: getattr(base, name) for name in unknowns.parameters if name not in unknowns.free}
    if isinstance(unknowns, Unknowns):
        if cold and not held.keys() - {"photocurrent"}:
            yield from cold[1:]
        else:
            yield from starts(sweep, held, _STARTS)
        return
    yield from cold[1:] if cold else two_diode_starts(sweep, held, problem.limits)
    # One diode, refined, tells Rs and Rsh better than a grid does.
    shared = {name: value for name, value in held.items() if name in PARAMETERS}
    guesses = starts(sweep, shared, 2)
    settings = replace(problem.settings, model="one diode", hold=frozenset(shared), bounds={})
    alike = Problem.of(sweep, settings, guesses[0])
    one = alike.unknowns.model(_best(alike, guesses)[0].place)
    yield replace(two_diodes_like(one), **held)


def _best(problem: Problem, candidates: Iterable[Model]) -> tuple[Minimum, Structure]:
    """The lowest minimum with the structure of its residuals; no further starts once one leaves nothing but noise.

    Two diodes whose n are free have several minima at the noise; there the search ends once three starts agree.
    """
    patient = bool({"ideality_1", "ideality_2"} & set(problem.unknowns.free))
    best: tuple[Minimum, Structure] | None = None
    agreeing = 0
    for candidate in candidates:
        minimum = problem.minimum_from(candidate)
        if not np.isfinite(minimum.cost):
            continue
        if best is not None and minimum.cost >= best[0].cost * (1.0 - _SAME):
            agreeing += minimum.cost <= best[0].cost * (1.0 + _SAME)
            if agreeing >= 2 and patient:
                break
            continue
        pattern = problem.pattern(minimum)
        best, agreeing = (minimum, pattern), 0
        if not patient and not pattern.systematic and pattern.excess <= 1.0 + _LENIENCY / math.sqrt(pattern.count):
            break
    if best is None:
        words = {"one diode": "one-diode", "two diodes": "two-diode"}[problem.settings.model]
        raise FitFailed(f"No {words} curve could be laid over these points; check units and signs of the sweep.")
    return _in_order(problem, best[0]), best[1]


def _in_order(problem: Problem, minimum: Minimum) -> Minimum:
    """Of two diodes that are free alike, the one of lower n stands first."""
    free, settings = problem.unknowns.free, problem.settings
    if not {"saturation_current_1", "saturation_current_2", "ideality_1", "ideality_2"} <= set(free):
        return minimum
    if any(settings.bounds.get(f"{name}_1") != settings.bounds.get(f"{name}_2") for name in ("saturation_current", "ideality")):
        return minimum
    first, second = free.index("ideality_1"), free.index("ideality_2")
    if minimum.place[first] >= minimum.place[second]:  # the unknowns of n run the other way
        return minimum
    swap = np.arange(len(free))
    for name in ("saturation_current", "ideality"):
        pair = [free.index(f"{name}_1"), free.index(f"{name}_2")]
        swap[pair] = swap[pair[::-1]]
    return replace(minimum, place=minimum.place[swap], jacobian=minimum.jacobian[:, swap])
