"""One device of the report: curves, numbers, losses, checks, conditions."""

from __future__ import annotations

from collections.abc import Sequence

from app import tables
from app.insight import is_shunt
from app.losses_scene import Losses, losses_of
from app.mechanisms import MECHANISMS
from app.readout import measured
from app.scene import short_name
from app.wording import number
from core.detailed_balance import limit, radiative_efficiency
from core.errors import ComparisonRefused, ConditionRefused
from core.retelling import tell_losses
from core.shares import Shares
from core.workspace import Workspace

from .figures import Shown, curves, ladder, order_of, signed, unit_of_residuals
from .markup import Markup, element, join, paragraph, table
from .numbers import conditions_tables, mark, metrics_tables, parameters_tables

_CURVES = 6  # in one picture
_NARROW = 2  # sweeps whose numbers take half the page
FIT_NOISE = (
    "In brackets: standard error of the last digit; below: interval. Both are of fit noise only: area, lamp, temperature and "
    "scatter between devices are not in them."
)


def device_section(workspace: Workspace, device_id: str, entries: Sequence[str], anchor: str) -> Markup:
    """Everything on the chosen sweeps of one device; ``anchor`` is distinct within the page."""
    device = workspace.devices[device_id]
    names = [short_name(workspace, workspace.entry(entry)) for entry in entries]
    lit = [i for i, entry in enumerate(entries) if workspace.sweep(entry).lit]
    group = f"group {device.group}" if device.group else ""
    first, *others = _curves(workspace, entries, names, anchor)
    conditions = join([element("h3", "Conditions"), conditions_tables(workspace, entries, names)])
    numbers = _metrics(workspace, [entries[i] for i in lit], [names[i] for i in lit])
    # Two narrow tables share the width of the page.
    narrow = len(entries) <= _NARROW and bool(lit)
    beside = [element("div", element("div", numbers), element("div", conditions), class_="beside")] if narrow else [numbers]
    under = paragraph(f"{group}, {_count(len(entries))}" if group else _count(len(entries)), class_="under")
    return element(
        "section",
        element("div", element("h2", device.name), under, first, class_="opening"),
        *others,
        *beside,
        *_parameters(workspace, entries, names),
        *_losses(workspace, entries, names, anchor),
        element("h3", "Checks"),
        _checks(workspace, entries, names),
        *([] if narrow else [conditions]),
        class_="device",
        id=anchor,
    )


def _count(sweeps: int) -> str:
    return "1 sweep" if sweeps == 1 else f"{sweeps} sweeps"


def _curves(workspace: Workspace, entries: Sequence[str], names: Sequence[str], anchor: str) -> list[Markup]:
    kinds: dict[tuple[bool, bool], list[Shown]] = {}
    for entry, name in zip(entries, names, strict=True):
        sweep, fit = workspace.sweep(entry), workspace.fit(entry)
        kinds.setdefault((not sweep.lit, not sweep.per_area), []).append(Shown(name, sweep, fit.model, fit.settings.weights))
    pictures = []
    for _, shown in sorted(kinds.items()):
        pictures += [shown[at : at + _CURVES] for at in range(0, len(shown), _CURVES)]
    return [
        element("figure", curves(shown, f"{anchor}-curves-{place}"), element("figcaption", _curve_words(shown)))
        for place, shown in enumerate(pictures)
    ]


def _curve_words(shown: Sequence[Shown]) -> str:
    fitted = any(one.model is not None for one in shown)
    words = "Marks: measured points" + (", thinned for print where they are many" if any(s.sweep.voltage.size > 140 for s in shown) else "")
    words += f"; lines: models. Below: residuals in units of {unit_of_residuals(shown)}" if fitted else ""
    return words + ("; ring: largest measured power." if shown[0].sweep.lit and len(shown) <= 2 else ".")


def _metrics(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> Markup:
    if not entries:
        return paragraph("Dark sweeps have no figures of merit.", class_="under")
    note = "Measured on the points. In brackets: standard uncertainty of the last digit, from the scatter of the points alone."
    return join([element("h3", "Metrics"), metrics_tables(workspace, entries, names), paragraph(note, class_="under")])


def _parameters(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> list[Markup]:
    modelled = [i for i, entry in enumerate(entries) if workspace.fit(entry).model is not None]
    if not modelled:
        return [element("h3", "Parameters"), paragraph("No model was laid over these sweeps.", class_="under")]
    entries, names = [entries[i] for i in modelled], [names[i] for i in modelled]
    settings = {}
    for entry, name in zip(entries, names, strict=True):
        refined = workspace.refined(entry)
        if refined is not None:
            settings.setdefault(f"{tables.settings_text(refined)}; {100 * refined.settings.confidence:g} % intervals", []).append(name)
    said = [paragraph(element("b", f"Fit settings, {', '.join(who)}: "), words + ".", class_="under") for words, who in settings.items()]
    return [
        element("h3", "Parameters"),
        parameters_tables(workspace, entries, names),
        *([paragraph(FIT_NOISE, class_="under")] if settings else []),
        *said,
    ]


def _losses(workspace: Workspace, entries: Sequence[str], names: Sequence[str], anchor: str) -> list[Markup]:
    parts = [
        part
        for place, (entry, name) in enumerate(zip(entries, names, strict=True))
        if workspace.sweep(entry).lit
        for part in _losses_of(workspace, entry, name, f"{anchor}-losses-{place}")
    ]
    return [element("h3", "Losses"), *parts] if parts else []


def _losses_of(workspace: Workspace, entry: str, name: str, drawing: str) -> list[Markup]:
    try:
        found = losses_of(workspace, entry, "front")
        best = limit(found.gap, found.sweep.temperature, found.sweep.irradiance)
    except (ComparisonRefused, ConditionRefused) as refusal:
        return [paragraph(f"{name}: {refusal}", class_="under")]
    shares = found.shares
    assumed = workspace.assumed(entry) | ({"band_gap"} if found.assumed else set())
    shunt = is_shunt(workspace, entry)
    told = tell_losses(found.name, shares, best, found.gap, shunt_confirmed=shunt, assumed=assumed)
    gap = f"limit, {found.gap:.3g} eV assumed" if found.assumed else f"limit at {found.gap:.4g} eV"
    picture = ladder(1e3 * best.pmp, shares, order_of(shares.by_mechanism), drawing, limit_name=gap, device_name=found.name)
    caption = "The largest loss first; a bar is the mechanism’s share, whatever the order."
    return [
        element("h4", name),
        element("figure", picture, element("figcaption", caption)),
        paragraph(" ".join(told)),
        shares_table(shares, best.pmp, "share of the limit"),
        *_remarks(found),
    ]


def _remarks(found: Losses) -> list[Markup]:
    """Where gap and model come from, and the radiative efficiency that Voc implies."""
    remarks = [found.state.source.capitalize() + "." if found.state.source else ""]
    if found.assumed:
        remarks.append("No band gap was given: the largest that could give the measured Jsc was assumed.")
    elif efficiency := _radiative_efficiency(found):
        remarks.append(efficiency)
    words = " ".join(remark for remark in remarks if remark)
    return [paragraph(words, class_="under")] if words else []


def _radiative_efficiency(found: Losses) -> str:
    metrics = measured(found.sweep)
    if metrics.jsc.value is None or metrics.voc.value is None:
        return ""
    try:
        efficiency = radiative_efficiency(metrics.jsc.value, metrics.voc.value, found.gap, found.sweep.temperature)
    except ConditionRefused:
        return ""
    return f"External radiative efficiency implied by Voc: {number(100 * efficiency, digits=2)} %."


def shares_table(shares: Shares, whole: float, whole_name: str) -> Markup:
    """Shares with intervals, in mW cm⁻² and as part of a whole [W cm⁻²]."""
    rows = []
    for mechanism in MECHANISMS:
        share, ends = shares.by_mechanism[mechanism.parameter], shares.intervals.get(mechanism.parameter)
        interval = "–" if ends is None else " … ".join(number(1e3 * end, 5e2 * (ends[1] - ends[0])) for end in ends)
        rows.append([join([mark(mechanism.parameter), mechanism.loss]), signed(1e3 * share, 1e3 * whole), interval, _part(share, whole)])
    if shares.residual is not None:
        rows.append(["not in the model", signed(1e3 * shares.residual, 1e3 * whole), "–", _part(shares.residual, whole)])
    rows.append([element("b", "together"), signed(1e3 * shares.difference, 1e3 * whole), "", _part(shares.difference, whole)])
    interval_name = f"{100 * shares.confidence:g} % interval, fit noise only"
    body = table(["", "power (mW cm⁻²)", interval_name, whole_name], rows, "numbers")
    return join([body, paragraph(shares.reason, class_="under")]) if shares.reason else body


def _part(share: float, whole: float) -> str:
    if not whole:
        return "–"
    return f"{round(100 * share / whole, 1) + 0.0:.1f} %".replace("-", "−")


def _checks(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> Markup:
    """Findings, each said once with the sweeps that it holds for."""
    name_of = dict(zip(entries, names, strict=True))
    told: dict[tuple[str, str, str, str], list[str]] = {}
    for entry, finding in tables.all_findings(workspace, entries):
        told.setdefault((finding.severity, finding.what, finding.meaning, finding.remedy), []).append(name_of[entry])
    if not told:
        return paragraph("Nothing was found amiss.", class_="under")
    worst_first = sorted(told.items(), key=lambda item: ("stop", "caution", "note").index(item[0][0]))
    rows = [
        [severity, join([what, " ", element("span", f"{meaning} {remedy}".strip(), class_="reason")]), ", ".join(who)]
        for (severity, what, meaning, remedy), who in worst_first
    ]
    return table(["", "finding", "sweep"], rows, "words checks")
