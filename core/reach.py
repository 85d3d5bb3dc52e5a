"""Voltages and currents that no sweep of solar cells has: a wrong unit, a misread number, or another kind of file.

Figures without a source are common practice.
"""

from __future__ import annotations

import numpy as np

from .constants import ONE_SUN
from .finding import Finding
from .sweep import Sweep

# Strings of modules are built for systems of up to 1500 V.
VOLTS_AT_MOST = 1500.0
# A sweep that stays within less than this [V] shows nothing of a diode; kT/q is 26 mV.
_VOLTS_AT_LEAST = 0.005
# Forward current of a small cell under strong concentration [A cm⁻²].
DENSITY_AT_MOST = 100.0
# Strings in parallel [A].
AMPERES_AT_MOST = 1000.0
# Source-meters resolve about a femtoampere [A or A cm⁻²].
_CURRENT_AT_LEAST = 1e-15
# Jsc at one sun [A cm⁻²] below which a device hardly responds to light.
_DENSITY_OF_SUN_AT_LEAST = 2e-5


def out_of_reach(sweep: Sweep) -> list[Finding]:
    """Findings on values that are far too large or too small, whatever the cause."""
    volts, amps = float(np.max(np.abs(sweep.voltage))), float(np.max(np.abs(sweep.current)))
    unit, most = ("A cm⁻²", DENSITY_AT_MOST) if sweep.per_area else ("A", AMPERES_AT_MOST)
    if sweep.per_area:
        most *= max(1.0, sweep.irradiance / ONE_SUN)
    findings = []
    if volts > VOLTS_AT_MOST:
        findings.append(_absurd(f"The voltage goes up to {volts:.3g} V, more than any string of modules has.", "voltage"))
    elif volts < _VOLTS_AT_LEAST:
        findings.append(_absurd(f"The voltage stays within {1e3 * volts:.3g} mV, too little to show a diode.", "voltage"))
    if amps > most:
        findings.append(_absurd(f"The current goes up to {amps:.3g} {unit}, more than a device carries.", "current"))
    elif 0 < amps < _CURRENT_AT_LEAST:
        findings.append(_absurd(f"The current stays below {amps:.3g} {unit}, less than a source-meter resolves.", "current"))
    elif sweep.lit and sweep.per_area:
        findings += _dim(sweep)
    return findings


def _dim(sweep: Sweep) -> list[Finding]:
    order = np.argsort(sweep.voltage, kind="stable")
    volts, amps = sweep.voltage[order], sweep.current[order]
    # A sweep that does not reach V = 0 delivers its largest current nearest to it.
    level = float(np.interp(0.0, volts, amps) if volts[0] <= 0 <= volts[-1] else np.max(amps))
    suns = sweep.irradiance / ONE_SUN
    if not 0 < level < _DENSITY_OF_SUN_AT_LEAST * suns:
        return []
    return [
        Finding(
            "density",
            "caution",
            f"A current of {1e3 * level:.3g} mA cm⁻² at V = 0 or nearest to it is very little for {suns:.3g} suns.",
            "Unit, area or irradiance is wrong, or the device hardly responds to light.",
            "Check the unit of current, the area in cm² and the irradiance.",
        )
    ]


def _absurd(what: str, quantity: str) -> Finding:
    return Finding(
        f"{quantity} out of reach",
        "stop",
        what,
        f"The unit of the {quantity} is wrong, its numbers were misread, or this is no sweep; all figures are wrong with it.",
        "Compare the points with the file, and write units into its headings and numbers without thousands signs.",
    )
