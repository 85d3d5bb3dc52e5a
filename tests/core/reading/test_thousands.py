"""Thousands signs: read where they can be nothing else, refused where nothing tells, never taken for decimals in silence."""

import io

import numpy as np
import pytest

from core.errors import UnreadableFile
from core.reading import read_sweeps
from core.reading.thousands import marks_of

MILLIVOLTS = np.arange(-100, 1151, 25)
MICROAMPERES = np.round(22_000 - 0.5 * MILLIVOLTS - 1e-6 * np.exp(MILLIVOLTS / 45.0)).astype(int)


def grouped(sign, decimal="", digits=0):
    """Writes a number with a sign between thousands."""

    def write(number):
        return f"{number:,.{digits}f}".replace(".", "\x00").replace(",", sign).replace("\x00", decimal)

    return write


def table(heading, delimiter, volts, amps=None, part=slice(None)):
    amps = amps or volts
    rows = [volts(v) + delimiter + amps(i) for v, i in zip(MILLIVOLTS[part], MICROAMPERES[part], strict=True)]
    return delimiter.join(heading) + "\n" + "\n".join(rows)


def read(text):
    return read_sweeps(text.encode(), "K07.csv")


ENGLISH, GERMAN = ("V (mV)", "I (uA)"), ("Spannung (mV)", "Strom (µA)")
COMMA, POINT = grouped(","), grouped(".")


@pytest.mark.parametrize(
    "text",
    [
        table(ENGLISH, ";", COMMA),
        table(ENGLISH, ";", POINT),
        table(GERMAN, ";", POINT),
        table(ENGLISH, "\t", COMMA),
        table(ENGLISH, "|", COMMA),
        table(ENGLISH, ";", grouped(",", ".", 1)),
        table(GERMAN, ";", grouped(".", ",", 1)),
        table(GERMAN, "\t", grouped(".", ",", 1)),
        table(GERMAN, "  ", grouped(".", ",", 2)),
        table(ENGLISH, ";", grouped("'")),
        table(GERMAN, ";", grouped("'", ",", 1)),
        table(ENGLISH, "\t", grouped("’", ".", 1)),
        table(ENGLISH, ",", grouped("’", ".", 1)),
        table(ENGLISH, ";", grouped("\u202f", ".", 1)),
        table(ENGLISH, "  ", grouped("\u2009")),
        table(ENGLISH, ";", grouped("\u00a0", ",", 1)),
        table(ENGLISH, " ", grouped("\u00a0", ".", 1)),
        table(ENGLISH, "\t", grouped(" ", ",", 1)),
        table(ENGLISH, ";", str, lambda i: f"{i:,.1f}"),
        table(ENGLISH, ",", lambda n: f'"{n:,}"'),
        table(("V (mV)", "I (nA)"), ";", str, lambda i: f"{1000 * i:,}"),
        table(("V", "µA"), ";", lambda v: f"{v / 1000:.3f}".replace(".", ","), grouped(".", ",", 2)),
        table(("V (V)", "I (uA)"), ";", lambda v: f"{v / 1000:.3f}", COMMA),
    ],
)
def test_numbers_with_thousands_signs_are_read_whole(text):
    [sweep] = read(text)
    assert sweep.voltage == pytest.approx(MILLIVOLTS / 1e3, abs=1e-9)
    assert sweep.current == pytest.approx(MICROAMPERES / 1e6, abs=1e-12)


def test_points_and_commas_between_thousands_are_told():
    [sweep] = read(table(ENGLISH, ";", COMMA))
    assert any("comma stands between thousands" in note and "“22,050” is read as 22050" in note for note in sweep.notes)
    [sweep] = read(table(ENGLISH, ";", str))
    assert not any("thousands" in note for note in sweep.notes)


# Up to 875 mV all currents have one sign before three digits, and no voltage has any.
SHORT = slice(0, 40)


@pytest.mark.parametrize(
    ("text", "number"),
    [
        (table(ENGLISH, ";", str, COMMA, SHORT), "“22,050” may be 22.050 or 22050"),
        (table(GERMAN, ";", str, POINT, SHORT), "“22.050” may be 22.050 or 22050"),
    ],
)
def test_a_number_that_can_be_read_in_two_ways_is_refused(text, number):
    with pytest.raises(UnreadableFile, match="without thousands signs") as caught:
        read(text)
    assert number in str(caught.value) and caught.value.line == 2


@pytest.mark.parametrize(
    ("text", "says"),
    [
        (table(ENGLISH, ",", COMMA), "commas seem to divide the cells and to stand between thousands"),
        (table(ENGLISH, "  ", grouped(" ")), "blanks seem to divide the cells and to stand between thousands"),
        (table(ENGLISH, ",", grouped(" ")), "blanks seem to divide the cells and to stand between thousands"),
        (table(ENGLISH, ";", POINT, COMMA, slice(46, 51)), "has a thousands sign, and nothing tells which"),
    ],
)
def test_signs_that_divide_cells_as_well_are_refused(text, says):
    with pytest.raises(UnreadableFile, match=says):
        read(text)


def test_the_usual_decimal_mark_is_taken_for_one_and_a_note_asks_to_check():
    [sweep] = read(table(ENGLISH, ";", str, POINT, SHORT))
    assert sweep.current[0] == pytest.approx(22.050e-6)
    assert any("“22.050” is read as 22.050; check" in note for note in sweep.notes)
    [sweep] = read(table(GERMAN, ";", str, COMMA, SHORT))
    assert sweep.current[0] == pytest.approx(22.050e-6)


def test_units_decide_where_one_reading_is_out_of_reach():
    """22 A cm⁻² is no cell under light, and 1 mV no sweep."""
    [sweep] = read(table(("V (mV)", "J (mA/cm2)"), ";", str, COMMA, SHORT))
    assert sweep.current[0] == pytest.approx(22.050e-3)
    assert not any("decimal mark" in note for note in sweep.notes)
    [sweep] = read(table(("V (mV)", "J (uA/cm2)"), ";", COMMA, part=slice(44, 51)))
    assert (sweep.voltage[0], sweep.current[0]) == pytest.approx((1.0, MICROAMPERES[44] / 1e6))


@pytest.mark.parametrize("delimiter", [";", "\t", ",", "  "])
@pytest.mark.parametrize("digits", [2, 3, 4])
def test_plain_decimals_are_left_alone(delimiter, digits):
    text = table(("V (V)", "I (mA)"), delimiter, lambda v: f"{v / 1000:.{digits}f}", lambda i: f"{i / 1000:.{digits}f}")
    [sweep] = read(text)
    assert sweep.current == pytest.approx(MICROAMPERES / 1e6, abs=1e-5)
    assert not any("thousands" in note or "decimal mark" in note for note in sweep.notes)


def test_no_break_spaces_that_divide_the_cells_are_no_thousands_signs():
    [sweep] = read("V I\n" + "\n".join(f"{v}\u00a0{v + 100}" for v in range(-800, 801, 100)))
    assert sweep.voltage.size == 17


def test_numbers_that_a_sheet_keeps_as_text():
    openpyxl = pytest.importorskip("openpyxl")
    book = openpyxl.Workbook()
    book.active.append(ENGLISH)
    for v, i in zip(MILLIVOLTS, MICROAMPERES, strict=True):
        book.active.append([COMMA(v), COMMA(i)])
    unclear = book.create_sheet("Unclear")
    unclear.append(ENGLISH)
    for v, i in zip(MILLIVOLTS[SHORT], MICROAMPERES[SHORT], strict=True):
        unclear.append([int(v), COMMA(i)])
    stream = io.BytesIO()
    book.save(stream)
    [sweep] = read_sweeps(stream.getvalue(), "K07.xlsx")
    assert sweep.current == pytest.approx(MICROAMPERES / 1e6)
    assert any("Sheet “Unclear” was skipped: “22,050” may be" in note for note in sweep.notes)


def test_what_is_no_number_in_either_reading_says_nothing_of_the_mark():
    """Damaged cells among open ones."""
    rows = [(1, ["22.011"]), (2, ["530.5.0000"]), (3, ["1.2,3"]), (4, ["22.012"])]
    assert marks_of(rows, ".") == marks_of([rows[0], rows[3]], ".")
