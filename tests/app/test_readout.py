"""The numbers beside the curve: dials, metrics, conditions and findings as text."""

import math
from dataclasses import replace

import numpy as np
import pytest

from app import readout
from app.mechanisms import BY_PARAMETER, MECHANISMS
from core import steps
from core.diode import PARAMETERS
from core.metrics import measure
from core.refine import FitSettings, Refinement
from core.sweep import Conditions
from core.two_diode import TwoDiode
from tests.app.benches import AMPERES, CELL, IN_THE_DARK, LIT, bench, sweep_of


def refinement(model=CELL, *, errors=None, intervals=None, free=PARAMETERS, findings=()):
    return Refinement(
        model=model,
        settings=FitSettings(hold=frozenset(PARAMETERS) - set(free)),
        standard_errors=dict.fromkeys(PARAMETERS) | (errors or {}),
        covariance=np.eye(len(free)),
        free=tuple(free),
        intervals=intervals or {},
        rmse=2e-6,
        points=56,
        findings=findings,
    )


def dials(workspace, entry):
    return readout.dial_rows(workspace, entry, workspace.sweep(entry))


def refined_dials(made):
    workspace, (entry,) = bench(LIT)
    return dials(steps.apply(workspace, steps.record_refinement(workspace, entry, made)), entry)


def test_there_is_one_mechanism_for_each_parameter_with_hue_and_shape_of_its_own():
    assert tuple(m.parameter for m in MECHANISMS) == PARAMETERS
    assert len({m.hue for m in MECHANISMS}) == len({m.shape for m in MECHANISMS}) == len(PARAMETERS)


def test_with_two_diodes_a_parameter_that_comes_twice_keeps_its_mechanisms_hue_and_shape():
    for name in set(TwoDiode.parameters) - set(PARAMETERS):
        twice, once = BY_PARAMETER[name], BY_PARAMETER[name.rpartition("_")[0]]
        assert (twice.hue, twice.shape, twice.symbol) == (once.hue, once.shape, once.symbol)
        assert twice.index != once.index and twice.title != once.title


def test_dials_show_symbols_values_and_units_per_area():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    rows = dials(workspace, entry)
    assert {name: (row["symbol"], row["index"], row["text"], row["unit"]) for name, row in rows.items()} == {
        "photocurrent": ("J", "ph", "22", "mA cm⁻²"),
        "saturation_current": ("J", "0", "2e-08", "mA cm⁻²"),
        "ideality": ("n", "", "1.6", ""),
        "series_resistance": ("R", "s", "3", "Ω cm²"),
        "shunt_resistance": ("R", "sh", "2000", "Ω cm²"),
    }
    assert all(0 < row["fraction"] < 1 for row in rows.values())


def test_dials_show_amperes_and_ohms_where_no_area_is_known():
    workspace, (entry,) = bench(AMPERES, models=(CELL.scaled(0.1),))
    rows = dials(workspace, entry)
    shown = {name: (row["symbol"], row["text"], row["unit"]) for name, row in rows.items()}
    assert shown["photocurrent"] == ("I", "0.0022", "A")
    assert shown["shunt_resistance"] == ("R", "20000", "Ω")


def test_a_dial_at_its_end_stops_shows_them():
    rows = readout.dial_values(LIT, replace(CELL, series_resistance=0.0, shunt_resistance=math.inf))
    assert rows["series_resistance"] == {"fraction": 0.0, "text": "0"}
    assert rows["shunt_resistance"] == {"fraction": 1.0, "text": "∞"}


def test_a_value_beyond_the_usual_range_still_lies_on_its_slider():
    rows = readout.dial_values(LIT, replace(CELL, ideality=40.0, photocurrent=1.0))
    assert rows["ideality"]["fraction"] == rows["photocurrent"]["fraction"] == 1.0


def test_a_held_dial_says_so():
    workspace, (entry,) = bench(LIT, models=(CELL,))
    workspace = steps.apply(workspace, steps.set_hold(workspace, entry, "ideality", True))
    assert [name for name, row in dials(workspace, entry).items() if row["held"]] == ["ideality"]


@pytest.mark.parametrize(
    ("parameter", "made", "shown"),
    [
        ("photocurrent", refinement(errors={"photocurrent": 1.234e-5}), "± 0.012"),
        ("ideality", refinement(errors={"ideality": 0.0312}), "± 0.031"),
        ("ideality", refinement(free=("photocurrent",), errors={"ideality": 0.03}), ""),
        ("shunt_resistance", refinement(intervals={"shunt_resistance": (4100.0, math.inf)}), "> 4100"),
        ("series_resistance", refinement(intervals={"series_resistance": (0.0, 0.21)}), "< 0.21"),
        ("saturation_current", refinement(intervals={"saturation_current": (0.0, 2.5e-12)}), "< 2.5·10⁻⁹"),
        ("ideality", refinement(intervals={"ideality": (0.5, 3.0)}), "not determined"),
        ("shunt_resistance", refinement(intervals={"shunt_resistance": (0.0, math.inf)}), "not determined"),
        ("shunt_resistance", refinement(), "not determined"),
    ],
)
def test_a_dial_tells_how_well_its_parameter_is_known(parameter, made, shown):
    assert refined_dials(made)[parameter]["error"] == shown


def test_measured_and_model_stand_beside_each_other_with_their_difference():
    rows = readout.metric_rows(LIT, CELL.landmarks())
    assert tuple(rows) == readout.METRIC_ROWS
    values, marks = measure(LIT), CELL.landmarks()
    voc = rows["voc"]
    assert voc["measured"] == readout.concise(values.voc.value, values.voc.uncertainty) and "(" in voc["measured"]
    assert "±" in voc["reason"] and voc["model"] == "0.8550" and voc["unit"] == "V"
    assert rows["fill_factor"]["model"] == readout.number(100 * marks.fill_factor)
    assert rows["efficiency"]["model"] == readout.number(100 * marks.pmp / 0.1)  # one sun is 0.1 W cm⁻²
    assert (rows["jsc"]["unit"], rows["pmp"]["unit"], rows["efficiency"]["unit"]) == ("mA cm⁻²", "mW cm⁻²", "%")


def test_a_difference_is_model_less_measured_and_carries_its_sign():
    higher = readout.metric_rows(LIT, replace(CELL, photocurrent=0.024).landmarks())["jsc"]
    lower = readout.metric_rows(LIT, replace(CELL, photocurrent=0.020).landmarks())["jsc"]
    assert [cell[0] for cell in (higher["difference"], lower["difference"])] == ["+", "−"]
    assert [float(cell[1:]) for cell in (higher["difference"], lower["difference"])] == pytest.approx([2, 2], abs=0.01)
    # As many decimals as the measured value has, and no more.
    decimals = [len(cells.partition("(")[0].partition(".")[2]) for cells in (higher["measured"], higher["difference"])]
    assert decimals[0] == decimals[1] > 0


def test_what_the_sweep_does_not_reach_has_a_reason_instead_of_a_number():
    short = sweep_of(CELL, "short", high=0.3)
    rows = readout.metric_rows(short, CELL.landmarks())
    assert rows["voc"]["measured"] == rows["voc"]["difference"] == "–"
    assert rows["voc"]["reason"] == measure(short).voc.reason != ""
    assert rows["voc"]["model"] == "0.8550"


def test_there_is_no_efficiency_without_an_area_or_in_the_dark():
    marks = CELL.scaled(0.1).landmarks()
    assert readout.metric_rows(AMPERES, marks)["efficiency"]["model"] == "–"
    assert readout.metric_rows(AMPERES, marks)["efficiency"]["reason"] != ""
    dark = readout.metric_rows(IN_THE_DARK, None)
    assert {row["model"] for row in dark.values()} == {"–"}
    assert dark["efficiency"]["measured"] == "–"


def test_what_follows_the_hand_is_what_stands_at_rest():
    marks = replace(CELL, ideality=1.8).landmarks()
    at_rest, live = readout.metric_rows(LIT, marks), readout.live_metrics(LIT, marks)
    assert live == {name: {"model": row["model"], "difference": row["difference"]} for name, row in at_rest.items()}


def test_handles_are_placed_in_screen_units_and_named_for_those_who_do_not_see_them():
    marks = {mark["parameter"]: mark for mark in readout.handle_marks(LIT, CELL, frozenset())}
    assert tuple(marks) == PARAMETERS
    grip = marks["photocurrent"]
    assert (grip["x"], grip["y"]) == (0.0, pytest.approx(1e3 * CELL.landmarks().jsc))
    assert (grip["text"], grip["value"]) == ("22.00 mA cm⁻²", pytest.approx(22.0))
    assert grip["label"].startswith("photocurrent") and not grip["locked"]
    in_amperes = readout.handle_marks(AMPERES, CELL.scaled(0.1), frozenset())[0]
    assert in_amperes["y"] == pytest.approx(0.1 * CELL.landmarks().jsc) and in_amperes["text"].endswith(" A")


def test_a_locked_handle_says_why():
    marks = {m["parameter"]: m for m in readout.handle_marks(LIT, CELL, frozenset({"saturation_current"}))}
    assert marks["saturation_current"]["locked"] and marks["ideality"]["locked"]
    assert "J0" in marks["ideality"]["label"] and marks["ideality"]["label"].endswith(".")
    assert not marks["photocurrent"]["locked"]


def test_an_infinite_shunt_can_be_sent():
    (mark,) = (
        m for m in readout.handle_marks(LIT, replace(CELL, shunt_resistance=math.inf), frozenset())
        if m["parameter"] == "shunt_resistance"
    )  # fmt: skip
    assert mark["value"] is None and mark["text"] == "∞ Ω cm²"


def conditions(workspace, entry):
    return readout.condition_rows(workspace, entry, workspace.sweep(entry))


def test_conditions_are_shown_in_the_units_of_the_lab_and_assumed_until_confirmed():
    workspace, (entry,) = bench(LIT)
    rows = conditions(workspace, entry)
    assert {name: row["text"] for name, row in rows.items()} == {
        "area": "0.1",
        "file_area": "",
        "temperature": "25",
        "irradiance": "100",
        "series_cells": "1",
        "lit": "light",
        "units": "as given",
        "group": "",
    }
    assert {name for name, row in rows.items() if row["assumed"]} == {"temperature", "irradiance", "series_cells"}
    confirmed = steps.apply(workspace, steps.confirm_conditions(workspace, entry, ["temperature"]))
    assert not conditions(confirmed, entry)["temperature"]["assumed"]
    assert conditions(confirmed, entry)["irradiance"]["assumed"]


def test_the_area_of_a_file_is_asked_for_only_where_the_file_gives_a_density():
    density = sweep_of(CELL, "density", read_as="density", per_area=True, conditions=Conditions(file_area=0.09))
    for sweep, shown in ((LIT, False), (density, True)):
        workspace, (entry,) = bench(sweep)
        assert conditions(workspace, entry)["file_area"]["shown"] is shown


def test_findings_are_checks_then_the_fit_then_the_reading():
    noted = replace(LIT, notes=("The sign of the current was turned.",))
    rows = readout.finding_rows(noted, refinement(findings=("Rsh is not determined.",)))
    assert [row["name"] for row in rows] == ["assumed", "fit", "read"]
    assert [row["what"] for row in rows[1:]] == ["Rsh is not determined.", "The sign of the current was turned."]
    assert all(row["severity"] in ("note", "caution", "stop") for row in rows)
    assert readout.finding_rows(replace(LIT, assumed=frozenset()), None) == []


def test_the_tray_shows_the_efficiency_else_the_power_else_nothing():
    short = sweep_of(CELL, "short", high=0.1)
    assert readout.efficiency_text(measure(LIT), LIT) == f"{100 * measure(LIT).efficiency.value:.1f} %"
    assert readout.efficiency_text(measure(AMPERES), AMPERES).endswith(" W")
    assert readout.efficiency_text(measure(short), short) == ""


def test_what_is_read_off_a_sweep_is_read_once():
    assert readout.measured(LIT) is readout.measured(LIT)
    assert readout.checked(LIT) is readout.checked(LIT)
