"""Published sweeps that tests hold the fits against.

T. Easwarakhanthan, J. Bottin, I. Bouhouch, C. Boutrit, "Nonlinear minimization algorithm for determining the solar cell
parameters with microcomputers", Int. J. Solar Energy 4 (1986) 1-12. Citation and points from memory; the points are
confirmed by recomputation: least squares on them lands on the figures known from the literature.
"""

from dataclasses import dataclass

import numpy as np

from core.sweep import Conditions, Sweep

# 57 mm silicon cell, 33 °C.
CELL_VOLTAGE = [
    -0.2057, -0.1291, -0.0588, 0.0057, 0.0646, 0.1185, 0.1678, 0.2132, 0.2545, 0.2924, 0.3269, 0.3585, 0.3873,
    0.4137, 0.4373, 0.4590, 0.4784, 0.4960, 0.5119, 0.5265, 0.5398, 0.5521, 0.5633, 0.5736, 0.5833, 0.5900,
]  # fmt: skip
CELL_CURRENT = [
    0.7640, 0.7620, 0.7605, 0.7605, 0.7600, 0.7590, 0.7570, 0.7570, 0.7555, 0.7540, 0.7505, 0.7465, 0.7385,
    0.7280, 0.7065, 0.6755, 0.6320, 0.5730, 0.4990, 0.4130, 0.3165, 0.2120, 0.1035, -0.0100, -0.1230, -0.2100,
]  # fmt: skip
# Module of 36 cells in series, 45 °C.
MODULE_VOLTAGE = [
    0.1248, 1.8093, 3.3511, 4.7622, 6.0538, 7.2364, 8.3189, 9.3097, 10.2163, 11.0449, 11.8018, 12.4929, 13.1231,
    13.6983, 14.2221, 14.6995, 15.1346, 15.5311, 15.8929, 16.2229, 16.5241, 16.7987, 17.0499, 17.2793, 17.4885,
]  # fmt: skip
MODULE_CURRENT = [
    1.0315, 1.0300, 1.0260, 1.0220, 1.0180, 1.0155, 1.0140, 1.0100, 1.0035, 0.9880, 0.9630, 0.9255, 0.8725,
    0.8075, 0.7265, 0.6345, 0.5345, 0.4275, 0.3185, 0.2085, 0.1010, -0.0080, -0.1110, -0.2090, -0.3030,
]  # fmt: skip


@dataclass(frozen=True)
class Optimum:
    """Least-squares optimum with uniform weights on current residuals, recomputed independently with scipy.

    In A and Ω; ``ideality`` per cell, with k and q as in print: with those of CODATA 2019 it is 1.05e-6 larger.
    """

    photocurrent: float
    saturation_current: float
    series_resistance: float
    shunt_resistance: float
    ideality: float
    rmse: float


CELL_OPTIMUM = Optimum(0.76078797, 3.1068460e-7, 0.03654695, 52.889789, 1.4772678, 7.7300626899e-4)
MODULE_OPTIMUM = Optimum(1.0314338, 2.6380759e-6, 1.2356342, 821.64089, 1.3221728, 2.0529606408e-3)


def cell() -> Sweep:
    """The 26-point silicon cell, in amperes."""
    return Sweep(np.array(CELL_VOLTAGE), np.array(CELL_CURRENT), conditions=Conditions(temperature=306.15))


def module() -> Sweep:
    """The 25-point module, in amperes."""
    return Sweep(
        np.array(MODULE_VOLTAGE), np.array(MODULE_CURRENT), conditions=Conditions(temperature=318.15, series_cells=36)
    )
