"""The losses screen of one tab: ladder, table, sentences and targets, from core's shares."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from plotly.graph_objects import Figure

from core.comparing import losses
from core.detailed_balance import Emission, gap_from_photocurrent, limit, limiting_diode
from core.diode import PARAMETERS, OneDiode
from core.errors import (
    BreakdownRefused,
    ComparisonRefused,
    ConditionRefused,
    StepRefused,
)
from core.retelling import tell_assumed_gap, tell_losses, tell_whole
from core.shares import Shares, ladder, mechanism_value, target
from core.sweep import Sweep
from core.workspace import Workspace

from . import readout
from .figures.ladder import FOOT, ladder_figure
from .figures.style import blank_figure
from .insight import is_shunt
from .mechanisms import loss_names
from .scene import View, active_entry, full_name, short_name
from .states import State, state_of
from .units import DENSITY
from .wording import number, percent, power_change

TARGETS: dict[str, tuple[float, float]] = {
    # Where a target's slider begins and ends, as a share of where the mechanism stands.
    "photocurrent": (0.8, 1.25),
    "saturation_current": (0.8, 1.2),
    "ideality": (0.5, 1.5),
    "series_resistance": (0.0, 2.0),
    "shunt_resistance": (0.1, 20.0),
}
_LEAST_SHUNT = 100.0  # where the target of a device without shunt begins [Ω cm²]


NO_CURVE = "No diode curve can be laid over this sweep, so its losses are not broken down. Measure more points, or exclude fewer."


@dataclass(frozen=True)
class Losses:
    """The breakdown of one device."""

    sweep: Sweep
    state: State
    name: str
    gap: float
    assumed: bool
    emission: Emission
    shares: Shares


def losses_of(workspace: Workspace, entry: str, emission: Emission) -> Losses:
    """The breakdown of the sweep's device.

    Raises
    ------
    ComparisonRefused, ConditionRefused
        With a sentence, where there is nothing to break down.
    BreakdownRefused
        Where the sweep or its fit says nothing of the mechanisms; limit and measured power stand.
    """
    sweep, state = workspace.sweep(entry), state_of(workspace, entry)
    if state is None or state.untold:
        raise BreakdownRefused(state.untold if state else NO_CURVE)
    gap, assumed = gap_of(workspace, entry, sweep, state)
    shares = losses(sweep, state.known, gap, emission, metrics=readout.measured(sweep))
    return Losses(sweep, state, full_name(workspace, entry), gap, assumed, emission, shares)


def gap_of(workspace: Workspace, entry: str, sweep: Sweep, state: State | None) -> tuple[float, bool]:
    """Band gap [eV] of the sweep's device, and whether it is assumed from the photocurrent.

    It is assumed from the measured Jsc, or from the model's photocurrent where that is larger and means something, so
    that a device does not stand above the limit that was made for it.
    """
    gap = workspace.devices[workspace.entries[entry].device].band_gap
    if gap is not None:
        return gap, False
    if not sweep.lit or not sweep.per_area:
        return 1.0, True  # nothing comes of it: such a sweep is refused for better reasons
    known = [readout.measured(sweep).jsc.value, state.model.photocurrent if state and not state.untold else None]
    currents = [current for current in known if current is not None]
    if not currents:
        reason = state.untold if state else NO_CURVE
        raise BreakdownRefused(f"{reason} Without Jsc no limit can be assumed either; type the band gap.")
    return gap_from_photocurrent(max(currents), sweep.irradiance), True


def refuse_whole(sweep: Sweep, reason: str) -> None:
    """Raises ComparisonRefused where even the whole gap to the limit of one junction means nothing; ``reason`` is why it is not shared out."""
    if not sweep.per_area:
        raise ComparisonRefused(f"{reason} Without an area there is no limit to set it against either.")
    if sweep.series_cells > 1:
        raise ComparisonRefused(f"{reason} A limit of one junction is not that of {sweep.series_cells} cells in series either.")


def emission_of(view: View) -> Emission:
    return "both" if view.get("emission") == "both" else "front"


def order_of(view: View) -> tuple[str, ...]:
    order = tuple(view.get("order") or PARAMETERS)
    return order if sorted(order) == sorted(PARAMETERS) else PARAMETERS


def losses_screen(workspace: Workspace, view: View) -> tuple[Figure, dict[str, Any]]:
    """Figure and data of the screen; a refusal is its sentence."""
    entry, emission = active_entry(workspace, view), emission_of(view)
    data: dict[str, Any] = {
        "entry": entry, "emission": emission, "ladder": "steps" if view.get("ladder") == "steps" else "shares", "order": order_of(view),
        "projector": bool(view.get("projector")),
    }
    if entry is None:
        return blank_figure(), {**data, "refusal": "There is nothing in the tray yet. Drop a sweep file first."}
    title = workspace.devices[workspace.entries[entry].device].name
    data |= {"title": title, "subtitle": short_name(workspace, workspace.entries[entry])}
    try:
        try:
            figure, more = _broken_down(workspace, entry, data)
        except BreakdownRefused as refused:
            figure, more = _whole(workspace, entry, data, str(refused))
    except (ComparisonRefused, ConditionRefused) as refused:
        return blank_figure(), {**data, "refusal": str(refused)}
    return figure, {**data, "refusal": "", **more}


def _broken_down(workspace: Workspace, entry: str, data: Mapping[str, Any]) -> tuple[Figure, dict[str, Any]]:
    """The gap between limit and device, mechanism by mechanism."""
    found = losses_of(workspace, entry, data["emission"])
    top, model = limiting_diode(found.gap, found.sweep.temperature, found.sweep.irradiance, found.emission), found.state.model
    stepwise, shares = data["ladder"] == "steps", found.shares
    order = data["order"] if stepwise else PARAMETERS
    if stepwise:
        # Intervals are those of shares, and no rung's.
        shares = replace(shares, by_mechanism=ladder(top, model, order), intervals={}, reason="")
    lost = {name: share * DENSITY.power_factor for name, share in shares.by_mechanism.items()}
    start, end = (p * DENSITY.power_factor for p in (shares.start, shares.end))
    rest = None if shares.residual is None else shares.residual * DENSITY.power_factor
    shunt = is_shunt(workspace, entry)
    figure = ladder_figure(
        start, end, lost, order, limit_name=_limit_name(found.gap, found.assumed), device_name=data["title"], rest=rest,
        shunt_confirmed=shunt, large=data["projector"],
    )
    called = loss_names(shunt)
    rows = [_row(name, called[name], lost[name], start, movable=stepwise) for name in order]
    if rest is not None:
        rows.append(_row("rest", "not in the model", rest, start))
    told = tell_losses(
        found.name, shares, top.landmarks(), found.gap, shunt_confirmed=shunt, order=order if stepwise else (),
        assumed=_assumed(workspace, entry, found.assumed),
    )
    return figure, {
        **_told(told[:3], [*told[3:], *(f"{f.what} {f.meaning}" for f in readout.gap_findings(workspace, entry))]),
        "bandGap": _gap_field(found.gap, found.assumed),
        "rows": [*rows, _row("total", "together", end - start, start)],
        "names": called,
        "targets": {name: _target_place(model, name) for name in PARAMETERS},
        "targetWords": f"The model as it stands: {_power_words(model, found.sweep)}. {_measured_words(found.sweep)}".strip(),
    }


def _whole(workspace: Workspace, entry: str, data: Mapping[str, Any], reason: str) -> tuple[Figure, dict[str, Any]]:
    """Limit, measured power and the gap between them, with the reason why it is not broken down.

    Raises ComparisonRefused where there is no measured power, and whatever else leaves the sweep without a limit.
    """
    sweep = workspace.sweep(entry)
    refuse_whole(sweep, reason)
    gap, assumed = gap_of(workspace, entry, sweep, state_of(workspace, entry))
    best, power = limit(gap, sweep.temperature, sweep.irradiance, data["emission"]), readout.measured(sweep).pmp.value
    if power is None:
        allowed = f"{number(best.pmp * DENSITY.power_factor)} {DENSITY.power}"
        raise ComparisonRefused(f"{reason} The {_limit_name(gap, assumed)} is {allowed}; the sweep gives no power to set against it.")
    start, end = best.pmp * DENSITY.power_factor, power * DENSITY.power_factor
    figure = ladder_figure(
        start, end, {}, (), limit_name=_limit_name(gap, assumed), device_name=data["title"], rest=end - start,
        rest_name="not broken down", large=data["projector"],
    )
    told = tell_whole(full_name(workspace, entry), power, best, gap, assumed=_assumed(workspace, entry, assumed))
    cautions = [f"{f.what} {f.meaning}" for f in readout.gap_findings(workspace, entry)] + ([tell_assumed_gap()] if assumed else [])
    return figure, {
        **_told([told, reason], cautions), "bandGap": _gap_field(gap, assumed), "rows": [_row("total", "together", end - start, start)],
        "targets": {}, "targetWords": "There are no targets where the losses are not broken down.",
    }


def _told(story: Sequence[str], cautions: Sequence[str]) -> dict[str, Any]:
    return {"story": tuple(story), "cautions": " ".join(cautions)}


def _limit_name(gap: float, assumed: bool) -> str:
    return f"limit at {gap:.4g} eV" + (" (gap assumed)" if assumed else "")


def _gap_field(gap: float, assumed: bool) -> dict[str, Any]:
    return {"text": f"{gap:.4g}", "assumed": assumed}


def _assumed(workspace: Workspace, entry: str, gap: bool) -> list[str]:
    return sorted(workspace.assumed(entry) | ({"band_gap"} if gap else set()))


def _row(parameter: str, name: str, loss: float, limit_power: float, *, movable: bool = False) -> dict[str, Any]:
    return {"parameter": parameter, "name": name, "loss": power_change(loss), "share": percent(loss / limit_power), "movable": movable}


def _target_range(model: OneDiode, name: str) -> tuple[float, float]:
    here = mechanism_value(model, name)
    if math.isinf(here):
        return _LEAST_SHUNT, math.inf
    low, high = TARGETS[name]
    return low * here, max(high * here, 1.0 if name == "series_resistance" else 0.0)


def _target_value(model: OneDiode, name: str, fraction: float) -> float:
    """What a slider at a fraction from 0 to 1 stands for; a scale that ends at no shunt at all runs in 1/Rsh."""
    low, high = _target_range(model, name)
    if math.isinf(high):
        return low / (1.0 - fraction) if fraction < 1.0 else math.inf
    return low + fraction * (high - low)


def _target_place(model: OneDiode, name: str) -> dict[str, Any]:
    low, high = _target_range(model, name)
    here = mechanism_value(model, name)
    return {"fraction": 1.0 if math.isinf(high) else (here - low) / (high - low), "text": target_text(name, here)}


def target_text(name: str, value: float) -> str:
    """A mechanism's value with its unit; the voltage mechanism is the voltage that the diode alone reaches."""
    if name == "saturation_current":
        return f"{number(value)} V"
    return f"{number(value * DENSITY.parameter_factor(name))} {DENSITY.parameter_unit(name)}".strip()


def with_targets(start: OneDiode, fractions: Mapping[str, float]) -> tuple[OneDiode, dict[str, str]]:
    """The model with some mechanisms at the values their sliders stand for, and those values as text."""
    model, words = start, {}
    # The photocurrent last: the others are read at the device's own.
    for name in sorted(fractions, key=lambda n: n == "photocurrent"):
        value = _target_value(start, name, min(max(float(fractions[name]), 0.0), 1.0))
        model, words[name] = target(model, name, value), target_text(name, value)
    return model, words


def answer_target(workspace: Workspace, event: Mapping[str, Any]) -> dict[str, Any]:
    """Live: what the device would deliver with mechanisms at their targets."""
    entry = workspace.entry(str(event["entry"])).id
    sweep, state = workspace.sweep(entry), state_of(workspace, entry)
    if state is None or state.untold:
        raise StepRefused(state.untold if state else NO_CURVE)
    fractions = {name: f for name, f in dict(event["fractions"]).items() if name in PARAMETERS}
    model, values = with_targets(state.model, fractions)
    power = model.landmarks().pmp
    gain = (power - state.model.landmarks().pmp) * DENSITY.power_factor
    return {
        "values": values,
        "words": f"The model with these targets: {_power_words(model, sweep)}, {power_change(gain)} mW cm⁻².",
        "x": [power * DENSITY.power_factor],
        "y": [FOOT],
    }


def _power_words(model: OneDiode, sweep: Sweep) -> str:
    power = model.landmarks().pmp
    return f"{number(power * DENSITY.power_factor)} mW cm⁻², PCE {100 * power / sweep.irradiance:.2f} %"


def _measured_words(sweep: Sweep) -> str:
    power = readout.measured(sweep).pmp.value
    return "" if power is None else f"Measured: {number(power * DENSITY.power_factor)} mW cm⁻²."
