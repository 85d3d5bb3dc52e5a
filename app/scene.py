"""What one browser tab shows: from a workspace and the tab's view to the data of its bench and tray."""

from __future__ import annotations

import math
import time
from collections.abc import Iterable, Mapping
from functools import lru_cache
from typing import Any

import numpy as np
from plotly.graph_objects import Figure

from core.finding import Finding
from core.fit_problem import used
from core.store import History
from core.sweep import Sweep
from core.workspace import Entry, Workspace

from . import insight, readout
from .curves import STRIPS, model_curves, thinned
from .figures.bench import bench_figure, empty_figure
from .stating import statement_rows
from .together import offered
from .units import Units
from .wording import number

View = Mapping[str, Any]
LINES = (("model", "y"), ("power", "y2"), ("corner", "y"), ("strip-model", "y3"))
PANELS = ("numbers", "fit", "estimates", "record")
SPARK_WIDTH, SPARK_HEIGHT = 56, 18


def active_entry(workspace: Workspace, view: View) -> str | None:
    """The sweep on the bench: the one the tab chose, else the first of the tray."""
    if view.get("active") in workspace.entries:
        return view["active"]
    order = workspace.in_tray_order()
    return order[0].id if order else None


def strip_of(view: View) -> str:
    return view.get("strip") if view.get("strip") in STRIPS else STRIPS[0]


def companions_of(workspace: Workspace, entry: str) -> list[Entry]:
    """Other sweeps of the same device under the same light: shown together, never one instead of the other."""

    def alike(entry_id: str) -> tuple:
        sweep = workspace.sweep(entry_id)
        return sweep.lit, sweep.irradiance, sweep.per_area

    same = workspace.entries_of(workspace.entries[entry].device)
    return [e for e in same if e.id != entry and alike(e.id) == alike(entry)]


def figure_key(workspace: Workspace, view: View) -> str:
    """Changes exactly when the figure itself must be drawn anew, and not when only the model moved."""
    entry = active_entry(workspace, view)
    if entry is None:
        return ""
    shown = [entry, *(e.id for e in companions_of(workspace, entry)), *_overlay(workspace, view, entry)]
    scales = [(e, workspace.entries[e].name, workspace.sweep(e).conditions) for e in shown]
    settings = workspace.fit(entry).settings
    return f"{workspace.id} {strip_of(view)} {scales} {settings.window} {settings.excluded}"


def figure(workspace: Workspace, view: View) -> Figure:
    """The bench's figure for this view."""
    entry = active_entry(workspace, view)
    if entry is None:
        return empty_figure()
    sweep = workspace.sweep(entry)
    return bench_figure(
        sweep,
        workspace.fit(entry).model,
        weights=workspace.fit(entry).settings.weights,
        left_out=~used(sweep, workspace.fit(entry).settings),
        companions=tuple(workspace.sweep(e.id) for e in companions_of(workspace, entry)),
        overlay=tuple(workspace.sweep(e) for e in _overlay(workspace, view, entry)),
        strip=strip_of(view),
        zoom_key=f"{entry} {sweep.per_area} {sweep.area} {sweep.lit}",
    )


def _overlay(workspace: Workspace, view: View, entry: str) -> list[str]:
    return [e for e in view.get("overlay") or () if e in workspace.entries and e != entry]


def scene(workspace: Workspace, view: View, history: History) -> dict[str, Any]:
    """Everything that the page paints beside the figure, and the model's lines for a figure that stays."""
    entry = active_entry(workspace, view)
    common = {
        "workspace": workspace.id,
        "revision": workspace.revision,
        "entry": entry,
        "strip": strip_of(view),
        "history": {"undo": history.undo, "redo": history.redo},
    }
    if entry is None:
        return common
    sweep, fit = workspace.sweep(entry), workspace.fit(entry)
    model, refined = fit.model, workspace.refined(entry)
    return {
        **common,
        "title": workspace.devices[workspace.entries[entry].device].name,
        "subtitle": short_name(workspace, workspace.entries[entry]),
        "lit": sweep.lit,
        "letter": "J" if sweep.per_area else "I",
        "fitted": model is not None,
        "curves": [c.to_dict() for c in model_curves(sweep, model, strip_of(view), fit.settings.weights)] if model else _no_lines(),
        "handles": readout.handle_marks(sweep, model, fit.settings.hold) if model else [],
        "dials": readout.dial_rows(workspace, entry, sweep),
        "metrics": readout.metric_rows(sweep, model.landmarks() if model and sweep.lit else None),
        "conditions": readout.condition_rows(workspace, entry, sweep),
        "findings": readout.finding_rows(sweep, refined, readout.gap_findings(workspace, entry) + readout.pair_findings(workspace, entry)),
        "fit": _fit_line(sweep, refined),
        "caution": next(iter(refined.findings), "") if refined else "",
        "panel": panel_of(view),
        **_panel(workspace, entry, view),
    }


def panel_of(view: View) -> str:
    return view.get("panel") if view.get("panel") in PANELS else PANELS[0]


def _panel(workspace: Workspace, entry: str, view: View) -> dict[str, Any]:
    """What the open panel shows beyond the numbers; a closed one costs nothing."""
    if panel_of(view) == "fit":
        return {
            "settings": insight.settings_rows(workspace, entry),
            "correlation": insight.correlation_rows(workspace.refined(entry)),
            "together": offered(workspace, entry),
        }
    if panel_of(view) == "estimates":
        return {"estimates": insight.estimate_rows(workspace, entry)}
    if panel_of(view) == "record":
        return {"stated": statement_rows(workspace, entry)}
    return {}


def _no_lines() -> list[dict[str, Any]]:
    return [{"uid": uid, "axis": axis, "x": [], "y": []} for uid, axis in LINES]


def _fit_line(sweep: Sweep, refined: Any) -> str:
    """One line under the buttons: what the last refining came to."""
    if refined is None:
        return ""
    units = Units.of(sweep.per_area)
    residual = f"{number(refined.rmse * units.current_factor, digits=5)} {units.current}"
    chi_square = "" if refined.chi_square is None else f", χ² per degree of freedom {number(refined.chi_square, digits=3)}"
    return f"rms residual {residual} over {refined.points} points{chi_square}; ± is fit noise only"


def tray_key(workspace: Workspace) -> str:
    """Changes exactly when a line of the tray may: a step that only moves a model leaves these records alone."""
    return f"{workspace.id} {hash((tuple(workspace.entries.values()), tuple(workspace.devices.values())))}"


def tray(workspace: Workspace, until: float = math.inf) -> list[dict[str, Any]]:
    """The tray: devices in order, each with its sweeps.

    A sweep whose turn comes after ``until`` [s, monotonic clock] has ``read`` False and waits for ``tray_readings``.
    """
    devices: dict[str, dict[str, Any]] = {}
    for entry in workspace.in_tray_order():
        device = workspace.devices[entry.device]
        row = devices.setdefault(
            device.id, {"device": device.id, "name": device.name, "group": device.group, "sweeps": []}
        )
        row["sweeps"].append(_tray_row(workspace, entry, until))
    return list(devices.values())


def tray_readings(workspace: Workspace, entries: Iterable[str], until: float = math.inf) -> dict[str, dict[str, Any]]:
    """What the tray says of these sweeps, by id: of those that are still there, and of at least one until time is up."""
    readings = {}
    for entry in entries:
        if entry in workspace.entries:
            readings[entry] = _read(workspace, entry)
            if time.monotonic() > until:
                break
    return readings


def short_name(workspace: Workspace, entry: Entry) -> str:
    """A sweep's name without the device's, where that stands above it anyway."""
    return entry.name.removeprefix(workspace.devices[entry.device].name).strip(" -_·,") or entry.name


def full_name(workspace: Workspace, entry: str) -> str:
    """Device and sweep in one line."""
    chosen = workspace.entries[entry]
    device = workspace.devices[chosen.device].name
    label = short_name(workspace, chosen)
    return device if label == device else f"{device} {label}"


def _tray_row(workspace: Workspace, entry: Entry, until: float) -> dict[str, Any]:
    reading = _read(workspace, entry.id) if time.monotonic() < until else _UNREAD
    return {
        "entry": entry.id,
        "name": entry.name,
        "label": short_name(workspace, entry),
        "direction": entry.reading.direction if workspace.conditions(entry.id).lit else "dark",
        **reading,
    }


_UNREAD = {"read": False, "value": "", "flag": "", "flags": "", "spark": ""}


def _read(workspace: Workspace, entry: str) -> dict[str, Any]:
    return _tray_reading(workspace.sweep(entry), readout.gap_findings(workspace, entry))


@lru_cache(maxsize=2**15)  # above the largest tray: one more than fits, read in turn, would never be found again
def _tray_reading(sweep: Sweep, of_gap: tuple[Finding, ...]) -> dict[str, Any]:
    """What the points of a sweep say in its line; the sweep never changes, so they are read once."""
    findings = [f for f in (*of_gap, *readout.checked(sweep)) if f.severity != "note"]
    worst = "stop" if any(f.severity == "stop" for f in findings) else "caution" if findings else ""
    return {
        "read": True,
        "value": readout.efficiency_text(readout.measured(sweep), sweep) if sweep.lit else "",
        "flag": worst,
        "flags": " ".join(f.what for f in findings),
        "spark": spark_path(sweep),
    }


def spark_path(sweep: Sweep) -> str:
    """The sweep as a tiny line: an SVG path in a box of 56 by 18."""
    voltage, current = thinned(sweep, 28)
    if not sweep.lit:
        current = np.log10(np.maximum(np.abs(current), 1e-6 * max(float(np.abs(current).max()), 1e-30)))
    elif current.max() > 0:
        current = np.maximum(current, -0.15 * current.max())
    x, y = _unit(voltage), _unit(current)
    points = " ".join(
        f"{1 + a * (SPARK_WIDTH - 2):.1f},{SPARK_HEIGHT - 1 - b * (SPARK_HEIGHT - 2):.1f}" for a, b in zip(x, y, strict=True)
    )
    return f"M{points}"


def _unit(values: np.ndarray) -> np.ndarray:
    span = float(values.max() - values.min())
    return (values - values.min()) / span if span > 0 else np.full_like(values, 0.5)

