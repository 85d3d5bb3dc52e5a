"""What the numbers of two columns mean: their units, told or judged by size, and the area and thousands behind them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .guesses import finite, level_at_zero
from .table import Block
from .thousands import NAMES, Doubt
from .units import Label
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
class Column:
    """One column of numbers with what its heading says."""

    index: int
    label: Label
    title: str
    device: str = ""


def area_between(block: Block, density: Column, current: Column) -> float | None:
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


def with_units(
    block: Block,
    columns: list[Column],
    voltage: Column,
    current: Column,
    error: Column | None,
    notes: tuple[str, ...],
) -> Pair:
    """The two columns with the factors to core's units; what had to be judged is noted.

    Raises
    ------
    Refusal
        If a point or comma may mark decimals or thousands, and nothing tells which.
    """
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
                area = area_between(block, current, other)
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
    voltage: Column,
    current: Column,
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
