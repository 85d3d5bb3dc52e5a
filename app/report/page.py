"""The report's page: from the title to the cautions."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Sequence
from datetime import datetime
from functools import lru_cache
from pathlib import Path

from app import tables
from app.fitted import fits_of
from app.readout import measured
from app.scene import companions_of, short_name
from app.telling import Telling
from app.units import Units
from app.wording import concise
from core.workspace import Workspace

from .comparison import pair_section
from .device import device_section
from .markup import Markup, element, join, paragraph, symbol, table
from .methods import methods_for
from .provenance import files_behind, versions
from .reporting import MISSING, Item, reporting_items

CAUTIONS = (
    "This report is no certified calibration. Uncertainties are those stated beside the numbers, and no others.",
    "What is marked assumed was given neither by a file nor by a person; efficiency and ideality factor depend on it.",
    "A slope of the plateau under light is a shunt or voltage-dependent collection; the dark sweep tells which.",
    "Who repeats the measurements: lamps of solar simulators are a danger by UV, glare and heat; surfaces get hot; "
    "source-meter outputs, and strings of cells in light, stay live; some devices hold lead and solvents. Local rules and "
    "trained staff decide.",
)  # fmt: skip
_WHOLE = 16  # files
_NAMED = 3  # sweeps named beside a statement before they are only counted
_FIRST_COLUMNS = ("jsc", "voc", "fill_factor", "efficiency")


def report_page(workspace: Workspace, entries: Sequence[str], *, made: datetime, telling: Telling = Telling()) -> str:
    """The report on some sweeps, and on those measured with them on the same device under the same light.

    Parameters
    ----------
    workspace : Workspace
    entries : sequence of str
    made : datetime
        With its time zone.
    telling : Telling
        How losses are told, and the sweeps to set against each other; without a pair the first lit sweeps where the report
        is on exactly two devices.

    Raises
    ------
    StepRefused
        If a sweep is not in the workspace.
    """
    devices = _by_device(workspace, [*entries, *telling.pair])
    shown = [entry for sweeps in devices.values() for entry in sweeps]
    pair = telling.pair or _only_two(workspace, devices)
    body = [
        _title(workspace, shown, devices, made),
        *([pair_section(workspace, *pair)] if pair else []),
        *(device_section(workspace, device, sweeps, f"device-{place}", telling) for place, (device, sweeps) in enumerate(devices.items(), start=1)),
        _account(workspace, shown, pair, telling),
    ]
    style = _style_sheet()
    policy = f"default-src 'none'; style-src 'sha256-{_digest(style)}'; base-uri 'none'; form-action 'none'"
    head = [
        element("meta", charset="utf-8"),
        element("meta", http_equiv="Content-Security-Policy", content=policy),
        element("meta", name="viewport", content="width=device-width, initial-scale=1"),
        element("meta", name="generator", content=f"Sweepbench {versions()['sweepbench']}"),
        element("title", f"{workspace.name or 'Sweepbench'}, report"),
        element("style", Markup(style)),
    ]
    page = element("html", element("head", *head), element("body", element("main", *body)), lang="en")
    return f"<!DOCTYPE html>\n{_without_ends(page)}\n"


def _by_device(workspace: Workspace, entries: Sequence[str]) -> dict[str, list[str]]:
    """Sweeps by device in the order of choice, with their companions: a direction is never shown instead of the other."""
    devices: dict[str, list[str]] = {}
    for entry in dict.fromkeys(entries):
        sweeps = devices.setdefault(workspace.entry(entry).device, [])
        sweeps += [e for e in (entry, *(c.id for c in companions_of(workspace, entry))) if e not in sweeps]
    return devices


def _only_two(workspace: Workspace, devices: dict[str, list[str]]) -> tuple[str, ...]:
    first = [next((e for e in sweeps if workspace.sweep(e).lit), None) for sweeps in devices.values()]
    return tuple(first) if len(first) == 2 and None not in first else ()


def _title(workspace: Workspace, entries: Sequence[str], devices: dict[str, list[str]], made: datetime) -> Markup:
    count = f"{len(devices)} {'device' if len(devices) == 1 else 'devices'}, {len(entries)} {'sweep' if len(entries) == 1 else 'sweeps'}"
    when = f"{made:%d %B %Y, %H:%M} UTC{made:%z}".replace("UTC+0000", "UTC")
    return element(
        "header",
        element("h1", workspace.name or "Report"),
        paragraph(f"Current–voltage report on {count}. Made {when}, at step {workspace.revision} of the workspace.", class_="under"),
        _overview(workspace, devices),
    )


def _overview(workspace: Workspace, devices: dict[str, list[str]]) -> Markup:
    """One row a lit sweep: the four numbers that everyone asks for first."""
    rows, units = [], set()
    flags: dict[str, list[str]] = {}
    for entry, finding in tables.all_findings(workspace, [e for sweeps in devices.values() for e in sweeps]):
        if finding.severity != "note":
            flags.setdefault(entry, []).append(finding.name)
    for place, (device, sweeps) in enumerate(devices.items(), start=1):
        for entry in sweeps:
            sweep = workspace.sweep(entry)
            units.add(Units.of(sweep.per_area).current)
            cells = [_short(workspace, entry, metric) for metric in _FIRST_COLUMNS]
            name = element("a", workspace.devices[device].name, href=f"#device-{place}")
            rows.append([name, short_name(workspace, workspace.entry(entry)), *cells, ", ".join(dict.fromkeys(flags.get(entry, ())))])
    current = " or ".join(sorted(units, reverse=True))
    named = (("Jsc", current), ("Voc", "V"), ("FF", "%"), ("PCE", "%"))
    heads = [join([symbol(name), element("span", f" ({unit})", class_="unit")]) for name, unit in named]
    return table(["device", "sweep", *heads, "checks"], rows, "numbers overview")


def _short(workspace: Workspace, entry: str, metric: str) -> str:
    sweep = workspace.sweep(entry)
    quantity = getattr(measured(sweep), metric)
    if quantity.value is None:
        return "–"
    units = Units.of(sweep.per_area)
    factor, _ = tables.metric_unit(metric, units)
    number = concise(quantity.value * factor, None if quantity.uncertainty is None else quantity.uncertainty * factor)
    return number if sweep.per_area or metric != "jsc" else f"{number} A"


def _account(workspace: Workspace, entries: Sequence[str], pair: tuple[str, ...], telling: Telling) -> Markup:
    """What others need to check and repeat: reporting table, methods, files, versions, cautions."""
    reporting = [[item.name, _statements(item)] for item in reporting_items(workspace, entries)]
    methods = methods_for(_topics(workspace, entries, pair, telling))
    files = [[name, element("code", sha256 or "–"), _who(tuple(sweeps))] for name, sha256, sweeps in files_behind(workspace, entries)]
    listing = table(["file", "SHA-256", "sweep"], files, "words files")
    return element(
        "section",
        element("h2", "Reporting table"),
        paragraph("What journals ask for. What no file says is marked, whether the user states it or nobody does.", class_="under"),
        table(["", ""], reporting, "words reporting"),
        element("h2", "Methods"),
        table(["", ""], [[m.name, join([m.how, " ", element("cite", "; ".join(m.sources))])] for m in methods], "words methods"),
        paragraph("Sources are cited from memory.", class_="under"),
        # A short list stays in one piece.
        element("div", element("h2", "Files"), listing, class_="block" if len(files) <= _WHOLE else None),
        element("h2", "Versions"),
        paragraph(", ".join(f"{name} {version}" for name, version in versions().items())),
        element("div", element("h2", "Cautions"), element("ul", *(element("li", caution) for caution in CAUTIONS)), class_="block"),
        class_="account",
    )


def _statements(item: Item) -> Markup:
    alone = len(item.values) == 1
    parts = [
        element("div", _marked(words, words in item.stated), "" if alone else f" ({_who(who)})")
        for words, who in item.values
    ]
    return join(parts) if parts else element("div", element("em", MISSING, class_="missing"))


def _marked(words: str, stated: bool) -> Markup | str:
    """A statement with a mark where it is not a file's or a person's for this sweep."""
    if words == MISSING:
        return element("em", words, class_="missing")
    if stated:
        return join([words, " ", element("em", "stated by the user", class_="stated")])
    plain = words.removesuffix("(assumed)")
    return join([plain, element("em", "assumed", class_="assumed")]) if plain != words else words


def _who(sweeps: tuple[str, ...]) -> str:
    return ", ".join(sweeps) if len(sweeps) <= _NAMED else f"{len(sweeps)} sweeps"


def _topics(workspace: Workspace, entries: Sequence[str], pair: tuple[str, ...], telling: Telling) -> set[str]:
    topics = {"pair"} if pair else set()
    if any(workspace.sweep(entry).lit for entry in entries):
        topics |= {"losses", telling.emission, "shares"}
    for fit in (fit for entry in entries for fit in fits_of(workspace, entry)):
        topics |= {"model", fit.kind}
        topics |= {"refined", "linear" if fit.linear else "profile"} if fit.refinement is not None else set()
        topics |= {"robust"} if fit.refinement is not None and fit.refinement.settings.loss == "robust" else set()
    if any(finding.name == "hysteresis" for _, finding in tables.all_findings(workspace, entries)):
        topics.add("hysteresis")
    return topics


@lru_cache(maxsize=1)
def _style_sheet() -> str:
    return (Path(__file__).parent / "report.css").read_text(encoding="utf-8")


def _digest(style: str) -> str:
    return base64.b64encode(hashlib.sha256(style.encode()).digest()).decode()


def _without_ends(page: str) -> str:
    """HTML has elements that do not end."""
    return page.replace("</meta>", "").replace("</br>", "")
