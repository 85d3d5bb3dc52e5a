"""Tables of what losses, pair, intervals and estimates say: units in the headers, one kind of number a column.

Unlike the tables of ``app.tables`` these take fits, so they are made for a few sweeps at a time.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import pandas as pd

from core.comparing import compare
from core.errors import BreakdownRefused, ComparisonRefused, ConditionRefused
from core.estimates import Estimate
from core.verdict import METRICS
from core.workspace import Workspace

from .fitted import ORIGINS, Fitted, fits_of
from .insight import dark_of, estimated, is_shunt, levels_of
from .mechanisms import MECHANISMS, loss_names
from .pair_scene import NO_CURVE, verdict_of
from .readout import measured
from .scene import full_name
from .states import State, state_of
from .tables import (
    Row,
    frame,
    headed,
    identity,
    metric_name,
    metric_unit,
    parameter_name,
    times,
)
from .telling import Telling, told_losses
from .units import DENSITY, Units

_FACES = {"front": "front", "both": "both faces"}
_NOISE = "fit noise only"
_POWER = DENSITY.power


def losses_table(workspace: Workspace, entries: Sequence[str], telling: Telling) -> pd.DataFrame:
    """A row for each mechanism of each lit sweep, its share and its rung of the ladder, and one for all together."""
    return frame(row for entry in entries if workspace.sweep(entry).lit for row in _losses(workspace, entry, telling))


def _losses(workspace: Workspace, entry: str, telling: Telling) -> list[Row]:
    same: Row = identity(workspace, entry)
    try:
        told = told_losses(workspace, entry, telling)
    except (ComparisonRefused, ConditionRefused) as refusal:
        return [{**same, "remarks": str(refusal)}]
    limit, shares = told.best.pmp, told.shares
    same |= {
        "band gap (eV)": told.gap,
        "band gap given": "assumed" if told.gap_assumed else "given",
        "emission": _FACES[telling.emission],
        headed("limit", _POWER): limit * DENSITY.power_factor,
        headed("delivered", _POWER): told.power * DENSITY.power_factor,
        "fit": _words(state_of(workspace, entry)),
    }

    def row(words: str, share: float, place: float = math.nan, rung: float | None = None, ends: tuple[float, float] | None = None) -> Row:
        low, high = ends or (None, None)
        return {
            **same,
            "lost to": words,
            headed("share", _POWER): share * DENSITY.power_factor,
            headed("share interval from", _POWER): times(low, DENSITY.power_factor),
            headed("share interval to", _POWER): times(high, DENSITY.power_factor),
            "share of the limit (%)": 100 * share / limit,
            "place in the order": place,
            headed("one after another", _POWER): times(rung, DENSITY.power_factor),
            "confidence of intervals (%)": math.nan if ends is None else 100 * shares.confidence,
            "uncertainty of shares": "" if ends is None else _NOISE,
            "remarks": "",
        }

    if shares is None:
        return [{**row("together", told.power - limit), "remarks": " ".join((told.story[-1], *told.cautions))}]
    rows = [
        row(
            told.names[m.parameter], shares.by_mechanism[m.parameter], telling.order.index(m.parameter) + 1,
            told.rungs[m.parameter], shares.intervals.get(m.parameter),
        )
        for m in MECHANISMS
    ]  # fmt: skip
    if shares.residual is not None:
        rows.append(row("not in the model", shares.residual))
    return [*rows, {**row("together", shares.difference), "remarks": " ".join(told.cautions)}]


def pair_table(workspace: Workspace, telling: Telling) -> pd.DataFrame:
    """A row for each metric: both, the difference with its uncertainty, and the verdict."""
    a, b = telling.pair
    if workspace.sweep(a).per_area != workspace.sweep(b).per_area:
        return frame([{**_pair(workspace, a, b), "verdict": "cannot be told", "sentence": "One of the two has no area."}])
    units, verdict = Units.of(workspace.sweep(a).per_area), verdict_of(workspace, a, b, (state_of(workspace, a), state_of(workspace, b)))
    rows = []
    for metric in METRICS:
        factor, unit = metric_unit(metric, units)
        weighed = verdict.by_metric[metric]
        first, second = (getattr(measured(workspace.sweep(entry)), metric) for entry in (a, b))
        rows.append(
            {
                **_pair(workspace, a, b),
                "metric": headed(metric_name(metric, units), unit),
                "of A": times(first.value, factor),
                "of A standard uncertainty": times(first.uncertainty, factor),
                "of B": times(second.value, factor),
                "of B standard uncertainty": times(second.uncertainty, factor),
                "B − A": times(weighed.difference, factor),
                "B − A standard uncertainty": times(weighed.uncertainty, factor),
                "verdict": weighed.word,
                "uncertainty mostly from": weighed.contributions[0].name if weighed.contributions else "",
                "not known": ", ".join(weighed.missing),
                "sentence": weighed.sentence,
            }
        )
    return frame(rows)


def shares_table(workspace: Workspace, telling: Telling) -> pd.DataFrame:
    """A row for each mechanism: its share in the difference between the two of a pair."""
    a, b = telling.pair
    sweeps, states = (workspace.sweep(a), workspace.sweep(b)), (state_of(workspace, a), state_of(workspace, b))
    same = {**_pair(workspace, a, b), "fit of A": _words(states[0]), "fit of B": _words(states[1])}
    try:
        if None in states:
            raise BreakdownRefused(NO_CURVE)
        first, second = measured(sweeps[0]), measured(sweeps[1])
        shares = compare(sweeps[0], states[0].known, sweeps[1], states[1].known, metrics_a=first, metrics_b=second)
    except (BreakdownRefused, ComparisonRefused, ConditionRefused) as refusal:
        return frame([{**same, "remarks": str(refusal)}])
    names = loss_names(is_shunt(workspace, a) and is_shunt(workspace, b))

    def row(words: str, share: float, ends: tuple[float, float] | None = None, remarks: str = "") -> Row:
        low, high = ends or (None, None)
        return {
            **same,
            "mechanism": words,
            headed("share", _POWER): share * DENSITY.power_factor,
            headed("share interval from", _POWER): times(low, DENSITY.power_factor),
            headed("share interval to", _POWER): times(high, DENSITY.power_factor),
            "share of A’s power (%)": 100 * share / shares.start if shares.start else math.nan,
            "confidence of intervals (%)": math.nan if ends is None else 100 * shares.confidence,
            "uncertainty of shares": "" if ends is None else _NOISE,
            "remarks": remarks,
        }

    rows = [row(names[m.parameter], shares.by_mechanism[m.parameter], shares.intervals.get(m.parameter)) for m in MECHANISMS]
    if shares.residual is not None:
        rows.append(row("not in the models", shares.residual))
    return frame([*rows, row("together", shares.difference, None, " ".join([*shares.notes, shares.reason]).strip())])


def _pair(workspace: Workspace, a: str, b: str) -> Row:
    return {"A": full_name(workspace, a), "B": full_name(workspace, b)}


def _words(state: State | None) -> str:
    return "none" if state is None else _fit_words(state.origin)


def _fit_words(origin: str) -> str:
    return "fitted for this table" if origin == "fitted on the spot" else ORIGINS[origin]


def intervals_table(workspace: Workspace, entries: Sequence[str]) -> pd.DataFrame:
    """A row for each fit that losses and pair rest on: parameters with intervals by profile likelihood, empty where open."""
    return frame(_intervals(workspace, entry, fit) for entry in entries for fit in fits_of(workspace, entry))


def _intervals(workspace: Workspace, entry: str, fit: Fitted) -> Row:
    units = Units.of(workspace.sweep(entry).per_area)
    row: Row = {**identity(workspace, entry), "model": fit.kind, "fit": _fit_words(fit.origin)}
    for parameter in fit.model.parameters:
        name, unit, factor = parameter_name(parameter, units), units.parameter_unit(parameter), units.parameter_factor(parameter)
        found = fit.intervals.get(parameter)
        row[headed(name, unit)] = getattr(fit.model, parameter) * factor
        row[headed(f"{name} interval from", unit)] = times(found.low if found and found.low_bounded else None, factor)
        row[headed(f"{name} interval to", unit)] = times(found.high if found and found.high_bounded else None, factor)
        row[f"{name} state"] = fit.state(parameter)
    fitted = fit.refinement is not None
    row["confidence of intervals (%)"] = 100 * fit.confidence if fitted else math.nan
    row["intervals by"] = "" if not fitted else f"linear, from the covariance: {fit.linear}" if fit.linear else "profile likelihood"
    row["uncertainty of parameters"] = _NOISE if fitted else ""
    return row


def estimates_table(workspace: Workspace, entries: Sequence[str]) -> pd.DataFrame:
    """A row for each published estimate of each sweep; the value stands in the column of its unit."""
    return frame(
        {**identity(workspace, entry), **_estimate(estimate, Units.of(workspace.sweep(entry).per_area))}
        for entry in entries
        for estimate in _estimates(workspace, entry)
    )


def _estimates(workspace: Workspace, entry: str) -> tuple[Estimate, ...]:
    model = next((fit.model for fit in fits_of(workspace, entry)), None)
    return estimated(workspace.sweep(entry), dark=dark_of(workspace, entry), levels=levels_of(workspace, entry), model=model)


def _estimate(estimate: Estimate, units: Units) -> Row:
    # A column for each unit that an estimate may have, in one order whichever comes first.
    columns = [("n", "", 1.0), ("J0", units.current, units.current_factor), ("resistance", units.resistance, 1.0), ("fill factor", "%", 100.0)]
    mine = {"ideality": "n", "saturation_current": "J0", "fill_factor": "fill factor"}.get(estimate.parameter, "resistance")
    row: Row = {"estimate": estimate.name}
    for name, unit, factor in columns:
        value, uncertainty = (estimate.value, estimate.uncertainty) if name == mine else (None, None)
        shown = f"{units.letter}0" if name == "J0" else name
        row[headed(shown, unit)] = times(value, factor)
        row[headed(f"{shown} standard uncertainty", unit)] = times(uncertainty, factor)
    return {**row, "method": estimate.method, "source": estimate.source, "note": estimate.note}
