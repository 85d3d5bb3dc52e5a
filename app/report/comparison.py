"""The pair of the report: two sweeps beside each other, and why their powers differ."""

from __future__ import annotations

from app import tables
from app.fitted import ORIGINS, drawn, fits_of
from app.insight import is_shunt
from app.mechanisms import loss_names
from app.pair_scene import NO_CURVE, verdict_of
from app.readout import measured
from app.scene import full_name
from app.states import State, state_of
from app.stating import statement_texts
from app.units import Units
from app.wording import concise
from core.comparing import compare, directions
from core.errors import BreakdownRefused, ComparisonRefused, ConditionRefused
from core.retelling import tell_difference, tell_measured
from core.sentences import listed
from core.verdict import METRICS, MetricVerdict, Verdict
from core.workspace import Workspace

from .figures import FINEST, Shown, curves, difference_bars, unit_of_residuals
from .markup import Markup, element, join, paragraph, symbol, table
from .numbers import told_once
from .shares import shares_table

_NOT_BESIDE = "One of the two has no area, so their currents are not of one kind and are not set against each other."
_NOT_ALIKE = "One is a light and the other a dark sweep, so they are not compared."


def pair_section(workspace: Workspace, entry_a: str, entry_b: str) -> Markup:
    """Curves, metrics with what can be said of their differences, and the shares of the mechanisms."""
    a, b = workspace.sweep(entry_a), workspace.sweep(entry_b)
    names = full_name(workspace, entry_a), full_name(workspace, entry_b)
    said = paragraph(f"A is {names[0]}, B is {names[1]}; differences are B less A.", class_="under")
    head = [element("h2", f"{names[0]} and {names[1]}"), said]
    if a.per_area != b.per_area or a.lit != b.lit:
        reason = _NOT_BESIDE if a.per_area != b.per_area else _NOT_ALIKE
        return element("section", *head, paragraph(reason), class_="device", id="pair")
    shown = [
        Shown(f"{letter}: {name}", sweep, drawn(fits_of(workspace, entry)), workspace.fit(entry).settings.weights)
        for letter, name, sweep, entry in (("A", names[0], a, entry_a), ("B", names[1], b, entry_b))
    ]
    caption = f"A: filled marks, solid line. B: hollow marks, dashed line. Below: residuals in units of {unit_of_residuals(shown)}."
    opening = element("div", *head, element("figure", curves(shown, "pair-curves"), element("figcaption", caption)), class_="opening")
    if not a.lit:
        return element("section", opening, class_="device", id="pair")
    states = state_of(workspace, entry_a), state_of(workspace, entry_b)
    verdict = verdict_of(workspace, entry_a, entry_b, states)
    return element(
        "section",
        opening,
        element("div", *_differences(workspace, entry_a, entry_b, verdict), class_="block"),
        element("div", element("h3", "Why the difference"), *_why(workspace, (entry_a, entry_b), names, states, verdict), class_="block"),
        class_="device",
        id="pair",
    )


def _differences(workspace: Workspace, entry_a: str, entry_b: str, verdict: Verdict) -> list[Markup]:
    a, b = (measured(workspace.sweep(entry)) for entry in (entry_a, entry_b))
    units = Units.of(workspace.sweep(entry_a).per_area)
    rows = []
    for metric in METRICS:
        factor, unit = tables.metric_unit(metric, units)
        weighed = verdict.by_metric[metric]
        cells = [_value(q.value, q.uncertainty, factor, q.reason) for q in (getattr(a, metric), getattr(b, metric))]
        head = join([symbol(tables.metric_name(metric, units)), element("span", f" ({unit})", class_="unit")])
        mostly = weighed.contributions[0].name if weighed.contributions else ""
        rows.append([head, *cells, _value(weighed.difference, weighed.uncertainty, factor, ""), _word(weighed), mostly])
    heads = ["", "A", "B", "B − A", "verdict", "uncertainty mostly from"]
    notes = " ".join([*_not_known(verdict, units), _stated(workspace)]).strip()
    said = paragraph(f"In brackets: standard uncertainty of the last digit. {notes}".strip(), class_="under")
    return [element("h3", "Metrics"), table(heads, told_once(rows), "numbers differences"), said]


def _not_known(verdict: Verdict, units: Units) -> list[str]:
    """What is missing in the uncertainty of the differences, each told once."""
    of: dict[tuple[str, ...], list[str]] = {}
    for metric in METRICS:
        if (weighed := verdict.by_metric[metric]).difference is not None and weighed.missing:
            of.setdefault(weighed.missing, []).append(tables.metric_name(metric, units))
    return [f"Not known and not in the uncertainty of {listed(who)}: {listed(list(missing))}." for missing, who in of.items()]


def _stated(workspace: Workspace) -> str:
    """What the user states of area and lamp."""
    texts = statement_texts(workspace)
    said = [f"{name} ± {texts[key]} %" for name, key in (("area", "area_uncertainty"), ("lamp", "lamp_uncertainty")) if texts[key]]
    said += ["one aperture for all"] if texts["area_shared"] else []
    return f"Stated by the user: {listed(said)}." if said else ""


def _value(value: float | None, uncertainty: float | None, factor: float, reason: str) -> Markup | str:
    if value is None:
        return element("span", reason or "–", class_="reason")
    return concise(value * factor, None if uncertainty is None else uncertainty * factor)


def _word(weighed: MetricVerdict) -> Markup:
    return element("span", weighed.word, class_="verdict" if weighed.word == "stands out" else "reason")


def _why(
    workspace: Workspace, entries: tuple[str, str], names: tuple[str, str], states: tuple[State | None, State | None], verdict: Verdict
) -> list[Markup]:
    sweeps = workspace.sweep(entries[0]), workspace.sweep(entries[1])
    a, b = (measured(sweep) for sweep in sweeps)
    try:
        if None in states:
            raise BreakdownRefused(NO_CURVE)
        shares = compare(sweeps[0], states[0].known, sweeps[1], states[1].known, metrics_a=a, metrics_b=b)
    except BreakdownRefused as refusal:
        powers = None if None in (a.pmp.value, b.pmp.value) or not sweeps[0].per_area else (a.pmp.value, b.pmp.value)
        return [paragraph(tell_measured(*names, powers, verdict, [*directions(*sweeps), str(refusal)]))]
    except (ComparisonRefused, ConditionRefused) as refusal:
        return [paragraph(str(refusal)), paragraph(verdict.by_metric["pmp"].sentence)]
    shunt = is_shunt(workspace, entries[0]) and is_shunt(workspace, entries[1])
    called, assumed = loss_names(shunt), workspace.assumed(entries[0]) | workspace.assumed(entries[1])
    words = tell_difference(*names, shares, verdict, shunt_confirmed=shunt, assumed=assumed)
    caption = (
        f"What each mechanism adds on the way from {names[0]} ({1e3 * shares.start:.{FINEST}f} mW cm⁻²) "
        f"to {names[1]} ({1e3 * shares.end:.{FINEST}f} mW cm⁻²); whiskers and intervals are of fit noise only."
    )
    title = f"Shares of the mechanisms in the step from {names[0]} to {names[1]}"
    return [
        element("figure", difference_bars(shares, called, "pair-bars", title), element("figcaption", caption)),
        paragraph(words),
        shares_table(shares, called, shares.start, "of A’s power"),
        *_sources(names, states),
    ]


def _sources(names: tuple[str, str], states: tuple[State, State]) -> list[Markup]:
    told = [f"{name}: {ORIGINS[state.origin]}." for name, state in zip(names, states, strict=True) if state.origin != "refined"]
    return [paragraph(" ".join([*told, "The parameters stand with each device."]), class_="under")] if told else []
