"""Units of the screen: core's A cm⁻² becomes mA cm⁻², or A where no area is known."""

from __future__ import annotations

from dataclasses import dataclass

from core.constants import ZERO_CELSIUS


@dataclass(frozen=True)
class Units:
    """Factors from core to screen, and the words beside the numbers.

    Attributes
    ----------
    letter : str
        ``J`` for densities, ``I`` where no area is known.
    current_factor, power_factor : float
        Screen value = core value times factor.
    current, power, resistance : str
        Unit labels.
    """

    letter: str
    current_factor: float
    power_factor: float
    current: str
    power: str
    resistance: str

    @classmethod
    def of(cls, per_area: bool) -> Units:
        return DENSITY if per_area else ABSOLUTE

    def parameter_factor(self, parameter: str) -> float:
        return self.current_factor if _is_current(parameter) else 1.0

    def parameter_unit(self, parameter: str) -> str:
        if _is_current(parameter):
            return self.current
        return "" if parameter.startswith("ideality") else self.resistance


def _is_current(parameter: str) -> bool:
    return parameter.startswith(("photocurrent", "saturation_current"))


DENSITY = Units("J", 1e3, 1e3, "mA cm⁻²", "mW cm⁻²", "Ω cm²")
ABSOLUTE = Units("I", 1.0, 1.0, "A", "W", "Ω")


def celsius(kelvin: float) -> float:
    return kelvin - ZERO_CELSIUS


def kelvin(degrees_celsius: float) -> float:
    return degrees_celsius + ZERO_CELSIUS
