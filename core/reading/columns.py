"""Which columns of a block are voltage and current."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from .guesses import finite, is_count, pairs_by_numbers, voltage_likeness
from .refusal import Refusal
from .scales import Column, Pair, area_between, with_units
from .table import Block
from .units import Label, Unit, parse_label, parse_unit
from .words import device_in


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
            found = [(Column(v, Label(), ""), Column(c, Label(), "")) for v, c in indices]
    if not found:
        raise Refusal(
            "the headings name no columns of voltage and current",
            "Name the columns, for example “Voltage (V)” and “Current (A)”",
            line=line,
        )
    return [with_units(block, columns, voltage, current, errors.get(current.index), notes) for voltage, current in found]


def _labelled(block: Block) -> list[Column]:
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
        columns.append(Column(index, label, title, device))
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
    block: Block, columns: list[Column]
) -> tuple[list[tuple[Column, Column]], dict[int, Column], tuple[str, ...]]:
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


def _errors(block: Block, columns: list[Column], found: list[tuple[Column, Column]]) -> dict[int, Column]:
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


def _is_error_of(block: Block, columns: list[Column], error: Column, voltage: Column, current: Column) -> bool:
    said, of = error.label, current.label
    if said.direction not in (None, of.direction) or said.lit not in (None, of.lit):
        return False
    if block.doubt is not None and error.index in block.doubt.first and not {voltage.index, current.index} & set(block.doubt.first):
        return False  # whether its marks divide decimals or thousands is not resolved
    if said.factor is not None:  # a unit of its own says nothing beside a current without one
        return of.factor is not None and said.error_of == of.kind
    both = {"current", "density"} <= {c.label.kind for c in columns}
    return said.error_of == of.kind or not both


def _refuse_shifted(block: Block, found: list[tuple[Column, Column]]) -> None:
    """Headings that lost a cell stand above the wrong columns; a count of the rows then looks like the voltage."""
    headings = max(map(len, block.labels), default=0)
    if headings < block.values.shape[1] and any(is_count(block.values[:, voltage.index]) for voltage, _ in found):
        raise Refusal(
            f"the rows have {block.values.shape[1]} columns and the headings only {headings}, and what stands under the "
            "voltage counts the rows",
            "Give each column its heading",
            line=int(block.lines[0]),
        )


def _nearest(voltages: list[Column], current: Column) -> Column:
    """The voltage just left of a current, else the first to its right."""
    left = [v for v in voltages if v.index < current.index]
    return left[-1] if left else voltages[0]


def _without_doubles(
    block: Block, currents: list[Column], voltages: list[Column]
) -> tuple[list[Column], list[str]]:
    """Drops a current that only repeats a density beside it (or the reverse), keeping the ratio as the area."""
    densities = [c for c in currents if c.label.kind == "density"]
    plain = [c for c in currents if c.label.kind == "current"]
    if not densities or not plain:
        return currents, []
    doubles = []
    for density, current in zip(densities, plain, strict=False):
        if area_between(block, density, current) is not None:
            doubles.append(current)
    kept = [c for c in currents if c not in doubles]
    if doubles:
        return kept, []
    return (densities if len(voltages) == len(densities) else kept), []
