"""Steps: every change of a workspace as a JSON-ready value, applied and inverted by pure functions.

A step is ``{"label": "rename device", "put": {kind: {id: record or None}}}`` with the kinds "devices",
"entries", "fits" and "statements"; a record replaces the one under its id, None deletes it. The kind "readings"
supplies the points of readings that the entries of this step need, by their content's id; a reading leaves the
workspace with its last entry, so nothing deletes one. "event" may name the event of a page that asked for the step.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any

from .errors import StepRefused, SweepbenchError
from .records import (
    id_of_text,
    plain,
    reading_from_record,
    reading_record,
    reading_text,
)
from .statements import Statement
from .sweep import Sweep
from .workspace import KINDS, Device, Entry, Fit, Workspace

Step = dict[str, Any]

_WORDS = {"devices": "device", "entries": "sweep", "fits": "fit", "statements": "statement", "readings": "reading"}


def make_step(label: str, **put: Mapping[str, Any]) -> Step:
    """A step from devices, entries, fits, statements, records of readings, or None; empty kinds are left out."""
    return {
        "label": label,
        "put": {
            kind: {name: _record(kind, value) for name, value in records.items()}
            for kind, records in put.items()
            if records
        },
    }


def _record(kind: str, value: Any) -> Any:
    if value is None or kind == "readings":
        return value
    return plain(value.to_dict())


def apply(workspace: Workspace, step: Mapping[str, Any]) -> Workspace:
    """The workspace after a step, one revision on.

    Raises
    ------
    StepRefused
        If the step has an unknown kind, a record that is not what it should be, or leaves a sweep
        without its device or its points, or a fit without its sweep.
    """
    put = _checked_put(step)
    readings = {}
    for name, record in put.get("readings", {}).items():
        readings[name] = reading_from_record(record)
        if id_of_text(reading_text(record)) != name:
            raise StepRefused("The points of a reading are not those that its id stands for.")
    return changed(workspace, put, readings)


def inverse(workspace: Workspace, step: Mapping[str, Any]) -> Step:
    """The step that takes ``apply(workspace, step)`` back to this workspace (but for its revision)."""
    put = {
        kind: {name: getattr(workspace, kind).get(name) for name in records}
        for kind, records in _checked_put(step).items()
        if kind in KINDS
    }
    supplied = {}
    for name, record in step["put"].get("entries", {}).items():
        entry = workspace.entries.get(name)
        if entry is not None and (record is None or record.get("reading") != entry.reading_id):
            supplied[entry.reading_id] = reading_record(entry.reading)
    return make_step(step["label"], **put, readings=supplied)


def changed(workspace: Workspace, put: Mapping[str, Mapping[str, Any]], readings: Mapping[str, Sweep]) -> Workspace:
    """``apply`` for readings that are already parsed and known to be whole."""
    devices = _table(workspace.devices, put, "devices", Device.from_dict)
    fits = _table(workspace.fits, put, "fits", Fit.from_dict)
    known = _Readings(workspace, readings)
    entries = _table(workspace.entries, put, "entries", lambda each: Entry.from_dict(each, known[each["reading"]]))
    if "devices" in put or "entries" in put:
        for entry in entries.values():
            if entry.device not in devices:
                raise StepRefused(f"The sweep “{entry.name}” would be left without its device.")
    for name in fits if "entries" in put else put.get("fits", {}):
        if name in fits and name not in entries:
            raise StepRefused("A fit would be left without its sweep.")
    return Workspace(
        workspace.id,
        workspace.name,
        workspace.revision + 1,
        devices,
        entries,
        fits,
        _table(workspace.statements, put, "statements", Statement.from_dict),
        workspace.derived if not {"devices", "entries"} & put.keys() else _still_true(workspace, devices, entries),
    )


class _Readings:
    """Finds the sweep behind a reading's id: in the step, else among the entries."""

    def __init__(self, workspace: Workspace, supplied: Mapping[str, Sweep]):
        self._workspace, self._supplied = workspace, supplied
        self._present: dict[str, Sweep] | None = None

    def __getitem__(self, name: str) -> Sweep:
        if name in self._supplied:
            return self._supplied[name]
        if self._present is None:
            self._present = self._workspace.readings()
        if name not in self._present:
            raise StepRefused("The points of a sweep are missing from the step.")
        return self._present[name]


def _table(old: Mapping[str, Any], put: Mapping[str, Any], kind: str, parse: Any) -> Mapping[str, Any]:
    if not put.get(kind):
        return old
    table = dict(old)
    for name, record in put[kind].items():
        if record is None:
            table.pop(name, None)
            continue
        try:
            if kind != "fits" and record["id"] != name:
                raise ValueError("it stands under another id than its own")
            table[name] = parse(record)
        except StepRefused:
            raise
        except (SweepbenchError, LookupError, TypeError, ValueError, AttributeError, ArithmeticError) as problem:
            detail = f"{type(problem).__name__}: {problem}" if isinstance(problem, KeyError) else str(problem)
            raise StepRefused(f"The record of a {_WORDS[kind]} is not as it should be ({detail[:160]}).") from problem
    return MappingProxyType(table)


def _still_true(workspace: Workspace, devices: Mapping[str, Device], entries: Mapping[str, Entry]) -> dict[str, Sweep]:
    """The derived sweeps whose entry and device the step left alone."""
    kept = {}
    for name, sweep in list(workspace.derived.items()):
        old, new = workspace.entries.get(name), entries.get(name)
        if old is not None and old == new and devices.get(new.device) == workspace.devices[old.device]:
            kept[name] = sweep
    return kept


def _checked_put(step: Mapping[str, Any]) -> Mapping[str, Mapping[str, Any]]:
    known = isinstance(step, Mapping) and {"label", "put"} <= step.keys() <= {"label", "put", "event"}
    if not known or not isinstance(step["label"], str) or not isinstance(step.get("event"), str | None):
        raise StepRefused("A step must have a label and the records that it puts, and nothing else.")
    put = step["put"]
    if not isinstance(put, Mapping):
        raise StepRefused("What a step puts must be records by kind.")
    for kind, records in put.items():
        if kind not in _WORDS:
            raise StepRefused(f"A workspace keeps no records of the kind “{kind}”.")
        if not isinstance(records, Mapping) or not all(
            isinstance(name, str) and name and (record is None or isinstance(record, Mapping))
            for name, record in records.items()
        ):
            raise StepRefused(f"The records of the kind “{kind}” must stand under their ids.")
    return put
