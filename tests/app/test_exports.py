"""Exports through the real routes: right numbers, safe cells, names that tell what is inside."""

import contextlib
import csv
import io
import json
import math
from dataclasses import replace

import flask
import numpy as np
import openpyxl
import pandas as pd
import pytest

from app import exports, files
from app.telling import Telling
from core import steps
from core.refine import refine
from core.store import Store
from tests.app.benches import CELL, LIT, OTHER, REVERSE, bench

# What spreadsheets may take for a formula; the first three are common in attacks, the others in the formats' own rules.
FORMULAS = ("=1+1", '=HYPERLINK("http://host.invalid","x")', "@SUM(A1)", "+1-2", "-2+3", "\t=1+1", "\r=1+1", "  =1+1", "＝1+1")


@pytest.fixture
def store(tmp_path):
    with contextlib.closing(Store(tmp_path)) as store:
        yield store


@pytest.fixture
def client(store):
    server = flask.Flask(__name__)
    files.register(server, store)
    return server.test_client()


def fill(store, *sweeps):
    """Sweeps in the first workspace; its id and those of the entries."""
    workspace = store.current(store.first())
    step = steps.add_sweeps(workspace, sweeps, source="0" * 64, source_name="a.csv")
    workspace = store.commit(workspace.id, step, workspace.revision)
    by_name = {entry.name: entry.id for entry in workspace.entries.values()}
    return workspace.id, [by_name[sweep.name] for sweep in sweeps]


def refined(store, *sweeps):
    workspace_id, entries = fill(store, *sweeps)
    workspace = store.current(workspace_id)
    found = {entry: refine(workspace.sweep(entry), CELL) for entry in entries}
    store.commit(workspace_id, steps.record_refinements(workspace, found), workspace.revision)
    return workspace_id, entries


def frame_of(answer):
    return pd.read_csv(io.BytesIO(answer.data), keep_default_na=False, na_values=[""])


def test_the_table_holds_the_chosen_sweeps_in_the_order_asked_for(client, store):
    workspace, (forward, reverse) = fill(store, LIT, REVERSE)
    answer = client.get(f"/files/table/{workspace}.csv?entries={reverse},{forward},{reverse}")
    assert answer.mimetype == "text/csv" and answer.data.startswith(b"\xef\xbb\xbf")
    assert list(frame_of(answer)["sweep"]) == ["reverse", "forward"]
    assert answer.headers["Content-Disposition"] == 'attachment; filename="A table.csv"'


def test_without_a_choice_it_holds_the_whole_tray(client, store):
    workspace, _ = fill(store, LIT, REVERSE)
    assert len(frame_of(client.get(f"/files/table/{workspace}.csv"))) == 2


TABLES = ["metrics", "parameters", "conditions", "checks", "losses", "intervals", "estimates", "pair", "shares"]


@pytest.mark.parametrize("table", TABLES)
def test_each_table_is_to_be_had_alone_and_as_a_sheet(client, store, table):
    workspace, entries = refined(store, LIT, OTHER)
    pair = f"emission=both&pair={','.join(entries)}"
    alone = frame_of(client.get(f"/files/table/{workspace}.csv?table={table}&{pair}"))
    book = client.get(f"/files/table/{workspace}.xlsx?{pair}").data
    sheet = pd.read_excel(io.BytesIO(book), sheet_name=table, engine="calamine")
    assert list(sheet.columns) == list(alone.columns) and len(sheet) == len(alone)
    numbers = alone.select_dtypes("number").columns
    np.testing.assert_allclose(sheet[numbers].astype(float), alone[numbers].astype(float), rtol=1e-14)


@pytest.mark.parametrize("words", FORMULAS)
def test_no_text_of_a_file_becomes_a_formula(words):
    workspace, (entry,) = bench(replace(LIT, notes=(words,)))
    (device,) = workspace.devices.values()
    workspace = replace(
        workspace,
        devices={device.id: replace(device, name=words, group=words)},
        entries={entry: replace(workspace.entries[entry], name=words, source_name=words)},
        derived={},
    )
    for table in ("", "checks", "losses", "intervals", "estimates"):
        text = exports.table_file(workspace, [entry], "csv", table).data.decode("utf-8-sig")
        cells = [cell for row in csv.reader(io.StringIO(text, newline="")) for cell in row]
        assert f"'{words}" in cells and words not in cells
    book = openpyxl.load_workbook(io.BytesIO(exports.table_file(workspace, [entry], "xlsx").data))
    kinds = {cell.data_type for sheet in book for row in sheet.iter_rows() for cell in row if cell.value is not None}
    assert kinds <= {"s", "n"}  # "f" would be a formula


def test_names_of_a_pair_are_no_formulas_either():
    workspace, entries = bench(LIT, OTHER)
    workspace = replace(workspace, devices={d.id: replace(d, name="=1+1") for d in workspace.devices.values()}, derived={})
    telling = Telling(pair=tuple(entries))
    for table in ("pair", "shares"):
        text = exports.table_file(workspace, entries, "csv", table, telling).data.decode("utf-8-sig")
        assert "'=1+1 forward" in text and "\n=" not in text and ",=" not in text
    book = openpyxl.load_workbook(io.BytesIO(exports.table_file(workspace, entries, "xlsx", "", telling).data))
    assert {cell.data_type for sheet in book for row in sheet.iter_rows() for cell in row if cell.value is not None} <= {"s", "n"}


def test_a_negative_number_stays_a_number():
    data = exports.to_csv(pd.DataFrame({"x": [-1.5, math.inf, math.nan], "t": ["plain", "a=b", "−1"]}))
    assert data.decode("utf-8-sig") == "x,t\r\n-1.5,plain\r\ninf,a=b\r\n,−1\r\n"


def test_a_workbook_takes_what_a_table_can_hold():
    frame = pd.DataFrame({"x": [1.0, math.inf, math.nan], "t": ["y" * 40_000, "http://host.invalid/", ""]})
    sheet = openpyxl.load_workbook(io.BytesIO(exports.to_xlsx({"one": frame})))["one"]
    assert [cell.value for cell in sheet["A"]] == ["x", 1, "inf", None]
    assert len(sheet["B2"].value) == 32_767
    assert sheet["B3"].value == "http://host.invalid/" and sheet["B3"].hyperlink is None


def test_parameters_come_back_from_json_as_they_were(client, store):
    workspace, (entry,) = refined(store, LIT)
    answer = client.get(f"/files/parameters/{workspace}.json")
    given = json.loads(answer.data)
    (sweep,) = given["sweeps"]
    held = store.current(workspace).refined(entry)
    assert type(held).from_dict(sweep["refinement"]).model == held.model
    assert sweep["sha256"] == "0" * 64 and sweep["file"] == "a.csv" and "temperature" in sweep["assumed"]
    assert given["made by"]["sweepbench"] and given["units"]["current"].startswith("A cm-2")
    assert "parameters.json" in answer.headers["Content-Disposition"]


def test_points_of_one_sweep(client, store):
    workspace, (entry,) = refined(store, LIT)
    answer = client.get(f"/files/points/{workspace}/{entry}.csv")
    assert frame_of(answer)["V (V)"].tolist() == LIT.voltage.tolist()
    assert "forward points.csv" in answer.headers["Content-Disposition"]


def test_the_report_is_a_file_of_html(client, store):
    workspace, (forward, reverse) = fill(store, LIT, REVERSE)
    answer = client.get(f"/files/report/{workspace}?entries={forward}&pair={forward},{reverse}")
    assert answer.mimetype == "text/html" and answer.text.startswith("<!DOCTYPE html>")
    assert answer.headers["Content-Disposition"] == 'attachment; filename="A report.html"'


def test_the_address_of_a_report_says_how_losses_are_told(client, store):
    workspace, (forward,) = refined(store, LIT)
    order = "shunt_resistance,photocurrent,saturation_current,ideality,series_resistance"
    page = client.get(f"/files/report/{workspace}?entries={forward}&emission=both&order={order}").text
    assert "both faces of the cell" in page and "Rsh, Jph, J0, n, Rs" in page
    assert "the front of the cell alone" in client.get(f"/files/report/{workspace}?entries={forward}").text


@pytest.mark.parametrize(
    "path",
    [
        "table/WORKSPACE.csv?entries=nowhere",
        "table/WORKSPACE.csv?table=secrets",
        "table/WORKSPACE.pdf",
        "table/WORKSPACE.csv?table=pair",
        "table/WORKSPACE.csv?table=pair&pair=ENTRY,nowhere",
        "table/WORKSPACE.csv?table=shares&pair=ENTRY,ENTRY",
        "table/nowhere.csv",
        "parameters/WORKSPACE.json?entries=nowhere",
        "points/WORKSPACE/nowhere.csv",
        "report/WORKSPACE?entries=nowhere",
        "report/WORKSPACE?pair=ENTRY",
        "report/WORKSPACE?pair=ENTRY,nowhere",
    ],
)
def test_what_is_not_there_is_told_in_a_sentence(client, store, path):
    workspace, (entry,) = fill(store, LIT)
    answer = client.get("/files/" + path.replace("WORKSPACE", workspace).replace("ENTRY", entry))
    assert answer.status_code == 400 and answer.json["sentence"].endswith(".")


@pytest.mark.parametrize("path", ["table/{}.csv", "table/{}.xlsx", "parameters/{}.json", "report/{}"])
def test_an_empty_workspace_has_nothing_to_hand_out_and_says_so(client, store, path):
    answer = client.get("/files/" + path.format(store.first()))
    assert answer.status_code == 400 and "no sweep" in answer.json["sentence"]
