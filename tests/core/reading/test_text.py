"""Delimited text in the layouts that benches write."""

import numpy as np
import pytest

from core.reading import read_sweeps

VOLTAGE = np.linspace(-0.1, 1.2, 27)
DENSITY = 22.0 - 1e-9 * np.exp(VOLTAGE / 0.045)  # [mA cm⁻²]


def table(voltage=VOLTAGE, current=DENSITY, delimiter=",", decimal=".", digits=6):
    rows = [f"{v:.{digits}f}{delimiter}{c:.{digits}f}".replace(".", decimal) for v, c in zip(voltage, current, strict=True)]
    return "\n".join(rows)


def read(text, name="K07.csv", encoding="utf-8"):
    return read_sweeps(text.encode(encoding), name)


@pytest.mark.parametrize("heading", ["Voltage (V){}Current density (mA/cm²)", "U [V]{}J [mA cm^-2]", "V{}mA/cm2", ""])
@pytest.mark.parametrize(
    ("delimiter", "decimal"), [(",", "."), (";", "."), (";", ","), ("\t", "."), ("\t", ","), ("  ", "."), ("  ", ","), ("|", ".")]
)
def test_delimiter_and_decimal_mark_are_found(delimiter, decimal, heading):
    # White space divides words as well as cells; headings then need two blanks or a bracket.
    text = heading.format(delimiter) + "\n" + table(delimiter=delimiter, decimal=decimal)
    [sweep] = read(text)
    assert sweep.voltage == pytest.approx(VOLTAGE, abs=1e-6)
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-8)
    assert sweep.per_area and sweep.read_as == "density"
    assert ("units" in sweep.assumed) == (heading == "")


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "cp1252", "latin-1"])
def test_micro_sign_and_square_survive_every_encoding(encoding):
    [sweep] = read("Fläche: 9 mm²\nSpannung (mV);Strom (µA)\n" + table(1e3 * VOLTAGE, 90 * DENSITY, ";"), encoding=encoding)
    assert sweep.area == pytest.approx(0.09)
    assert sweep.voltage == pytest.approx(VOLTAGE, abs=1e-6)
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-8)


@pytest.mark.parametrize("ending", ["\n", "\r\n", "\r", "\r\r\n", "\n\n"])
def test_line_endings_do_not_matter(ending):
    sweeps = read(("V (V),I (A)\n" + table()).replace("\n", ending))
    assert [len(s.voltage) for s in sweeps] == [27]


def test_columns_in_the_other_order_beside_others():
    rows = [f"{i},{0.1 * i:.1f},{c:.6f},{v:.4f},{v * c:.6f},OK" for i, (v, c) in enumerate(zip(VOLTAGE, DENSITY, strict=True), 1)]
    [sweep] = read("Index,Time (s),Current (mA),Voltage (V),Power (mW),Status\n" + "\n".join(rows))
    assert sweep.voltage == pytest.approx(VOLTAGE, abs=1e-4)
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-8)
    assert any("“Power (mW)”" in note for note in sweep.notes)


def test_currents_without_heading_may_stand_first():
    uneven = DENSITY / 1e3
    [sweep] = read(table(uneven, VOLTAGE))
    assert sweep.voltage == pytest.approx(VOLTAGE, abs=1e-5)


def test_pairs_side_by_side_of_unequal_length():
    rows = [f"{v:.4f},{c:.4f},{w:.4f},{d:.4f}" for v, c, w, d in zip(VOLTAGE, DENSITY, VOLTAGE[::-1], DENSITY[::-1], strict=True)]
    rows[-5:] = [row.rsplit(",", 2)[0] + ",," for row in rows[-5:]]
    forward, reverse = read("V1,I1,V2,I2\nV,mA,V,mA\n" + "\n".join(rows))
    assert (forward.direction, reverse.direction) == ("forward", "reverse")
    assert (len(forward.voltage), len(reverse.voltage)) == (27, 22)
    assert forward.device == reverse.device == "K07"


def test_one_voltage_with_a_current_for_each_direction():
    rows = [f"{v:.4f},{c:.4f},{c + 0.1:.4f}" for v, c in zip(VOLTAGE, DENSITY, strict=True)]
    forward, reverse = read("V (V),J forward (mA/cm2),J reverse (mA/cm2)\n" + "\n".join(rows))
    assert (forward.name, reverse.name) == ("K07 forward", "K07 reverse")
    assert reverse.voltage[0] > reverse.voltage[-1]
    assert reverse.current[-1] == pytest.approx(0.0221)


def test_names_of_devices_above_the_headings():
    rows = [f"{v:.4f},{c:.4f},{v:.4f},{c / 2:.4f}" for v, c in zip(VOLTAGE, DENSITY, strict=True)]
    sweeps = read("K01,,K02,\nU,I,U,I\nV,mA,V,mA\n" + "\n".join(rows), "batch.csv")
    assert [s.device for s in sweeps] == ["K01", "K02"]


def test_current_and_density_together_give_the_area():
    rows = [f"{v:.4f};{c * 0.09e-3:.9f};{c:.5f}" for v, c in zip(VOLTAGE, DENSITY, strict=True)]
    [sweep] = read("V (V);I (A);J (mA/cm²)\n" + "\n".join(rows))
    assert sweep.area == pytest.approx(0.09)
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-8)


@pytest.mark.parametrize("between", ["\n", "\n\n", "\n# second\n", "\nReverse scan\n", "\nV (V),I (mA)\n"])
def test_stacked_forward_and_reverse(between):
    text = "V (V),I (mA)\n" + table() + between + table(VOLTAGE[::-1], DENSITY[::-1] - 0.2)
    forward, reverse = read(text)
    assert [s.direction for s in (forward, reverse)] == ["forward", "reverse"]
    assert forward.current[0] == pytest.approx(0.022)
    assert reverse.current[-1] == pytest.approx(0.0218)
    assert (len(forward.voltage), len(reverse.voltage)) == (27, 27)


def test_a_turn_that_was_measured_once_belongs_to_both():
    text = "V (V),I (mA)\n" + table(np.r_[VOLTAGE, VOLTAGE[-2::-1]], np.r_[DENSITY, DENSITY[-2::-1]])
    forward, reverse = read(text)
    assert forward.voltage[-1] == reverse.voltage[0] == pytest.approx(1.2)
    assert len(forward.voltage) == len(reverse.voltage) == 27


def test_repeats_of_one_direction_are_sweeps_of_their_own():
    sweeps = read("V (V),I (mA)\n" + table(np.tile(VOLTAGE, 3), np.tile(DENSITY, 3)))
    assert [(s.name, len(s.voltage)) for s in sweeps] == [("K07 forward", 27), ("K07 forward 2", 27), ("K07 forward 3", 27)]


def test_jitter_of_the_voltage_is_no_turn():
    jittered = VOLTAGE + np.where(np.arange(27) % 2, 0.001, -0.001)
    jittered[10] = jittered[9] - 0.004
    [sweep] = read("V (V),I (mA)\n" + table(jittered))
    assert len(sweep.voltage) == 27
    assert np.all(np.diff(sweep.voltage) >= 0)
    assert any("order of voltage" in note for note in sweep.notes)


def test_points_held_at_one_voltage_are_kept():
    [sweep] = read("V (V),I (mA)\n" + table(np.repeat(VOLTAGE, 2), np.repeat(DENSITY, 2)))
    assert len(sweep.voltage) == 54
    assert any("more than once" in note for note in sweep.notes)


def test_current_of_either_sign_ends_positive_and_the_notes_say_so():
    [as_is], [turned] = (read("V (V),I (mA)\n" + table(VOLTAGE, sign * DENSITY)) for sign in (1, -1))
    assert turned.current == pytest.approx(as_is.current)
    assert any("other sign" in note for note in turned.notes)
    assert not any("other sign" in note for note in as_is.notes)


def test_a_device_measured_the_wrong_way_round_is_turned():
    [sweep] = read("V (V),I (mA)\n" + table(-VOLTAGE, -DENSITY))
    assert sweep.voltage == pytest.approx(VOLTAGE, abs=1e-6)
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-8)
    assert any("voltage has the other sign" in note for note in sweep.notes)


@pytest.mark.parametrize("sign", [1, -1])
def test_dark_sweeps_carry_negative_forward_current(sign):
    [sweep] = read("V (V),I (mA)\n" + table(VOLTAGE, sign * (DENSITY - 22.0)), "K07_dark.csv")
    assert not sweep.lit and sweep.irradiance == 0
    assert sweep.current[-1] < 0
    assert sweep.name == "K07 dark"


def test_dark_is_judged_by_the_current_at_zero_where_nobody_says():
    [sweep] = read("V (V),I (mA)\n" + table(VOLTAGE, DENSITY - 22.0))
    assert not sweep.lit
    assert any("dark" in note for note in sweep.notes)


def test_a_sweep_that_never_crosses_zero_volt_is_read():
    part = VOLTAGE > 0.3
    [sweep] = read("V (V),I (mA)\n" + table(VOLTAGE[part], -DENSITY[part]))
    assert sweep.lit and sweep.current[0] > 0


def test_units_are_never_guessed_silently():
    [amperes], [cell], [millivolts] = (
        read(text) for text in (table(VOLTAGE, DENSITY / 1e3), table(), table(1e3 * VOLTAGE, DENSITY / 1e3))
    )
    assert (amperes.read_as, cell.read_as) == ("current", "density")
    assert millivolts.voltage == pytest.approx(VOLTAGE, abs=1e-6)
    for sweep, units in ((amperes, "V and A;"), (cell, "V and mA cm⁻²"), (millivolts, "mV and A;")):
        assert "units" in sweep.assumed
        assert any("No unit given" in note and units in note for note in sweep.notes)


@pytest.mark.parametrize("heading", ["Voltage (MV)\tCurrent (MA)", "VOLTAGE\tCURRENT\nMV\tMA", "U [MV]\tJ [MA/CM2]"])
def test_units_in_capitals_are_milli_and_a_note_says_so(heading):
    [sweep] = read(heading + "\n" + table(1e3 * VOLTAGE, DENSITY, "\t"))
    assert sweep.voltage == pytest.approx(VOLTAGE, abs=1e-6)
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-8)
    assert any("read as milli" in note for note in sweep.notes)


def test_a_first_row_that_is_cut_short_does_not_shift_the_headings():
    rows = [f"{n}\t{0.2 * n:.1f}\t{v:.4f}\t{c:.6f}" for n, (v, c) in enumerate(zip(VOLTAGE, DENSITY, strict=True), 1)]
    rows[0] = "1\t0.2\t0.3"
    rows[4] += "a a a a"
    [sweep] = read("Point\tTime (s)\tVoltage (V)\tCurrent (mA)\n" + "\n".join(rows))
    assert sweep.voltage[-1] == pytest.approx(VOLTAGE[-1])


def test_one_wild_reading_does_not_lose_the_sweep():
    rows = table().split("\n")
    rows[5] = "0.15,2e9"
    [sweep] = read("V (V),I (A)\n" + "\n".join(rows))
    assert len(sweep.voltage) == 27


def test_void_and_broken_rows_are_left_out_and_named():
    rows = table().split("\n")
    rows[3], rows[7], rows[9] = "0.05,9.9e37", "0.25,###x", "nan,nan"
    [sweep] = read("V (V),I (mA)\n" + "\n".join(rows) + "\n\nVoc (V),1.05\nFF (%),74.1\n")
    assert len(sweep.voltage) == 24
    assert any("2 points marked as over range" in note and "line 5" in note for note in sweep.notes)
    assert any("line 9" in note for note in sweep.notes)
    assert sweep.header["Voc (V)"] == "1.05"


def test_readings_with_words_beside_them():
    rows = [f"12:03:{i:02d};{v:.4f};{c:.4f};OK" for i, (v, c) in enumerate(zip(VOLTAGE, DENSITY, strict=True))]
    [sweep] = read("Zeit;U (V);I (mA);Status\n" + "\n".join(rows).replace(".", ","))
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-7)


@pytest.mark.parametrize("offset", [0.0, 22.0])
def test_a_current_without_its_sign_gets_it_back(offset):
    signed = DENSITY - offset
    [sweep] = read("V (V),|I| (mA)\n" + table(VOLTAGE, np.abs(signed)))
    assert sweep.lit == (offset == 0)
    clear = np.abs(signed) > 1e-3
    assert sweep.current[clear] == pytest.approx(1e-3 * signed[clear], rel=1e-3)
    assert any("without its sign" in note for note in sweep.notes)


def test_the_signed_current_is_preferred_to_its_size():
    rows = [f"{v:.4f},{abs(c):.4f},{c:.4f}" for v, c in zip(VOLTAGE, DENSITY, strict=True)]
    [sweep] = read("V (V),|I| (mA),I (mA)\n" + "\n".join(rows))
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-7)


@pytest.mark.parametrize("heading", ["Voltage V Current mA", "Voltage (V) Current (mA)", "V[V] I[mA]", "U / V I / mA", "# V I\n# V mA"])
def test_headings_between_single_blanks(heading):
    [sweep] = read(heading + "\n" + table(delimiter=" "))
    assert sweep.current == pytest.approx(1e-3 * DENSITY, abs=1e-8)
    assert "units" not in sweep.assumed


@pytest.mark.parametrize("text", ["-0.2057 0.7640\n0.0057 0.7605\n0.3269 0.7505\n0.5633 0.1035\n0.5900 -0.2100",
                                  "0.1248,1.0315\n6.0538,1.0180\n12.4929,0.9255\n16.5241,0.1010\n17.4885,-0.3030"])  # fmt: skip
def test_uneven_voltages_without_headings_are_volts_and_amperes(text):
    """Rows of the published cell and module sets in circulation since 1986 (from memory)."""
    [sweep] = read(text)
    assert sweep.read_as == "current"
    assert [[v, c] for v, c in zip(sweep.voltage, sweep.current, strict=True)] == [
        [float(cell) for cell in row.replace(",", " ").split()] for row in text.split("\n")
    ]


def test_a_title_belongs_to_its_own_table_only():
    text = "Forward scan\nV (V),I (mA)\n" + table() + "\n\n" + table(VOLTAGE[::-1], DENSITY[::-1])
    forward, reverse = read(text)
    assert reverse.direction == "reverse" and reverse.voltage[0] > reverse.voltage[-1]


def test_whole_numbers_between_commas_are_fine_under_as_many_headings():
    rows = [f"{i},{95 - i},{i},{90 - i}" for i in range(9)]
    assert len(read("V1 (mV),I1 (mA),V2 (mV),I2 (mA)\n" + "\n".join(rows))) == 2
