"""What the user's hand does, translated: an event from the page into a move of the model or a step.

An event is a small JSON object: ``kind``, ``entry`` (the sweep), and what the kind needs. Positions come in
screen units; which parameter follows, and by how much, is decided in core.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from core import steps
from core.dials import dial_ranges
from core.errors import ConditionRefused, StepRefused
from core.handles import Move, drag, set_parameter, type_parameter
from core.models import Model
from core.moves import TYPED_LIMITS
from core.statements import SWITCHES, UNCERTAINTIES
from core.sweep import Sweep
from core.workspace import Workspace

from .fit_settings import change_setting, leave_out, noise_by_repeats, use_all_points
from .fits import guess_step, refine_step
from .mechanisms import BY_PARAMETER
from .together import refine_sweeps_together
from .units import Units, celsius, kelvin
from .wording import parse_number

Event = Mapping[str, Any]
Step = dict[str, Any]

_VERBS = {"drag": "drag", "dial": "turn", "field": "set"}
MODEL_KINDS = tuple(_VERBS)


def moved(workspace: Workspace, event: Event) -> Move:
    """The model after a handle, dial or number field of the bench has moved.

    Raises
    ------
    StepRefused
        If the sweep is gone, has no model, or the event names no parameter.
    ConditionRefused
        If a typed text is no number, or one beyond what the parameter can be.
    """
    sweep, fit = sweep_of(workspace, event), workspace.fit(event["entry"])
    parameter = _parameter(event)
    if fit.model is None:
        raise StepRefused("There is no curve on this sweep yet. Press “first guess” to lay one.")
    if parameter not in fit.model.parameters:
        raise StepRefused(f"This model has no {BY_PARAMETER[parameter].title}. Reload the page.")
    hold, units = fit.settings.hold, Units.of(sweep.per_area)
    if event["kind"] == "drag":
        span = (float(sweep.voltage.min()), float(sweep.voltage.max()))
        x, y = _position(event, "x"), _position(event, "y") / units.current_factor
        return drag(fit.model, parameter, x, y, lit=sweep.lit, hold=hold, span=span)
    keep = bool(event.get("keep"))
    if event["kind"] == "dial":
        value = _dial(sweep, fit.model, parameter).value(_position(event, "fraction"))
        return set_parameter(fit.model, parameter, value, hold=hold, keep_jsc_voc=keep)
    value = _typed(str(event.get("text", "")), parameter, units)
    return type_parameter(fit.model, parameter, value, hold=hold, keep_jsc_voc=keep)


def step_for(workspace: Workspace, event: Event) -> tuple[Step | None, str]:
    """The step that an event asks for, or None where nothing changes; and a sentence for the user, or ""."""
    kind = str(event.get("kind"))
    if kind in MODEL_KINDS:
        move = moved(workspace, event)
        if move.model == workspace.fit(event["entry"]).model:
            return None, move.message
        label = f"{_VERBS[kind]} {BY_PARAMETER[event['parameter']].title}"
        return steps.set_model(workspace, event["entry"], move.model, label=label), move.message
    if kind not in _STEPS:
        raise StepRefused(f"The page asked for “{kind}”, which this version does not know. Reload the page.")
    step = _STEPS[kind](workspace, event)
    return step, _remark(workspace, event, step)


def _remark(workspace: Workspace, event: Event, step: Step | None) -> str:
    """What a step does beyond what its event says."""
    if event["kind"] != "condition" or event["name"] != "irradiance" or step is None:
        return ""
    if not workspace.sweep(event["entry"]).lit or steps.apply(workspace, step).sweep(event["entry"]).lit:
        return ""
    return (
        "Without irradiance this is now a dark sweep: its bench is the dark one, and Jsc, Voc and PCE are gone. "
        "If it was measured in light, undo, or choose “light” under “measured in” and type its irradiance."
    )


def sweep_of(workspace: Workspace, event: Event) -> Sweep:
    if event.get("entry") is None:
        raise StepRefused("There is no sweep on the bench yet. Drop a file first.")
    if event.get("entry") not in workspace.entries:
        raise StepRefused("That sweep is no longer in the tray.")
    return workspace.sweep(event["entry"])


def _position(event: Event, name: str) -> float:
    # A page without axes sends null.
    if not isinstance(event.get(name), int | float):
        raise StepRefused("The page named no position. Reload the page.")
    return float(event[name])


def _parameter(event: Event) -> str:
    if event.get("parameter") not in BY_PARAMETER:
        raise StepRefused("The page named no parameter. Reload the page.")
    return event["parameter"]


def _typed(text: str, parameter: str, units: Units) -> float:
    """A parameter's value in core's unit, from a text in the unit of the screen."""
    factor, (low, high) = units.parameter_factor(parameter), TYPED_LIMITS[parameter]
    title, unit = BY_PARAMETER[parameter].title.capitalize(), units.parameter_unit(parameter)
    remedy = "For a module, give its cells in series first: n is that of one cell." if parameter.startswith("ideality") else ""
    return parse_number(text, title, unit, limits=(low * factor, high * factor), remedy=remedy) / factor


def _dial(sweep: Sweep, model: Model, parameter: str) -> Any:
    return dial_ranges(sweep, model.parameters)[parameter].containing(getattr(model, parameter))


def _guess(workspace: Workspace, event: Event) -> Step:
    sweep_of(workspace, event)
    return guess_step(workspace, event["entry"])


def _refine(workspace: Workspace, event: Event) -> Step:
    sweep_of(workspace, event)
    return refine_step(workspace, event["entry"])


def _hold(workspace: Workspace, event: Event) -> Step:
    return steps.set_hold(workspace, event["entry"], _parameter(event), bool(event["on"]))


def _band_gap(workspace: Workspace, event: Event) -> Step:
    sweep_of(workspace, event)
    text = str(event["text"]).strip()
    gap = None if text in ("", "–") else parse_number(text, "Band gap", "eV")
    return steps.set_band_gap(workspace, event["entry"], gap)


def _condition(workspace: Workspace, event: Event) -> Step:
    sweep_of(workspace, event)
    name, text = str(event["name"]), str(event["text"]).strip()
    if name == "units":
        return steps.set_current_unit(workspace, event["entry"], text)
    if name == "group":
        return steps.set_group(workspace, [workspace.entry(event["entry"]).device], text)
    if name not in _CONDITIONS:
        raise StepRefused(f"There is no condition called “{name}”.")
    return steps.set_conditions(workspace, event["entry"], **{name: _CONDITIONS[name](text)})


def _statement(workspace: Workspace, event: Event) -> Step | None:
    name, text = str(event["name"]), str(event["text"]).strip()
    if name in UNCERTAINTIES:
        value = parse_number(text, "Uncertainty", "%") / 100 if text else None  # per cent on the screen
    else:
        value = text == "yes" if name in SWITCHES else text
    return steps.state(workspace, name, value)


def _area(text: str) -> float | None:
    """[cm²], from a micrometre-sized pixel to a field of modules."""
    if text in ("", "–"):
        return None
    return parse_number(
        text, "Area", "cm²", limits=(1e-8, 1e6), other_units={"mm²": lambda value: value / 100, "m²": lambda value: value * 1e4}
    )


def _temperature(text: str) -> float:
    return kelvin(parse_number(text, "Temperature", "°C", limits=(-223.0, 726.0), other_units={"K": celsius}))


def _irradiance(text: str) -> float:
    """[W cm⁻²], from mW cm⁻² on the screen; zero in the dark, at most a hundred thousand suns."""
    per_square_metre = {"W m⁻²": lambda value: value / 10}
    return parse_number(text, "Irradiance", "mW cm⁻²", limits=(0.0, 1e7), other_units=per_square_metre) / 1e3


def _whole(text: str) -> int:
    value = parse_number(text, "Cells in series", limits=(1, 10_000), other_units={"cells": lambda value: value})
    if not value.is_integer():
        raise ConditionRefused("The number of cells in series must be a whole number from 1 to 10000.")
    return int(value)


_CONDITIONS: dict[str, Callable[[str], Any]] = {
    "area": _area,
    "file_area": _area,
    "temperature": _temperature,
    "irradiance": _irradiance,
    "series_cells": _whole,
    "lit": lambda text: text == "light",
}

_STEPS: dict[str, Callable[[Workspace, Event], Step | None]] = {
    "first-guess": _guess,
    "refine": _refine,
    "hold": _hold,
    "setting": change_setting,
    "leave-out": leave_out,
    "use-all": use_all_points,
    "repeats": noise_by_repeats,
    "together": refine_sweeps_together,
    "condition": _condition,
    "band-gap": _band_gap,
    "statement": _statement,
    "confirm": lambda w, e: steps.confirm_conditions(w, e["entry"], list(e["names"])),
    "rename-sweep": lambda w, e: steps.rename_entry(w, e["entry"], str(e["text"])),
    "rename-device": lambda w, e: steps.rename_device(w, e["device"], str(e["text"])),
    "remove": lambda w, e: steps.remove_entries(w, list(e["entries"])),
}
