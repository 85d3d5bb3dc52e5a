"""What leaves as a file: tables as CSV and XLSX, parameters as JSON, points as CSV, the report as HTML.

Text in these tables comes from other people's files. A spreadsheet takes a cell that begins like a formula for one,
so such text is marked as text: by an apostrophe in CSV, by the type of the cell in XLSX.
"""

from __future__ import annotations

import io
import json
import math
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any

import pandas as pd
import xlsxwriter

from core.errors import StepRefused
from core.sentences import listed
from core.workspace import Workspace

from . import tables, told_tables
from .report import report_page, versions
from .telling import Telling

CSV, JSON, HTML = "text/csv", "application/json", "text/html"
XLSX = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"

# First characters that make a spreadsheet compute a cell; the wide forms too, which some take for the narrow ones.
_FORMULA = re.compile(r"\s*[=+\-@＝＋－＠]|[\t\r\n]")
_LONGEST_CELL = 32_767  # characters, a limit of the XLSX format
_WIDEST_COLUMN = 60  # characters
MOST_FITTED = 24  # sweeps; each may take a fit and the profile of every parameter
_TOO_MANY = f"Losses, intervals and estimates are worked out for up to {MOST_FITTED} sweeps at a time. Choose fewer sweeps for them."


@dataclass(frozen=True)
class Export:
    """A file to hand out."""

    name: str
    mimetype: str
    data: bytes


def chosen(workspace: Workspace, given: str) -> list[str]:
    """The sweeps that an address names (``a,b,c``), or all of the tray where it names none.

    Raises
    ------
    StepRefused
        If a sweep is not in the workspace, or there is none at all.
    """
    named = list(dict.fromkeys(name for name in given.split(",") if name))
    for name in named:
        workspace.entry(name)
    entries = named or [entry.id for entry in workspace.in_tray_order()]
    if not entries:
        raise StepRefused("There is no sweep in this workspace yet. Drop a file first.")
    return entries


def table_file(workspace: Workspace, entries: Sequence[str], kind: str, table: str = "", telling: Telling = Telling()) -> Export:
    """The tables of these sweeps.

    Parameters
    ----------
    kind : "csv" or "xlsx"
        A workbook has a sheet for each table; CSV holds one.
    table : str
        Which one for CSV; "" for the one that has everything on one row a sweep.
    telling : Telling
        How losses are told, and the pair.

    Raises
    ------
    StepRefused
        If there is no such table or kind, no pair for one on a pair, or more sweeps than are fitted at a time.
    """
    _refuse_odd(telling.pair)
    for entry in telling.pair:
        workspace.entry(entry)
    makers: dict[str, Callable[[], pd.DataFrame]] = {
        "": lambda: tables.summary_table(workspace, entries),
        "metrics": lambda: tables.metrics_table(workspace, entries),
        "parameters": lambda: tables.parameters_table(workspace, entries),
        "conditions": lambda: tables.conditions_table(workspace, entries),
        "checks": lambda: tables.checks_table(workspace, entries),
    }
    fitted: dict[str, Callable[[], pd.DataFrame]] = {
        "losses": lambda: told_tables.losses_table(workspace, entries, telling),
        "intervals": lambda: told_tables.intervals_table(workspace, entries),
        "estimates": lambda: told_tables.estimates_table(workspace, entries),
    }
    of_pair: dict[str, Callable[[], pd.DataFrame]] = {
        "pair": lambda: told_tables.pair_table(workspace, telling),
        "shares": lambda: told_tables.shares_table(workspace, telling),
    }
    title, many = _title(workspace, entries), len(entries) > MOST_FITTED
    if kind == "xlsx":
        more = {**({} if many else fitted), **(of_pair if telling.pair else {})}
        sheets = tables.tables(workspace, entries) | {name: make() for name, make in more.items()}
        if many:
            sheets["left out"] = pd.DataFrame({"left out": [_TOO_MANY]})
        return Export(f"{title} tables.xlsx", XLSX, to_xlsx(sheets))
    if kind != "csv" or table not in {*makers, *fitted, *of_pair}:
        raise StepRefused(f"There is no such table; {listed([*list(makers)[1:], *fitted, *of_pair])} are offered, as csv or xlsx.")
    if table in of_pair and not telling.pair:
        raise StepRefused("That table is of a pair. Choose two sweeps.")
    if table in fitted and many:
        raise StepRefused(_TOO_MANY)
    return Export(f"{title} {table or 'table'}.csv", CSV, to_csv((makers | fitted | of_pair)[table]()))


def points_file(workspace: Workspace, entry: str) -> Export:
    """The points of one sweep, with the model's current where there is a model."""
    return Export(f"{workspace.entry(entry).name} points.csv", CSV, to_csv(tables.points_table(workspace, entry)))


def parameters_file(workspace: Workspace, entries: Sequence[str]) -> Export:
    """Models and refinements of these sweeps in core's units, as JSON that another program can read."""
    content = {
        "made by": versions(),
        "made": datetime.now().astimezone().isoformat(timespec="seconds"),
        "workspace": workspace.name,
        "revision": workspace.revision,
        "units": {
            "voltage": "V", "current": "A cm-2 where per_area is true, else A", "resistance": "ohm cm2, else ohm",
            "temperature": "K", "irradiance": "W cm-2", "area": "cm2", "band_gap": "eV",
        },
        "notes": [
            "A shunt_resistance of null means that there is no shunt; null at the end of an interval means that it is open.",
            "standard_errors, covariance and intervals (linear ones) are of fit noise only; covariance is of the free parameters in "
            "their order, scaled as photocurrent, ln saturation_current, ideality, series_resistance, 1/shunt_resistance.",
        ],
        "sweeps": [_parameters(workspace, entry) for entry in entries],
    }  # fmt: skip
    text = json.dumps(content, ensure_ascii=False, indent=1, allow_nan=False)
    return Export(f"{_title(workspace, entries)} parameters.json", JSON, text.encode())


def report_file(workspace: Workspace, entries: Sequence[str], telling: Telling) -> Export:
    """The report as one HTML file.

    Raises
    ------
    StepRefused
        If the pair names anything but no sweep or two sweeps of the workspace.
    """
    _refuse_odd(telling.pair)
    page = report_page(workspace, entries, telling=telling, made=datetime.now().astimezone())
    return Export(f"{_title(workspace, entries)} report.html", HTML, page.encode())


def _refuse_odd(pair: Sequence[str]) -> None:
    if len(pair) not in (0, 2) or len(set(pair)) < len(pair):
        raise StepRefused("A pair is two different sweeps. Choose two, or none.")


def to_csv(frame: pd.DataFrame) -> bytes:
    """CSV with a byte-order mark, without which spreadsheets misread the units; infinity is ``inf``."""
    safe = frame.map(lambda value: _as_text(value) if isinstance(value, str) else value)
    return safe.to_csv(index=False, lineterminator="\r\n").encode("utf-8-sig")


def _as_text(text: str) -> str:
    return f"'{text}" if _FORMULA.match(text) else text


def to_xlsx(frames: Mapping[str, pd.DataFrame]) -> bytes:
    """A workbook with one sheet a table; text is written as text, whatever it looks like."""
    stream = io.BytesIO()
    with xlsxwriter.Workbook(stream, {"in_memory": True}) as book:
        head = book.add_format({"bold": True, "text_wrap": True, "valign": "top", "bottom": 1})
        for name, frame in frames.items():
            sheet = book.add_worksheet(name)
            sheet.freeze_panes(1, 3)
            for column, title in enumerate(frame.columns):
                sheet.write_string(0, column, title, head)
                values = frame[title].tolist()
                for row, value in enumerate(values, start=1):
                    _write(sheet, row, column, value)
                sheet.set_column(column, column, _width(title, values))
    return stream.getvalue()


def _write(sheet: Any, row: int, column: int, value: Any) -> None:
    if isinstance(value, str):
        sheet.write_string(row, column, value[:_LONGEST_CELL])
    elif value is None or math.isnan(value):
        return
    elif math.isinf(value):
        sheet.write_string(row, column, "inf" if value > 0 else "-inf")
    else:
        sheet.write_number(row, column, value)


def _width(title: str, values: list[Any]) -> int:
    longest = max((len(value) for value in values if isinstance(value, str)), default=0)
    return max(12, min(longest + 1, _WIDEST_COLUMN), math.ceil(len(title) / 2) + 2)


def _parameters(workspace: Workspace, entry_id: str) -> dict[str, Any]:
    entry, sweep, fit = workspace.entry(entry_id), workspace.sweep(entry_id), workspace.fit(entry_id)
    refined, conditions = workspace.refined(entry_id), sweep.conditions
    device = workspace.devices[entry.device]
    return {
        "device": device.name,
        "group": device.group,
        "sweep": entry.name,
        "file": entry.source_name,
        "sha256": entry.source,
        "per_area": sweep.per_area,
        "lit": sweep.lit,
        "direction": sweep.direction,
        "area": conditions.area,
        "irradiance": conditions.irradiance,
        "temperature": conditions.temperature,
        "band_gap": device.band_gap,
        "assumed": sorted(workspace.assumed(entry_id)),
        "model": None if fit.model is None else fit.model.to_dict(),
        "refinement": None if refined is None else refined.to_dict(),
    }


def _title(workspace: Workspace, entries: Sequence[str]) -> str:
    """The device's name where all are of one device, else the workspace's."""
    devices = {workspace.entry(entry).device for entry in entries}
    return workspace.devices[devices.pop()].name if len(devices) == 1 else workspace.name or "workspace"
