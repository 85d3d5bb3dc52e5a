"""Tables of numbers on paper: a quantity a row, a sweep a column."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from app import tables
from app.mechanisms import BY_PARAMETER
from app.readout import measured
from app.units import Units, celsius
from app.wording import concise, field, number, plus_minus
from core.diode import PARAMETERS
from core.quantity import Quantity
from core.refinement import Refinement
from core.workspace import Workspace

from .markup import Markup, element, join, symbol, table, text

_COLUMNS = 4  # of numbers that a page carries side by side
ASSUMED = element("em", "assumed", class_="assumed")


def metrics_tables(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> Markup:
    """Metrics with standard uncertainties; a reason where there is no number."""

    def block(part: Sequence[int]) -> Markup:
        sweeps = [workspace.sweep(entries[i]) for i in part]
        units = Units.of(sweeps[0].per_area)
        rows = []
        for metric in tables.METRICS:
            factor, unit = tables.metric_unit(metric, units)
            cells = [_quantity(getattr(measured(sweep), metric), factor) for sweep in sweeps]
            rows.append([_headed(tables.metric_name(metric, units), unit), *cells])
        return table(["", *(names[i] for i in part)], rows, "numbers sweeps")

    return _in_blocks(workspace, entries, block)


def parameters_tables(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> Markup:
    """Parameters with standard errors, and intervals below them."""

    def block(part: Sequence[int]) -> Markup:
        units = Units.of(workspace.sweep(entries[part[0]]).per_area)
        rows = [
            [
                join([mark(parameter), _headed(tables.parameter_name(parameter, units), units.parameter_unit(parameter))]),
                *(_parameter(workspace, entries[i], parameter, units) for i in part),
            ]
            for parameter in PARAMETERS
        ]
        rows.append(["", *(_fit(workspace, entries[i], units) for i in part)])
        return table(["", *(names[i] for i in part)], rows, "numbers sweeps")

    return _in_blocks(workspace, entries, block)


def conditions_tables(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> Markup:
    """Conditions; what neither file nor user gave is marked."""

    def block(part: Sequence[int]) -> Markup:
        chosen = [entries[i] for i in part]
        sweeps = [workspace.sweep(entry) for entry in chosen]
        gap = workspace.devices[workspace.entry(chosen[0]).device].band_gap
        rows = [
            ["measured in", *("light" if s.lit else "dark" for s in sweeps)],
            ["direction", *(s.direction for s in sweeps)],
            ["area (cm²)", *("not given" if s.area is None else field(s.area) for s in sweeps)],
            ["irradiance (mW cm⁻²)", *(_condition(field(1e3 * s.irradiance), "irradiance" in s.assumed) for s in sweeps)],
            ["temperature (°C)", *(_condition(field(celsius(s.temperature)), "temperature" in s.assumed) for s in sweeps)],
            ["cells in series", *(_condition(str(s.series_cells), "series_cells" in s.assumed) for s in sweeps)],
            ["band gap (eV)", *(["not given" if gap is None else field(gap)] * len(sweeps))],
            ["scan rate (mV s⁻¹)", *("not given" if s.scan_rate is None else field(1e3 * s.scan_rate) for s in sweeps)],
            ["points", *(str(s.voltage.size) for s in sweeps)],
        ]
        if any("units" in s.assumed for s in sweeps):
            rows.append(["units in the file", *(_condition("", True) if "units" in s.assumed else "given" for s in sweeps)])
        return table(["", *(names[i] for i in part)], rows, "numbers sweeps")

    return _in_blocks(workspace, entries, block)


def mark(parameter: str) -> Markup:
    """The mechanism's shape in its hue."""
    mechanism = BY_PARAMETER[parameter]
    path = element("path", d=mechanism.shape, fill=mechanism.hue)
    return element("svg", path, class_="mark", viewBox="0 0 16 16", aria_hidden="true")


def _in_blocks(workspace: Workspace, entries: Sequence[str], block: Callable[[Sequence[int]], Markup]) -> Markup:
    """Tables of few columns each, sweeps of one unit together."""
    blocks = []
    for per_area in (True, False):
        like = [i for i, entry in enumerate(entries) if workspace.sweep(entry).per_area == per_area]
        columns = math.ceil(len(like) / math.ceil(len(like) / _COLUMNS)) if like else 1  # tables of about equal width
        blocks += [block(like[at : at + columns]) for at in range(0, len(like), columns)]
    return join(blocks)


def _headed(name: str, unit: str) -> Markup:
    return join([symbol(name), element("span", f" ({unit})", class_="unit") if unit else ""])


def _quantity(quantity: Quantity, factor: float) -> Markup:
    if quantity.value is None:
        return element("span", quantity.reason or "–", class_="reason")
    uncertainty = None if quantity.uncertainty is None else quantity.uncertainty * factor
    said = text(concise(quantity.value * factor, uncertainty))
    return join([said, element("span", f" {quantity.reason}", class_="reason")]) if quantity.reason else said


def _condition(words: str, assumed: bool) -> Markup:
    return join([words, " " if words else "", ASSUMED]) if assumed else text(words)


def _parameter(workspace: Workspace, entry: str, parameter: str, units: Units) -> Markup:
    fit, refined, factor = workspace.fit(entry), workspace.refined(entry), units.parameter_factor(parameter)
    if fit.model is None or not hasattr(fit.model, parameter):
        return text("–")
    value = getattr(fit.model, parameter) * factor
    if refined is None:
        return text(number(value))
    state = tables.parameter_state(refined, parameter)
    if state == "held":
        return join([number(value), " ", element("span", "held", class_="reason")])
    error = refined.standard_errors.get(parameter)
    known = concise(value, None if error is None else error * factor)
    return join([known, element("br"), element("span", interval_text(refined, parameter, factor), class_="interval")])


def interval_text(refined: Refinement, parameter: str, factor: float = 1.0) -> str:
    """``22.58 … 22.62``; one-sided where the data only bound the parameter."""
    low, high = (end * factor for end in refined.intervals.get(parameter, (-math.inf, math.inf)))
    if low <= 0 and math.isinf(high):
        return "not determined"
    if math.isinf(high):
        return f"> {number(low, digits=2)}"
    if low <= 0:
        return f"< {number(high, digits=2)}"
    # Two digits of the interval's width, so that its ends differ.
    width = (high - low) / 2
    return f"{number(low, width)} … {number(high, width)}"


def _fit(workspace: Workspace, entry: str, units: Units) -> Markup:
    refined = workspace.refined(entry)
    if refined is None:
        return element("span", "set by hand, not refined" if workspace.fit(entry).model else "no model", class_="reason")
    rmse = f"{plus_minus(refined.rmse * units.current_factor)} {units.current}"
    chi_square = "" if refined.chi_square is None else f", χ² per degree of freedom {number(refined.chi_square, digits=3)}"
    return element("span", f"rms residual {rmse}, {refined.points} points{chi_square}", class_="reason")
