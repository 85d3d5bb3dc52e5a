"""Numbers as the screen shows them, and numbers as people type them."""

import math
import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.units import ABSOLUTE, DENSITY, Units, celsius, kelvin
from app.wording import (
    concise,
    difference,
    field,
    number,
    parse_number,
    with_uncertainty,
)
from core.diode import PARAMETERS
from core.errors import ConditionRefused


@pytest.mark.parametrize(
    ("value", "uncertainty", "shown"),
    [
        (22.0123, 0.0312, "22.012"),
        (22.0123, 0.0996, "22.01"),  # 0.10, to two digits
        (1234.5, 100.0, "1230"),
        (400.0, 2300.0, "400"),
        (-0.5, 0.02, "−0.500"),
        (1.2e-9, 3e-11, "1.200·10⁻⁹"),
        (5e-4, 0.01, "0.001"),
        (-1e-4, 0.1, "0.00"),
        (0.0, 0.01, "0.000"),
        (0.6543, 1e-12, "0.6543000"),
        (22.0123, None, "22.01"),
        (22.0123, math.inf, "22.01"),
        (22.0, 0.0, "22.00"),
        (9.9996, None, "10.00"),
        (0.99996, None, "1.000"),
        (9.99996e-4, None, "0.001000"),
        (999999.6, None, "1.000·10⁶"),
        (1.234e-4, None, "1.234·10⁻⁴"),
        (-1e-5, None, "−1.000·10⁻⁵"),
        (0.0, None, "0"),
        (math.inf, None, "∞"),
        (-math.inf, 1.0, "−∞"),
        (math.nan, 0.1, "–"),
        (None, None, "–"),
    ],
)
def test_a_number_carries_the_digits_that_its_uncertainty_allows(value, uncertainty, shown):
    assert number(value, uncertainty) == shown


def significant(shown):
    return len(re.sub(r"·10.*|[−.]", "", shown).lstrip("0"))


@given(st.floats(1e-30, 1e30), st.integers(1, 8))
def test_without_an_uncertainty_the_digits_asked_for_are_shown(value, digits):
    shown = number(value, digits=digits)
    if "·10" in shown or value < 10.0 ** (digits - 1):
        assert significant(shown) == digits
    assert parse_number(shown, "x") == pytest.approx(value, rel=0.51 * 10.0 ** (1 - digits))


@pytest.mark.parametrize(
    ("value", "uncertainty", "shown"),
    [
        (22.0123, 0.0312, "22.01(3)"),
        (22.0123, 0.0996, "22.0(1)"),
        (0.76078, 3.4e-4, "0.7608(3)"),
        (-0.5, 0.02, "−0.50(2)"),
        (1.2e-9, 3e-11, "1.20(3)·10⁻⁹"),
        (2e7, 3e5, "2.00(3)·10⁷"),
        (1234.5, 100.0, "1200(100)"),
        (1234.5, 2300.0, "1000(2000)"),
        (5e-4, 0.01, "0.00(1)"),
        (0.0, 0.01, "0.00(1)"),
        (0.6543, 1e-12, "0.6543000"),
        (12.3, None, "12.30"),
        (12.3, math.inf, "12.30"),
        (math.nan, 0.1, "–"),
        (None, 0.1, "–"),
    ],
)
def test_concise_notation_puts_the_uncertainty_of_the_last_digits_in_brackets(value, uncertainty, shown):
    assert concise(value, uncertainty) == shown


@given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e3))
def test_concise_notation_says_what_it_was_given(value, uncertainty):
    """Read back as the Guide defines it: the digits in brackets count in units of the last place before them."""
    shown = concise(value, uncertainty)
    if "(" not in shown:  # more digits than a table shows
        assert abs(value) > 1e5 * uncertainty
        return
    mantissa, digits, power = re.fullmatch(r"(.*)\((\d+)\)(.*)", shown).groups()
    place = 10.0 ** -len(mantissa.partition(".")[2]) * (parse_number("1" + power, "x"))
    assert int(digits) * place == pytest.approx(uncertainty, rel=0.51)
    assert parse_number(mantissa + power, "x") == pytest.approx(value, abs=5.1 * 10.0 ** math.floor(math.log10(uncertainty)))


def test_with_uncertainty_shows_two_digits_of_it():
    assert with_uncertainty(22.0123, 0.0312) == "22.012 ± 0.031"
    assert with_uncertainty(22.0123, None) == "22.01"
    assert with_uncertainty(math.nan, 0.1) == "–"


@pytest.mark.parametrize(
    ("typed", "value"),
    [
        ("22.5", 22.5),
        ("1,2", 1.2),
        (" 1.2e-9 ", 1.2e-9),
        ("1.2E-9", 1.2e-9),
        ("−1,5e−3", -1.5e-3),
        ("1.2·10⁻⁹", 1.2e-9),
        ("1,2 × 10⁻⁹", 1.2e-9),
        ("1.2*10^-9", 1.2e-9),
        ("10⁻⁹", 1e-9),
        ("-10^6", -1e6),
        ("10", 10.0),
        ("1 000", 1000.0),
        ("1\u202f000", 1000.0),
        ("1\u00a0000", 1000.0),
        ("∞", math.inf),
        ("inf", math.inf),
        ("0,250", 0.25),
        ("1,0000", 1.0),
        ("1,25", 1.25),
        ("1,234e-9", 1.234e-9),
        ("9 cm²", 9.0),
        ("9cm^2", 9.0),
        ("1,5·10⁻² cm2", 0.015),
    ],
)
def test_a_typed_number_is_understood_in_every_usual_spelling(typed, value):
    assert parse_number(typed, "Area", "cm²") == value


@pytest.mark.parametrize("typed", ["1,000", "-1,234", "12,345", "999,000", "1,000 cm²"])
def test_what_may_separate_thousands_or_decimals_is_asked_about(typed):
    with pytest.raises(ConditionRefused, match=r"^Area: “.*” can mean \d+\.\d{3} or \d{4,6}\. Type it like"):
        parse_number(typed, "Area", "cm²")


@pytest.mark.parametrize("typed", ["1e999", "-1e999", "1e-400", "3,5e-999"])
def test_a_number_that_the_program_cannot_carry_is_neither_infinity_nor_zero(typed):
    with pytest.raises(ConditionRefused, match="too (large|small)"):
        parse_number(typed, "Area")


@pytest.mark.parametrize(
    ("unit", "spellings"),
    [
        ("mA cm⁻²", ["mA/cm2", "mA/cm²", "mA cm^-2", "mA·cm⁻²", "mAcm-2"]),
        ("mW cm⁻²", ["mW/cm²", "mW cm-2"]),
        ("Ω cm²", ["ohm cm2", "Ohm·cm²", "\u2126 cm^2"]),
        ("°C", ["C", "°C", "degC"]),
        ("%", ["%", "percent"]),
    ],
)
def test_the_unit_of_a_field_may_be_spelt_in_every_usual_way(unit, spellings):
    for spelt in spellings:
        assert parse_number(f"2.5 {spelt}", "x", unit) == 2.5


@pytest.mark.parametrize("unit", ["", "mA cm⁻²", "°C"])
def test_another_unit_is_refused_with_the_one_that_the_field_takes(unit):
    with pytest.raises(ConditionRefused, match=f"takes a.* {unit or 'plain number'}"):
        parse_number("22 mV", "x", unit)


def test_limits_are_named_in_the_unit_of_the_field():
    assert parse_number("20", "n", limits=(0.1, 20)) == 20
    with pytest.raises(ConditionRefused, match=r"^n has to be from 0.1 to 20, not “20.1”; it stays as it was\. Mind it\.$"):
        parse_number("20.1", "n", limits=(0.1, 20), remedy="Mind it.")
    with pytest.raises(ConditionRefused, match="from 0 to 5 eV"):
        parse_number("inf", "gap", "eV", limits=(0, 5))


@pytest.mark.parametrize("typed", ["", "n/a", "1 2", "nan", "1,2,3", "1,000.5", "1.000,5", "0x10", "5²", "12 mV", "--3", "·10⁻³"])
def test_what_is_no_number_is_told_with_what_it_is_for(typed):
    with pytest.raises(ConditionRefused, match=r"^Area: .*Type it like .*\.$"):
        parse_number(typed, "Area")


def test_a_long_text_is_quoted_in_part():
    with pytest.raises(ConditionRefused) as refused:
        parse_number("x" * 5000, "Area")
    assert len(str(refused.value)) < 150


@given(st.floats(1e-30, 1e30) | st.just(math.inf))
def test_a_field_can_be_typed_back(value):
    assert parse_number(field(value), "x") == pytest.approx(value, rel=1e-4)


def test_densities_are_shown_per_area_and_currents_in_amperes():
    assert Units.of(True) is DENSITY and Units.of(False) is ABSOLUTE
    assert (DENSITY.letter, DENSITY.current, DENSITY.power, DENSITY.resistance) == ("J", "mA cm⁻²", "mW cm⁻²", "Ω cm²")
    assert (ABSOLUTE.letter, ABSOLUTE.current, ABSOLUTE.power, ABSOLUTE.resistance) == ("I", "A", "W", "Ω")
    shown = {name: (0.022 * DENSITY.parameter_factor(name), DENSITY.parameter_unit(name)) for name in PARAMETERS}
    assert shown == {
        "photocurrent": (22.0, "mA cm⁻²"),
        "saturation_current": (22.0, "mA cm⁻²"),
        "ideality": (0.022, ""),
        "series_resistance": (0.022, "Ω cm²"),
        "shunt_resistance": (0.022, "Ω cm²"),
    }
    assert {ABSOLUTE.parameter_factor(name) for name in PARAMETERS} == {1.0}


def test_temperatures_are_shown_in_degrees_celsius():
    assert celsius(298.15) == pytest.approx(25.0)
    assert celsius(kelvin(-40.0)) == pytest.approx(-40.0)


@pytest.mark.parametrize(
    ("gap", "uncertainty", "text"),
    [(4.4e-7, 2e-5, "0.00000"), (-0.017, 0.02, "−0.02"), (0.5, None, "+0.50"), (12, 30, "+12"), (0.0, 1e-3, "0.000"), (-1.26, 0.1, "−1.3")],
)
def test_a_difference_goes_as_far_as_what_it_is_taken_from(gap, uncertainty, text):
    assert difference(gap, uncertainty) == text
