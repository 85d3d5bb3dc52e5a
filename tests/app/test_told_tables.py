"""Tables of losses, pair, shares, intervals and estimates: core's numbers with units in the headers."""

import io
import math
from dataclasses import replace

import openpyxl
import pytest

from app import exports, told_tables
from app.telling import Telling, telling_of
from core import steps
from core.comparing import compare, losses
from core.detailed_balance import limit, limiting_diode
from core.diode import PARAMETERS
from core.errors import StepRefused
from core.estimates import estimates
from core.first_guess import first_guess
from core.profile import profile_intervals
from core.refine import refine
from core.shares import ladder
from tests.app.benches import AMPERES, CELL, LIT, OTHER, S_SHAPED, bench

BOTH = Telling("both", PARAMETERS[::-1])


@pytest.fixture(scope="module")
def two():
    workspace, entries = bench(LIT, OTHER)
    for entry in entries:
        workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, refine(workspace.sweep(entry), CELL)))
    return steps.apply(workspace, steps.set_band_gap(workspace, entries[0], 1.6)), entries


def test_losses_are_those_of_core_in_the_convention_that_was_asked_for(two):
    workspace, entries = two
    table = told_tables.losses_table(workspace, entries[:1], BOTH)
    found = losses(workspace.sweep(entries[0]), workspace.refined(entries[0]), 1.6, "both")
    assert table["share (mW cm⁻²)"].tolist() == pytest.approx(
        [1e3 * s for s in (*found.by_mechanism.values(), found.residual, found.difference)]
    )
    rungs = ladder(limiting_diode(1.6, emission="both"), workspace.refined(entries[0]).model, PARAMETERS[::-1])
    assert table["one after another (mW cm⁻²)"].tolist()[:5] == pytest.approx([1e3 * rungs[name] for name in PARAMETERS])
    assert table["place in the order"].tolist()[:5] == [5, 4, 3, 2, 1]
    low = [1e3 * found.intervals[name][0] for name in PARAMETERS]
    assert table["share interval from (mW cm⁻²)"].tolist()[:5] == pytest.approx(low)
    first = table.iloc[0]
    assert first["limit (mW cm⁻²)"] == pytest.approx(1e3 * limit(1.6, emission="both").pmp)
    assert (first["emission"], first["fit"], first["band gap given"]) == ("both faces", "refined", "given")


def test_losses_that_are_not_broken_down_keep_their_whole_and_the_reason():
    workspace, entries = bench(S_SHAPED, AMPERES)
    whole, refused = told_tables.losses_table(workspace, entries, Telling()).to_dict("records")
    assert whole["lost to"] == "together" and whole["share (mW cm⁻²)"] < 0 and "S-shaped" in whole["remarks"]
    assert math.isnan(refused["limit (mW cm⁻²)"]) and "area" in refused["remarks"]


def test_pair_and_shares_are_those_of_the_screen(two):
    workspace, (a, b) = two
    metrics, shares = told_tables.pair_table(workspace, Telling(pair=(a, b))), told_tables.shares_table(workspace, Telling(pair=(a, b)))
    assert list(metrics["metric"]) == ["Jsc (mA cm⁻²)", "Voc (V)", "FF (%)", "Pmp (mW cm⁻²)", "PCE (%)"]
    assert (metrics["B − A"] - (metrics["of B"] - metrics["of A"])).abs().max() < 1e-12
    assert set(metrics["verdict"]) <= {"stands out", "may be chance", "cannot be told"} and metrics["sentence"].str.endswith(".").all()
    found = compare(workspace.sweep(a), workspace.refined(a), workspace.sweep(b), workspace.refined(b))
    assert shares["share (mW cm⁻²)"].tolist()[:5] == pytest.approx([1e3 * s for s in found.by_mechanism.values()])
    assert shares["share (mW cm⁻²)"].iloc[-1] == pytest.approx(shares["share (mW cm⁻²)"].iloc[:-1].sum(), abs=1e-9)


def test_a_pair_that_cannot_be_shared_out_says_why():
    workspace, (a, b) = bench(LIT, AMPERES)
    assert "area" in told_tables.shares_table(workspace, Telling(pair=(a, b)))["remarks"].iloc[0]
    assert told_tables.pair_table(workspace, Telling(pair=(a, b)))["verdict"].iloc[0] == "cannot be told"


def test_intervals_are_by_profile_and_of_the_fit_that_losses_use():
    workspace, entries = bench(LIT, models=(first_guess(LIT),))
    row = told_tables.intervals_table(workspace, entries).iloc[0]
    fit = refine(LIT)
    found = profile_intervals(LIT, fit)["ideality"]
    assert (row["fit"], row["intervals by"], row["n state"]) == ("fitted for this table", "profile likelihood", "free")
    assert (row["n"], row["n interval from"], row["n interval to"]) == pytest.approx((fit.model.ideality, found.low, found.high), rel=1e-6)


def test_an_interval_that_is_open_has_an_empty_end():
    flat = replace(LIT, current=replace(CELL, shunt_resistance=math.inf).current(LIT.voltage) + (LIT.current - CELL.current(LIT.voltage)))
    workspace, entries = bench(flat)
    row = told_tables.intervals_table(workspace, entries).iloc[0]
    assert row["Rsh state"] == "bounded only" and row["Rsh interval from (Ω cm²)"] > 0 and math.isnan(row["Rsh interval to (Ω cm²)"])


def test_estimates_stand_in_the_column_of_their_unit(two):
    workspace, entries = two
    table = told_tables.estimates_table(workspace, entries[:1])
    expected = estimates(workspace.sweep(entries[0]), model=workspace.refined(entries[0]).model)
    assert list(table["estimate"]) == [estimate.name for estimate in expected]
    slope = table[table["estimate"] == "slope at Jsc"].iloc[0]
    assert slope["resistance (Ω cm²)"] == expected[0].value and math.isnan(slope["n"])


def test_an_address_chooses_how_losses_are_told():
    order = ",".join(PARAMETERS[::-1])
    assert telling_of({"emission": "both", "order": order, "pair": "a,b"}) == Telling("both", PARAMETERS[::-1], ("a", "b"))
    assert telling_of({}) == telling_of({"emission": "sideways", "order": "up,down"}) == Telling()


def test_a_whole_tray_keeps_what_takes_no_fits_and_says_what_was_left_out():
    workspace, entries = bench(*(replace(LIT, name=f"s{n}") for n in range(exports.MOST_FITTED + 1)))
    with pytest.raises(StepRefused, match="Choose fewer"):
        exports.table_file(workspace, entries, "csv", "losses")
    assert exports.table_file(workspace, entries, "csv").data
    book = openpyxl.load_workbook(io.BytesIO(exports.table_file(workspace, entries, "xlsx").data))
    assert book.sheetnames == ["metrics", "parameters", "conditions", "checks", "left out"]
