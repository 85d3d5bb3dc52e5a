"""The pair of the report: two sweeps beside each other, and why their powers differ."""

from __future__ import annotations

from app import tables
from app.insight import is_shunt
from app.readout import measured
from app.states import state_of
from app.units import Units
from app.wording import concise, number
from core.budget import budget_of
from core.comparing import compare
from core.errors import ComparisonRefused, ConditionRefused
from core.retelling import tell_difference
from core.verdict import METRICS, MetricVerdict, Verdict, stands_out
from core.workspace import Workspace

from .device import shares_table
from .figures import Shown, curves, difference_bars, unit_of_residuals
from .markup import Markup, element, join, paragraph, symbol, table

_NOT_BESIDE = "One of the two has no area, so their currents are not of one kind and are not set against each other."


def pair_section(workspace: Workspace, entry_a: str, entry_b: str) -> Markup:
    """Curves, metrics with what can be said of their differences, and the shares of the mechanisms."""
    a, b = workspace.sweep(entry_a), workspace.sweep(entry_b)
    names = a.name, b.name
    head = [element("h2", f"{a.name} and {b.name}"), paragraph(f"A is {a.name}, B is {b.name}; differences are B less A.", class_="under")]
    if a.per_area != b.per_area or a.lit != b.lit:
        reason = _NOT_BESIDE if a.per_area != b.per_area else "One is a light and the other a dark sweep, so they are not compared."
        return element("section", *head, paragraph(reason), class_="device", id="pair")
    shown = []
    for letter, sweep, entry in (("A", a, entry_a), ("B", b, entry_b)):
        fit = workspace.fit(entry)
        shown.append(Shown(f"{letter}: {sweep.name}", sweep, fit.model, fit.settings.weights))
    caption = f"A: filled marks, solid line. B: hollow marks, dashed line. Below: residuals in units of {unit_of_residuals(shown)}."
    return element(
        "section",
        element("div", *head, element("figure", curves(shown, "pair-curves"), element("figcaption", caption)), class_="opening"),
        *(_differences(workspace, entry_a, entry_b) if a.lit else ()),
        *(_shares(workspace, entry_a, entry_b, names) if a.lit else ()),
        class_="device",
        id="pair",
    )


def _verdict(workspace: Workspace, entry_a: str, entry_b: str) -> Verdict:
    metrics = [measured(workspace.sweep(entry)) for entry in (entry_a, entry_b)]
    budget = budget_of(workspace, entry_a, entry_b, lambda entry: measured(workspace.sweep(entry)))
    return stands_out(*metrics, budget)


def _differences(workspace: Workspace, entry_a: str, entry_b: str) -> list[Markup]:
    a, b = (measured(workspace.sweep(entry)) for entry in (entry_a, entry_b))
    units, verdict = Units.of(workspace.sweep(entry_a).per_area), _verdict(workspace, entry_a, entry_b)
    rows = []
    for metric in METRICS:
        factor, unit = tables.metric_unit(metric, units)
        weighed = verdict.by_metric[metric]
        first, second = getattr(a, metric), getattr(b, metric)
        cells = [_value(q.value, q.uncertainty, factor, q.reason) for q in (first, second)]
        head = join([symbol(tables.metric_name(metric, units)), element("span", f" ({unit})", class_="unit")])
        rows.append([head, *cells, _value(weighed.difference, weighed.uncertainty, factor, ""), _word(weighed)])
    sentences = [paragraph(v.sentence, class_="under") for m in METRICS[:3] if (v := verdict.by_metric[m]).difference is not None]
    return [element("h3", "Metrics"), table(["", "A", "B", "B − A", ""], rows, "numbers"), *sentences]


def _value(value: float | None, uncertainty: float | None, factor: float, reason: str) -> Markup | str:
    if value is None:
        return element("span", reason or "–", class_="reason")
    return concise(value * factor, None if uncertainty is None else uncertainty * factor)


def _word(weighed: MetricVerdict) -> Markup:
    return element("span", weighed.word, class_="verdict" if weighed.word == "stands out" else "reason")


def _shares(workspace: Workspace, entry_a: str, entry_b: str, names: tuple[str, str]) -> list[Markup]:
    head = element("h3", "Why the difference")
    states = [state_of(workspace, entry) for entry in (entry_a, entry_b)]
    if None in states:
        return [head, paragraph("No diode curve can be laid over one of the two, so the mechanisms cannot be told.", class_="under")]
    a, b = workspace.sweep(entry_a), workspace.sweep(entry_b)
    try:
        shares = compare(a, states[0].known, b, states[1].known, metrics_a=measured(a), metrics_b=measured(b))
    except (ComparisonRefused, ConditionRefused) as refusal:
        return [head, paragraph(str(refusal))]
    assumed = workspace.assumed(entry_a) | workspace.assumed(entry_b)
    verdict, shunt = _verdict(workspace, entry_a, entry_b), is_shunt(workspace, entry_a) and is_shunt(workspace, entry_b)
    words = tell_difference(*names, shares, verdict, shunt_confirmed=shunt, assumed=assumed)
    caption = (
        f"What each mechanism adds on the way from {names[0]} ({number(1e3 * shares.start)} mW cm⁻²) "
        f"to {names[1]} ({number(1e3 * shares.end)} mW cm⁻²)."
    )
    sources = [paragraph(f"{name}: {state.source}.", class_="under") for name, state in zip(names, states, strict=True) if state.source]
    title = f"Shares of the mechanisms in the step from {names[0]} to {names[1]}"
    return [
        head,
        element("figure", difference_bars(shares, "pair-bars", title), element("figcaption", caption)),
        paragraph(words),
        shares_table(shares, shares.start, "share of A’s power"),
        *sources,
    ]
