"""One device of the report: curves, numbers, losses, checks, conditions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from app import tables
from app.fitted import Fitted, drawn, fits_of
from app.readout import measured
from app.scene import short_name
from app.telling import Telling, ToldLosses, told_losses
from app.units import Units
from app.wording import number
from core.detailed_balance import radiative_efficiency
from core.errors import ComparisonRefused, ConditionRefused
from core.workspace import Workspace

from .figures import (
    FINEST,
    HALF,
    Rung,
    Shown,
    curves,
    digits_of,
    ladder,
    rungs_of,
    unit_of_residuals,
)
from .markup import Markup, element, join, paragraph, table
from .numbers import conditions_tables, metrics_tables, parameters_tables
from .shares import conventions, shares_table

_CURVES = 6  # in one picture
_NARROW = 3  # sweeps whose numbers take half the page
_WHOLE = 8  # findings that are not torn apart by the end of a page
FIT_NOISE = "In brackets: standard error of the last digit; beside or below: interval by profile likelihood; all of fit noise only."


def device_section(workspace: Workspace, device_id: str, entries: Sequence[str], anchor: str, telling: Telling) -> Markup:
    """Everything on the chosen sweeps of one device; ``anchor`` is distinct within the page."""
    device = workspace.devices[device_id]
    names = [short_name(workspace, workspace.entry(entry)) for entry in entries]
    lit = [i for i, entry in enumerate(entries) if workspace.sweep(entry).lit]
    told = {entry: fits_of(workspace, entry) for entry in entries}
    group = f"group {device.group}" if device.group else ""
    first, *others = _curves(workspace, entries, names, told, anchor)
    conditions = element("div", element("h3", "Conditions"), conditions_tables(workspace, entries, names), class_="block")
    numbers = element("div", _metrics(workspace, [entries[i] for i in lit], [names[i] for i in lit]), class_="block")
    # Two narrow tables share the width of the page.
    narrow = len(entries) <= _NARROW and bool(lit)
    beside = [element("div", numbers, conditions, class_="beside")] if narrow else [numbers]
    under = element("span", f"{group}, {_count(len(entries))}" if group else _count(len(entries)), class_="under")
    return element(
        "section",
        element("div", element("h2", join([device.name, " ", under])), first, class_="opening"),
        *others,
        *beside,
        _parameters(workspace, [(name, fit) for entry, name in zip(entries, names, strict=True) for fit in told[entry]]),
        *_losses(workspace, entries, names, anchor, telling),
        *([] if narrow else [conditions]),
        _checks(workspace, entries, names),
        class_="device",
        id=anchor,
    )


def _count(sweeps: int) -> str:
    return "1 sweep" if sweeps == 1 else f"{sweeps} sweeps"


def _curves(
    workspace: Workspace, entries: Sequence[str], names: Sequence[str], told: Mapping[str, tuple[Fitted, ...]], anchor: str
) -> list[Markup]:
    kinds: dict[tuple[bool, bool], list[Shown]] = {}
    for entry, name in zip(entries, names, strict=True):
        sweep, weights = workspace.sweep(entry), workspace.fit(entry).settings.weights
        kinds.setdefault((not sweep.lit, not sweep.per_area), []).append(Shown(name, sweep, drawn(told[entry]), weights))
    pictures = []
    for _, shown in sorted(kinds.items()):
        pictures += [shown[at : at + _CURVES] for at in range(0, len(shown), _CURVES)]
    # A light and a dark picture share the width of the page.
    side_by_side = len(kinds) == len(pictures) == 2 and len({dark for dark, _ in kinds}) == 2
    if side_by_side:
        halves = [curves(shown, f"{anchor}-curves-{place}", HALF) for place, shown in enumerate(pictures)]
        caption = element("figcaption", _curve_words([one for shown in pictures for one in shown]))
        return [element("figure", element("div", *halves, class_="halves"), caption)]
    return [
        element("figure", curves(shown, f"{anchor}-curves-{place}"), element("figcaption", _curve_words(shown)))
        for place, shown in enumerate(pictures)
    ]


def _curve_words(shown: Sequence[Shown]) -> str:
    fitted = any(one.model is not None for one in shown)
    words = "Marks: measured points" + (", thinned for print where they are many" if any(s.sweep.voltage.size > 140 for s in shown) else "")
    words += f"; lines: models. Below: residuals in units of {unit_of_residuals(shown)}" if fitted else ""
    return words + ("; ring: largest measured power." if 0 < sum(one.sweep.lit for one in shown) <= 2 else ".")


def _metrics(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> Markup:
    if not entries:
        return paragraph("Dark sweeps have no figures of merit.", class_="under")
    note = "Measured on the points. In brackets: standard uncertainty of the last digit, from the scatter of the points alone."
    return join([element("h3", "Metrics"), metrics_tables(workspace, entries, names), paragraph(note, class_="under")])


def _parameters(workspace: Workspace, fits: Sequence[tuple[str, Fitted]]) -> Markup:
    if not fits:
        return element("div", element("h3", "Parameters"), paragraph("No model was laid over these sweeps.", class_="under"), class_="block")
    fitted = [(name, fit) for name, fit in fits if fit.refinement is not None]
    settings: dict[str, list[str]] = {}
    for name, fit in fitted:
        words = f"{tables.settings_text(fit.refinement)}; {100 * fit.confidence:g} % intervals"
        settings.setdefault(words, []).append(f"{name} for the losses" if fit.beside else name)
    said = [paragraph(element("b", f"{', '.join(who)}: "), words + ".", class_="under") for words, who in settings.items()]
    linear = [f"Intervals of {name} are linear ones, from the covariance: {fit.linear}" for name, fit in fitted if fit.linear]
    together = [f"{name} was refined together with other sweeps." for name, fit in fitted if fit.refinement.others]
    notes = ([FIT_NOISE] if fitted else []) + together + linear
    return element(
        "div",
        element("h3", "Parameters"),
        parameters_tables(fits, lambda entry: Units.of(workspace.sweep(entry).per_area)),
        paragraph(" ".join(notes), class_="under") if notes else "",
        *said,
        class_="block",
    )


def _losses(workspace: Workspace, entries: Sequence[str], names: Sequence[str], anchor: str, telling: Telling) -> list[Markup]:
    lit = [(place, entry, name) for place, (entry, name) in enumerate(zip(entries, names, strict=True)) if workspace.sweep(entry).lit]
    parts, broken_down = [], False
    for place, entry, name in lit:
        heading = element("h4", name) if len(lit) > 1 else ""
        try:
            told = told_losses(workspace, entry, telling)
        except (ComparisonRefused, ConditionRefused) as refusal:
            parts.append(element("div", heading, paragraph(str(refusal)), class_="block"))
            continue
        broken_down = broken_down or told.shares is not None
        drawing = f"{anchor}-losses-{place}"
        parts.append(element("div", heading, *_losses_of(told, drawing, _efficiency(workspace, entry, told, telling)), class_="block"))
    if not parts:
        return []
    said = paragraph(conventions(telling), class_="under") if broken_down else ""
    # The heading stays with what it heads.
    return [element("div", element("h3", "Losses"), said, parts[0], class_="block"), *parts[1:]]


def _losses_of(told: ToldLosses, drawing: str, efficiency: str) -> list[Markup]:
    gap = f"limit, {told.gap:.3g} eV assumed" if told.gap_assumed else f"limit at {told.gap:.4g} eV"
    whole = 1e3 * (told.power - told.best.pmp)
    rungs = [Rung("not broken down", whole)] if told.shares is None else rungs_of(told.shares, told.names)
    digits = FINEST if told.shares is None else digits_of(told.shares)
    picture = ladder(1e3 * told.best.pmp, 1e3 * told.power, rungs, drawing, limit_name=gap, device_name=told.name, digits=digits)
    words = " ".join([*([efficiency] if efficiency else []), *told.cautions])
    rest = paragraph(words, class_="under") if words else ""
    numbers = "" if told.shares is None else shares_table(told.shares, told.names, told.best.pmp, "of the limit", told.rungs)
    return [element("figure", picture), paragraph(" ".join(told.story)), numbers, rest]


def _efficiency(workspace: Workspace, entry: str, told: ToldLosses, telling: Telling) -> str:
    """The radiative efficiency that Voc implies; an assumed gap implies none."""
    sweep = workspace.sweep(entry)
    metrics = measured(sweep)
    if told.gap_assumed or metrics.jsc.value is None or metrics.voc.value is None:
        return ""
    try:
        efficiency = radiative_efficiency(metrics.jsc.value, metrics.voc.value, told.gap, sweep.temperature, telling.emission)
    except ConditionRefused:
        return ""
    return f"External radiative efficiency implied by Voc: {number(100 * efficiency, digits=2)} %."


def _checks(workspace: Workspace, entries: Sequence[str], names: Sequence[str]) -> Markup:
    """Findings, each said once with the sweeps that it holds for."""
    name_of = dict(zip(entries, names, strict=True))
    told: dict[tuple[str, str, str, str], list[str]] = {}
    for entry, finding in tables.all_findings(workspace, entries):
        told.setdefault((finding.severity, finding.what, finding.meaning, finding.remedy), []).append(name_of[entry])
    if not told:
        return element("div", element("h3", "Checks"), paragraph("Nothing was found amiss.", class_="under"), class_="block")
    worst_first = sorted(told.items(), key=lambda item: ("stop", "caution", "note").index(item[0][0]))
    rows = [
        [severity, join([what, " ", element("span", f"{meaning} {remedy}".strip(), class_="reason")]), ", ".join(who)]
        for (severity, what, meaning, remedy), who in worst_first
    ]
    whole = "block" if len(rows) <= _WHOLE else None
    return element("div", element("h3", "Checks"), table(["", "finding", "sweep"], rows, "words checks"), class_=whole)
