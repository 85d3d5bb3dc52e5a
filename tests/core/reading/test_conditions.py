"""What a file's header and name say of device and conditions."""

import numpy as np
import pytest

from core.reading import read_sweeps
from core.reading.header import recognise
from core.reading.words import device_in, from_file_name

VOLTAGE = np.linspace(-0.1, 1.2, 27)
ROWS = "\n".join(f"{v:.4f}\t{22 - 1e-9 * np.exp(v / 0.045):.5f}" for v in VOLTAGE)


def read(header, name="file.txt", heading="Voltage (V)\tCurrent (mA)"):
    [sweep] = read_sweeps(f"{header}\n{heading}\n{ROWS}\n".encode(), name)
    return sweep


@pytest.mark.parametrize(
    ("line", "area"),
    [("Area: 0.09 cm²", 0.09), ("Cell area (mm2) = 9", 0.09), ("Zellfläche\t0,25 cm^2", 0.25), ("Active area [cm²]\t0.16", 0.16),
     ("Aperture: 3 mm x 3 mm", 0.09), ("device size: 0.5 cm x 0.5 cm", 0.25), ("Area;1,5e-4 m2", 1.5), ("# area = 0.1", 0.1)],
)  # fmt: skip
def test_area_makes_a_density_of_a_current(line, area):
    sweep = read(line)
    assert sweep.area == pytest.approx(area)
    assert sweep.per_area and sweep.read_as == "current"
    assert sweep.current[2] == pytest.approx(0.022 / area, rel=1e-3)


def test_area_beside_a_density_is_the_files_own():
    sweep = read("Area: 0.09 cm2", heading="Voltage (V)\tCurrent density (mA/cm2)")
    assert sweep.conditions.file_area == sweep.area == pytest.approx(0.09)
    assert sweep.current[2] == pytest.approx(0.022, rel=1e-3)


@pytest.mark.parametrize(
    ("line", "kelvin"),
    [("Temperature: 25.5 °C", 298.65), ("T (K) = 300", 300.0), ("Temperatur\t40", 313.15), ("Stage temperature [°C]: -20", 253.15),
     ("Temp. (C): 30", 303.15), ("Temperature: 77 F", 298.15)],
)  # fmt: skip
def test_temperature(line, kelvin):
    sweep = read(line)
    assert sweep.temperature == pytest.approx(kelvin)
    assert "temperature" not in sweep.assumed


@pytest.mark.parametrize(
    ("line", "watts"),
    [("Irradiance: 1000 W/m²", 0.1), ("Light intensity (mW/cm2): 50", 0.05), ("Bestrahlungsstärke = 800 W m^-2", 0.08),
     ("Illumination: 0.5 sun", 0.05), ("Suns: 0.1", 0.01), ("Intensity: 1", 0.1), ("Lamp: 100,0 mW/cm²", 0.1)],
)  # fmt: skip
def test_irradiance(line, watts):
    sweep = read(line)
    assert sweep.irradiance == pytest.approx(watts)
    assert "irradiance" not in sweep.assumed


def test_scan_rate_cells_and_other_words():
    sweep = read(
        "Sample: K09\nScan rate: 50 mV/s\nCells in series: 36\nPreconditioning: 60 s in light\nDelay: 20 ms\nOperator: N. N."
    )
    assert sweep.device == "K09" and sweep.name == "K09 forward"
    assert sweep.scan_rate == pytest.approx(0.05)
    assert sweep.series_cells == 36 and "series_cells" not in sweep.assumed
    assert sweep.header["Preconditioning"] == "60 s in light"
    assert sweep.header["Delay"] == "20 ms"
    assert sweep.header["Operator"] == "N. N."


def test_what_the_file_does_not_say_is_assumed():
    assert read("Operator: N. N.").assumed == {"temperature", "irradiance", "series_cells"}


@pytest.mark.parametrize("line", ["Light: off", "Illumination\tdark", "Messart: Dunkelkennlinie", "Dark: yes", "Irradiance: 0 W/m2"])
def test_dark_by_its_header(line):
    sweep = read(line)
    assert not sweep.lit and sweep.irradiance == 0 and "irradiance" not in sweep.assumed


@pytest.mark.parametrize("line", ["Light: on", "Messart: Hellkennlinie", "Shutter: open", "Mode: light"])
def test_light_by_its_header(line):
    assert read(line, name="K07_d.txt").lit


def test_a_reverse_sweep_listed_by_rising_voltage():
    sweep = read("Scan direction: reverse")
    assert sweep.direction == "reverse" and sweep.voltage[0] > sweep.voltage[-1]
    assert any("the other way" in note for note in sweep.notes)


def test_pixel_stays_in_the_devices_name():
    assert read("Sample: K09\nPixel: 3").device == "K09 pixel 3"


def test_footer_counts_where_the_header_says_nothing():
    [sweep] = read_sweeps(f"Voltage (V)\tCurrent (mA)\n{ROWS}\n\nArea: 0.09 cm2\nTemperature: 30 °C\n".encode(), "K.txt")
    assert sweep.area == pytest.approx(0.09) and sweep.temperature == pytest.approx(303.15)


def test_conditions_that_cannot_be_are_left_out_with_a_note():
    recorded = recognise({"Area": "-1 cm2", "Temperature": "9000 K", "Irradiance": "5 klx", "Cells in series": "1e400"})
    assert (recorded.area, recorded.temperature, recorded.irradiance, recorded.series_cells) == (None,) * 4
    assert len(recorded.notes) == 3


def test_an_intensity_series_is_named_by_its_light():
    blocks = [f"Irradiance: {suns} suns\nVoltage (V)\tCurrent (mA)\n{ROWS}\n" for suns in (0.1, 0.5, 1)]
    sweeps = read_sweeps("\n".join(["Sample: K33", *blocks]).encode(), "levels.txt")
    assert [s.name for s in sweeps] == ["K33 forward 0.1 sun", "K33 forward 0.5 sun", "K33 forward 1 sun"]


@pytest.mark.parametrize(
    ("stem", "device", "direction", "lit"),
    [("K07_fwd", "K07", "forward", None), ("K07_rev", "K07", "reverse", None), ("K07_dark", "K07", None, False),
     ("K07_d", "K07", None, False), ("K07_l_r", "K07", "reverse", True), ("K07_fwd_1", "K07", "forward", None),
     ("K07_1", "K07_1", None, None), ("K07_px3_rv_light", "K07_px3", "reverse", True), ("dark_K07", "K07", None, False),
     ("K07 vorwärts hell", "K07", "forward", True), ("K07_D", "K07_D", None, None), ("K07fwd", "K07", "forward", None),
     ("K07_0p5sun_fwd", "K07", "forward", None), ("JV_K07 scan2", "K07", None, None), ("forward", "", "forward", None)],
)  # fmt: skip
def test_device_direction_and_light_in_a_file_name(stem, device, direction, lit):
    assert device_in(stem) == device
    assert from_file_name(stem) == (direction, lit)


def test_light_level_in_a_file_name():
    assert read("", "K07_0p5sun_fwd.txt").irradiance == pytest.approx(0.05)


@pytest.mark.parametrize("line", ["Annealing temperature: 100 °C", "Colour temperature: 5600 K", "Remark: measured up to 1.2 V in the dark room"])
def test_what_is_said_of_other_things_is_no_condition(line):
    sweep = read(line)
    assert sweep.temperature == 298.15 and "temperature" in sweep.assumed
    assert sweep.lit and sweep.direction == "forward"


def test_prose_above_a_table_is_no_title():
    assert read("These cells were kept in the dark for a day and went down in efficiency").lit
    assert not read("Dark sweep").lit


@pytest.mark.parametrize("line", ["Comment: voltage, current", "Series resistance: series resistance", "Scan: V, I"])
def test_an_entry_that_speaks_of_columns_is_no_second_heading(line):
    assert read(f"Operator: somebody\n{line}").voltage.size == VOLTAGE.size


@pytest.mark.parametrize(
    "stem",
    ["light_dark_cols", "jv_summary", "dark_abs", "iv_results", "summary_fwd", "dark_log", "jv_export", "light_perovskite", "dark_2026-05-01"],
)
def test_a_file_without_a_device_in_its_name_is_a_device_of_its_own(stem):
    [sweep] = read_sweeps(b"V (V),J (mA/cm2)\n-0.1,22\n0,21.9\n0.5,21\n0.9,10\n1,-5\n", f"{stem}.csv")
    assert sweep.device == stem


@pytest.mark.parametrize(
    ("stem", "device"),
    [("dark_K07", "K07"), ("JV_A", "A"), ("control_fwd", "control"), ("control_rev", "control"), ("jv_control_fwd", "jv_control"),
     ("scan_K07_fwd_2", "K07"), ("2026-05-01_K07_dark", "2026-05-01_K07")],
)  # fmt: skip
def test_words_around_a_device_are_left_out(stem, device):
    assert device_in(stem) == device
