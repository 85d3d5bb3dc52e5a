"""Physical constants and standard test conditions, in the units of core."""

from scipy import constants as _codata

BOLTZMANN_OVER_CHARGE = _codata.k / _codata.e  # [V K⁻¹], CODATA through scipy
ZERO_CELSIUS = _codata.zero_Celsius  # [K]

STANDARD_TEMPERATURE = 298.15  # [K], standard test conditions
ONE_SUN = 0.1  # [W cm⁻²], 1000 W m⁻², standard test conditions


def thermal_voltage(temperature: float) -> float:
    """Thermal voltage kT/q [V] at a temperature [K]."""
    return BOLTZMANN_OVER_CHARGE * temperature
