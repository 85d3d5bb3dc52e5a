"""The losses screen of one tab: ladder, table, sentences and targets, from core's shares."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from plotly.graph_objects import Figure

from core.comparing import losses
from core.detailed_balance import Emission, gap_from_photocurrent, limit, limiting_diode
from core.diode import PARAMETERS, OneDiode
from core.errors import ComparisonRefused, ConditionRefused, StepRefused
from core.limit_check import check_against_limit
from core.retelling import tell_losses
from core.shares import Shares, ladder, mechanism_value, target
from core.sweep import Sweep
from core.workspace import Workspace

from . import readout
from .figures.ladder import FOOT, ladder_figure
from .insight import is_shunt
from .mechanisms import BY_PARAMETER
from .scene import View, active_entry, full_name, short_name
from .states import State, state_of
from .units import DENSITY
from .wording import number, power_change

TARGETS: dict[str, tuple[float, float]] = {
    # Where a target's slider begins and ends, as a share of where the mechanism stands.
    "photocurrent": (0.8, 1.25),
    "saturation_current": (0.8, 1.2),
    "ideality": (0.5, 1.5),
    "series_resistance": (0.0, 2.0),
    "shunt_resistance": (0.1, 20.0),
}


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
    """
    sweep, state = workspace.sweep(entry), state_of(workspace, entry)
    if state is None:
        raise ComparisonRefused("No diode curve can be laid over this sweep, so there is nothing to break down.")
    gap, assumed = gap_of(workspace, entry, sweep, state.model)
    shares = losses(sweep, state.known, gap, emission, metrics=readout.measured(sweep))
    return Losses(sweep, state, full_name(workspace, entry), gap, assumed, emission, shares)


def gap_of(workspace: Workspace, entry: str, sweep: Sweep, model: OneDiode) -> tuple[float, bool]:
    """Band gap [eV] of the sweep's device, and whether it is assumed from the photocurrent."""
    gap = workspace.devices[workspace.entries[entry].device].band_gap
    if gap is not None:
        return gap, False
    if not sweep.lit or not sweep.per_area:
        return 1.0, True  # nothing comes of it: such a sweep is refused for better reasons
    return gap_from_photocurrent(readout.measured(sweep).jsc.value or model.photocurrent, sweep.irradiance), True


def emission_of(view: View) -> Emission:
    return "both" if view.get("emission") == "both" else "front"


def order_of(view: View) -> tuple[str, ...]:
    order = tuple(view.get("order") or PARAMETERS)
    return order if sorted(order) == sorted(PARAMETERS) else PARAMETERS


def losses_screen(workspace: Workspace, view: View) -> tuple[Figure, dict[str, Any]]:
    """Figure and data of the screen; a refusal is its sentence."""
    entry, emission = active_entry(workspace, view), emission_of(view)
    stepwise, large = view.get("ladder") == "steps", bool(view.get("projector"))
    data: dict[str, Any] = {
        "entry": entry, "emission": emission, "ladder": "steps" if stepwise else "shares", "order": order_of(view), "projector": large,
    }
    if entry is None:
        return Figure(), {**data, "refusal": "There is nothing in the tray yet. Drop a sweep file first."}
    title = workspace.devices[workspace.entries[entry].device].name
    data |= {"title": title, "subtitle": short_name(workspace, workspace.entries[entry])}
    try:
        found = losses_of(workspace, entry, emission)
    except (ComparisonRefused, ConditionRefused) as refused:
        return Figure(), {**data, "refusal": str(refused)}
    taken = found.shares.by_mechanism
    if stepwise:
        top = limiting_diode(found.gap, found.sweep.temperature, found.sweep.irradiance, emission)
        taken = ladder(top, found.state.model, order_of(view))
    lost = {name: share * DENSITY.power_factor for name, share in taken.items()}
    start, end = (p * DENSITY.power_factor for p in (found.shares.start, found.shares.end))
    rest = None if found.shares.residual is None else found.shares.residual * DENSITY.power_factor
    gap_name = f"limit at {found.gap:.3g} eV" + (" (gap assumed)" if found.assumed else "")
    order = order_of(view) if stepwise else PARAMETERS
    figure = ladder_figure(start, end, lost, order, limit_name=gap_name, device_name=title, rest=rest, large=large)
    rows = [_row(name, BY_PARAMETER[name].loss, lost[name], start, movable=stepwise) for name in order]
    if rest is not None:
        rows.append(_row("rest", "not in the model", rest, start, movable=False))
    rows.append(_row("total", "together", end - start, start, movable=False))
    return figure, {
        **data,
        "refusal": "",
        "bandGap": {"text": f"{found.gap:.4g}", "assumed": found.assumed},
        "rows": rows,
        "story": _story(workspace, entry, found),
        "targets": {name: _target_place(found.state.model, name) for name in PARAMETERS},
        "targetWords": f"As it stands: {_power_words(found.state.model, found.sweep)}.",
    }


def _story(workspace: Workspace, entry: str, found: Losses) -> tuple[str, ...]:
    top = limit(found.gap, found.sweep.temperature, found.sweep.irradiance, found.emission)
    assumed = sorted(workspace.assumed(entry) | ({"band_gap"} if found.assumed else set()))
    too_much = () if found.assumed else check_against_limit(readout.measured(found.sweep).jsc, found.gap, found.sweep.irradiance)
    shunt = is_shunt(workspace, entry)
    told = tell_losses(found.name, found.shares, top, found.gap, shunt_confirmed=shunt, assumed=assumed)
    return (*told, *(f"{f.what} {f.meaning}" for f in too_much))


def _row(parameter: str, name: str, loss: float, limit_power: float, *, movable: bool) -> dict[str, Any]:
    return {
        "parameter": parameter, "name": name, "loss": power_change(loss),
        "share": f"{100 * abs(loss) / limit_power:.1f} %", "movable": movable,
    }


def _target_range(model: OneDiode, name: str) -> tuple[float, float]:
    here = mechanism_value(model, name)
    if here == float("inf"):
        return 1e2, 1e6
    low, high = TARGETS[name]
    return low * here, max(high * here, 1.0 if name == "series_resistance" else 0.0)


def _target_place(model: OneDiode, name: str) -> dict[str, Any]:
    low, high = _target_range(model, name)
    here = min(mechanism_value(model, name), high)
    return {"fraction": (here - low) / (high - low), "text": target_text(name, here)}


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
        low, high = _target_range(start, name)
        value = low + min(max(float(fractions[name]), 0.0), 1.0) * (high - low)
        model, words[name] = target(model, name, value), target_text(name, value)
    return model, words


def answer_target(workspace: Workspace, event: Mapping[str, Any]) -> dict[str, Any]:
    """Live: what the device would deliver with mechanisms at their targets."""
    entry = workspace.entry(str(event["entry"])).id
    sweep, state = workspace.sweep(entry), state_of(workspace, entry)
    if state is None:
        raise StepRefused("No diode curve can be laid over this sweep.")
    fractions = {name: f for name, f in dict(event["fractions"]).items() if name in PARAMETERS}
    model, values = with_targets(state.model, fractions)
    power = model.landmarks().pmp
    gain = (power - state.model.landmarks().pmp) * DENSITY.power_factor
    return {
        "values": values,
        "words": f"With these targets: {_power_words(model, sweep)}, {power_change(gain)} mW cm⁻².",
        "x": [power * DENSITY.power_factor],
        "y": [FOOT],
    }


def _power_words(model: OneDiode, sweep: Sweep) -> str:
    power = model.landmarks().pmp
    return f"{number(power * DENSITY.power_factor)} mW cm⁻², PCE {100 * power / sweep.irradiance:.2f} %"
