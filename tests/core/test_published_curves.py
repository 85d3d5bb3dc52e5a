"""Curves of published optima: their currents, landmarks and residuals in both objectives in use.

Optima of the 26-point cell and the 25-point module (``published``), recomputed with numpy and scipy apart from this
project. The implicit objective puts the measured current on both sides of the diode equation; it is written out here,
without core.
"""

from dataclasses import dataclass

import numpy as np
import pytest
from scipy import constants

from core.constants import thermal_voltage
from core.diode import OneDiode
from core.two_diode import TwoDiode
from tests.core.published import CELL_OPTIMUM, MODULE_OPTIMUM, Optimum, cell, module

# The printed n belong to k = 1.3806503e-23 J/K and q = 1.60217646e-19 C; n kT/q is what a sweep determines.
PRINTED = 1.3806503e-23 / 1.60217646e-19 / (constants.k / constants.e)
IMPLICIT_CELL = Optimum(0.76077553, 3.2302078e-7, 0.03637709, 53.718522, 1.4811836, 9.8602187789e-4)
IMPLICIT_MODULE = Optimum(1.0305143, 3.4822629e-6, 1.2012710, 981.98218, 1.3511899, 2.4250748681e-3)


@dataclass(frozen=True)
class Data:
    sweep: object
    cells: int
    temperature: float

    def model(self, at: Optimum) -> OneDiode:
        return OneDiode(
            at.photocurrent, at.saturation_current, PRINTED * at.ideality, at.series_resistance, at.shunt_resistance,
            series_cells=self.cells, temperature=self.temperature,
        )  # fmt: skip

    def explicit(self, at: Optimum) -> float:
        return rms(self.model(at).current(self.sweep.voltage) - self.sweep.current)

    def implicit(self, at: Optimum) -> float:
        voltage, current = self.sweep.voltage, self.sweep.current
        junction = voltage + current * at.series_resistance
        diode = at.saturation_current * np.expm1(junction / (PRINTED * at.ideality * self.cells * thermal_voltage(self.temperature)))
        return rms(at.photocurrent - diode - junction / at.shunt_resistance - current)


def rms(residuals):
    return float(np.sqrt(np.mean(residuals**2)))


CELL, MODULE = Data(cell(), 1, 306.15), Data(module(), 36, 318.15)


@pytest.mark.parametrize(
    ("score", "at", "expected"),
    [
        (CELL.implicit, IMPLICIT_CELL, 9.8602187789e-4),
        (CELL.explicit, IMPLICIT_CELL, 7.7539e-4),
        (CELL.implicit, CELL_OPTIMUM, 9.8911e-4),
        (MODULE.implicit, IMPLICIT_MODULE, 2.4250748681e-3),
        (MODULE.explicit, IMPLICIT_MODULE, 2.13853e-3),
        # The parameters that the paper of 1986 prints, rounded to four digits (from memory).
        (CELL.implicit, Optimum(0.7608, 0.3223e-6, 0.0364, 53.76, 1.4837, 9.70e-3), 9.70e-3),
    ],
    ids=["cell, implicit", "cell, crosswise", "cell, crosswise back", "module, implicit", "module, crosswise", "rounded"],
)
def test_each_optimum_scores_what_it_should_in_either_objective(score, at, expected):
    digits = len(f"{expected:.10e}".split("e")[0].rstrip("0").replace(".", ""))
    # The parameters are printed with eight digits, which leaves the residual about six.
    assert score(at) == pytest.approx(expected, rel=max(10.0 ** -(digits - 1), 2e-6))


@pytest.mark.parametrize(
    ("data", "at", "isc", "voc", "vmp", "imp", "pmp", "fill_factor"),
    [
        (CELL, IMPLICIT_CELL, 0.760260, 0.572785, 0.45064, 0.689350, 0.310652, 0.713379),
        (CELL, CELL_OPTIMUM, 0.760262, 0.572780, 0.45069, 0.689383, 0.310695, 0.713481),
        (MODULE, IMPLICIT_MODULE, 1.029250, 16.778194, 12.64589, 0.912517, 11.539591, 0.668228),
        (MODULE, MODULE_OPTIMUM, 1.029881, 16.777065, 12.65298, 0.912887, 11.550744, 0.668509),
    ],
)
def test_landmarks_of_each_optimum(data, at, isc, voc, vmp, imp, pmp, fill_factor):
    marks = data.model(at).landmarks()
    found = (marks.jsc, marks.voc, marks.vmp, marks.jmp, marks.pmp, marks.fill_factor)
    assert found == pytest.approx((isc, voc, vmp, imp, pmp, fill_factor), rel=1.5e-5)
    assert (marks.voc, marks.pmp) == pytest.approx((voc, pmp), rel=2e-6)


def test_currents_at_the_26_voltages():
    expected = [
        0.7641495, 0.7627022, 0.7613738, 0.7601545, 0.7590391, 0.7580108, 0.7570457, 0.7560848, 0.7550223, 0.7535974,
        0.7513273, 0.7473053, 0.7400846, 0.7274262, 0.7070259, 0.6754003, 0.6309982, 0.5721747, 0.4995390, 0.4134849,
        0.3171615, 0.2120167, 0.1026367, -0.0092983, -0.1243613, -0.2091017,
    ]  # fmt: skip
    np.testing.assert_allclose(CELL.model(CELL_OPTIMUM).current(CELL.sweep.voltage), expected, atol=1.5e-7)


def test_two_diodes_at_their_implicit_optimum():
    """n ≤ 2, I0 ≤ 1 µA: 9.8248485e-4, recomputed; the parameters are printed with six to eight digits."""
    model = TwoDiode(
        0.7607811, 2.25974e-7, 7.49347e-7, 0.0367404, 55.48544,
        ideality_1=PRINTED * 1.451017, ideality_2=PRINTED * 2.0, temperature=306.15,
    )  # fmt: skip

    def closed(current):
        junction = CELL.sweep.voltage + current * model.series_resistance
        step = thermal_voltage(306.15)
        first = model.saturation_current_1 * np.expm1(junction / (model.ideality_1 * step))
        second = model.saturation_current_2 * np.expm1(junction / (model.ideality_2 * step))
        return model.photocurrent - first - second - junction / model.shunt_resistance

    assert rms(closed(CELL.sweep.current) - CELL.sweep.current) == pytest.approx(9.8248485e-4, rel=1e-5)
    # Where the model's own current stands for the measured one, the same equation closes.
    current = model.current(CELL.sweep.voltage)
    np.testing.assert_allclose(closed(current), current, rtol=0, atol=1e-12)
