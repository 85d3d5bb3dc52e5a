"""Values out of reach are found whatever the cause, and values of real devices are not."""

import numpy as np
import pytest

from core.checks import check
from core.diode import OneDiode
from core.reach import out_of_reach
from core.sweep import Conditions, Sweep

CELL = OneDiode(22e-3, 1e-12, 1.6, 3.0, 2000.0)
VOLTAGE = np.linspace(-0.1, 1.05, 116)


def sweep(volts=1.0, amps=1.0, *, per_area=True, lit=True, suns=1.0):
    light = Conditions(lit=lit, irradiance=0.1 * suns if lit else 0.0, area=0.16 if per_area else None)
    return Sweep(volts * VOLTAGE, amps * CELL.current(VOLTAGE), per_area, light)


@pytest.mark.parametrize(
    ("wild", "name"),
    [
        (sweep(volts=1e3 * 1.5), "voltage out of reach"),
        (sweep(volts=1e9), "voltage out of reach"),
        (sweep(volts=1e-3), "voltage out of reach"),
        (sweep(amps=1e4), "current out of reach"),
        (sweep(amps=1e5, per_area=False), "current out of reach"),
        (sweep(amps=1e-15), "current out of reach"),
    ],
)
def test_what_no_device_reaches_stops(wild, name):
    assert (name, "stop") in {(f.name, f.severity) for f in check(wild)}


def test_hardly_any_current_under_a_sun_is_a_caution():
    assert ("density", "caution") in {(f.name, f.severity) for f in check(sweep(amps=1e-4))}
    assert "density" not in {f.name for f in check(sweep(amps=1e-4, suns=1e-3))}


@pytest.mark.parametrize(
    "real",
    [
        sweep(),
        sweep(volts=60),  # a module
        sweep(volts=1300, amps=400, per_area=False),  # a string
        sweep(amps=1000, suns=1000),  # a concentrator
        sweep(amps=1e-9, lit=False),  # a good diode in the dark
        sweep(amps=1e-10, per_area=False),
    ],
)
def test_real_devices_are_within_reach(real):
    assert out_of_reach(real) == []
