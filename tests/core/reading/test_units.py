import pytest

from core.reading.units import parse_label, parse_unit


@pytest.mark.parametrize("text", ["mA/cm2", "mA/cm²", "mA cm^-2", "mA·cm⁻²", "mA cm−2", "mA*cm^-2", "$mA/cm^{2}$", "mA per cm2", "mA/sqcm", "MA/CM2"])
def test_milliamperes_per_square_centimetre(text):
    unit = parse_unit(text)
    assert (unit.kind, unit.factor) == ("density", pytest.approx(1e-3))


@pytest.mark.parametrize(
    ("text", "kind", "factor"),
    [("V", "voltage", 1), ("mV", "voltage", 1e-3), ("volts", "voltage", 1), ("A", "current", 1), ("uA", "current", 1e-6),
     ("µA", "current", 1e-6), ("μA", "current", 1e-6), ("nA", "current", 1e-9), ("A/m²", "density", 1e-4), ("A m^-2", "density", 1e-4),
     ("mW/cm2", "other", 1), ("s", "other", 1)],
)  # fmt: skip
def test_units(text, kind, factor):
    unit = parse_unit(text)
    assert (unit.kind, unit.factor) == (kind, pytest.approx(factor))


@pytest.mark.parametrize("text", ["", "Pixel A", "UV", "forward", "K07", "V V", "cm2", "A" * 100])
def test_what_is_no_unit(text):
    assert parse_unit(text) is None


@pytest.mark.parametrize(
    ("text", "kind", "factor"),
    [("U / V", "voltage", 1), ("U (V)", "voltage", 1), ("Spannung in mV", "voltage", 1e-3), ("V_meas (V)", "voltage", 1),
     ("Stromdichte [mA/cm²]", "density", 1e-3), ("J / mA cm-2", "density", 1e-3), ("Measured Current, A", "current", 1),
     ("Current (mA/cm2)", "density", 1e-3), ("I_fwd_mA", "current", 1e-3), ("I2", "current", None), ("Vset", "voltage", None),
     ("Power (mW/cm2)", "other", 1), ("|J| (mA/cm2)", "density", 1e-3), ("Time (s)", "other", 1), ("Pixel A", None, None)],
)  # fmt: skip
def test_headings(text, kind, factor):
    label = parse_label(text)
    assert label.kind == kind
    assert label.factor == (None if factor is None else pytest.approx(factor))


def test_headings_name_role_direction_and_light():
    assert parse_label("V_set (V)").role == "set"
    assert parse_label("Vmeas").role == "measured"
    assert parse_label("J reverse (mA/cm2)").direction == "reverse"
    assert parse_label("J_dark").lit is False
    assert parse_label("|J| (mA/cm2)").magnitude and parse_label("abs I").magnitude
