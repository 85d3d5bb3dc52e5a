"""What stands beside the fit: settings, intervals, correlation, estimates by published methods, derived figures."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import lru_cache
from typing import Any

from core.derived import derive
from core.errors import FitFailed, SweepbenchError
from core.estimates import Estimate, estimates, plateau_reading, shunt_confirmed
from core.fit_problem import used
from core.model_choice import compare_models
from core.models import Model
from core.profile import Beside, Interval, profile_intervals
from core.refinement import Refinement
from core.sweep import Sweep
from core.workspace import Workspace

from .mechanisms import BY_PARAMETER
from .units import Units
from .wording import number, with_uncertainty

estimated = lru_cache(maxsize=64)(estimates)
_models = lru_cache(maxsize=64)(compare_models)
profiles = lru_cache(maxsize=64)(profile_intervals)


def settings_rows(workspace: Workspace, entry: str) -> dict[str, Any]:
    """The fit settings as the panel shows them."""
    settings, sweep = workspace.fit(entry).settings, workspace.sweep(entry)
    low, high = settings.window or (None, None)
    units = Units.of(sweep.per_area)
    noise = getattr(settings, "voltage_noise", None)
    left_out = int((~used(sweep, settings)).sum())
    return {
        "model": settings.model,
        "weights": settings.weights,
        # Choices that this sweep does not have.
        "weights_without": [] if sweep.current_error is not None else ["from the file"],
        "loss": settings.loss,
        "window_low": "" if low is None else f"{low:.5g}",
        "window_high": "" if high is None else f"{high:.5g}",
        "confidence": f"{100 * settings.confidence:.4g}",
        "current_noise": "" if settings.current_noise is None else f"{settings.current_noise * units.current_factor:.4g}",
        "current_noise_unit": units.current,
        "voltage_noise": "" if noise is None else f"{1e3 * noise:.4g}",
        "left_out": f"{left_out} of {sweep.voltage.size} points left out" if left_out else "all points used",
    }


def correlation_rows(refined: Refinement | None) -> dict[str, Any]:
    """The correlation matrix of the free parameters, as symbols and numbers; empty before refining."""
    if refined is None or len(refined.free) < 2:
        return {"names": [], "values": []}
    matrix = refined.correlation
    return {
        "names": [_symbol(name, refined.model) for name in refined.free],
        "values": [[round(float(v), 3) if math.isfinite(v) else None for v in row] for row in matrix],
    }


def _symbol(parameter: str, model: Model) -> str:
    mechanism = BY_PARAMETER[parameter]
    return f"{mechanism.symbol}{mechanism.index}"


Question = tuple[Sweep, Refinement, float, Beside]

UNREFINED = {"rows": [], "sentence": "Refine to see how well each parameter is known.", "choice": ""}
# Up to so many free parameters, sweeps and points, intervals are there well within 300 ms; beyond, they are a job.
_QUICK_FREE, _QUICK_SWEEPS, _QUICK_POINTS = 5, 5, 3000


def interval_question(workspace: Workspace, entry: str) -> Question | None:
    """What ``interval_rows`` needs to know of a sweep, fit to travel to another process; None before refining."""
    refined = workspace.refined(entry)
    if refined is None:
        return None
    # The level that stands now needs no new fit.
    return workspace.sweep(entry), refined, workspace.fit(entry).settings.confidence, workspace.beside(entry)


def is_quick(question: Question) -> bool:
    """Whether the intervals can be had while the page waits."""
    sweep, refined, _, beside = question
    points = sweep.voltage.size + sum(other.voltage.size for other, _ in beside)
    return len(refined.free) <= _QUICK_FREE and 1 + len(beside) <= _QUICK_SWEEPS and points <= _QUICK_POINTS


def interval_rows(sweep: Sweep, refined: Refinement, level: float, beside: Beside) -> dict[str, Any]:
    """Intervals of the refined parameters, one-sided where the data only bound one."""
    try:
        found = profiles(sweep, refined, level, beside=beside)
    except FitFailed as failure:
        return not_told(failure)
    units = Units.of(sweep.per_area)
    rows = [
        {"name": BY_PARAMETER[name].title, "words": interval_words(interval, units, name)} for name, interval in found.items()
    ]
    of_all = " of all sweeps refined together" if refined.others else ""
    sentence = f"{100 * level:.4g} % intervals by profile likelihood{of_all}, fit noise only."
    return {"rows": rows, "sentence": sentence, "choice": _choice(sweep, refined)}


def not_told(reason: object) -> dict[str, Any]:
    """The panel without intervals, and why."""
    return {"rows": [], "sentence": str(reason), "choice": ""}


def _choice(sweep: Sweep, refined: Refinement) -> str:
    """One diode or two: what the data say."""
    try:
        return _models(sweep, replace(refined.settings, hold=None, bounds={}, confidence=0.95)).sentence
    except FitFailed:
        return ""


def interval_words(interval: Interval, units: Units, parameter: str) -> str:
    """``4.1 to 4.6 Ω cm²``; ``> 4.1`` or ``< 0.2`` where the data only bound it."""
    factor, unit = units.parameter_factor(parameter), units.parameter_unit(parameter)
    low, high = interval.low * factor, interval.high * factor
    if not interval.low_bounded and not interval.high_bounded:
        return "not determined"
    if not interval.high_bounded:
        return f"> {number(low, digits=3)} {unit}".strip()
    if not interval.low_bounded:
        return f"< {number(high, digits=3)} {unit}".strip()
    half = 0.5 * (high - low)
    return f"{number(low, half)} to {number(high, half)} {unit}".strip()


def estimate_rows(workspace: Workspace, entry: str) -> dict[str, Any]:
    """Estimates beside the fit, the sentence on the plateau, and derived figures."""
    sweep, model = workspace.sweep(entry), workspace.fit(entry).model
    dark, levels = dark_of(workspace, entry), levels_of(workspace, entry)
    plateau = plateau_reading(sweep, dark) if sweep.lit else ""
    rows = [_estimate(e, sweep, model) for e in estimated(sweep, dark=dark, levels=levels, model=model)]
    gap = workspace.devices[workspace.entries[entry].device].band_gap
    return {
        "rows": [row | {"note": ""} if row["note"] == plateau else row for row in rows],  # it stands above them already
        "plateau": plateau,
        "derived": _derived(sweep, model, gap) if model is not None and sweep.lit else [],
    }


def is_shunt(workspace: Workspace, entry: str) -> bool:
    """Whether the dark sweep of the device confirms that the plateau's slope is a shunt."""
    return shunt_confirmed(workspace.sweep(entry), dark_of(workspace, entry))


def dark_of(workspace: Workspace, entry: str) -> Sweep | None:
    """The first dark sweep of the same device, if it has one."""
    sweeps = (workspace.sweep(e.id) for e in workspace.entries_of(workspace.entries[entry].device) if e.id != entry)
    return next((s for s in sweeps if not s.lit), None)


def levels_of(workspace: Workspace, entry: str) -> tuple[Sweep, ...]:
    """Lit sweeps of the same device in the same direction: a light-intensity series where there are several levels."""
    here = workspace.sweep(entry)
    sweeps = (workspace.sweep(e.id) for e in workspace.entries_of(workspace.entries[entry].device))
    return tuple(s for s in sweeps if s.lit and s.direction == here.direction)


def _estimate(estimate: Estimate, sweep: Sweep, model: Model | None) -> dict[str, str]:
    factor, unit = _unit(estimate.parameter, Units.of(sweep.per_area))
    value = None if estimate.value is None else estimate.value * factor
    uncertainty = None if estimate.uncertainty is None else estimate.uncertainty * factor
    fitted = getattr(model, estimate.parameter, None) if model is not None else None
    return {
        "parameter": estimate.parameter,
        "name": estimate.name,
        "value": "–" if value is None else f"{with_uncertainty(value, uncertainty)} {unit}".strip(),
        "fit": "" if fitted is None else number(fitted * factor),
        "method": f"{_capital(estimate.method)}. {_capital(estimate.source)}.",
        "note": estimate.note,
    }


def _capital(words: str) -> str:
    """A sentence's beginning; a formula keeps its own."""
    return words[:1].upper() + words[1:] if words[:2].isalpha() and words[:2].islower() else words


def _unit(parameter: str, units: Units) -> tuple[float, str]:
    if parameter in ("fill_factor", "pseudo_fill_factor"):
        return 100.0, "%"
    if parameter == "slope_resistance":
        return 1.0, units.resistance
    return units.parameter_factor(parameter), units.parameter_unit(parameter)


def _derived(sweep: Sweep, model: Model, gap: float | None) -> list[dict[str, str]]:
    try:
        found = derive(model, gap, per_area=sweep.per_area)
    except SweepbenchError as refused:
        return [{"name": "derived figures", "value": "–", "note": str(refused)}]
    if found is None:
        return []
    ohm = Units.of(sweep.per_area).resistance
    rows = [
        ("ideal fill factor", f"{100 * found.ideal_fill_factor:.2f} %"),
        ("pseudo fill factor", f"{100 * found.pseudo_fill_factor:.2f} %"),
        ("recombination resistance at Voc", f"{number(found.recombination_resistance)} {ohm}"),
        ("slope −dV/dJ at Voc", f"{number(found.slope_resistance_voc)} {ohm}"),
    ]
    if found.radiative_efficiency is not None:
        rows.append(("external radiative efficiency", f"{number(100 * found.radiative_efficiency, digits=2)} %"))
    if found.voc_temperature_coefficient is not None:
        rows.append(("dVoc/dT expected", f"{number(1e3 * found.voc_temperature_coefficient, digits=3)} mV/K"))
    note = " ".join(found.notes)
    return [{"name": name, "value": value, "note": note} for name, value in rows]
