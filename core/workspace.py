"""Everything of one piece of work, as one frozen value.

A workspace holds devices, entries (the sweeps measured on them, as read, with the user's corrections),
fits (one for an entry) and statements (what the user says of all of it). It never changes: a step makes the
next one (``core.steps``). It derives what the screens need: the sweep under the conditions that now hold,
which of them are still assumed, whether a refinement still describes the model.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, fields, replace
from types import MappingProxyType
from typing import Any

from .constants import ONE_SUN
from .errors import ConditionRefused, StepRefused
from .fit_settings import FitSettings
from .models import Model, model_from_dict
from .refinement import Refinement
from .statements import Statement
from .sweep import Conditions, Sweep

DEVICE_CONDITIONS = ("area", "file_area", "series_cells")  # of the device, hence of all its sweeps
ENTRY_CONDITIONS = ("temperature", "irradiance", "lit")  # of one sweep
CONFIRMED_OF_ENTRY = frozenset({*ENTRY_CONDITIONS, "units"})  # the units as read; another unit is another file


@dataclass(frozen=True, slots=True)
class Device:
    """What sweeps were measured on.

    Attributes
    ----------
    id, name : str
    area, file_area : float or None
        Area that densities refer to, and the one the file divided by [cm²]; None where nobody gave one.
    series_cells : int
    band_gap : float or None
        [eV]
    group : str
        "" for no group.
    confirmed : frozenset of str
        "series_cells" once a file or the user gave it.
    """

    id: str
    name: str
    area: float | None = None
    file_area: float | None = None
    series_cells: int = 1
    band_gap: float | None = None
    group: str = ""
    confirmed: frozenset[str] = frozenset()

    def __post_init__(self):
        _texts(self, "id", "name", "group")
        _numbers(self, "band_gap")
        Conditions(area=self.area, file_area=self.file_area, series_cells=self.series_cells)  # refuses what cannot be

    def to_dict(self) -> dict[str, Any]:
        return _values(self)

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Device:
        return cls(**{**values, "confirmed": _confirmed(values, {"series_cells"})})


@dataclass(frozen=True, slots=True)
class Entry:
    """One sweep in the tray.

    Attributes
    ----------
    id, device : str
        Its own id and that of its device.
    name : str
    reading : Sweep
        As read; never changed.
    reading_id : str
        SHA-256 of the reading's text (``core.records``).
    source, source_name : str or None, str
        SHA-256 and name of the original file.
    order : float
        Place in the tray.
    temperature, irradiance, lit : float, float, bool or None
        The user's corrections [K], [W cm⁻²]; None: as read.
    confirmed : frozenset of str
        Of these three and "units", those that the user gave or confirmed.
    """

    id: str
    device: str
    name: str
    reading: Sweep = field(compare=False, repr=False)
    reading_id: str
    source: str | None = None
    source_name: str = ""
    order: float = 0.0
    temperature: float | None = None
    irradiance: float | None = None
    lit: bool | None = None
    confirmed: frozenset[str] = frozenset()

    def __post_init__(self):
        _texts(self, "id", "device", "name", "reading_id", "source_name")
        _numbers(self, "order", "temperature", "irradiance")
        if self.source is not None:
            _texts(self, "source")
        if not (self.lit is None or isinstance(self.lit, bool)) or self.order is None:
            raise ValueError("light or dark is yes, no or as read; the place in the tray is a number")

    def to_dict(self) -> dict[str, Any]:
        """The record of the entry; the reading stands in it by its id alone."""
        values = _values(self, without=("reading", "reading_id"))
        return {**values, "reading": self.reading_id}

    @classmethod
    def from_dict(cls, values: Mapping[str, Any], reading: Sweep) -> Entry:
        values = {**values, "confirmed": _confirmed(values, CONFIRMED_OF_ENTRY)}
        return cls(reading=reading, reading_id=values.pop("reading"), **values)


@dataclass(frozen=True, slots=True)
class Fit:
    """The model laid over one sweep, the settings it is refined with, and the last refinement."""

    model: Model | None = None
    settings: FitSettings = field(default_factory=FitSettings)
    refinement: Refinement | None = None

    def __post_init__(self):
        _check_settings(self.settings)
        if self.model is not None:
            _check_model(self.model)

    def to_dict(self) -> dict[str, Any]:
        return {
            "model": None if self.model is None else self.model.to_dict(),
            "settings": self.settings.to_dict(),
            "refinement": None if self.refinement is None else self.refinement.to_dict(),
        }

    @classmethod
    def from_dict(cls, values: Mapping[str, Any]) -> Fit:
        model, refinement = values["model"], values["refinement"]
        return cls(
            None if model is None else model_from_dict(model),
            FitSettings.from_dict(values["settings"]),
            None if refinement is None else Refinement.from_dict(refinement),
        )


KINDS = ("devices", "entries", "fits", "statements")


@dataclass(frozen=True, slots=True, eq=False)
class Workspace:
    """One piece of work at one revision.

    Attributes
    ----------
    id, name : str
    revision : int
        Raised by every step, undo and redo.
    devices, entries, fits, statements : mapping of str to Device, Entry, Fit, Statement
        By id; a fit stands under the id of its entry.
    """

    id: str
    name: str
    revision: int = 0
    devices: Mapping[str, Device] = field(default_factory=lambda: MappingProxyType({}))
    entries: Mapping[str, Entry] = field(default_factory=lambda: MappingProxyType({}))
    fits: Mapping[str, Fit] = field(default_factory=lambda: MappingProxyType({}))
    statements: Mapping[str, Statement] = field(default_factory=lambda: MappingProxyType({}))
    # Derived sweeps, made when first asked for and handed on to the next revision where nothing about
    # them changed: the same sweep stays the same object, so that what is computed from it can be kept.
    derived: dict[str, Sweep] = field(default_factory=dict, repr=False)

    def sweep(self, entry_id: str) -> Sweep:
        """The reading under the conditions and the name that now hold, with what of them is still assumed.

        A density whose file area nobody knows stays as read, even beside sweeps of a known area.
        """
        sweep = self.derived.get(entry_id)
        if sweep is None:
            entry = self.entry(entry_id)
            sweep = sweep_under(entry.reading, self.conditions(entry_id))
            sweep = replace(sweep, name=entry.name, assumed=self.assumed(entry_id))
            self.derived[entry_id] = sweep
        return sweep

    def conditions(self, entry_id: str) -> Conditions:
        """Conditions of a sweep: the device's, with what was read or corrected for this sweep."""
        entry = self.entry(entry_id)
        return conditions_of(self.devices[entry.device], entry)

    def assumed(self, entry_id: str) -> frozenset[str]:
        """Names of the conditions that no file gave and the user has not confirmed."""
        entry = self.entry(entry_id)
        conditions, read = self.conditions(entry_id), entry.reading.conditions
        names = set(entry.reading.assumed)
        if not conditions.lit:
            names.discard("irradiance")  # none in the dark
        elif not read.irradiance > 0:
            names.add("irradiance")  # read as dark, corrected to lit
        return frozenset(names - entry.confirmed - self.devices[entry.device].confirmed)

    def entry(self, entry_id: str) -> Entry:
        """Raises StepRefused where the sweep is not (or no longer) in the workspace."""
        try:
            return self.entries[entry_id]
        except KeyError:
            raise StepRefused("That sweep is no longer in this workspace. Choose another in the tray.") from None

    def device(self, device_id: str) -> Device:
        """Raises StepRefused where the device is not (or no longer) in the workspace."""
        try:
            return self.devices[device_id]
        except KeyError:
            raise StepRefused("That device is no longer in this workspace. Choose another in the tray.") from None

    def fit(self, entry_id: str) -> Fit:
        """The fit of a sweep; an empty one with the usual settings if it has none."""
        self.entry(entry_id)
        return self.fits.get(entry_id) or Fit()

    def stated(self, name: str) -> float | bool | str | None:
        """What the user states of every sweep under this name, or None."""
        statement = self.statements.get(name)
        return None if statement is None else statement.value

    def refined(self, entry_id: str) -> Refinement | None:
        """The last refinement if the model still stands where it left it, else None."""
        fit = self.fit(entry_id)
        stands = fit.refinement is not None and fit.refinement.model == fit.model
        return fit.refinement if stands else None

    def beside(self, entry_id: str) -> tuple[tuple[Sweep, Refinement], ...]:
        """The other sweeps that a sweep was refined together with, and their refinements, in the order of that fit.

        Those that are gone, or were refined anew since, are left out; empty where the sweep was refined alone.
        """
        mine = self.fit(entry_id).refinement
        if mine is None or mine.bond is None:
            return ()
        others = [each for each in mine.bond.entries if each != entry_id and each in self.entries]
        kept = [(each, self.fit(each).refinement) for each in others]
        return tuple(
            (self.sweep(each), fit)
            for each, fit in kept
            if fit is not None and fit.bond is not None and fit.bond.entries == mine.bond.entries
        )

    def entries_of(self, device_id: str) -> list[Entry]:
        """The sweeps of one device, in their order."""
        return sorted((e for e in self.entries.values() if e.device == device_id), key=_place)

    def in_tray_order(self) -> list[Entry]:
        """All sweeps: those of one device together, devices by their first sweep."""
        in_order = sorted(self.entries.values(), key=_place)
        first: dict[str, int] = {}
        for entry in in_order:
            first.setdefault(entry.device, len(first))
        return sorted(in_order, key=lambda entry: first[entry.device])

    def record(self, kind: str, record_id: str) -> dict[str, Any] | None:
        """One device, entry, fit or statement as JSON-ready values, or None where there is none."""
        value = getattr(self, kind).get(record_id)
        return None if value is None else value.to_dict()

    def records(self) -> dict[str, dict[str, Any]]:
        """All records, by kind and id; readings stand in them by their ids alone."""
        return {kind: {name: value.to_dict() for name, value in getattr(self, kind).items()} for kind in KINDS}

    def readings(self) -> dict[str, Sweep]:
        """The readings in use, by id."""
        return {entry.reading_id: entry.reading for entry in self.entries.values()}


def conditions_of(device: Device, entry: Entry) -> Conditions:
    """Conditions of a sweep of this device."""
    read = entry.reading.conditions
    lit = read.lit if entry.lit is None else entry.lit
    irradiance = entry.irradiance if entry.irradiance is not None else read.irradiance
    return Conditions(
        area=device.area,
        file_area=read.file_area if device.file_area is None else device.file_area,
        temperature=read.temperature if entry.temperature is None else entry.temperature,
        irradiance=0.0 if not lit else irradiance if irradiance > 0 else ONE_SUN,
        lit=lit,
        series_cells=device.series_cells,
    )


def sweep_under(reading: Sweep, conditions: Conditions) -> Sweep:
    """``reading.under(conditions)``, or the current as read where the area cannot rescale it."""
    try:
        return reading.under(conditions)
    except ConditionRefused:
        return replace(reading, conditions=replace(conditions, area=reading.area))


def _place(entry: Entry) -> tuple[float, str]:
    return entry.order, entry.id


def _values(record: Any, without: tuple[str, ...] = ()) -> dict[str, Any]:
    values = {f.name: getattr(record, f.name) for f in fields(record) if f.name not in without}
    return {**values, "confirmed": sorted(record.confirmed)}


def _confirmed(values: Mapping[str, Any], allowed: set[str]) -> frozenset[str]:
    confirmed = frozenset(values.get("confirmed", ()))
    if not confirmed <= allowed:
        raise ValueError("unknown condition confirmed")
    return confirmed


def _texts(record: Any, *names: str) -> None:
    for name in names:
        if not isinstance(getattr(record, name), str):
            raise TypeError(f"{name} is not a text")


def _numbers(record: Any, *names: str) -> None:
    for name in names:
        value = getattr(record, name)
        if value is not None and (isinstance(value, bool) or not math.isfinite(value)):
            raise ValueError(f"{name} is not a number")


def _check_model(model: Model) -> None:
    saturations = [getattr(model, name) for name in model.parameters if name.startswith("saturation_current")]
    above_zero = [getattr(model, name) for name in model.parameters if name.startswith("ideality")]
    finite = [getattr(model, name) for name in model.parameters if name != "shunt_resistance"]
    sound = (
        all(math.isfinite(value) for value in (*finite, model.temperature))
        and min(*above_zero, model.shunt_resistance, model.temperature, max(saturations)) > 0
        and min(model.series_resistance, *saturations) >= 0
        and model.series_cells >= 1
    )
    if not sound:
        raise ValueError("the parameters of a model are not numbers of the right sign")


def _check_settings(settings: FitSettings) -> None:
    numbers = [*settings.excluded, *(settings.window or ())]
    names = {*settings.hold, *settings.bounds}
    if not names <= set(settings.parameters) or not all(math.isfinite(number) for number in numbers):
        raise ValueError("the settings of a fit name an unknown parameter or a point that is not a number")
