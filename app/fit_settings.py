"""Fit settings as the page sends them, translated into steps."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from typing import Any, get_args

from core import steps
from core.errors import ConditionRefused, StepRefused
from core.fit_settings import FitSettings, Weights
from core.point_choice import leave_out_box, use_all
from core.repeats import noise_from_repeats
from core.workspace import Workspace

from .units import Units
from .wording import parse_number

Event = Mapping[str, Any]
Step = dict[str, Any]

CHOICES = {
    "weights": get_args(Weights),
    "loss": ("linear", "robust"),
    "model": ("one diode", "two diodes"),
}


def change_setting(workspace: Workspace, event: Event) -> Step:
    """One setting of the fit."""
    entry, name, text = workspace.entry(event["entry"]).id, str(event["name"]), str(event["text"]).strip()
    settings = workspace.fit(entry).settings
    if name == "model":
        return steps.switch_model(workspace, entry, _choice(name, text))
    if name in ("window_low", "window_high"):
        changed = replace(settings, window=_window(workspace, entry, settings, name, text))
    elif name == "confidence":
        changed = replace(settings, confidence=_level(text))
    elif name == "current_noise":
        units = Units.of(workspace.sweep(entry).per_area)
        noise = parse_number(text, "Noise of the current", units.current) / units.current_factor if text else None
        changed = replace(settings, current_noise=noise)
    elif name == "voltage_noise":
        changed = replace(settings, voltage_noise=parse_number(text, "Noise of the voltage", "mV") / 1e3 if text else None)
    else:
        changed = replace(settings, **{name: _choice(name, text)})
    return steps.set_fit_settings(workspace, entry, changed, label=f"change {name.replace('_', ' ')}")


def leave_out(workspace: Workspace, event: Event) -> Step | None:
    """A box that the user drew over points."""
    entry = workspace.entry(event["entry"]).id
    factor = Units.of(workspace.sweep(entry).per_area).current_factor
    x0, x1, y0, y1 = (float(value) for value in event["box"])
    return leave_out_box(workspace, entry, (x0, x1), (y0 / factor, y1 / factor))


def use_all_points(workspace: Workspace, event: Event) -> Step:
    return use_all(workspace, workspace.entry(event["entry"]).id)


def noise_by_repeats(workspace: Workspace, event: Event) -> Step:
    """Effective weights, with the noise of current and voltage judged from the device's like sweeps."""
    entry = workspace.entry(event["entry"]).id
    here = workspace.sweep(entry)
    alike = [
        s
        for e in workspace.entries_of(workspace.entries[entry].device)
        if (s := workspace.sweep(e.id)).conditions == here.conditions and s.direction == here.direction
    ]
    current, voltage = noise_from_repeats(alike)
    settings = replace(workspace.fit(entry).settings, weights="effective", voltage_noise=voltage, current_noise=current)
    return steps.set_fit_settings(workspace, entry, settings, label="noise from repeats")


def _choice(name: str, text: str) -> str:
    if name not in CHOICES or text not in CHOICES[name]:
        raise StepRefused(f"The page asked for “{text}” as {name}, which this version does not know. Reload the page.")
    return text


def _window(workspace: Workspace, entry: str, settings: FitSettings, name: str, text: str) -> tuple[float, float] | None:
    voltage = workspace.sweep(entry).voltage
    whole = float(voltage.min()), float(voltage.max())
    low, high = settings.window or whole
    typed = parse_number(text, "Voltage window", "V", other_units={"mV": lambda value: value / 1e3}) if text else math.inf
    if name == "window_low":
        low = typed if math.isfinite(typed) else whole[0]
    else:
        high = typed if math.isfinite(typed) else whole[1]
    if not low < high:
        raise ConditionRefused("The voltage window must run from a lower to a higher voltage.")
    return None if low <= whole[0] and high >= whole[1] else (low, high)


def _level(text: str) -> float:
    value = parse_number(text, "Level of the intervals", "%")
    if not 50 <= value < 100:
        raise ConditionRefused("The level of the intervals must be a percentage from 50 to below 100, for instance 95.")
    return value / 100
