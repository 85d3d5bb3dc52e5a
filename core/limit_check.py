"""Whether a measured photocurrent is possible at all for the band gap of its device."""

from __future__ import annotations

from .constants import ONE_SUN
from .detailed_balance import limiting_photocurrent
from .finding import Finding
from .quantity import Quantity


def check_against_limit(jsc: Quantity, band_gap: float, irradiance: float = ONE_SUN) -> tuple[Finding, ...]:
    """A finding if Jsc [A cm⁻²] lies above what AM1.5G can give at this gap [eV], by more than its noise.

    Raises
    ------
    ConditionRefused
        If the gap lies outside the spectrum's table, or there is no light.
    """
    most = limiting_photocurrent(band_gap, irradiance)
    if jsc.value is None or jsc.value <= most + 2 * (jsc.uncertainty or 0.0):
        return ()
    return (
        Finding(
            "photocurrent above the limit",
            "stop",
            f"Jsc is {1e3 * jsc.value:.4g} mA cm⁻²; a gap of {band_gap:.4g} eV allows {1e3 * most:.4g} mA cm⁻² at most.",
            "The area, the lamp's spectrum or irradiance, or the band gap is wrong.",
            "Check the area first (a mask smaller than the electrode, light from the side), then the lamp and the gap.",
        ),
    )
