"""Tables in numbers: units in the headers, nothing converted, nothing invented."""

import math
from dataclasses import replace

import pytest

from app import tables
from core import steps
from core.first_guess import first_guess
from core.metrics import measure
from core.reading import read_sweeps
from core.refine import FitSettings, refine
from core.two_diode_guess import guess_two_diodes
from tests.app.benches import (
    AMPERES,
    CELL,
    IN_THE_DARK,
    LIT,
    REVERSE,
    WITH_ERRORS,
    bench,
)


def refined_bench(*sweeps, hold=frozenset()):
    workspace, entries = bench(*sweeps)
    for entry in entries:
        sweep = workspace.sweep(entry)
        start = CELL if sweep.per_area else CELL.scaled(0.1)
        found = refine(sweep, start, FitSettings(hold=hold))
        workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, found))
    return workspace, entries


def test_metrics_stand_in_screen_units_with_their_uncertainties():
    workspace, entries = bench(LIT)
    row = tables.metrics_table(workspace, entries).iloc[0]
    measured = measure(LIT)
    assert row["Jsc (mA cm⁻²)"] == 1e3 * measured.jsc.value
    assert row["Jsc standard uncertainty (mA cm⁻²)"] == 1e3 * measured.jsc.uncertainty
    assert row["Voc (V)"] == measured.voc.value
    assert row["PCE (%)"] == 100 * measured.efficiency.value
    assert row["Pmp (mW cm⁻²)"] == 1e3 * measured.pmp.value
    assert row["−dV/dJ at J = 0 (Ω cm²)"] == measured.slope_resistance_voc.value


def test_a_device_without_an_area_has_columns_of_its_own_and_no_efficiency():
    workspace, entries = bench(LIT, AMPERES)
    density, current = tables.metrics_table(workspace, entries).to_dict("records")
    assert math.isnan(density["Isc (A)"]) and math.isnan(current["Jsc (mA cm⁻²)"])
    assert current["Isc (A)"] == measure(AMPERES).jsc.value
    assert math.isnan(current["PCE (%)"]) and "PCE: no area" in current["remarks on metrics"]


def test_what_is_not_reached_is_empty_and_says_why():
    short = replace(LIT, voltage=LIT.voltage[10:40], current=LIT.current[10:40])
    workspace, entries = bench(short)
    row = tables.metrics_table(workspace, entries).iloc[0]
    assert math.isnan(row["Jsc (mA cm⁻²)"]) and math.isnan(row["Voc (V)"])
    assert "Jsc: not reached" in row["remarks on metrics"] and "Voc: not reached" in row["remarks on metrics"]


def test_parameters_carry_errors_intervals_and_what_was_held():
    workspace, entries = refined_bench(LIT, hold=frozenset({"series_resistance"}))
    row = tables.parameters_table(workspace, entries).iloc[0]
    found = workspace.refined(entries[0])
    assert row["J0 (mA cm⁻²)"] == 1e3 * found.model.saturation_current
    assert row["J0 standard error (mA cm⁻²)"] == 1e3 * found.standard_errors["saturation_current"]
    assert (row["n linear interval from"], row["n linear interval to"]) == found.intervals["ideality"]
    assert row["Rs (Ω cm²)"] == CELL.series_resistance
    assert row["Rs state"] == "held" and math.isnan(row["Rs standard error (Ω cm²)"])
    assert row["n state"] == "free" and row["uncertainty of parameters"] == "fit noise only"
    assert row["points used"] == found.points and "held: series resistance" in row["fit settings"]


def test_a_model_set_by_hand_has_no_errors():
    workspace, entries = bench(LIT, replace(LIT, name="bare"), models=(CELL,))
    by_hand, bare = tables.parameters_table(workspace, entries).to_dict("records")
    assert by_hand["model"] == "one diode, laid by hand, not refined"
    assert by_hand["n"] == 1.6 and math.isnan(by_hand["n standard error"]) and by_hand["fit settings"] == ""
    assert bare["model"] == "none" and math.isnan(bare["n"])


def test_the_first_guess_of_the_program_is_nobody_s_hand():
    workspace, (one, two) = bench(LIT, replace(LIT, name="again"), models=(first_guess(LIT), guess_two_diodes(LIT)))
    words = tables.parameters_table(workspace, [one, two])["model"]
    assert list(words) == ["one diode, first guess, not refined", "two diodes, first guess, not refined"]


def test_two_diodes_have_their_own_columns():
    workspace, (entry,) = bench(LIT)
    found = refine(LIT, settings=FitSettings(model="two diodes"))
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, found))
    row = tables.parameters_table(workspace, [entry]).iloc[0]
    assert row["model"] == "two diodes, refined" and row["J02 (mA cm⁻²)"] == 1e3 * found.model.saturation_current_2
    assert row["n1 state"] == "held" and "held: ideality 1, ideality 2" in row["fit settings"]


def test_a_model_moved_after_refining_is_no_longer_called_refined():
    workspace, (entry,) = refined_bench(LIT)
    workspace = steps.apply(workspace, steps.set_model(workspace, entry, replace(CELL, ideality=1.7)))
    row = tables.parameters_table(workspace, [entry]).iloc[0]
    assert row["model"].endswith("not refined") and math.isnan(row["Jph standard error (mA cm⁻²)"])


def test_conditions_say_which_of_them_are_assumed():
    workspace, (entry,) = bench(LIT)
    row = tables.conditions_table(workspace, [entry]).iloc[0]
    assert (row["temperature (°C)"], row["temperature given"], row["irradiance given"]) == (25.0, "assumed", "assumed")
    workspace = steps.apply(workspace, steps.confirm_conditions(workspace, entry, ["temperature"]))
    row = tables.conditions_table(workspace, [entry]).iloc[0]
    assert (row["temperature given"], row["irradiance given"]) == ("given", "assumed")
    assert row["irradiance (mW cm⁻²)"] == 100 and row["area (cm²)"] == 0.1


def test_hysteresis_is_told_once_and_only_where_both_directions_are_chosen():
    workspace, (forward, reverse) = bench(LIT, REVERSE)
    told = tables.checks_table(workspace, [forward, reverse])
    assert list(told[told["check"] == "hysteresis"]["sweep"]) == ["forward"]
    assert "hysteresis" not in set(tables.checks_table(workspace, [forward])["check"])


def test_a_current_above_the_limit_of_the_gap_is_found():
    workspace, (entry,) = bench(LIT)
    workspace = steps.apply(workspace, steps.set_band_gap(workspace, entry, 2.0))  # 22 mA cm⁻² need a smaller gap
    assert "photocurrent above the limit" in set(tables.checks_table(workspace, [entry])["check"])


def test_points_come_in_the_order_of_measurement_with_the_model_beside_them():
    workspace, (entry, dark) = bench(LIT, IN_THE_DARK, models=(CELL,))
    table = tables.points_table(workspace, entry)
    assert table["V (V)"].tolist() == LIT.voltage.tolist()
    assert table["J (mA cm⁻²)"].tolist() == pytest.approx((1e3 * LIT.current).tolist())
    assert table["J of the model (mA cm⁻²)"].tolist() == pytest.approx((1e3 * CELL.current(LIT.voltage)).tolist())
    assert list(tables.points_table(workspace, dark)) == ["V (V)", "J (mA cm⁻²)", "P (mW cm⁻²)"]


def test_the_summary_holds_every_column_of_the_other_tables():
    workspace, entries = refined_bench(LIT, AMPERES)
    summary = tables.summary_table(workspace, entries)
    parts = (tables.metrics_table, tables.parameters_table, tables.conditions_table)
    assert {column for part in parts for column in part(workspace, entries)} <= set(summary)
    assert len(summary) == 2 and summary.columns.is_unique


def test_weights_from_the_file_are_named_with_their_chi_square_and_the_points_carry_them():
    workspace, (entry,) = bench(WITH_ERRORS)
    found = refine(WITH_ERRORS, CELL, FitSettings(weights="from the file"))
    workspace = steps.apply(workspace, steps.record_refinement(workspace, entry, found))
    row = tables.parameters_table(workspace, [entry]).iloc[0]
    assert "; weights from the file; " in row["fit settings"]
    assert row["χ² per degree of freedom"] == found.chi_square
    points = tables.points_table(workspace, entry)
    assert points["J standard deviation (mA cm⁻²)"].tolist() == pytest.approx((1e3 * WITH_ERRORS.current_error).tolist())
    (again,) = read_sweeps(points[["V (V)", "J (mA cm⁻²)", "J standard deviation (mA cm⁻²)"]].to_csv(index=False).encode(), "again.csv")
    assert again.current_error.tolist() == pytest.approx(WITH_ERRORS.current_error.tolist())
