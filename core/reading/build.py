"""From a pair of columns to sweeps: points left out, passes, signs, conditions, names."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from ..constants import ONE_SUN, STANDARD_TEMPERATURE
from ..sweep import Conditions, Sweep
from .header import Recorded
from .limits import (
    MAX_AMPERES,
    MAX_BROKEN_ROWS,
    MAX_BROKEN_SHARE,
    MAX_DENSITY,
    MAX_VOLTS,
    MIN_POINTS,
)
from .passes import Pass, split_passes
from .refusal import Refusal
from .scales import Pair
from .shape import refuse_other_shapes
from .signs import current_is_turned, looks_lit, voltage_is_turned
from .table import Block
from .words import device_of_sheet, direction_in, light_in


@dataclass(frozen=True, slots=True)
class Origin:
    """What is known of a table from outside it: file name, sheet, header."""

    device: str
    recorded: Recorded
    header: Mapping[str, str]
    direction: str | None = None
    lit: bool | None = None
    irradiance: float | None = None
    row_word: str = "line"


def sweeps_of(block: Block, pair: Pair, origin: Origin) -> list[Sweep]:
    """The sweeps that a pair of columns holds, in the order of measurement.

    Raises
    ------
    Refusal
        If the columns hold no sweep.
    """
    voltage, current, error, notes = _points(block, pair, origin.row_word)
    if np.all(current == 0):
        raise Refusal(
            "the current is zero at every voltage",
            "Check that the contacts were closed and that the right column was exported",
            line=int(block.lines[0]),
        )
    try:
        passes, lost = split_passes(voltage)
    except Refusal as refusal:
        raise Refusal(refusal.problem, refusal.remedy, line=int(block.lines[0])) from refusal
    if pair.bare:
        refuse_other_shapes(passes, voltage, current, int(block.lines[0]))
    if lost:
        notes.append(f"{_points_word(lost)} at the turns of the voltage that make no sweep of their own left out.")
    stated_dark = False if _first(origin.recorded.irradiance, origin.irradiance) == 0 else None
    said_lit = _first(pair.lit, light_in(block.words), origin.recorded.lit, stated_dark, origin.lit)
    said_direction = pair.direction or direction_in(block.words) or origin.direction if len(passes) == 1 else None
    if pair.magnitude:
        current = _signed(passes, voltage, current, said_lit)
        notes.append("The file gives the size of the current without its sign: the sign was put back by the curve's shape.")
    turned_voltage = _vote(passes, voltage, current, said_lit, voltage_is_turned)
    if turned_voltage:
        voltage = -voltage
        notes.append("The file's voltage has the other sign (the device works at negative voltage): turned round.")
    return [
        _sweep(
            voltage[p.indices],
            current[p.indices],
            None if error is None else error[p.indices],
            p, turned_voltage, pair, origin, said_lit, said_direction, notes,
        )
        for p in passes
    ]  # fmt: skip


def _first(*values):
    return next((v for v in values if v is not None), None)


def _points_word(count: int) -> str:
    return "1 point" if count == 1 else f"{count} points"


def _points(
    block: Block, pair: Pair, row_word: str
) -> tuple[np.ndarray, np.ndarray, np.ndarray | None, list[str]]:
    """Usable voltages and currents with the standard deviations of these, and notes on what was left out."""
    volts, amps = block.values[:, pair.voltage], block.values[:, pair.current]
    good = np.isfinite(volts) & np.isfinite(amps)
    void = ~good & (np.isinf(volts) | np.isinf(amps))
    if block.broken:
        text = np.zeros(len(volts), dtype=bool)
        text[[row for row, column in block.broken if column in (pair.voltage, pair.current)]] = True
    else:
        text = np.zeros(len(volts), dtype=bool)
    # Where both cells are empty the pair beside it is longer; where one is, the row is broken.
    broken = ~good & ~void & (text | (np.isfinite(volts) != np.isfinite(amps)))
    notes = list(pair.notes)
    if broken.any():
        first = int(block.lines[np.flatnonzero(broken)[0]])
        count = int(broken.sum())
        if count > max(MAX_BROKEN_ROWS, MAX_BROKEN_SHARE * len(volts)):
            raise Refusal(
                f"{count} rows do not have a number for both voltage and current, the first one here",
                "Mend or delete these rows, or export the sweep again",
                line=first,
            )
        where = ", ".join(str(int(n)) for n in block.lines[broken][:3])
        notes.append(f"Left out, not a number for both voltage and current: {row_word} {where}.")
    if void.any():
        first = int(block.lines[np.flatnonzero(void)[0]])
        notes.append(
            f"{_points_word(int(void.sum()))} marked as over range or not measured left out (first: {row_word} {first})."
        )
    if int(good.sum()) < MIN_POINTS:
        raise Refusal(
            f"only {int(good.sum())} usable points are left",
            "A sweep needs at least three; check the export and the source-meter's range",
            line=int(block.lines[0]),
        )
    voltage, current = volts[good] * pair.voltage_factor, amps[good] * pair.current_factor
    _refuse_absurd(voltage, current, pair, int(block.lines[0]))
    error = None if pair.error is None else block.values[good, pair.error] * pair.error_factor
    if error is not None:
        error[np.isinf(error)] = np.nan
        if lacking := int(np.count_nonzero(~(error > 0))):
            notes.append(f"{_points_word(lacking)} without a standard deviation above zero.")
    return voltage, current, error, notes


def _refuse_absurd(voltage: np.ndarray, current: np.ndarray, pair: Pair, line: int) -> None:
    # Half of the points: one wild reading among good ones is left to the checks.
    volts, amps = float(np.median(np.abs(voltage))), float(np.median(np.abs(current)))
    what, value, unit, most = "voltage", volts, "V", MAX_VOLTS
    if volts <= MAX_VOLTS:
        what, value, unit, most = ("density", amps, "A cm⁻²", MAX_DENSITY) if pair.density else ("current", amps, "A", MAX_AMPERES)
        if pair.read_unit:  # the user can still say in which unit it is
            return
    if value > most:
        raise Refusal(
            f"half of the points have a {what} above {value:.3g} {unit}, which no solar cell or module reaches",
            f"Check the unit of the {what} in the headings and the decimal marks, or whether this is a sweep at all",
            line=line,
        )


def _signed(passes: list[Pass], voltage: np.ndarray, current: np.ndarray, said_lit: bool | None) -> np.ndarray:
    """Current with the sign that |current| has lost: delivered up to Voc in light, never in the dark."""
    signed = np.abs(current)
    for one in passes:
        volts, sizes = voltage[one.indices], np.abs(current[one.indices])
        if said_lit if said_lit is not None else looks_lit(volts, sizes):
            ahead = np.where(volts > 0, sizes, np.inf)
            beyond = volts > volts[np.argmin(ahead)]
        else:
            beyond = volts > 0
        signed[one.indices] = np.where(beyond, -sizes, sizes)
    return signed


def _vote(passes: list[Pass], voltage, current, said_lit, question) -> bool:
    """One answer for all passes of a column, weighed by their points."""
    ayes = 0
    for one in passes:
        volts, amps = voltage[one.indices], current[one.indices]
        lit = said_lit if said_lit is not None else looks_lit(volts, amps)
        ayes += len(volts) if question(volts, amps, lit) else -len(volts)
    return ayes > 0


def _sweep(
    voltage: np.ndarray,
    current: np.ndarray,
    error: np.ndarray | None,
    one: Pass,
    turned_voltage: bool,
    pair: Pair,
    origin: Origin,
    said_lit: bool | None,
    said_direction: str | None,
    notes: list[str],
) -> Sweep:
    notes = list(notes)
    recorded = origin.recorded
    lit = said_lit if said_lit is not None else looks_lit(voltage, current)
    if said_lit is None and not lit:
        notes.append("Read as a dark sweep, judged by the current at V = 0; the file does not say.")
    if current_is_turned(voltage, current, lit):
        current = 0.0 - current  # not −current, which turns 0 into −0
        notes.append("The file's current has the other sign: turned round, so that delivered current is positive.")
    if one.jitter:
        notes.append("The voltage ran back by small steps in places: points put in order of voltage.")
    if np.any(np.diff(voltage) == 0):
        notes.append("Some voltages come more than once: all their points are kept.")
    direction = "forward" if one.rising != turned_voltage else "reverse"
    if said_direction is not None and said_direction != direction:
        notes.append(
            f"The file says {said_direction} but lists the voltages the other way: taken as {said_direction}."
        )
        voltage, current, direction = voltage[::-1], current[::-1], said_direction
        error = None if error is None else error[::-1]
    assumed = {"temperature", "irradiance", "series_cells"}
    irradiance = ONE_SUN
    stated = _first(recorded.irradiance, origin.irradiance)
    if not lit:
        irradiance = 0.0
        if said_lit is not None or stated == 0:
            assumed.discard("irradiance")
    elif stated:
        irradiance = stated
        assumed.discard("irradiance")
    if recorded.temperature is not None:
        assumed.discard("temperature")
    if recorded.series_cells is not None:
        assumed.discard("series_cells")
    if pair.assumed_units:
        assumed.add("units")
    conditions = Conditions(
        temperature=_first(recorded.temperature, STANDARD_TEMPERATURE),
        irradiance=irradiance,
        lit=lit,
        series_cells=recorded.series_cells or 1,
    )
    sweep = Sweep(
        voltage=voltage,
        current=current,
        per_area=pair.density,
        conditions=conditions,
        direction=direction,
        read_as="density" if pair.density else "current",
        scan_rate=recorded.scan_rate,
        device=device_of_sheet(pair.device, origin.device) if pair.device else origin.device,
        notes=(*notes, *recorded.notes),
        header=dict(origin.header),
        assumed=frozenset(assumed),
        read_unit=pair.read_unit,
        current_error=error,
    )
    if pair.density:
        return sweep.under(replace(conditions, file_area=_first(pair.area, recorded.area)))
    if recorded.area is not None:
        return sweep.under(replace(conditions, area=recorded.area))
    return sweep


def named(sweeps: list[Sweep]) -> list[Sweep]:
    """The same sweeps with short names that differ."""
    dark_of = Counter(s.device for s in sweeps if not s.lit)
    names = [_name(s, with_direction=s.lit or dark_of[s.device] > 1) for s in sweeps]
    levels: dict[str, set[float]] = {}
    for name, sweep in zip(names, sweeps, strict=True):
        levels.setdefault(name, set()).add(sweep.irradiance)
    # An intensity series is told apart by its light, anything else that repeats by a number.
    names = [
        f"{name} {sweep.irradiance / ONE_SUN:.4g} sun" if len(levels[name]) > 1 else name
        for name, sweep in zip(names, sweeps, strict=True)
    ]
    seen: Counter[str] = Counter()
    result = []
    for name, sweep in zip(names, sweeps, strict=True):
        seen[name] += 1
        result.append(replace(sweep, name=name if seen[name] == 1 else f"{name} {seen[name]}"))
    return result


def _name(sweep: Sweep, with_direction: bool) -> str:
    parts = (sweep.device, "" if sweep.lit else "dark", sweep.direction if with_direction else "")
    return " ".join(part for part in parts if part)
