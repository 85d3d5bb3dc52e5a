"""A column with the standard deviation of each current is kept with its sweep."""

import json
from dataclasses import replace

import numpy as np
import pytest

from core.diode import OneDiode
from core.reading import read_sweeps
from core.reading.units import parse_label
from core.records import id_of_text, reading_from_record, reading_record, reading_text

VOLTAGE = np.linspace(-0.1, 1.1, 61)
DENSITY = OneDiode(0.021, 2e-13, 1.7, 4.0, 1500).current(VOLTAGE)
ERROR = 2e-6 + 1e-3 * np.abs(DENSITY) + 1e-6 * np.arange(61)  # [A cm⁻²], another at each point


def table(*columns, delimiter=",", decimal="."):
    rows = (delimiter.join("" if np.isnan(x) else f"{x:.9g}".replace(".", decimal) for x in row) for row in zip(*columns, strict=True))
    return "\n".join(rows) + "\n"


def read(text, name="K07.csv"):
    return read_sweeps(text.encode(), name)


def one(heading, error, current=DENSITY * 1e3, voltage=VOLTAGE):
    (sweep,) = read(heading + "\n" + table(voltage, current, error))
    return sweep


@pytest.mark.parametrize(
    ("text", "of", "factor"),
    [("Current error (mA)", "current", 1e-3), ("I_std", "current", None), ("I_std_mA", "current", 1e-3), ("std(I) (A)", "current", 1),
     ("σ_J (mA/cm²)", "density", 1e-3), ("σI / A", "current", 1), ("Standard deviation (mA)", "current", 1e-3),
     ("Uncertainty of current density (mA cm^-2)", "density", 1e-3), ("Stromdichte Fehler (mA/cm²)", "density", 1e-3),
     ("Istd (A)", "current", 1), ("stdI", "current", None), ("Jerr_mA/cm2", "density", 1e-3),
     ("Error", None, None), ("Standard deviation", None, None), ("Current error (%)", None, None), ("V_std (V)", None, None),
     ("rel. std I", None, None), ("2σ I (A)", None, None), ("error I V", None, None), ("Temperature error", None, None),
     ("Expanded uncertainty (mA)", None, None), ("Current (mA)", None, 1e-3), ("I_sd (A)", None, 1)],
)  # fmt: skip
def test_headings_of_standard_deviations(text, of, factor):
    label = parse_label(text)
    assert label.error_of == of and label.factor == (None if factor is None else pytest.approx(factor))
    assert label.kind == ("current" if text in ("Current (mA)", "I_sd (A)") else "other")  # the latter: source to drain


@pytest.mark.parametrize(
    ("heading", "scale"),
    [
        ("Voltage (V),Current density (mA/cm2),Std of current density (mA/cm2)", 1e3),
        ("Voltage (V),J (mA/cm2),σ_J", 1e3),
        ("Voltage (V),J (mA/cm2),σ_J (A/m2)", 1e4),
        ("Voltage (V),Current (mA/cm2),Current error", 1e3),
        ("V,J,J_err\nV,mA/cm2,uA/cm2", 1e6),
    ],
)
def test_the_standard_deviation_has_its_own_unit_or_that_of_the_current(heading, scale):
    sweep = one(heading, ERROR * scale)
    np.testing.assert_allclose(sweep.current_error, ERROR, rtol=1e-8)
    assert any("is read as the standard deviation of each current" in note for note in sweep.notes)
    assert not any("Not used" in note for note in sweep.notes)


def test_it_may_stand_before_the_current_with_decimal_commas():
    text = "U (V);Unsicherheit (mA);Strom (mA)\n" + table(VOLTAGE, ERROR * 1e3, DENSITY * 1e3, delimiter=";", decimal=",")
    (sweep,) = read(text)
    assert not sweep.per_area
    np.testing.assert_allclose(sweep.current, DENSITY, rtol=1e-7, atol=1e-11)
    np.testing.assert_allclose(sweep.current_error, ERROR, rtol=1e-8)


def test_it_goes_with_its_points_through_passes_and_turned_signs():
    there_and_back = np.concatenate([np.arange(61), np.arange(60, -1, -1)])
    size = np.arange(1, 123) * 1e-6
    text = "Voltage (V),Current (A),Current std (A)\n" + table(VOLTAGE[there_and_back], -DENSITY[there_and_back], size)
    forward, reverse = read(text)
    assert (forward.direction, reverse.direction) == ("forward", "reverse")
    np.testing.assert_allclose(forward.current, DENSITY, rtol=1e-7, atol=1e-11)
    np.testing.assert_allclose(forward.current_error, size[:61])
    np.testing.assert_allclose(reverse.current_error[-60:], size[-60:])
    assert reverse.current_error.shape == reverse.current.shape


def test_points_put_in_order_take_theirs_along():
    order = np.arange(61)
    order[[30, 31]] = 31, 30
    sweep = one("Voltage (V),J (mA/cm2),J std", ERROR[order] * 1e3, DENSITY[order] * 1e3, VOLTAGE[order])
    np.testing.assert_allclose(sweep.voltage, VOLTAGE)
    np.testing.assert_allclose(sweep.current_error, ERROR, rtol=1e-8)


def test_each_of_two_currents_has_its_own():
    heading = "Voltage (V),J_fwd (mA/cm2),J_fwd_std (mA/cm2),J_rev (mA/cm2),J_rev_std (mA/cm2)\n"
    sweeps = read(heading + table(VOLTAGE, DENSITY * 1e3, ERROR * 1e3, DENSITY * 990, ERROR * 2e3))
    by_direction = {sweep.direction: sweep for sweep in sweeps}
    np.testing.assert_allclose(by_direction["forward"].current_error, ERROR, rtol=1e-8)
    np.testing.assert_allclose(by_direction["reverse"].current_error[::-1], 2 * ERROR, rtol=1e-8)


@pytest.mark.parametrize(
    "heading",
    [
        "Voltage (V),J (mA/cm2),Error",
        "Voltage (V),J (mA/cm2),J error (%)",
        "Voltage (V),J (mA/cm2),V_std (V)",
        "Voltage (V),J (mA/cm2),I_std (mA)",
        "Voltage (V),J,σ_J (mA/cm2)",
        "V,J,J_err\nV,mA/cm2,%",
    ],
)
def test_what_may_be_something_else_is_not_used(heading):
    sweep = one(heading, ERROR * 1e3)
    assert sweep.current_error is None
    assert any("Not used" in note for note in sweep.notes)


def test_two_of_them_for_one_current_or_one_for_two_are_not_used():
    (sweep,) = read("Voltage (V),J (mA/cm2),J std,J uncertainty\n" + table(VOLTAGE, DENSITY * 1e3, ERROR, ERROR))
    assert sweep.current_error is None
    text = "Voltage (V),J_fwd (mA/cm2),J_rev (mA/cm2),J std (mA/cm2)\n" + table(VOLTAGE, DENSITY * 1e3, DENSITY * 999, ERROR)
    assert [sweep.current_error for sweep in read(text)] == [None, None]


def test_a_unit_of_the_current_without_one_of_its_own_is_not_enough_beside_both_quantities():
    text = "Voltage (V),J (mA/cm2),I (mA),I std\n" + table(VOLTAGE, DENSITY * 1e3, DENSITY * 100, ERROR * 100)
    (sweep,) = read(text)
    assert sweep.per_area and sweep.current_error is None


def test_missing_ones_stay_missing_and_are_counted():
    size = ERROR.copy()
    size[[3, 7]], size[9] = np.nan, 0.0
    sweep = one("Voltage (V),J (mA/cm2),J std", size * 1e3)
    assert np.flatnonzero(np.isnan(sweep.current_error)).tolist() == [3, 7] and sweep.current_error[9] == 0
    assert "3 points without a standard deviation above zero." in sweep.notes
    record = json.loads(reading_text(reading_record(sweep)))
    assert record["current_error"][3] is None
    again = reading_from_record(record)
    np.testing.assert_array_equal(again.current_error, sweep.current_error)
    assert not again.current_error.flags.writeable


def test_a_column_of_nothing_but_zeros_is_not_used():
    assert one("Voltage (V),J (mA/cm2),J error", np.zeros(61)).current_error is None


def test_it_is_rescaled_with_the_current():
    sweep = one("Voltage (V),Current (mA),Current std (mA)", ERROR * 1e3)
    smaller = sweep.under(replace(sweep.conditions, area=0.1))
    np.testing.assert_allclose(smaller.current_error / smaller.current, sweep.current_error / sweep.current)
    assert smaller.current_error[0] == pytest.approx(10 * ERROR[0])
    unit = one("Voltage,Current,Current std", ERROR * 1e3)
    other = unit.with_unit("µA")
    np.testing.assert_allclose(other.current_error / other.current, unit.current_error / unit.current)
    np.testing.assert_allclose(unit.only(np.array([4, 5])).current_error, unit.current_error[4:6])


def test_readings_without_it_are_written_as_before_and_keep_their_ids():
    (sweep,) = read("Voltage (V),J (mA/cm2)\n0,20\n0.5,19\n1.0,-3\n")
    record = reading_record(sweep)
    assert "current_error" not in record and reading_from_record(record).current_error is None
    assert id_of_text(reading_text(record)) == "c33a16fe85b7a3a30427e9ce5d7a6b4ae02b42aae766c28ea69457b8ab884b52"
