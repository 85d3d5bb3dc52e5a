"""Tables of numbers on paper: a quantity a row, a sweep a column."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from app import tables
from app.fitted import Fitted
from app.mechanisms import BY_PARAMETER
from app.readout import measured
from app.units import Units, celsius
from app.wording import concise, field, number, plus_minus
from core.profile import Interval
from core.quantity import Quantity
from core.workspace import Workspace

from .markup import Markup, element, join, symbol, table, text

_COLUMNS = 4  # of numbers that a page carries side by side
_FEW = 2  # columns in which an interval stands beside its value
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
        return table(["", *(names[i] for i in part)], told_once(rows), "numbers sweeps")

    return _in_blocks(workspace, entries, block)


def told_once(rows: Sequence[Sequence[Markup | str]]) -> list[list[Markup | str]]:
    """Neighbours with the same numbers, as Pmp and PCE have at one sun, in one row."""
    told: list[list[Markup | str]] = []
    for row in rows:
        if told and any(sign.isdigit() for cell in row[1:] for sign in cell) and list(row[1:]) == told[-1][1:]:
            told[-1][0] = join([told[-1][0], " = ", row[0]])
        else:
            told.append(list(row))
    return told


def parameters_tables(fits: Sequence[tuple[str, Fitted]], units_of: Callable[[str], Units]) -> Markup:
    """Parameters with standard errors, and intervals below them.

    Parameters
    ----------
    fits : sequence of (name, Fitted)
        With the name of the sweep.
    units_of : callable
        Units of a sweep by its entry.
    """
    blocks = []
    kinds = dict.fromkeys((fit.kind, units_of(fit.entry)) for _, fit in fits)
    for kind, units in kinds:
        like = [(name, fit) for name, fit in fits if (fit.kind, units_of(fit.entry)) == (kind, units)]
        heads = [name if len(kinds) == 1 else f"{name}, {kind}" for name, _ in like]
        for at, columns in _portions(len(like)):
            part, names = like[at : at + columns], heads[at : at + columns]
            rows = [
                [
                    join([mark(parameter), _headed(tables.parameter_name(parameter, units), units.parameter_unit(parameter))]),
                    *(_parameter(fit, parameter, units) for _, fit in part),
                ]
                for parameter in part[0][1].model.parameters
            ]
            rows.append(["fit", *(element("span", fit.words, class_="reason") for _, fit in part)])
            if any(fit.refinement for _, fit in part):
                rows.append([_headed("rms residual", units.current), *(_residual(fit, units) for _, fit in part)])
                if any(fit.refinement and fit.refinement.chi_square is not None for _, fit in part):
                    rows.append(["χ² per degree of freedom", *(_chi_square(fit) for _, fit in part)])
                rows.append(["points used", *(str(fit.refinement.points) if fit.refinement else "–" for _, fit in part)])
            blocks.append(table(["", *names], rows, "numbers sweeps few" if columns <= _FEW else "numbers sweeps"))
    return join(blocks)


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
        blocks += [block(like[at : at + columns]) for at, columns in _portions(len(like))]
    return join(blocks)


def _portions(count: int) -> list[tuple[int, int]]:
    """Where tables of about equal width begin, and how many columns they have."""
    if not count:
        return []
    columns = math.ceil(count / math.ceil(count / _COLUMNS))
    return [(at, columns) for at in range(0, count, columns)]


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


def _parameter(fit: Fitted, parameter: str, units: Units) -> Markup:
    factor = units.parameter_factor(parameter)
    value = getattr(fit.model, parameter) * factor
    if fit.refinement is None:
        return text(number(value))
    if fit.state(parameter) == "held":
        return join([number(value), " ", element("span", "held", class_="reason")])
    error = fit.refinement.standard_errors.get(parameter)
    known = concise(value, None if error is None else error * factor)
    return join([known, " ", element("span", interval_text(fit.intervals[parameter], factor), class_="interval")])


def interval_text(interval: Interval, factor: float = 1.0) -> str:
    """``22.58 … 22.62``; one-sided where the data only bound the parameter."""
    low, high = interval.low * factor, interval.high * factor
    if not interval.low_bounded and not interval.high_bounded:
        return "not determined"
    if not interval.high_bounded:
        return f"> {number(low, digits=2)}"
    if not interval.low_bounded:
        return f"< {number(high, digits=2)}"
    # Two digits of the interval's width, so that its ends differ.
    width = (high - low) / 2
    ends = [number(end, width) for end in (low, high)]
    mantissa, _, power = ends[0].partition("·10")
    return f"{mantissa} … {ends[1]}" if power and ends[1].endswith(f"·10{power}") else " … ".join(ends)


def _residual(fit: Fitted, units: Units) -> str:
    return plus_minus(fit.refinement.rmse * units.current_factor) if fit.refinement else "–"


def _chi_square(fit: Fitted) -> str:
    return number(fit.refinement.chi_square, digits=3) if fit.refinement and fit.refinement.chi_square is not None else "–"
