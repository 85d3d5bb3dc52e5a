"""Tables of chosen sweeps as data frames: numbers in full, units in the headers, one row a sweep.

A column of another unit (amperes where no area is known) is a column of its own; nothing is converted between them.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from itertools import combinations
from typing import Any

import pandas as pd

from core.checks import Finding, check_pair
from core.diode import PARAMETERS
from core.models import Model
from core.quantity import Quantity
from core.refinement import Refinement
from core.sweep import Sweep
from core.two_diode import TwoDiode
from core.workspace import Workspace

from . import readout
from .mechanisms import BY_PARAMETER
from .states import Origin, origin_of
from .units import Units, celsius

Row = dict[str, Any]

METRICS = ("jsc", "voc", "fill_factor", "efficiency", "pmp", "jmp", "vmp", "slope_resistance_jsc", "slope_resistance_voc")
_RESISTANCES = {"slope_resistance_jsc": "−dV/d{0} at V = 0", "slope_resistance_voc": "−dV/d{0} at {0} = 0"}
_PLAIN_NAMES = {"voc": "Voc", "vmp": "Vmp", "fill_factor": "FF", "efficiency": "PCE", "pmp": "Pmp"}


def metric_name(metric: str, units: Units) -> str:
    """``Jsc``, or ``Isc`` where no area is known."""
    if metric in _RESISTANCES:
        return _RESISTANCES[metric].format(units.letter)
    return _PLAIN_NAMES.get(metric) or units.letter + metric[1:]


def metric_unit(metric: str, units: Units) -> tuple[float, str]:
    """Factor from core's unit, and the unit of the screen."""
    if metric in _RESISTANCES:
        return 1.0, units.resistance
    return readout.metric_unit(metric, units)


def parameter_name(parameter: str, units: Units) -> str:
    """``Jph``, ``J0``, ``n``, ``Rs``, ``Rsh``."""
    mechanism = BY_PARAMETER[parameter]
    return (units.letter if mechanism.symbol == "J" else mechanism.symbol) + mechanism.index


def headed(name: str, unit: str) -> str:
    return f"{name} ({unit})" if unit else name


def metrics_table(workspace: Workspace, entries: Iterable[str]) -> pd.DataFrame:
    """Figures of merit of the points with their standard uncertainties, and why one is missing."""
    return frame({**identity(workspace, entry), **_metrics(workspace.sweep(entry))} for entry in entries)


def parameters_table(workspace: Workspace, entries: Iterable[str]) -> pd.DataFrame:
    """Diode parameters as the workspace holds them, with standard errors and linear intervals of fit noise, and the fit's settings."""
    return frame({**identity(workspace, entry), **_parameters(workspace, entry)} for entry in entries)


def conditions_table(workspace: Workspace, entries: Iterable[str]) -> pd.DataFrame:
    """What was measured, how, and from which file; beside each condition that can be assumed, whether it is."""
    return frame({**identity(workspace, entry), **_conditions(workspace, entry)} for entry in entries)


def checks_table(workspace: Workspace, entries: Sequence[str]) -> pd.DataFrame:
    """One row a finding."""
    columns = ["device", "group", "sweep", "severity", "check", "finding", "meaning", "remedy"]
    rows = [
        {**identity(workspace, entry), "severity": f.severity, "check": f.name, "finding": f.what, "meaning": f.meaning,
         "remedy": f.remedy}
        for entry, f in all_findings(workspace, entries)
    ]
    return pd.DataFrame(rows, columns=columns)


def tables(workspace: Workspace, entries: Sequence[str]) -> dict[str, pd.DataFrame]:
    """All four by name, in the order of a workbook's sheets; those that take fits are in ``app.told_tables``."""
    return {
        "metrics": metrics_table(workspace, entries),
        "parameters": parameters_table(workspace, entries),
        "conditions": conditions_table(workspace, entries),
        "checks": checks_table(workspace, entries),
    }


def summary_table(workspace: Workspace, entries: Sequence[str]) -> pd.DataFrame:
    """Everything on one row a sweep; of the checks, the names of those that are more than a note."""
    flags: dict[str, list[str]] = {}
    for entry, finding in all_findings(workspace, entries):
        if finding.severity != "note":
            flags.setdefault(entry, []).append(finding.name)
    return frame(
        {
            **identity(workspace, entry),
            **_metrics(workspace.sweep(entry)),
            **_parameters(workspace, entry),
            **_conditions(workspace, entry),
            "checks": ", ".join(dict.fromkeys(flags.get(entry, ()))),
        }
        for entry in entries
    )


def points_table(workspace: Workspace, entry: str) -> pd.DataFrame:
    """The measured points in their order, the standard deviations that the file gives, and the model's current where there is one."""
    sweep, model = workspace.sweep(entry), workspace.fit(entry).model
    units = Units.of(sweep.per_area)
    columns = {
        headed("V", "V"): sweep.voltage,
        headed(units.letter, units.current): sweep.current * units.current_factor,
        headed("P", units.power): sweep.voltage * sweep.current * units.power_factor,
    }
    if sweep.current_error is not None:
        columns[headed(f"{units.letter} standard deviation", units.current)] = sweep.current_error * units.current_factor
    if model is not None:
        modelled = model.current(sweep.voltage)
        columns[headed(f"{units.letter} of the model", units.current)] = modelled * units.current_factor
        columns[headed("residual", units.current)] = (sweep.current - modelled) * units.current_factor
    return pd.DataFrame(columns)


def all_findings(workspace: Workspace, entries: Sequence[str]) -> Iterator[tuple[str, Finding]]:
    """Entry and finding: of each sweep, its fit and its reading, of its gap, and of forward and reverse together."""
    for entry in entries:
        refined = workspace.refined(entry)
        seen = set()
        for finding in (*readout.gap_findings(workspace, entry), *_of_sweep(workspace.sweep(entry), refined), *_of_pairs(workspace, entry, entries)):
            if finding.what not in seen:
                seen.add(finding.what)
                yield entry, finding


def _of_sweep(sweep: Sweep, refined: Refinement | None) -> Iterator[Finding]:
    for row in readout.finding_rows(sweep, refined):
        yield Finding(row["name"], row["severity"], row["what"], row["meaning"], row["remedy"])


def _of_pairs(workspace: Workspace, entry: str, entries: Sequence[str]) -> Iterator[Finding]:
    """Hysteresis, told once: at the forward sweep."""
    device = workspace.entry(entry).device
    for one, other in combinations([e for e in entries if workspace.entry(e).device == device], 2):
        forward, reverse = sorted((one, other), key=lambda e: workspace.sweep(e).direction)
        a, b = workspace.sweep(forward), workspace.sweep(reverse)
        if forward == entry and (a.direction, b.direction) == ("forward", "reverse") and a.conditions == b.conditions and a.lit:
            yield from check_pair(a, b)


def frame(rows: Iterable[Row]) -> pd.DataFrame:
    """Columns in the order in which the rows bring them."""
    rows = list(rows)
    columns = list(dict.fromkeys(name for row in rows for name in row))
    return pd.DataFrame(rows, columns=columns)


def identity(workspace: Workspace, entry_id: str) -> Row:
    """Whose row it is."""
    entry = workspace.entry(entry_id)
    device = workspace.devices[entry.device]
    return {"device": device.name, "group": device.group, "sweep": entry.name}


def _metrics(sweep: Sweep) -> Row:
    units, values = Units.of(sweep.per_area), readout.measured(sweep)
    row: Row = {}
    reasons = []
    for metric in METRICS:
        quantity: Quantity = getattr(values, metric)
        name, (factor, unit) = metric_name(metric, units), metric_unit(metric, units)
        row[headed(name, unit)] = times(quantity.value, factor)
        row[headed(f"{name} standard uncertainty", unit)] = times(quantity.uncertainty, factor)
        if quantity.reason:
            reasons.append(f"{name}: {quantity.reason}")
    return {**row, "remarks on metrics": "; ".join(reasons)}


def times(value: float | None, factor: float) -> float:
    """A cell of a number; empty where there is none."""
    return math.nan if value is None else value * factor


def _parameters(workspace: Workspace, entry: str) -> Row:
    model, refined = workspace.fit(entry).model, workspace.refined(entry)
    units = Units.of(workspace.sweep(entry).per_area)
    row: Row = {"model": _model_state(model, origin_of(workspace, entry))}
    for parameter in model.parameters if model is not None else PARAMETERS:
        name, unit, factor = parameter_name(parameter, units), units.parameter_unit(parameter), units.parameter_factor(parameter)
        error, low, high, state = None, None, None, ""
        if refined is not None:
            error = refined.standard_errors.get(parameter)
            low, high = refined.intervals.get(parameter, (None, None))
            state = parameter_state(refined, parameter)
        row[headed(name, unit)] = times(None if model is None else getattr(model, parameter), factor)
        row[headed(f"{name} standard error", unit)] = times(error, factor)
        row[headed(f"{name} linear interval from", unit)] = times(low, factor)
        row[headed(f"{name} linear interval to", unit)] = times(high, factor)
        row[f"{name} state"] = state
    row[headed("rms residual", units.current)] = times(None if refined is None else refined.rmse, units.current_factor)
    if refined is not None and refined.chi_square is not None:
        row["χ² per degree of freedom"] = refined.chi_square
    row["points used"] = math.nan if refined is None else refined.points
    row["confidence of intervals (%)"] = math.nan if refined is None else 100 * refined.settings.confidence
    row["uncertainty of parameters"] = "" if refined is None else "fit noise only"
    row["fit settings"] = settings_text(refined) if refined is not None else ""
    return row


def _model_state(model: Model | None, origin: Origin | None) -> str:
    if model is None or origin is None:
        return "none"
    kind = "two diodes" if isinstance(model, TwoDiode) else "one diode"
    return f"{kind}, refined" if origin == "refined" else f"{kind}, {origin}, not refined"


def parameter_state(refined: Refinement, parameter: str) -> str:
    """How well the data fix a parameter."""
    if parameter not in refined.free:
        return "held"
    if refined.standard_errors.get(parameter) is not None:
        return "free"
    low, high = refined.intervals.get(parameter, (0.0, math.inf))
    return "bounded only" if low > 0 or math.isfinite(high) else "not determined"


def settings_text(refined: Refinement) -> str:
    """The settings of a fit on one line."""
    settings = refined.settings
    window = "all voltages" if settings.window is None else f"{settings.window[0]:g} to {settings.window[1]:g} V"
    held = ", ".join(p.replace("_", " ") for p in settings.parameters if p in settings.hold) or "nothing"
    bounds = ", ".join(f"{name.replace('_', ' ')} {low:g} to {high:g}" for name, (low, high) in settings.bounds.items())
    weights = "weights from the file" if refined.weights == "from the file" else f"{refined.weights} weights"
    return (
        f"{settings.model}; {weights}; {settings.loss} loss; {window}; "
        f"{len(settings.excluded) or 'no'} points excluded; held: {held}; {'bounds: ' + bounds if bounds else 'built-in bounds'}"
    )


def _conditions(workspace: Workspace, entry_id: str) -> Row:
    entry, sweep, assumed = workspace.entry(entry_id), workspace.sweep(entry_id), workspace.assumed(entry_id)
    device, conditions = workspace.devices[entry.device], sweep.conditions
    row: Row = {
        "measured in": "light" if sweep.lit else "dark",
        "direction": sweep.direction,
        "area (cm²)": times(conditions.area, 1.0),
        "area in the file (cm²)": times(conditions.file_area, 1.0),
        "irradiance (mW cm⁻²)": conditions.irradiance * 1e3,
        "irradiance given": _given("irradiance", assumed),
        "temperature (°C)": round(celsius(conditions.temperature), 6),
        "temperature given": _given("temperature", assumed),
        "cells in series": conditions.series_cells,
        "cells in series given": _given("series_cells", assumed),
        "units given": _given("units", assumed),
        "band gap (eV)": times(device.band_gap, 1.0),
        "scan rate (V s⁻¹)": times(sweep.scan_rate, 1.0),
        "points": sweep.voltage.size,
        "file": entry.source_name,
        "SHA-256 of the file": entry.source or "",
    }
    return row


def _given(name: str, assumed: frozenset[str]) -> str:
    return "assumed" if name in assumed else "given"
