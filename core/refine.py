"""Least squares of a diode model on a sweep, from where the dials stand or from cold."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import replace

import numpy as np

from .diode import PARAMETERS, OneDiode
from .errors import FitFailed
from .first_guess import scales, starts
from .fit_findings import findings
from .fit_settings import FitSettings
from .intervals import knowledge
from .least_squares import Minimum, minimise
from .noise import noise_level
from .refinement import Refinement
from .residuals import Structure, looks_s_shaped, structure
from .sweep import Sweep
from .unknowns import Unknowns
from .weighting import point_weights, resolved

__all__ = ["FitSettings", "Refinement", "refine"]

# A fit whose residuals look like noise, and exceed it by no more than its estimate is uncertain, needs no second start.
_LENIENCY = 2.5
_STARTS = 4
_ROUNDING = 1e-9
# Huber's constant: 95 % efficiency for normal noise; P. J. Huber, Ann. Math. Stat. 35 (1964) 73 (from memory).
_HUBER = 1.345
_HUBER_PASSES = 20


def refine(sweep: Sweep, start: OneDiode | None = None, settings: FitSettings = FitSettings()) -> Refinement:
    """Refine a one-diode model on a sweep by least squares in the current.

    Parameters
    ----------
    sweep : Sweep
    start : OneDiode or None
        Where the dials stand, and the values of held parameters; None starts from the first guess. The first
        guess is tried in any case if the fit from here ends above the noise.
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
    cold = [] if start is not None else starts(used, {}, _STARTS)
    base = cold[0] if start is None else _under_conditions(start, sweep)
    hold = settings.hold
    if not sweep.lit:
        base = base if "photocurrent" in hold and start is not None else replace(base, photocurrent=0.0)
        hold = hold | {"photocurrent"}
    unknowns = Unknowns.of(base, hold, scales(used), settings.bounds)
    if used.voltage.size < len(unknowns.free):
        raise FitFailed(
            f"There are {used.voltage.size} points for {len(unknowns.free)} free parameters; "
            "hold some of them, or measure more points."
        )
    limits = unknowns.limits(settings.bounds)
    weight = point_weights(used, settings.weights)

    minimum, pattern = _best(_candidates(used, unknowns, base, cold), unknowns, used, weight, limits)
    if settings.loss == "robust":
        minimum = _robust(minimum, unknowns, used, weight, limits)
        pattern = _pattern(minimum, used, weight)
    model = unknowns.model(minimum.place)
    known = knowledge(minimum, unknowns, limits, settings.confidence)
    residual = model.current(used.voltage) - used.current
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
            s_shaped=sweep.lit and pattern.systematic and looks_s_shaped(used),
            lit=sweep.lit,
        ),
        weights=resolved(settings.weights, sweep),
    )


def points_used(sweep: Sweep, settings: FitSettings) -> Sweep:
    """The sweep with only the points that the settings leave for the fit."""
    keep = np.isfinite(sweep.voltage) & np.isfinite(sweep.current)
    keep[[index for index in settings.excluded if 0 <= index < keep.size]] = False
    if settings.window is not None:
        keep &= (sweep.voltage >= settings.window[0]) & (sweep.voltage <= settings.window[1])
    if np.all(keep):
        return sweep
    return replace(sweep, voltage=sweep.voltage[keep], current=sweep.current[keep])


def residuals_of(
    unknowns: Unknowns, sweep: Sweep, weight: np.ndarray
) -> Callable[[np.ndarray], tuple[np.ndarray, np.ndarray]]:
    """Weighted residuals, model less measured, and their Jacobian in the unknowns."""
    voltage, current = sweep.voltage, sweep.current

    def evaluate(place: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        modelled, jacobian = unknowns.model(place).current_and_jacobian(voltage)
        return weight * (modelled - current), (weight[:, None] * jacobian) @ unknowns.chain(place)

    return evaluate


def _under_conditions(model: OneDiode, sweep: Sweep) -> OneDiode:
    """The start's curve read under the sweep's temperature and cells in series."""
    if (model.temperature, model.series_cells) == (sweep.temperature, sweep.series_cells):
        return model
    return model.at(temperature=sweep.temperature, series_cells=sweep.series_cells)


def _candidates(sweep: Sweep, unknowns: Unknowns, base: OneDiode, cold: list[OneDiode]) -> Iterator[OneDiode]:
    """Starts in the order of promise, made only as they are asked for."""
    yield base
    held = {name: getattr(base, name) for name in set(PARAMETERS) - set(unknowns.free)}
    if cold and not held.keys() - {"photocurrent"}:
        yield from cold[1:]
    else:
        yield from starts(sweep, held, _STARTS)


def _best(
    candidates: Iterator[OneDiode],
    unknowns: Unknowns,
    sweep: Sweep,
    weight: np.ndarray,
    limits: dict[str, tuple[float, float]],
) -> tuple[Minimum, Structure]:
    """The lowest minimum with the structure of its residuals; no further starts once one leaves nothing but noise."""
    evaluate = residuals_of(unknowns, sweep, weight)
    lower, upper = unknowns.box(limits)
    best: tuple[Minimum, Structure] | None = None
    for candidate in candidates:
        minimum = minimise(evaluate, unknowns.place(candidate), lower, upper)
        if not np.isfinite(minimum.cost) or (best is not None and minimum.cost >= best[0].cost):
            continue
        pattern = _pattern(minimum, sweep, weight)
        best = minimum, pattern
        if not pattern.systematic and pattern.excess <= 1.0 + _LENIENCY / math.sqrt(pattern.count):
            break
    if best is None:
        raise FitFailed("No one-diode curve could be laid over these points; check units and signs of the sweep.")
    return best


def _pattern(minimum: Minimum, sweep: Sweep, weight: np.ndarray) -> Structure:
    """Structure of the weighted residuals, in units of the noise that they show between neighbours."""
    order = np.argsort(sweep.voltage, kind="stable")
    noise = noise_level(replace(sweep, current=minimum.residual))
    # What is left on exact curves is rounding, whose structure means nothing.
    rounding = _ROUNDING * float(np.max(np.abs(sweep.current * weight)))
    return structure(minimum.residual[order], max(noise, rounding))


def _robust(
    minimum: Minimum, unknowns: Unknowns, sweep: Sweep, weight: np.ndarray, limits: dict[str, tuple[float, float]]
) -> Minimum:
    """Huber's loss by repeated weighting; weights are frozen within a pass."""
    lower, upper = unknowns.box(limits)
    evaluate = residuals_of(unknowns, sweep, weight)
    share = np.ones(sweep.voltage.size)
    for _ in range(_HUBER_PASSES):
        residual = evaluate(minimum.place)[0]
        scale = max(float(np.median(np.abs(residual))) / 0.6745, 1e-300)
        previous, share = share, np.sqrt(1.0 / np.maximum(np.abs(residual) / (_HUBER * scale), 1.0))
        if np.max(np.abs(share - previous)) < 1e-6:
            break
        minimum = minimise(residuals_of(unknowns, sweep, weight * share), minimum.place, lower, upper)
    return minimum
