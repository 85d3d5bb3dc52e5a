"""What stands beside the fit: settings, intervals, correlation, estimates by published methods, derived figures."""

from __future__ import annotations

import math
from functools import lru_cache
from typing import Any

from core.derived import derive
from core.errors import SweepbenchError
from core.estimates import Estimate, estimates, plateau_reading
from core.models import Model
from core.point_choice import used
from core.refinement import Refinement
from core.sweep import Sweep
from core.workspace import Workspace

from .mechanisms import BY_PARAMETER
from .units import Units
from .wording import number, with_uncertainty

_estimates = lru_cache(maxsize=64)(estimates)


def settings_rows(workspace: Workspace, entry: str) -> dict[str, Any]:
    """The fit settings as the panel shows them."""
    settings, sweep = workspace.fit(entry).settings, workspace.sweep(entry)
    low, high = settings.window or (None, None)
    noise = getattr(settings, "voltage_noise", None)
    left_out = int((~used(sweep, settings)).sum())
    return {
        "model": settings.model,
        "weights": settings.weights,
        "loss": settings.loss,
        "window_low": "" if low is None else f"{low:.5g}",
        "window_high": "" if high is None else f"{high:.5g}",
        "confidence": f"{100 * settings.confidence:.4g}",
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


def interval_rows(workspace: Workspace, entry: str) -> dict[str, Any]:
    """Intervals of the refined parameters, one-sided where the data only bound one."""
    refined, sweep = workspace.refined(entry), workspace.sweep(entry)
    if refined is None:
        return {"rows": [], "sentence": "Refine to see how well each parameter is known.", "choice": ""}
    units = Units.of(sweep.per_area)
    rows = [
        {"name": BY_PARAMETER[name].title, "words": interval_words(*refined.intervals[name], units, name)}
        for name in refined.free
        if name in refined.intervals
    ]
    level = f"{100 * refined.settings.confidence:.4g} %"
    return {"rows": rows, "sentence": f"{level} intervals, fit noise only.", "choice": ""}


def interval_words(low: float, high: float, units: Units, parameter: str) -> str:
    """``4.1 to 4.6 Ω cm²``; ``> 4.1`` or ``< 0.2`` where the data only bound it."""
    factor, unit = units.parameter_factor(parameter), units.parameter_unit(parameter)
    if math.isinf(high) and low <= 0:
        return "not determined"
    if math.isinf(high):
        return f"> {number(low * factor, digits=3)} {unit}".strip()
    if low <= 0:
        return f"< {number(high * factor, digits=3)} {unit}".strip()
    half = 0.5 * (high - low)
    return f"{number(low * factor, half * factor)} to {number(high * factor, half * factor)} {unit}".strip()


def estimate_rows(workspace: Workspace, entry: str) -> dict[str, Any]:
    """Estimates beside the fit, the sentence on the plateau, and derived figures."""
    sweep, model = workspace.sweep(entry), workspace.fit(entry).model
    dark, levels = dark_of(workspace, entry), levels_of(workspace, entry)
    rows = [_estimate(e, sweep, model) for e in _estimates(sweep, dark=dark, levels=levels, model=model)]
    gap = workspace.devices[workspace.entries[entry].device].band_gap
    return {
        "rows": rows,
        "plateau": plateau_reading(sweep, dark) if sweep.lit else "",
        "derived": _derived(sweep, model, gap) if model is not None and sweep.lit else [],
    }


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
        "method": f"{estimate.method}. {estimate.source}.",
        "note": estimate.note,
    }


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
