"""Steps on what stands in the tray: sweeps and devices come, go, and get names and groups."""

from __future__ import annotations

import math
import secrets
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace
from pathlib import PurePath

from .applying import Step, make_step
from .condition_steps import fit_under
from .errors import StepRefused
from .records import id_of_text, reading_record, reading_text
from .sweep import Sweep
from .workspace import Device, Entry, Fit, Workspace, conditions_of

LONGEST_NAME = 200  # characters; a name is a label, not a text


def short_id() -> str:
    """A random id, short enough to read aloud."""
    return secrets.token_hex(5)


def already_loaded(workspace: Workspace, source: str) -> bool:
    """Whether sweeps of the file with this SHA-256 stand in the tray."""
    return any(entry.source == source for entry in workspace.entries.values())


def add_sweeps(
    workspace: Workspace,
    sweeps: Sequence[Sweep],
    *,
    source: str | None = None,
    source_name: str = "",
    new_id: Callable[[], str] = short_id,
) -> Step:
    """Put the sweeps of one file into the tray.

    A sweep joins the device of its name if what the files say of area and cells in series agrees, else it gets
    a device of its own with a distinct name. What only the new file says (the area) then holds for the
    whole device. Sweeps of a file that are in the tray already are left out, so that dropping a file
    twice gives a step without change (``already_loaded`` tells).

    Parameters
    ----------
    source, source_name : str or None, str
        SHA-256 and name of the original file.
    new_id : callable
        Makes ids; for tests.
    """
    tray = _Tray(workspace, new_id)
    there = {(entry.source, entry.reading_id) for entry in workspace.entries.values() if entry.source is not None}
    readings = {}
    for sweep in sweeps:
        record = reading_record(sweep)
        reading_id = id_of_text(reading_text(record))
        if (source, reading_id) in there:
            continue
        readings[reading_id] = record
        tray.add(sweep, reading_id, source, source_name)
    label = "add sweep" if len(tray.new) == 1 else f"add {len(tray.new)} sweeps"
    return make_step(label, devices=tray.touched, entries=tray.new, fits=tray.fits, readings=readings)


def remove_entries(workspace: Workspace, entry_ids: Iterable[str]) -> Step:
    """Take sweeps out of the tray, with their fits, and devices that have none left."""
    removed = {workspace.entry(entry_id).id for entry_id in entry_ids}
    left = {entry.device for entry in workspace.entries.values() if entry.id not in removed}
    emptied = {workspace.entries[entry_id].device for entry_id in removed} - left
    return make_step(
        "remove sweep" if len(removed) == 1 else f"remove {len(removed)} sweeps",
        devices=dict.fromkeys(emptied),
        entries=dict.fromkeys(removed),
        fits=dict.fromkeys(removed & workspace.fits.keys()),
    )


def rename_entry(workspace: Workspace, entry_id: str, name: str) -> Step:
    """Give a sweep another name, distinct among those of its device."""
    entry, name = workspace.entry(entry_id), _given_name(name)
    if any(other.name == name and other.id != entry_id for other in workspace.entries_of(entry.device)):
        raise StepRefused(f"Another sweep of this device is called “{name}” already. Choose another name.")
    return make_step("rename sweep", entries={entry_id: replace(entry, name=name)})


def rename_device(workspace: Workspace, device_id: str, name: str) -> Step:
    """Give a device another name, distinct in the workspace."""
    device, name = workspace.device(device_id), _given_name(name)
    if any(other.name == name and other.id != device_id for other in workspace.devices.values()):
        raise StepRefused(f"Another device is called “{name}” already. Choose another name.")
    return make_step("rename device", devices={device_id: replace(device, name=name)})


def set_group(workspace: Workspace, device_ids: Iterable[str], group: str) -> Step:
    """Put devices into a group; an empty name takes them out of theirs."""
    devices = [workspace.device(device_id) for device_id in device_ids]
    group = clean_name(group)
    return make_step("change group", devices={device.id: replace(device, group=group) for device in devices})


def clean_name(name: str) -> str:
    """A name on one line, without control characters, of bounded length."""
    printable = "".join(character if character.isprintable() else " " for character in str(name))
    return " ".join(printable.split())[:LONGEST_NAME].rstrip()


def distinct_name(name: str, taken: Iterable[str]) -> str:
    """The name itself, or with the first number that makes it distinct."""
    taken = set(taken)
    candidate, number = name, 2
    while candidate in taken:
        candidate, number = f"{name} {number}", number + 1
    return candidate


def _given_name(name: str) -> str:
    name = clean_name(name)
    if not name:
        raise StepRefused("A name must have at least one character.")
    return name


def _group_of(sweep: Sweep) -> str:
    """What the file's header calls the group; the names are common practice."""
    words = {key.strip().lower(): value for key, value in sweep.header.items()}
    return next((clean_name(words[key]) for key in ("group", "batch", "gruppe", "charge") if words.get(key)), "")


class _Frame:
    """What a file says of the device behind a sweep: area, file's area, cells in series; None: nothing."""

    def __init__(self, sweep: Sweep):
        conditions = sweep.conditions
        area = conditions.area
        if area is None and sweep.read_as == "density":
            area = conditions.file_area
        cells = None if "series_cells" in sweep.assumed else conditions.series_cells
        self.values = (area, conditions.file_area, cells)

    def agrees(self, other: _Frame) -> bool:
        return all(
            mine is None or theirs is None or math.isclose(mine, theirs, rel_tol=1e-6)
            for mine, theirs in zip(self.values, other.values)
        )

    def device_name(self, name: str) -> str:
        """The name for a device set apart from another of the same name."""
        area, _, cells = self.values
        if area is not None:
            return f"{name} ({area:.4g} cm²)"
        return f"{name} ({cells} cells)" if cells is not None else name


class _Tray:
    """The tray while sweeps are being added to it."""

    def __init__(self, workspace: Workspace, new_id: Callable[[], str]):
        self._workspace, self._new_id = workspace, new_id
        self._devices = dict(workspace.devices)
        self._by_name: dict[str, list[str]] = {}
        for device in workspace.devices.values():
            self._by_name.setdefault(device.name, []).append(device.id)
        self._of_device: dict[str, list[Entry]] = {}
        for entry in workspace.entries.values():
            self._of_device.setdefault(entry.device, []).append(entry)
        self._next = 1 + max((entry.order for entry in workspace.entries.values()), default=0.0)
        self.new: dict[str, Entry] = {}
        self.touched: dict[str, Device] = {}
        self.fits: dict[str, Fit] = {}

    def add(self, sweep: Sweep, reading_id: str, source: str | None, source_name: str) -> None:
        device = self._device_for(sweep, source_name)
        others = self._of_device.setdefault(device.id, [])
        base = clean_name(sweep.name) or sweep.direction
        entry = Entry(
            id=self._fresh_id(self._workspace.entries, self.new),
            device=device.id,
            name=distinct_name(base, (other.name for other in others)),
            reading=sweep,
            reading_id=reading_id,
            source=source,
            source_name=clean_name(source_name),
            order=self._next,
        )
        self._next += 1
        others.append(entry)
        self.new[entry.id] = entry

    def _device_for(self, sweep: Sweep, source_name: str) -> Device:
        frame = _Frame(sweep)
        name = clean_name(sweep.device) or clean_name(PurePath(source_name).stem) or "device"
        apart = frame.device_name(name)
        for candidate in dict.fromkeys((name, apart)):
            for device_id in self._by_name.get(candidate, ()):
                if all(frame.agrees(_Frame(entry.reading)) for entry in self._of_device.get(device_id, ())):
                    return self._completed(self._devices[device_id], frame)
        area, file_area, cells = frame.values
        device = Device(
            id=self._fresh_id(self._devices),
            name=distinct_name(apart if name in self._by_name else name, self._by_name),
            area=area,
            file_area=file_area,
            series_cells=sweep.series_cells,
            group=_group_of(sweep),
            confirmed=frozenset() if cells is None else frozenset({"series_cells"}),
        )
        self._by_name.setdefault(device.name, []).append(device.id)
        self._devices[device.id] = self.touched[device.id] = device
        return device

    def _completed(self, device: Device, frame: _Frame) -> Device:
        """The device with what the new file knows and nobody gave before; its fits follow."""
        area, file_area, cells = frame.values
        new_cells = cells is not None and "series_cells" not in device.confirmed
        completed = replace(
            device,
            area=area if device.area is None else device.area,
            file_area=file_area if device.file_area is None else device.file_area,
            series_cells=cells if new_cells else device.series_cells,
            confirmed=device.confirmed | {"series_cells"} if new_cells else device.confirmed,
        )
        if completed != device:
            self._devices[device.id] = self.touched[device.id] = completed
            for entry in self._of_device[device.id]:
                fit = self.fits.get(entry.id) or self._workspace.fits.get(entry.id)
                if fit is not None:
                    before, after = conditions_of(device, entry), conditions_of(completed, entry)
                    self.fits[entry.id] = fit_under(fit, entry.reading, before, after)
        return completed

    def _fresh_id(self, *tables: Mapping[str, object]) -> str:
        name = self._new_id()
        while any(name in table for table in tables):
            name = self._new_id()
        return name
