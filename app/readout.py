"""The numbers beside the curve: dials, metrics, conditions and findings, as text for the page."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache
from typing import Any

from core.checks import Finding, check, check_pair
from core.dials import dial_ranges
from core.diode import PARAMETERS, Landmarks, OneDiode
from core.errors import ConditionRefused
from core.handles import Handle, handles
from core.limit_check import check_against_limit
from core.metrics import measure
from core.quantity import Metrics, Quantity
from core.refinement import Refinement
from core.sweep import Sweep
from core.workspace import Workspace

from .mechanisms import BY_PARAMETER
from .units import Units, celsius
from .wording import (
    concise,
    difference,
    field,
    number,
    plus_minus,
    with_uncertainty,
)

# A sweep never changes, so what is read off it is read once.
measured = lru_cache(maxsize=4096)(measure)
checked = lru_cache(maxsize=4096)(check)
_paired = lru_cache(maxsize=512)(check_pair)
_ranges = lru_cache(maxsize=256)(dial_ranges)  # of a sweep and a model's parameters


def handle_marks(sweep: Sweep, model: OneDiode, hold: frozenset[str]) -> list[dict[str, Any]]:
    """The grips on the curve, in screen units."""
    units = Units.of(sweep.per_area)
    span = (float(sweep.voltage.min()), float(sweep.voltage.max()))
    return [_mark(h, units, model) for h in handles(model, lit=sweep.lit, hold=hold, span=span)]


def on_dark_curve(sweep: Sweep, model: OneDiode, mark: dict[str, Any]) -> dict[str, float]:
    """Where the dark curve passes at a grip's voltage, in screen units."""
    current = float(replace(model, photocurrent=0.0).current(mark["x"]))
    return {"x": mark["x"], "y": abs(current) * Units.of(sweep.per_area).current_factor}


def _mark(handle: Handle, units: Units, model: OneDiode) -> dict[str, Any]:
    mechanism = BY_PARAMETER[handle.parameter]
    factor, unit = units.parameter_factor(handle.parameter), units.parameter_unit(handle.parameter)
    value = getattr(model, handle.parameter) * factor
    return {
        "parameter": handle.parameter,
        "x": handle.x,
        "y": handle.y * units.current_factor,
        "motion": handle.motion,
        "locked": handle.locked,
        "label": f"{mechanism.title}, {handle.motion} handle" + (f", locked: {handle.reason}" if handle.locked else ""),
        "value": value if abs(value) < 1e300 else None,
        "text": f"{number(value)} {unit}".strip(),
        "shape": mechanism.shape,
    }


def dial_values(sweep: Sweep, model: OneDiode) -> dict[str, dict[str, Any]]:
    """Where each dial stands while the model moves: slider position and number field."""
    units, ranges = Units.of(sweep.per_area), _ranges(sweep, model.parameters)
    values = {}
    for parameter in model.parameters:
        value = getattr(model, parameter)
        values[parameter] = {
            "fraction": ranges[parameter].containing(value).fraction(value),
            "text": field(value * units.parameter_factor(parameter)),
        }
    return values


def dial_rows(workspace: Workspace, entry: str, sweep: Sweep) -> dict[str, dict[str, Any]]:
    """All that the five dials show, at rest."""
    fit, units = workspace.fit(entry), Units.of(sweep.per_area)
    refined = workspace.refined(entry)
    values = dial_values(sweep, fit.model) if fit.model else {}
    rows = {}
    for parameter in fit.model.parameters if fit.model else PARAMETERS:
        mechanism = BY_PARAMETER[parameter]
        letter = units.letter if mechanism.symbol == "J" else mechanism.symbol
        rows[parameter] = {
            "title": mechanism.title,
            "symbol": letter,
            "index": mechanism.index,
            "unit": units.parameter_unit(parameter),
            "held": parameter in fit.settings.hold,
            "error": _error(refined, parameter, units),
            **values.get(parameter, {"fraction": 0, "text": ""}),
        }
    return rows


def _error(refined: Refinement | None, parameter: str, units: Units) -> str:
    """Standard error after refining; a one-sided statement where the data only bound the parameter."""
    if refined is None or parameter not in refined.free:
        return ""
    factor = units.parameter_factor(parameter)
    error = refined.standard_errors.get(parameter)
    if error is not None:
        if parameter.startswith("saturation_current"):  # spans decades: its relative error says more, in less room
            return f"± {number(100 * error / getattr(refined.model, parameter), digits=2)} %"
        return f"± {plus_minus(error * factor)}"
    low, high = refined.intervals.get(parameter, (None, None))
    if high is not None and high == float("inf") and low:
        return f"> {number(low * factor, digits=2)}"
    if low is not None and low <= 0 < high < float("inf"):
        return f"< {number(high * factor, digits=2)}"
    return "not determined"


METRIC_ROWS = ("jsc", "voc", "fill_factor", "efficiency", "pmp", "jmp", "vmp")


def metric_rows(sweep: Sweep, marks: Landmarks | None) -> dict[str, dict[str, str]]:
    """Measured, model and difference of each metric, and the unit; a reason where there is no number."""
    units, values = Units.of(sweep.per_area), measured(sweep)
    rows = {}
    for name in METRIC_ROWS:
        factor, unit = metric_unit(name, units)
        quantity: Quantity = getattr(values, name)
        modelled = _modelled(name, sweep, marks)
        rows[name] = {
            "unit": unit,
            **_measured_cells(quantity, factor),
            **_model_cells(quantity, modelled, factor),
        }
    return rows


def _measured_cells(quantity: Quantity, factor: float) -> dict[str, str]:
    if quantity.value is None:
        return {"measured": "–", "reason": quantity.reason}
    value = quantity.value * factor
    uncertainty = None if quantity.uncertainty is None else quantity.uncertainty * factor
    return {"measured": concise(value, uncertainty), "reason": with_uncertainty(value, uncertainty)}


def live_metrics(sweep: Sweep, marks: Landmarks) -> dict[str, dict[str, str]]:
    """The cells that follow the hand: model and difference."""
    units, values = Units.of(sweep.per_area), measured(sweep)
    return {
        name: _model_cells(getattr(values, name), _modelled(name, sweep, marks), metric_unit(name, units)[0])
        for name in METRIC_ROWS
    }


def _model_cells(quantity: Quantity, modelled: float | None, factor: float) -> dict[str, str]:
    if modelled is None or modelled != modelled:
        return {"model": "–", "difference": "–"}
    shown = {"model": number(modelled * factor)}
    if quantity.value is None:
        return {**shown, "difference": "–"}
    uncertainty = None if quantity.uncertainty is None else quantity.uncertainty * factor
    return {**shown, "difference": difference((modelled - quantity.value) * factor, uncertainty)}


def _modelled(name: str, sweep: Sweep, marks: Landmarks | None) -> float | None:
    if marks is None or not sweep.lit:
        return None
    if name == "efficiency":
        return marks.pmp / sweep.irradiance if sweep.per_area and sweep.irradiance > 0 else None
    return getattr(marks, name)


def metric_unit(name: str, units: Units) -> tuple[float, str]:
    return {
        "jsc": (units.current_factor, units.current),
        "jmp": (units.current_factor, units.current),
        "voc": (1.0, "V"),
        "vmp": (1.0, "V"),
        "pmp": (units.power_factor, units.power),
        "fill_factor": (100.0, "%"),
        "efficiency": (100.0, "%"),
    }[name]


UNIT_GIVEN = "as given"


def condition_rows(workspace: Workspace, entry: str, sweep: Sweep) -> dict[str, dict[str, Any]]:
    """Conditions as text fields; ``assumed`` where the file gave none and nobody confirmed."""
    assumed = workspace.assumed(entry)
    conditions, reading = sweep.conditions, workspace.entry(entry).reading
    texts = {
        "area": field(conditions.area),
        "file_area": field(conditions.file_area),
        "temperature": f"{celsius(conditions.temperature):.5g}",
        "irradiance": f"{conditions.irradiance * 1e3:.5g}",
        "series_cells": str(conditions.series_cells),
        "lit": "light" if conditions.lit else "dark",
        "units": reading.read_unit or UNIT_GIVEN,
        "group": workspace.device(workspace.entry(entry).device).group,
    }
    hidden = {"file_area": sweep.read_as != "density", "units": "units" not in reading.assumed}
    return {
        name: {"text": text, "assumed": name in assumed, "shown": not hidden.get(name, False)}
        for name, text in texts.items()
    }


def pair_findings(workspace: Workspace, entry: str) -> tuple[Finding, ...]:
    """What this sweep and the device's other direction say together; hysteresis is told beside both."""
    here = workspace.sweep(entry)
    for other in workspace.entries_of(workspace.entries[entry].device):
        there = workspace.sweep(other.id)
        if here.lit and there.conditions == here.conditions and there.direction != here.direction:
            forward, reverse = (here, there) if here.direction == "forward" else (there, here)
            return _paired(forward, reverse)
    return ()


def gap_findings(workspace: Workspace, entry: str) -> tuple[Finding, ...]:
    """What the sweep and the band gap that was given for its device say together."""
    return _against_gap(workspace.sweep(entry), workspace.devices[workspace.entry(entry).device].band_gap)


def _against_gap(sweep: Sweep, gap: float | None) -> tuple[Finding, ...]:
    if gap is None or not sweep.lit or not sweep.per_area or sweep.series_cells > 1:
        return ()
    try:
        return check_against_limit(measured(sweep).jsc, gap, sweep.irradiance)
    except ConditionRefused as refusal:
        return (Finding("band gap", "caution", str(refusal), "", ""),)


def finding_rows(sweep: Sweep, refined: Refinement | None, more: tuple[Finding, ...] = ()) -> list[dict[str, str]]:
    """What to know before trusting this sweep or its fit; ``more`` is what only the workspace knows."""
    stops = [f for f in more if f.severity == "stop"]
    rows = [_finding(f) for f in (*stops, *checked(sweep), *(f for f in more if f not in stops))]
    rows += [{"severity": "note", "name": "fit", "what": sentence, "meaning": "", "remedy": ""}
             for sentence in (refined.findings if refined else ())]
    rows += [{"severity": "note", "name": "read", "what": note, "meaning": "", "remedy": ""} for note in sweep.notes]
    return rows


def _finding(finding: Finding) -> dict[str, str]:
    return {"severity": finding.severity, "name": finding.name, "what": finding.what, "meaning": finding.meaning,
            "remedy": finding.remedy}


def efficiency_text(metrics: Metrics, sweep: Sweep) -> str:
    """One number for the tray: PCE, else the power, else nothing."""
    if metrics.efficiency.value is not None:
        return f"{100 * metrics.efficiency.value:.1f} %"
    if metrics.pmp.value is not None:
        units = Units.of(sweep.per_area)
        return f"{number(metrics.pmp.value * units.power_factor, digits=3)} {units.power}"
    return ""
