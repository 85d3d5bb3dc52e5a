"""The pair screen of one tab: both curves, the table with its verdicts, the shares, the paragraph, and what-if."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import Any

from plotly.graph_objects import Figure

from core.comparing import compare, directions
from core.diode import PARAMETERS, OneDiode
from core.errors import (
    BreakdownRefused,
    ComparisonRefused,
    StepRefused,
)
from core.retelling import tell_difference, tell_measured
from core.sentences import conditions, listed
from core.shares import what_if
from core.verdict import Verdict, budget_of, stands_out
from core.workspace import Workspace

from . import readout
from .figures.pair import Side, pair_figure, shares_figure, what_if_line
from .figures.style import blank_figure
from .insight import is_shunt
from .mechanisms import loss_names
from .scene import View, active_entry, full_name
from .states import State, state_of
from .stating import statement_texts
from .units import DENSITY, Units
from .wording import concise, number, power_change

NO_CURVE = "No diode curve can be laid over one of the two, so the difference is not shared out."


def chosen_pair(workspace: Workspace, view: View) -> tuple[str | None, str | None]:
    """A and B: as the tab chose, else the sweep on the bench and the next device's first lit one, measured alike if one is."""
    lit = [e.id for e in workspace.in_tray_order() if workspace.sweep(e.id).lit]
    asked = view.get("pair") or {}
    active = active_entry(workspace, view)
    a = asked.get("a") if asked.get("a") in lit else active if active in lit else next(iter(lit), None)
    others = [e for e in lit if a is not None and workspace.entries[e].device != workspace.entries[a].device]
    b = asked.get("b") if asked.get("b") in lit else max(others, key=lambda e: _alike(workspace, a, e), default=None)
    return a, b


def _alike(workspace: Workspace, a: str, b: str) -> tuple[bool, ...]:
    """What two sweeps were measured alike in, the most important first."""
    one, other = workspace.sweep(a), workspace.sweep(b)
    return (
        one.per_area == other.per_area,
        (one.irradiance, one.temperature) == (other.irradiance, other.temperature),
        one.direction == other.direction,
    )


def pair_screen(workspace: Workspace, view: View) -> tuple[Figure, Figure, dict[str, Any]]:
    """Both figures and the data of the screen; a refusal is its sentence."""
    a, b = chosen_pair(workspace, view)
    normalised = bool(view.get("normalised"))
    data: dict[str, Any] = {"a": a, "b": b, "normalised": normalised, "whatIf": "", "story": "", "sources": "", "note": "", "refusal": "", "still": False}
    data["stated"] = statement_texts(workspace)
    if a is None or b is None:
        refusal = "Two lit sweeps are needed to compare. Drop more files, or choose two in the tray."
        return blank_figure(), blank_figure(), {**data, "refusal": refusal}
    sweep_a, sweep_b = workspace.sweep(a), workspace.sweep(b)
    if sweep_a.per_area != sweep_b.per_area and not normalised:
        refusal = "One of the two has an area and the other has none. Give the missing area on the bench, or compare them normalised."
        return blank_figure(), blank_figure(), {**data, "refusal": refusal}
    states = state_of(workspace, a), state_of(workspace, b)
    drawn = tuple(s if s and s.worth_drawing else None for s in states)
    sides = [Side(workspace.sweep(e), s.model if s else None, full_name(workspace, e)) for e, s in zip((a, b), drawn, strict=True)]
    curves = pair_figure(*sides, normalised=normalised, zoom_key=f"pair {a} {b} {normalised}")
    verdict = verdict_of(workspace, a, b, states)
    data["compared"] = _compared(workspace, a, b, verdict)
    assumed = _assumed(workspace.assumed(a) | workspace.assumed(b))
    data["sources"] = f"{_sources(drawn)} {assumed}".strip()
    try:
        if None in states:
            raise BreakdownRefused(NO_CURVE)
        bars, more = _shares(workspace, a, b, states, verdict)
    except BreakdownRefused as refused:
        bars, more = _not_shared(workspace, a, b, verdict, str(refused))
    except ComparisonRefused as refused:
        return curves, blank_figure(), {**data, "story": str(refused), "still": True}
    return curves, bars, {**data, **more}


def _not_shared(workspace: Workspace, a: str, b: str, verdict: Verdict, reason: str) -> tuple[Figure, dict[str, Any]]:
    """The measured difference as a whole, with the reason why it is not shared out."""
    sweeps = workspace.sweep(a), workspace.sweep(b)
    powers = tuple(readout.measured(sweep).pmp.value for sweep in sweeps)
    unknown = None in powers or not (sweeps[0].per_area and sweeps[1].per_area)
    story = tell_measured(full_name(workspace, a), full_name(workspace, b), None if unknown else powers, verdict, [*directions(*sweeps), reason])
    bars = blank_figure() if unknown else shares_figure({}, (powers[1] - powers[0]) * DENSITY.power_factor)
    return bars, {"story": story, "note": "" if unknown else "measured difference, not shared out", "still": True}


def _shares(workspace: Workspace, a: str, b: str, states: tuple, verdict: Verdict) -> tuple[Figure, dict[str, Any]]:
    sweeps = workspace.sweep(a), workspace.sweep(b)
    shares = compare(
        sweeps[0], states[0].known, sweeps[1], states[1].known,
        metrics_a=readout.measured(sweeps[0]), metrics_b=readout.measured(sweeps[1]),
    )
    factor = DENSITY.power_factor
    shunt = is_shunt(workspace, a) and is_shunt(workspace, b)
    bars = shares_figure(
        {name: share * factor for name, share in shares.by_mechanism.items()},
        shares.difference * factor,
        intervals={name: (low * factor, high * factor) for name, (low, high) in shares.intervals.items()},
        rest=None if shares.residual is None else shares.residual * factor,
        shunt_confirmed=shunt,
    )
    story = tell_difference(
        full_name(workspace, a), full_name(workspace, b), shares, verdict, shunt_confirmed=shunt,
    )
    note = "order-free shares" + ("; whiskers 95 %, fit noise only" if shares.intervals else "")
    return bars, {"story": story, "note": note, "names": loss_names(shunt)}


def _assumed(names: Collection[str]) -> str:
    return f"Assumed, not given: {listed(conditions(names))}." if names else ""


def _sources(states: tuple[State | None, State | None]) -> str:
    words = [s.source if s else "" for s in states]
    if words[0] == words[1]:
        return f"Both curves were {words[0]}." if words[0] else ""
    return " ".join(f"The curve of {letter} was {source}." for letter, source in zip("AB", words, strict=True) if source)


def verdict_of(workspace: Workspace, a: str, b: str, states: tuple[State | None, State | None]) -> Verdict:
    """What can be said of the difference of each metric, from all that the workspace knows."""
    budget = budget_of(
        workspace, a, b, lambda entry: readout.measured(workspace.sweep(entry)),
        ideality=states[0].model.ideality if states[0] else 1.0,
    )
    names = tuple(workspace.devices[workspace.entries[entry].device].name for entry in (a, b))
    return stands_out(readout.measured(workspace.sweep(a)), readout.measured(workspace.sweep(b)), budget, names)


def _compared(workspace: Workspace, a: str, b: str, verdict: Verdict) -> dict[str, dict[str, str]]:
    sweep_a, sweep_b = workspace.sweep(a), workspace.sweep(b)
    units = Units.of(sweep_a.per_area)
    rows = {}
    for name in readout.METRIC_ROWS:
        factor, unit = readout.metric_unit(name, units)
        values = [getattr(readout.measured(s), name).value for s in (sweep_a, sweep_b)]
        cells = [number(None if v is None else v * factor) for v in values]
        found = verdict.by_metric.get(name)
        gap = None if None in values else (values[1] - values[0]) * factor
        reach = None if found is None or found.uncertainty is None else found.uncertainty * factor
        rows[name] = {
            "a": cells[0],
            "b": cells[1],
            "difference": ("+" if gap is not None and gap > 0 else "") + concise(gap, reach),
            "verdict": found.word if found else "",
            "reason": f"{unit}. {found.sentence if found else ''}".strip(),
        }
    return rows


def answer_what_if(workspace: Workspace, event: Mapping[str, Any]) -> dict[str, Any]:
    """Live: A with some mechanisms moved towards B's."""
    states = []
    for letter in "ab":
        state = state_of(workspace, workspace.entry(str(event[letter])).id)
        if state is None or state.untold:
            raise StepRefused(state.untold if state else NO_CURVE)
        states.append(state)
    sweep = workspace.sweep(str(event["a"]))
    fractions = {name: float(f) for name, f in dict(event["fractions"]).items() if name in PARAMETERS}
    model = moved_towards(states[0].model, states[1].model, fractions)
    side = Side(sweep, states[0].model, "")
    x, y = what_if_line(side, model, bool(event.get("normalised"))) if any(fractions.values()) else ([], [])
    before, after = states[0].model.landmarks().pmp, model.landmarks().pmp
    units = Units.of(sweep.per_area)
    gain = (after - before) * units.power_factor
    words = f"{number(after * units.power_factor)} {units.power}, {power_change(gain) if sweep.per_area else number(gain, digits=3)}"
    if sweep.per_area:
        words += f"; PCE {100 * after / sweep.irradiance:.2f} %"
    return {"x": x, "y": y, "words": f"A would deliver {words}."}


def moved_towards(model_a: OneDiode, model_b: OneDiode, fractions: Mapping[str, float]) -> OneDiode:
    """A with each mechanism moved its own part of the way to B's value."""
    model = model_a
    # The photocurrent last: it sets the reference at which the diode's voltage is read.
    for name in sorted(fractions, key=lambda n: n == "photocurrent"):
        if fractions[name] > 0:
            model = what_if(model, model_b, [name], fractions[name])
    return model
