"""Steps on measuring conditions, and what they do to the models laid over the points.

A condition changes the frame, not the measurement: the model curve stays where it is relative to the
points. A new area multiplies currents, so Jph and J0 are multiplied and Rs and Rsh divided; a new temperature or
number of cells rescales n, since a sweep determines n·Ns·T alone. Bounds of the fit settings follow.
The refinement of such a fit is dropped and the (rescaled) model kept: errors and intervals belong to the
conditions that they were computed under. Excluded points and the voltage window stay.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import replace
from typing import Any

from .applying import Step, make_step
from .errors import ConditionRefused
from .records import id_of_text, reading_record, reading_text
from .sweep import Conditions, Sweep
from .workspace import (
    CONFIRMED_OF_ENTRY,
    DEVICE_CONDITIONS,
    ENTRY_CONDITIONS,
    Device,
    Entry,
    Fit,
    Workspace,
    conditions_of,
)

_WORDS = {
    "area": "area",
    "file_area": "area used by the file",
    "series_cells": "cells in series",
    "temperature": "temperature",
    "irradiance": "irradiance",
    "lit": "light or dark",
    "units": "units",
}


def set_conditions(workspace: Workspace, entry_id: str, **changes: float | bool | None) -> Step:
    """Correct conditions of a sweep.

    Parameters
    ----------
    area, file_area : float or None
        [cm²], of the device and all its sweeps; None: not known.
    series_cells : int or None
        Of the device and all its sweeps; None: as read.
    temperature, irradiance, lit : float, float, bool or None
        [K], [W cm⁻²], of this sweep; None: as read. An irradiance of zero makes the sweep a dark one.

    Returns
    -------
    Step
        It also confirms what is given, and rescales models as described at the head of this module.

    Raises
    ------
    ConditionRefused
        If a condition makes no sense, or a current density cannot be rescaled because nobody
        knows the area that its file divided by.
    """
    entry = workspace.entry(entry_id)
    device = workspace.device(entry.device)
    changes = _checked(changes)
    for_device = {name: value for name, value in changes.items() if name in DEVICE_CONDITIONS}
    for_entry = {name: value for name, value in changes.items() if name in ENTRY_CONDITIONS}
    if for_entry.get("irradiance") == 0 and "lit" not in for_entry:
        for_entry["lit"] = False
    if for_device.get("series_cells", 0) is None:
        for_device["series_cells"] = entry.reading.series_cells
    new_device = replace(
        device, **for_device, confirmed=_confirmed(device, changes, DEVICE_CONDITIONS) & {"series_cells"}
    )
    new_entry = replace(entry, **for_entry, confirmed=_confirmed(entry, {**changes, **for_entry}, ENTRY_CONDITIONS))
    _check_light(new_entry, for_entry)
    of_device = workspace.entries_of(device.id) if for_device else [entry]
    if {"area", "file_area"} & changes.keys():
        for other in of_device:
            _check_area(other, conditions_of(new_device, other), device, named=other.id != entry_id)
    fits = {}
    for other in of_device:
        after = conditions_of(new_device, new_entry if other.id == entry_id else other)
        fit = workspace.fits.get(other.id)
        if fit is not None:
            fits[other.id] = fit_under(fit, other.reading, workspace.conditions(other.id), after)
    label = "change " + ", ".join(_WORDS[name] for name in changes)
    return make_step(label, devices={device.id: new_device}, entries={entry_id: new_entry}, fits=fits)


def set_current_unit(workspace: Workspace, entry_id: str, unit: str) -> Step:
    """Say in which unit a file without units gives its current; for all its sweeps in the tray.

    Their models go, because they were laid over other numbers.

    Parameters
    ----------
    unit : str
        One of ``core.sweep.CURRENT_UNITS``.

    Raises
    ------
    ConditionRefused
        If the file gives its units, or there is no such unit.
    """
    entry = workspace.entry(entry_id)
    entry.reading.with_unit(unit)  # refuses for this one, whatever the others are
    entries, readings, devices = {}, {}, {}
    for other in workspace.entries.values():
        if not other.reading.read_unit or other.id != entry_id and (entry.source is None or other.source != entry.source):
            continue
        reading = other.reading.with_unit(unit)
        record = reading_record(reading)
        reading_id = id_of_text(reading_text(record))
        readings[reading_id] = record
        entries[other.id] = replace(other, reading=reading, reading_id=reading_id, confirmed=other.confirmed | {"units"})
        device = workspace.device(other.device)
        devices[device.id] = replace(device, file_area=reading.conditions.file_area)
    return make_step(
        "change unit of the current",
        devices=devices,
        entries=entries,
        fits=dict.fromkeys(entries.keys() & workspace.fits.keys()),
        readings=readings,
    )


def set_band_gap(workspace: Workspace, entry_id: str, band_gap: float | None) -> Step:
    """Say the band gap [eV] of a sweep's device; None: not known.

    Raises
    ------
    ConditionRefused
        If it is not a gap that a solar cell can have.
    """
    device = workspace.device(workspace.entry(entry_id).device)
    if band_gap is not None and not 0.3 <= band_gap <= 5:
        raise ConditionRefused(f"A band gap of {band_gap:.4g} eV is outside 0.3 to 5 eV; check the unit.")
    return make_step("change band gap", devices={device.id: replace(device, band_gap=band_gap)})


def confirm_conditions(workspace: Workspace, entry_id: str, names: Iterable[str]) -> Step:
    """Confirm conditions that were assumed, as they stand."""
    entry = workspace.entry(entry_id)
    device = workspace.device(entry.device)
    names = frozenset(names)
    if not names <= {*DEVICE_CONDITIONS, *CONFIRMED_OF_ENTRY}:
        raise ConditionRefused(f"There is no condition called “{sorted(names - set(_WORDS))[0]}”.")
    return make_step(
        "confirm " + ", ".join(_WORDS[name] for name in _WORDS if name in names),
        devices={device.id: replace(device, confirmed=device.confirmed | names & {"series_cells"})},
        entries={entry_id: replace(entry, confirmed=entry.confirmed | names & CONFIRMED_OF_ENTRY)},
    )


def fit_under(fit: Fit, reading: Sweep, before: Conditions, after: Conditions) -> Fit:
    """The fit of a sweep whose conditions change from ``before`` to ``after``; see the head of this module."""
    factor = _current_factor(reading, after) / _current_factor(reading, before)
    ideality = (before.series_cells * before.temperature) / (after.series_cells * after.temperature)
    if factor == 1 and ideality == 1 and before.lit == after.lit and before.series_cells == after.series_cells:
        return fit
    model = fit.model
    if model is not None and factor != 1:
        model = model.scaled(factor)
    if model is not None:
        model = model.at(temperature=after.temperature, series_cells=after.series_cells)
    bounds = {}
    for name, (low, high) in fit.settings.bounds.items():
        scale = ideality if name.startswith("ideality") else 1 / factor if name.endswith("resistance") else factor
        bounds[name] = low * scale, high * scale
    noise = fit.settings.current_noise
    noise = None if noise is None else noise * factor
    return Fit(model, replace(fit.settings, bounds=bounds, current_noise=noise), None)


def _current_factor(reading: Sweep, conditions: Conditions) -> float:
    try:
        return reading.rescaling(conditions)
    except ConditionRefused:
        return 1.0  # such a density stays as read, see Workspace.sweep


def _confirmed(record: Device | Entry, changes: dict[str, Any], names: tuple[str, ...]) -> frozenset[str]:
    """What stays or becomes confirmed: a condition that is given; not one that goes back to as read."""
    given = {name for name in names if changes.get(name) is not None}
    taken_back = {name for name in names if name in changes and changes[name] is None}
    return frozenset((record.confirmed | given) - taken_back)


def _checked(changes: dict[str, Any]) -> dict[str, Any]:
    if not changes:
        raise ConditionRefused("No condition was given.")
    for name, value in changes.items():
        if name not in {*DEVICE_CONDITIONS, *ENTRY_CONDITIONS}:
            raise ConditionRefused(f"There is no condition called “{name}”.")
        if value is None:
            continue
        if name == "lit":
            changes[name] = bool(value)
            continue
        try:
            number = float(value)
        except (TypeError, ValueError):
            number = math.nan
        if isinstance(value, bool) or not math.isfinite(number):
            raise ConditionRefused(f"The {_WORDS[name]} must be a number, not “{value}”.")
        if name == "series_cells" and not number.is_integer():
            raise ConditionRefused("The number of cells in series must be a whole number from 1 to 10000.")
        changes[name] = int(number) if name == "series_cells" else number
    if changes.get("irradiance", 0) is not None and changes.get("irradiance", 0) < 0:
        raise ConditionRefused("The irradiance must be zero (dark) or a number above zero.")
    return changes


def _check_light(entry: Entry, given: dict[str, Any]) -> None:
    lit = entry.reading.lit if entry.lit is None else entry.lit
    irradiance = given.get("irradiance")
    if irradiance and not lit:
        raise ConditionRefused("A dark sweep has no irradiance. Mark the sweep as measured in light first.")
    if irradiance == 0 and lit:
        raise ConditionRefused("A sweep measured in light needs an irradiance above zero.")


def _check_area(entry: Entry, conditions: Conditions, device: Device, *, named: bool) -> None:
    try:
        entry.reading.rescaling(conditions)
    except ConditionRefused as refused:
        if not named:
            raise
        raise ConditionRefused(f"{entry.name} of {device.name}: {refused}") from refused
