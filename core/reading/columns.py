"""Which columns of a block are voltage and current, and in what units."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from .guesses import finite, is_count, level_at_zero, pairs_by_numbers, voltage_likeness
from .refusal import Refusal
from .table import Block
from .thousands import NAMES, Doubt
from .units import Label, Unit, parse_label, parse_unit
from .words import device_in, is_german

# A voltage without unit beyond this is read as millivolts [V]; module strings end far below.
_VOLTS_AT_MOST = 150.0
# Single cells end below this [V]; their currents in A are rarely above the next figure.
_CELL_VOLTS = 3.0
_AMPERES_OF_CELL = 1.5
_AMPERES_AT_MOST = 15.0
# A density without unit above this at one sun cannot be in A cm⁻².
_DENSITY_AT_MOST = 0.15
# Where a point or comma may mark decimals or thousands, a reading beyond these is none:
# a voltage [V] below the first or beyond _VOLTS_AT_MOST, a density [A cm⁻²], a current [A].
_DOUBTED_VOLTS_AT_LEAST = 0.02
_DOUBTED_DENSITY_AT_MOST = 1.0
_DOUBTED_AMPERES_AT_MOST = 100.0


@dataclass(frozen=True, slots=True)
class Pair:
    """A column of voltage and its column of current, with factors to V and to A or A cm⁻²."""

    voltage: int
    current: int
    voltage_factor: float
    current_factor: float
    density: bool
    direction: str | None = None
    lit: bool | None = None
    device: str = ""
    area: float | None = None
    magnitude: bool = False  # the file gives |current|
    assumed_units: bool = False
    bare: bool = False  # chosen by its numbers alone
    read_unit: str = ""  # of a current whose unit the file does not give
    error: int | None = None  # the column with the standard deviation of each current
    error_factor: float = 1.0
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class _Column:
    index: int
    label: Label
    title: str
    device: str = ""


def pairs_of(block: Block) -> list[Pair]:
    """Every pair of voltage and current in a block.

    Raises
    ------
    Refusal
        If the block has one column only, or no columns that can be a sweep.
    """
    line = int(block.lines[0])
    usable = [c for c in range(block.values.shape[1]) if finite(block.values[:, c]).size >= 3]
    if not usable:
        raise Refusal("the table has fewer than three numbers in each column", "Check the export", line=line)
    if len(usable) == 1:
        raise Refusal(
            "the table has only one column of numbers",
            "A sweep needs a column of voltage and one of current; check the delimiter in the export",
            line=line,
        )
    columns = _labelled(block)
    columns = [c for c in columns if c.index in usable]
    if any(c.label.kind in ("voltage", "current", "density") for c in columns):
        found, errors, notes = _by_label(block, columns)
    else:
        others = {c.index for c in columns if c.label.kind == "other"}
        open_ones = [c for c in usable if c not in others]
        found, errors, notes = [], {}, ()
        if len(open_ones) > 1:
            indices, notes = pairs_by_numbers(block.values, open_ones, line)
            found = [(_Column(v, Label(), ""), _Column(c, Label(), "")) for v, c in indices]
    if not found:
        raise Refusal(
            "the headings name no columns of voltage and current",
            "Name the columns, for example “Voltage (V)” and “Current (A)”",
            line=line,
        )
    return [_with_units(block, columns, voltage, current, errors.get(current.index), notes) for voltage, current in found]


def _labelled(block: Block) -> list[_Column]:
    """Columns with what all the heading rows together say of each."""
    width = block.values.shape[1]
    rows = [tuple(row) for row in block.labels]
    scores = [sum(parse_label(cell).kind is not None for cell in row) for row in rows]
    main = int(np.argmax(scores)) if rows and max(scores) else len(rows) - 1
    columns = []
    for index in range(width):
        title = _at(rows, main, index, width) if rows else ""
        label = parse_label(title) if title else Label()
        device = ""
        for row in range(len(rows)):
            if row == main:
                continue
            cell = _at(rows, row, index, width, fill=row < main)
            unit = parse_unit(cell.strip("()[] ")) if cell else None
            if unit is not None and row > main:
                if label.error_of is not None:
                    label = _error_in(label, unit)
                elif label.kind is None or unit.kind == label.kind or {unit.kind, label.kind} == {"current", "density"}:
                    label = replace(label, kind=unit.kind, factor=unit.factor, capital=unit.capital)
            elif cell and row < main and not scores[row]:
                above = parse_label(cell)
                label = replace(
                    label,
                    direction=label.direction or above.direction,
                    lit=label.lit if label.lit is not None else above.lit,
                )
                device = device_in(cell)
        columns.append(_Column(index, label, title, device))
    return columns


def _error_in(label: Label, unit: Unit) -> Label:
    """The label of a standard deviation with the unit that stands below it; one of another kind makes it none of a current."""
    if unit.kind in ("current", "density"):
        return replace(label, factor=unit.factor, error_of=unit.kind)
    return replace(label, factor=None, error_of=None)


def _at(rows: Sequence[Sequence[str]], row: int, index: int, width: int, fill: bool = False) -> str:
    """A heading's cell; with ``fill`` the one to its left where it is empty (merged cells)."""
    cells = rows[row]
    if index < len(cells) and cells[index].strip():
        return cells[index].strip()
    if fill:
        return next((cells[i].strip() for i in range(min(index, len(cells) - 1), -1, -1) if cells[i].strip()), "")
    return ""


def _by_label(
    block: Block, columns: list[_Column]
) -> tuple[list[tuple[_Column, _Column]], dict[int, _Column], tuple[str, ...]]:
    """Pairs of voltage and current, the standard deviations by the index of their current, and notes."""
    voltages = [c for c in columns if c.label.kind == "voltage"]
    currents = [c for c in columns if c.label.kind in ("current", "density")]
    currents = [c for c in currents if not c.label.magnitude] or currents
    unknown = [c for c in columns if c.label.kind is None]
    notes: list[str] = []
    if voltages and not currents:
        currents = unknown[:] if unknown else []
        unknown = []
    elif currents and not voltages and unknown:
        best = max(unknown, key=lambda c: voltage_likeness(block.values[:, c.index]))
        voltages, unknown = [best], [c for c in unknown if c is not best]
    if not voltages or not currents:
        return [], {}, ()
    if len(voltages) > 1 and len(voltages) != len(currents):
        measured = [c for c in voltages if c.label.role == "measured"]
        unset = [c for c in voltages if c.label.role != "set"]
        chosen = measured or unset or voltages
        if len(chosen) < len(voltages):
            notes.append("Of several voltage columns the measured one is used.")
        voltages = chosen
    currents, more = _without_doubles(block, currents, voltages)
    notes += more
    if len(voltages) == len(currents):
        found = list(zip(voltages, currents, strict=True))
    else:
        found = [(_nearest(voltages, c), c) for c in currents]
    _refuse_shifted(block, found)
    errors = _errors(block, columns, found)
    used = {c.index for pair in found for c in pair} | {c.index for c in errors.values()}
    left = [c.title or f"column {c.index + 1}" for c in columns if c.index not in used]
    if left:
        names = ", ".join(f"“{name[:40]}”" for name in left[:5]) + (" and more" if len(left) > 5 else "")
        notes.append(f"Not used: {names}.")
    return found, errors, tuple(notes)


def _errors(block: Block, columns: list[_Column], found: list[tuple[_Column, _Column]]) -> dict[int, _Column]:
    """The standard deviation of each current, by the current's index, where nothing about it is in doubt."""
    errors = [c for c in columns if c.label.error_of is not None and np.any(finite(block.values[:, c.index]) > 0)]
    if not errors:
        return {}
    matched = {}
    taken = sorted(c.index for pair in found for c in pair)
    for voltage, current in found:
        beside = errors
        if len(found) > 1:  # of several currents, each has its own to its right
            end = next((index for index in taken if index > current.index), block.values.shape[1])
            beside = [c for c in errors if current.index < c.index < end]
        if len(beside) == 1 and _is_error_of(block, columns, beside[0], voltage, current):
            matched[current.index] = beside[0]
    # One that is left over may stand beside another current than its own.
    return matched if len(matched) == len(found) == len(errors) else {}


def _is_error_of(block: Block, columns: list[_Column], error: _Column, voltage: _Column, current: _Column) -> bool:
    said, of = error.label, current.label
    if said.direction not in (None, of.direction) or said.lit not in (None, of.lit):
        return False
    if block.doubt is not None and error.index in block.doubt.first and not {voltage.index, current.index} & set(block.doubt.first):
        return False  # whether its marks divide decimals or thousands is not resolved
    if said.factor is not None:  # a unit of its own says nothing beside a current without one
        return of.factor is not None and said.error_of == of.kind
    both = {"current", "density"} <= {c.label.kind for c in columns}
    return said.error_of == of.kind or not both


def _refuse_shifted(block: Block, found: list[tuple[_Column, _Column]]) -> None:
    """Headings that lost a cell stand above the wrong columns; a count of the rows then looks like the voltage."""
    headings = max(map(len, block.labels), default=0)
    if headings < block.values.shape[1] and any(is_count(block.values[:, voltage.index]) for voltage, _ in found):
        raise Refusal(
            f"the rows have {block.values.shape[1]} columns and the headings only {headings}, and what stands under the "
            "voltage counts the rows",
            "Give each column its heading",
            line=int(block.lines[0]),
        )


def _nearest(voltages: list[_Column], current: _Column) -> _Column:
    """The voltage just left of a current, else the first to its right."""
    left = [v for v in voltages if v.index < current.index]
    return left[-1] if left else voltages[0]


def _without_doubles(
    block: Block, currents: list[_Column], voltages: list[_Column]
) -> tuple[list[_Column], list[str]]:
    """Drops a current that only repeats a density beside it (or the reverse), keeping the ratio as the area."""
    densities = [c for c in currents if c.label.kind == "density"]
    plain = [c for c in currents if c.label.kind == "current"]
    if not densities or not plain:
        return currents, []
    doubles = []
    for density, current in zip(densities, plain, strict=False):
        if _area_between(block, density, current) is not None:
            doubles.append(current)
    kept = [c for c in currents if c not in doubles]
    if doubles:
        return kept, []
    return (densities if len(voltages) == len(densities) else kept), []


def _area_between(block: Block, density: _Column, current: _Column) -> float | None:
    """Area [cm²] if the current is the density times one number."""
    if density.label.factor is None or current.label.factor is None:
        return None
    j = block.values[:, density.index] * density.label.factor
    i = block.values[:, current.index] * current.label.factor
    good = np.isfinite(j) & np.isfinite(i)
    if good.sum() < 3:
        return None
    j, i = j[good], i[good]
    large = np.abs(j) > 0.1 * np.max(np.abs(j), initial=0.0)
    if not large.any():
        return None
    ratio = np.abs(i[large] / j[large])
    area = float(np.median(ratio))
    if not (1e-12 < area < 1e9) or np.max(np.abs(ratio / area - 1)) > 0.05:
        return None
    return float(f"{area:.4g}")


def _with_units(
    block: Block,
    columns: list[_Column],
    voltage: _Column,
    current: _Column,
    error: _Column | None,
    notes: tuple[str, ...],
) -> Pair:
    said = list(notes)
    volts = np.abs(finite(block.values[:, voltage.index]))
    voltage_factor, current_factor = voltage.label.factor, current.label.factor
    density = current.label.kind == "density"
    assumed, read_unit = False, ""
    if voltage.title == "V" and float(np.max(volts, initial=0.0)) > _VOLTS_AT_MOST:
        voltage_factor = None  # the letter is the symbol, not the unit
    if voltage_factor is None:
        assumed = True
        milli = float(np.max(volts, initial=0.0)) > _VOLTS_AT_MOST
        voltage_factor = 1e-3 if milli else 1.0
        voltage_unit = "mV" if milli else "V"
    if current_factor is None:
        level = level_at_zero(block.values[:, voltage.index] * voltage_factor, block.values[:, current.index])
        cell = float(np.max(volts, initial=0.0)) * voltage_factor < _CELL_VOLTS
        if current.label.kind == "density":
            unit, current_factor = ("mA cm⁻²", 1e-3) if level > _DENSITY_AT_MOST else ("A cm⁻²", 1.0)
        elif current.label.kind == "current":
            unit, current_factor = ("mA", 1e-3) if level > _AMPERES_AT_MOST else ("A", 1.0)
        elif cell and level > _AMPERES_OF_CELL:
            unit, current_factor, density = "mA cm⁻²", 1e-3, True
        else:
            unit, current_factor = "A", 1.0
        read_unit, both = unit, f"{voltage_unit} and {unit}" if assumed else unit
        said.append(f"No unit given: read as {both}; check that this is right.")
        assumed = True
    elif assumed:
        said.append(f"No unit given for the voltage: read as {voltage_unit}; check that this is right.")
    error_factor = current_factor if error is None or error.label.factor is None else error.label.factor
    if block.doubt is not None:
        larger, note = _resolved(block, block.doubt, voltage, current, voltage_factor, current_factor, density)
        said += note
        voltage_factor *= larger.get(voltage.index, 1.0)
        current_factor *= larger.get(current.index, 1.0)
        if error is not None and error.index in block.doubt.first:
            error_factor *= max(larger.values(), default=1.0)  # one mark means one thing in all columns
    if block.note:
        said.append(block.note)
    device = current.device or voltage.device or _device_in_label(current.label)
    area = None
    if density and current.label.factor is not None:
        for other in columns:
            if other.label.kind == "current" and other.index != current.index:
                area = _area_between(block, current, other)
                if area is not None:
                    said.append(
                        f"The file gives current and density; their ratio, {area:.4g} cm², is taken as its area."
                    )
                    break
    if voltage.label.capital or current.label.capital:
        said.append("The M of the unit in the heading is read as milli: no solar cell is measured in megavolts or megaamperes.")
    if voltage.label.factor == 1e-3:
        said.append("The voltage was read in mV.")
    if error is not None:
        said.append(f"“{error.title[:40]}” is read as the standard deviation of each current.")
    return Pair(
        voltage.index,
        current.index,
        voltage_factor,
        current_factor,
        density,
        direction=current.label.direction or voltage.label.direction,
        lit=current.label.lit if current.label.lit is not None else voltage.label.lit,
        device=device,
        area=area,
        magnitude=current.label.magnitude,
        assumed_units=assumed,
        bare=voltage.label.kind is None and current.label.kind is None,
        read_unit=read_unit,
        error=None if error is None else error.index,
        error_factor=error_factor,
        notes=tuple(said),
    )


def _resolved(
    block: Block,
    doubt: Doubt,
    voltage: _Column,
    current: _Column,
    voltage_factor: float,
    current_factor: float,
    density: bool,
) -> tuple[dict[int, float], list[str]]:
    """Factors for columns in which a point or comma turns out to stand between thousands, and a note.

    Raises
    ------
    Refusal
        If decimals and thousands are equally possible.
    """
    doubted = [c.index for c in (voltage, current) if c.index in doubt.first]
    if not doubted:
        return {}, []
    votes = set()
    if voltage.index in doubted:
        volts = voltage_factor * float(np.max(np.abs(finite(block.values[:, voltage.index])), initial=0.0))
        if 1e3 * volts > _VOLTS_AT_MOST:
            votes.add("decimal")
        elif volts < _DOUBTED_VOLTS_AT_LEAST:
            votes.add("thousands")
    if current.index in doubted:
        amps = current_factor * float(np.max(np.abs(finite(block.values[:, current.index])), initial=0.0))
        if 1e3 * amps > (_DOUBTED_DENSITY_AT_MOST if density else _DOUBTED_AMPERES_AT_MOST):
            votes.add("decimal")
    expected = doubt.mark == ("," if is_german(" ".join(cell for row in block.labels for cell in row)) else ".")
    if len(votes) > 1 or not (votes or expected):
        raise doubt.refusal(doubted[-1])
    _, cell = doubt.first[doubted[-1]]
    if votes == {"thousands"}:
        digits = cell.replace(doubt.mark, "")
        return dict.fromkeys(doubted, 1e3), [f"A {NAMES[doubt.mark]} stands between thousands: “{cell}” is read as {digits}."]
    if votes:
        return {}, []
    decimals = cell.replace(doubt.mark, ".")
    return {}, [f"The {NAMES[doubt.mark]} is taken for a decimal mark: “{cell}” is read as {decimals}; check that this is right."]


def _device_in_label(label: Label) -> str:
    rest = device_in(label.rest)
    return "" if rest.isdigit() or len(rest) < 2 else rest
