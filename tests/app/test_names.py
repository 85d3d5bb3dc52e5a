"""Names and header text come from other people's files: on every screen and in every file they stay text."""

import csv
import html
import io
import json
import re
from dataclasses import replace
from html.parser import HTMLParser

import openpyxl
import pytest

from app import exports, scene, tables
from app.files import safe_name
from app.losses_scene import losses_screen
from app.pair_scene import pair_screen
from app.telling import Telling
from core import steps
from core.reading import read_sweeps
from core.store import History
from core.workspace import Workspace
from tests.app.benches import CELL, LIT

WICKED = {
    "markup": '<a href="https://evil.example">click</a><b>bold</b><br>&lt;<img src=x onerror="window.ran=1"></script><script>1</script>',
    "templates and quotes": "%{x} %{customdata[0]} {{7*7}} ${1} \"'`’ -->]]>",
    "a formula": '=HYPERLINK("https://evil.example","x")',
    "a command": "@SUM(1+1)*cmd|' /C calc'!A0",
    "a formula behind blanks": "  -2+3",
    "characters that do not show": "a\x00b\x07c\x1b[31md\r\ne\tf.\u202exslx\u202c\u2066\u200f",
    "the name of a mechanism": "series resistance",
    "the name of a row": "foot",
    "very long": "long <b>" + "n" * 10_000,
}
HEADER = "Sample: {0}\nOperator: {0}\nNote {0}: {0}\nVoltage (V),Current density (mA/cm2)\n"


def file_with(name):
    """A file that says this name wherever a file can say one."""
    words = "".join(character if ord(character) > 31 else " " for character in name)
    rows = "\n".join(f"{v:.4f},{1e3 * j:.5f}" for v, j in zip(LIT.voltage, LIT.current, strict=True))
    return (HEADER.format(words) + rows).encode("utf-8", "replace")


def workspace_named(name):
    """A workspace with two sweeps, and this name wherever there can be one."""
    workspace = Workspace("w", name)
    for number in range(2):
        (read,) = read_sweeps(file_with(name), f"{name} {number}.csv")
        sweeps = [replace(read, name=name, device=f"{name} {number}")]
        step = steps.add_sweeps(workspace, sweeps, source=f"{number}" * 64, source_name=f"{name} {number}.csv")
        workspace = steps.apply(workspace, step)
        entry = next(iter(step["put"]["entries"]))
        workspace = steps.apply(workspace, steps.rename_entry(workspace, entry, f"{name}" if number else "other"))
        workspace = steps.apply(workspace, steps.set_model(workspace, entry, CELL))
        device = workspace.entries[entry].device
        workspace = steps.apply(workspace, steps.rename_device(workspace, device, name if number else f"2 {name}"))
        workspace = steps.apply(workspace, steps.set_group(workspace, [device], name))
    return workspace


@pytest.fixture(params=WICKED, scope="module")
def named(request):
    name = WICKED[request.param]
    return name, workspace_named(name)


def strings(value):
    if isinstance(value, str):
        yield value
    elif isinstance(value, dict):
        for key, below in value.items():
            yield from strings(key)
            if key != "bdata":  # packed numbers
                yield from strings(below)
    elif isinstance(value, list | tuple):
        for below in value:
            yield from strings(below)


def screens(workspace):
    order = [entry.id for entry in workspace.in_tray_order()]
    for active in order:
        for strip in ("residuals", "log", "ideality"):
            view = {"active": active, "overlay": order, "strip": strip}
            yield scene.figure(workspace, view), scene.scene(workspace, view, History(None, None))
        for ladder in ("shares", "stepwise"):
            yield losses_screen(workspace, {"active": active, "ladder": ladder})
    for normalised in (False, True):
        curves, bars, data = pair_screen(workspace, {"pair": {"a": order[1], "b": order[0]}, "normalised": normalised})
        yield curves, data
        yield bars, {}


def test_no_figure_holds_a_name_that_plotly_would_interpret(named):
    name, workspace = named
    ours = re.compile(r"</?(b|br|sub|sup|i|extra|span)\b[^>]*>")
    for figure, data in screens(workspace):
        values = json.loads(figure.to_json())
        json.dumps(data, allow_nan=False, default=str)
        for text in strings(values):
            if "<" in text:
                left = ours.sub("", text)
                assert "<" not in left, text[:200]
                assert "bold" not in text and "click" not in text and "nnnn" not in text
            assert "\u202e" not in text and "\x00" not in text and "\x1b" not in text
            assert len(text) < 1000
        for trace in values["data"]:
            # What stands in braces there is computed; a name must not bring braces of its own.
            assert set(re.findall(r"%\{([^}:]*)", trace.get("hovertemplate", ""))) <= {"x", "y", "customdata[0]", "text"}


def test_no_two_rows_of_the_ladder_fall_together(named):
    _, workspace = named
    figure, _ = losses_screen(workspace, {"active": workspace.in_tray_order()[-1].id})
    ends, rungs = (next(trace for trace in figure.data if trace.uid == uid) for uid in ("ends", "rungs"))
    rows = [*ends.y, *rungs.y]
    assert len(set(rows)) == len(rows) == len(figure.layout.yaxis.ticktext)
    assert all(len(html.unescape(text)) <= 40 for text in figure.layout.yaxis.ticktext)


def test_tables_hold_names_as_text(named):
    _, workspace = named
    order = [entry.id for entry in workspace.in_tray_order()]
    for table in ("", "metrics", "parameters", "conditions", "checks", "losses", "intervals", "estimates"):
        text = exports.table_file(workspace, order, "csv", table).data.decode("utf-8-sig")
        for row in csv.reader(io.StringIO(text)):
            for cell in row:
                numeric = re.fullmatch(r"[-+]?[\d.]+(e[-+]?\d+)?", cell)
                assert numeric or not cell.lstrip().startswith(("=", "+", "-", "@")), cell[:80]
    book = openpyxl.load_workbook(io.BytesIO(exports.table_file(workspace, order, "xlsx").data))
    cells = [cell for sheet in book for row in sheet.iter_rows() for cell in row]
    assert len(cells) > 20
    assert not [cell for cell in cells if cell.data_type == "f" or cell.hyperlink]
    json.loads(exports.parameters_file(workspace, order).data)
    exports.points_file(workspace, order[0])
    assert len(tables.tables(workspace, order)) > 1


class Tags(HTMLParser):
    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.tags, self.attributes = [], []
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes += attrs


def report_of(workspace):
    order = [entry.id for entry in workspace.in_tray_order()]
    return Tags(exports.report_file(workspace, order, Telling(pair=(order[1], order[0]))).data.decode())


@pytest.fixture(scope="module")
def harmless():
    """The same report with names of letters alone."""
    return report_of(workspace_named("plain"))


def test_the_report_holds_names_as_text(named, harmless):
    page = report_of(named[1])
    assert not {"img", "script", "iframe"} & set(page.tags)
    assert page.tags.count("a") == harmless.tags.count("a") and page.tags.count("b") == harmless.tags.count("b")
    assert not [name for name, _ in page.attributes if name.startswith("on")]
    assert not [value for name, value in page.attributes if name in ("href", "src") and "evil" in (value or "")]


@pytest.mark.parametrize("name", WICKED.values(), ids=WICKED)
def test_files_to_save_have_plain_names(name):
    safe = safe_name(f"{name}.csv")
    assert len(safe) <= 130 and not re.search(r'[\x00-\x1f<>:"/\\|?*]', safe) and not safe.startswith(".")
