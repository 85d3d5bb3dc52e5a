"""The detailed-balance limit of one junction under AM1.5G.

Every photon above the band gap gives one electron, and the only recombination is black-body emission of the cell.
Emission from the front alone (a perfect mirror behind the cell) and from both faces are the two conventions in print;
they differ by kT·ln 2/q of Voc, 17.8 mV at 25 °C.

References
----------
W. Shockley, H. J. Queisser, J. Appl. Phys. 32 (1961) 510 (from memory). Spectrum: ASTM G173-03, see ``spectra``.
"""

from __future__ import annotations

import math
from functools import lru_cache
from pathlib import Path
from typing import Literal

import numpy as np
from scipy import constants as _codata
from scipy.optimize import brentq

from .constants import ONE_SUN, STANDARD_TEMPERATURE, thermal_voltage
from .diode import Landmarks, OneDiode
from .errors import ConditionRefused

Emission = Literal["front", "both"]

_SPECTRUM = Path(__file__).parent / "spectra" / "astm_g173_global_tilt.csv"
_NANOMETRE_ELECTRONVOLT = 1e9 * _codata.h * _codata.c / _codata.e  # photon energy [eV] times wavelength [nm]
# 2πq/(h³c²) with energies in eV: current density of black-body emission [A cm⁻² eV⁻³].
_EMISSION = 1e-4 * 2 * math.pi * _codata.e * _codata.e**3 / (_codata.h**3 * _codata.c**2)
_FACES = {"front": 1.0, "both": 2.0}
# Below this wavelength [nm] the table holds next to no light: a limit there would be rounding.
_SHORTEST = 300.0


def limit(
    band_gap: float,
    temperature: float = STANDARD_TEMPERATURE,
    irradiance: float = ONE_SUN,
    emission: Emission = "front",
) -> Landmarks:
    """Jsc, Voc, maximum power point and fill factor at the limit.

    Parameters
    ----------
    band_gap : float
        [eV]
    temperature : float
        Of the cell [K].
    irradiance : float
        [W cm⁻²]; scales the photon flux of AM1.5G, which stands for 0.1 W cm⁻² (its table carries 0.10004).
    emission : "front" or "both"
        Faces that emit.

    Returns
    -------
    Landmarks
        The efficiency is ``pmp / irradiance``.

    Raises
    ------
    ConditionRefused
        If the gap lies outside the spectrum's table, or a condition makes no sense.
    """
    return limiting_diode(band_gap, temperature, irradiance, emission).landmarks()


def limiting_diode(
    band_gap: float,
    temperature: float = STANDARD_TEMPERATURE,
    irradiance: float = ONE_SUN,
    emission: Emission = "front",
) -> OneDiode:
    """The limit as a diode: n = 1, Rs = 0, no shunt. Arguments and errors as for ``limit``."""
    return OneDiode(
        photocurrent=limiting_photocurrent(band_gap, irradiance),
        saturation_current=radiative_saturation_current(band_gap, temperature, emission),
        ideality=1.0,
        series_resistance=0.0,
        shunt_resistance=math.inf,
        temperature=temperature,
    )


def limiting_photocurrent(band_gap: float, irradiance: float = ONE_SUN) -> float:
    """Photocurrent [A cm⁻²] if every photon of AM1.5G above the gap [eV] gives one electron."""
    if not (math.isfinite(irradiance) and irradiance > 0):
        raise ConditionRefused("The detailed-balance limit needs an irradiance above zero; it is not defined in the dark.")
    wavelength, flux, below = _photon_flux()
    low, high = gap_range()
    if not low <= band_gap <= high:
        raise ConditionRefused(
            f"A band gap of {band_gap:.4g} eV lies outside the AM1.5G table, which serves gaps from "
            f"{low:.2f} to {high:.2f} eV; check the gap and its unit."
        )
    edge = min(max(_NANOMETRE_ELECTRONVOLT / band_gap, wavelength[0]), wavelength[-1])
    last = min(int(np.searchsorted(wavelength, edge, side="right")) - 1, wavelength.size - 2)
    part = edge - wavelength[last]
    at_edge = flux[last] + (flux[last + 1] - flux[last]) * part / (wavelength[last + 1] - wavelength[last])
    return float((below[last] + 0.5 * (flux[last] + at_edge) * part) * irradiance / ONE_SUN)


def radiative_saturation_current(
    band_gap: float, temperature: float = STANDARD_TEMPERATURE, emission: Emission = "front"
) -> float:
    """J0 [A cm⁻²] of a cell that loses charge by black-body emission above its gap [eV] alone.

    2πq/(h³c²)·∫E²/(exp(E/kT) − 1)dE from the gap upwards, times the number of emitting faces. With x = Eg/kT the
    integral is (kT)³·Σ exp(−jx)·(x²/j + 2x/j² + 2/j³), whose terms are summed down to rounding.
    """
    if emission not in _FACES:
        raise ConditionRefused("The emission is that of the front alone or of both faces.")
    if not 50 <= temperature <= 1000:
        raise ConditionRefused(f"A cell temperature of {temperature:.4g} K is outside 50 to 1000 K; check the unit.")
    if not band_gap > 0:
        raise ConditionRefused("The band gap must be a number above zero in eV.")
    energy = thermal_voltage(temperature)  # kT [eV]
    ratio = band_gap / energy
    total = 0.0
    for term in range(1, 200):
        addend = math.exp(-term * ratio) * (ratio**2 / term + 2 * ratio / term**2 + 2 / term**3)
        total += addend
        if addend <= 1e-17 * total:
            break
    saturation = _FACES[emission] * _EMISSION * energy**3 * total
    if saturation < 1e-290:
        raise ConditionRefused(
            f"At {temperature:.4g} K a gap of {band_gap:.4g} eV emits too little to be computed; check the temperature."
        )
    return saturation


def radiative_voltage(
    jsc: float, band_gap: float, temperature: float = STANDARD_TEMPERATURE, emission: Emission = "front"
) -> float:
    """Vrad = Vt·ln(1 + Jsc/J0,rad) [V]: Voc of a cell of this Jsc [A cm⁻²] if all recombination were radiative."""
    saturation = radiative_saturation_current(band_gap, temperature, emission)
    return thermal_voltage(temperature) * math.log1p(jsc / saturation)


def radiative_efficiency(
    jsc: float,
    voc: float,
    band_gap: float,
    temperature: float = STANDARD_TEMPERATURE,
    emission: Emission = "front",
) -> float:
    """External radiative efficiency that Voc implies, exp[(Voc − Vrad)/Vt] [-].

    Parameters
    ----------
    jsc, voc : float
        [A cm⁻²], [V]
    band_gap : float
        [eV]; an error of 26 meV changes the result by a factor of about e.
    temperature, emission
        As for ``limit``.

    Raises
    ------
    ConditionRefused
        If there is no photocurrent, or a condition makes no sense.

    References
    ----------
    U. Rau, Phys. Rev. B 76 (2007) 085303; M. A. Green, Prog. Photovolt. 20 (2012) 472 (both from memory).
    """
    if not jsc > 0:
        raise ConditionRefused("The radiative efficiency needs a Jsc above zero.")
    vrad = radiative_voltage(jsc, band_gap, temperature, emission)
    return math.exp((voc - vrad) / thermal_voltage(temperature))


def gap_from_photocurrent(jsc: float, irradiance: float = ONE_SUN) -> float:
    """The largest band gap [eV] that could give a Jsc [A cm⁻²]: the gap whose limiting photocurrent it equals.

    A device collects less than every photon, so its own gap is smaller; whoever uses this must mark it assumed.

    Raises
    ------
    ConditionRefused
        If no gap of the table gives that Jsc.
    """
    low, high = gap_range()
    most, least = limiting_photocurrent(low, irradiance), limiting_photocurrent(high, irradiance)
    if not least < jsc <= most:
        raise ConditionRefused(
            f"A Jsc of {1e3 * jsc:.4g} mA cm⁻² belongs to no band gap: at this irradiance AM1.5G gives at most "
            f"{1e3 * most:.4g} mA cm⁻². Check the area, the unit and the irradiance, or type the band gap."
        )
    return float(brentq(lambda gap: limiting_photocurrent(gap, irradiance) - jsc, low, high, xtol=1e-12))


@lru_cache(maxsize=1)
def gap_range() -> tuple[float, float]:
    """Smallest and largest band gap [eV] that the table serves."""
    wavelength = spectrum()[0]
    return float(_NANOMETRE_ELECTRONVOLT / wavelength[-1]), _NANOMETRE_ELECTRONVOLT / _SHORTEST


@lru_cache(maxsize=1)
def spectrum() -> tuple[np.ndarray, np.ndarray]:
    """AM1.5G: wavelength [nm] and spectral irradiance [W m⁻² nm⁻¹], shapes (2002,), read-only."""
    wavelength, irradiance = np.loadtxt(_SPECTRUM, delimiter=",", skiprows=5, unpack=True, encoding="utf-8")
    wavelength.setflags(write=False)
    irradiance.setflags(write=False)
    return wavelength, irradiance


@lru_cache(maxsize=1)
def _photon_flux() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Wavelength [nm], photon flux as current [A cm⁻² nm⁻¹], and its integral from the short end [A cm⁻²]."""
    wavelength, irradiance = spectrum()
    flux = 1e-4 * irradiance * wavelength / _NANOMETRE_ELECTRONVOLT
    steps = 0.5 * (flux[1:] + flux[:-1]) * np.diff(wavelength)
    return wavelength, flux, np.concatenate([[0.0], np.cumsum(steps)])

