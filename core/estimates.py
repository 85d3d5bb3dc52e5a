"""Estimates beside the fit: numbers read off the sweeps by published methods, each with its name and source.

They need no fit and share few of its assumptions, so how far they agree with it and with each other shows how far the
parameters can be trusted. None of them corrects the fit.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from . import series_resistance as methods
from .constants import thermal_voltage
from .dark_slope import LOWEST_VOLTAGE, DarkSlope, dark_slope
from .diode import OneDiode
from .drops import voltage_at_drop
from .fill_factor import GREEN, normalised, published
from .intensity import (
    PseudoCurve,
    Reading,
    light_ideality,
    pseudo_curve,
    resistance_from_levels,
    resistance_from_pseudo_curve,
)
from .local_ideality import local_ideality
from .metrics import measure
from .models import Model, one_diode_like
from .quantity import Metrics, Quantity
from .sweep import Sweep

SAH = "C.-T. Sah, R. N. Noyce, W. Shockley, Proc. IRE 45 (1957) 1228"
KIRCHARTZ = "T. Kirchartz et al., J. Phys. Chem. Lett. 4 (2013) 2371"
_PRACTICE = "common practice"
_SAME_SLOPE = 0.2  # plateau conductances that differ by less, in the dark and under light, count as the same
_WIDTHS = 2.0  # … or by less than so many standard uncertainties


@dataclass(frozen=True, slots=True)
class Estimate:
    """One number read off by one method.

    Attributes
    ----------
    name : str
        What it is, for a table.
    parameter : str
        What it speaks of: a name of PARAMETERS, "fill_factor", or "slope_resistance" for a slope of the curve that is
        neither Rs nor Rsh.
    value, uncertainty : float or None
        In core's units; the statistical standard uncertainty where it is known.
    method, source : str
        In words, and where it is published.
    note : str
        What to bear in mind, or why there is no value; "" if nothing.
    """

    name: str
    parameter: str
    value: float | None
    uncertainty: float | None
    method: str
    source: str
    note: str = ""


def estimates(
    sweep: Sweep, *, dark: Sweep | None = None, levels: Sequence[Sweep] = (), model: Model | None = None
) -> tuple[Estimate, ...]:
    """All estimates that the given sweeps allow.

    Parameters
    ----------
    sweep : Sweep
        The lit sweep in question, or a dark one.
    dark : Sweep or None
        The dark sweep of the same device.
    levels : sequence of Sweep
        Lit sweeps of the device at other light levels; ``sweep`` itself may be among them.
    model : OneDiode, TwoDiode or None
        The fit, for the published fill factor; without it the estimates themselves stand in.

    Returns
    -------
    tuple of Estimate
        In the order of a table. One without value says why in its note.
    """
    if not sweep.lit:
        return tuple(_of_dark_sweep(sweep))
    marks = measure(sweep)
    if dark is not None and (dark.lit or dark.per_area != sweep.per_area or dark.series_cells != sweep.series_cells):
        dark = None
    found = list(_slopes(sweep, dark, marks))
    line = dark_slope(dark) if dark is not None else None
    if dark is not None:
        found += _of_dark_sweep(dark, line)
        found += _light_against_dark(dark, marks)
    found.append(_local_ideality(sweep, "under light"))
    others = [level for level in levels if level is not sweep]
    if others:
        found += _over_levels(sweep, others, marks)
    found.append(_fill_factor(sweep, marks, model, line, found))
    return tuple(found)


def shunt_confirmed(lit: Sweep, dark: Sweep | None) -> bool:
    """Whether the dark sweep has the same slope at V = 0, so that the plateau's slope is a shunt and not collection."""
    if dark is None or dark.lit or dark.per_area != lit.per_area:
        return False
    light, unlit = measure(lit).slope_resistance_jsc, measure(dark).slope_resistance_jsc
    return light.value is not None and unlit.value is not None and _same_slope(light, unlit)


def _same_slope(light: Quantity, unlit: Quantity) -> bool:
    in_light, in_dark = 1.0 / light.value, 1.0 / unlit.value  # conductances, and the spread of their difference
    spread = math.hypot((light.uncertainty or 0.0) * in_light**2, (unlit.uncertainty or 0.0) * in_dark**2)
    return abs(in_light - in_dark) <= max(_SAME_SLOPE * in_light, _WIDTHS * spread)


def plateau_reading(lit: Sweep, dark: Sweep | None = None) -> str:
    """What the slope of the plateau under light means, as one sentence.

    It is called shunt or voltage-dependent collection unless the dark sweep has the same slope at V = 0.
    """
    unit = "Ω cm²" if lit.per_area else "Ω"
    light = measure(lit).slope_resistance_jsc
    if light.value is None:
        return f"The plateau under light tells nothing of a shunt ({light.reason})."
    told = f"The plateau's slope of {_figure(light.value)} {unit} at V = 0"
    either = "is shunt or voltage-dependent collection"
    if dark is None or dark.lit or dark.per_area != lit.per_area:
        return f"{told} {either}; a dark sweep of the device would tell which."
    unlit = measure(dark).slope_resistance_jsc
    if unlit.value is None and not unlit.reason.startswith("not determined"):
        return f"{told} {either}; the dark sweep does not tell which ({unlit.reason})."
    if unlit.value is None:
        return f"{told} {either}; the dark sweep is flat within its noise there, which speaks for collection."
    in_light, in_dark = 1.0 / light.value, 1.0 / unlit.value
    if _same_slope(light, unlit):
        return f"{told} is a shunt: the dark sweep has the same slope there, {_figure(unlit.value)} {unit}."
    if in_light > in_dark:
        return (
            f"{told} {either}: the dark sweep, {_figure(unlit.value)} {unit} there, "
            f"accounts for {100 * in_dark / in_light:.0f} % of it as a shunt."
        )
    return (
        f"{told} {either}; the dark sweep conducts more than that ({_figure(unlit.value)} {unit}), "
        "so check that both are of the same device in the same state."
    )


def _slopes(sweep: Sweep, dark: Sweep | None, marks: Metrics) -> Iterator[Estimate]:
    yield _measured(
        "slope at Jsc", marks.slope_resistance_jsc, "−dV/dJ at V = 0 under light", plateau_reading(sweep, dark)
    )
    yield _measured(
        "slope at Voc",
        marks.slope_resistance_voc,
        "−dV/dJ at J = 0 under light",
        "A slope of the curve: Rs and the diode's own n·Ns·kT/q/Jsc together.",
    )


def _measured(name: str, quantity: Quantity, method: str, note: str) -> Estimate:
    if quantity.value is None:
        note = _sentence(quantity.reason)
    return Estimate(name, "slope_resistance", quantity.value, quantity.uncertainty, method, _PRACTICE, note)


def _of_dark_sweep(dark: Sweep, line: DarkSlope | None = None) -> Iterator[Estimate]:
    line = line or dark_slope(dark)
    method = "straight line through the steepest decade of the dark sweep"
    names = ("n from the dark sweep", "ideality"), ("J0 from the dark sweep", "saturation_current")
    if line is None:
        note = "No decade of the dark current stands clear of noise."
        for name, parameter in names:
            yield Estimate(name, parameter, None, None, method, SAH, note)
    else:
        taken_off = "" if math.isinf(line.shunt_resistance) else ", the current of the slope at V = 0 taken off"
        note = f"Between {line.low:.3g} and {line.high:.3g} V{taken_off}; Rs can only make it larger."
        yield Estimate(*names[0], line.ideality, line.ideality_uncertainty, method, SAH, note)
        spread = line.saturation_current * line.log_uncertainty
        yield Estimate(*names[1], line.saturation_current, spread, method, SAH, "It goes with this n alone.")
    yield _local_ideality(dark, "in the dark")
    plateau = measure(dark).slope_resistance_jsc
    note = _sentence(plateau.reason) or "Rsh and Rs together, as far as the diode carries nothing there."
    yield Estimate(
        "slope of the dark sweep at V = 0",
        "shunt_resistance",
        plateau.value,
        plateau.uncertainty,
        "−dV/dJ at V = 0 in the dark",
        _PRACTICE,
        note,
    )


def _local_ideality(sweep: Sweep, where: str) -> Estimate:
    name = f"smallest local ideality {where}"
    method = "smallest (dV/d ln J)/(Ns·kT/q), as the median of three neighbours"
    voltage, ideality = local_ideality(sweep)
    high = voltage > LOWEST_VOLTAGE * sweep.series_cells * thermal_voltage(sweep.temperature)
    voltage, ideality = voltage[high], ideality[high]
    if ideality.size < 3:
        note = "The points do not show a local slope that stands clear of noise."
        return Estimate(name, "ideality", None, None, method, SAH, note)
    smooth = np.median(np.lib.stride_tricks.sliding_window_view(ideality, 3), axis=1)
    best = int(np.argmin(smooth))
    note = f"At {voltage[best + 1]:.3g} V" + (", which under light contains the drop J·Rs." if sweep.lit else ".")
    return Estimate(name, "ideality", float(smooth[best]), None, method, SAH, note)


def _light_against_dark(dark: Sweep, marks: Metrics) -> Iterator[Estimate]:
    parameter = "series_resistance"
    shift, method = None, "[Vdark(Jsc) − Voc]/Jsc"
    name, note = "Rs from the dark shift at Voc", "The sweeps do not reach Jsc in the dark, or Voc under light."
    jsc, voc = marks.jsc, marks.voc
    found = None
    if jsc.value is not None and jsc.value > 0 and voc.value is not None:
        found = voltage_at_drop(dark, 0.0, jsc.value)
    if found is None:
        yield Estimate(name, parameter, None, None, method, methods.ABERLE, note)
    else:
        shift = methods.from_dark_shift(found[0], voc.value, jsc.value)
        spread = _together(found[1], voc.uncertainty, jsc.value)
        yield Estimate(name, parameter, shift, spread, method, methods.ABERLE)
    name, method = "Rs from the dark shift at Vmp", "[Vdark(Jsc − Jmp) − Vmp − (Jsc − Jmp)·Rs,dark]/Jmp"
    found = None
    if shift is not None and marks.jmp.value is not None:
        found = voltage_at_drop(dark, 0.0, jsc.value - marks.jmp.value)
    if found is None:
        yield Estimate(name, parameter, None, None, method, methods.ABERLE, "The dark sweep does not reach Jsc − Jmp.")
        return
    value = methods.from_dark_at_maximum(found[0], marks.vmp.value, jsc.value, marks.jmp.value, shift)
    spread = _together(found[1], marks.vmp.uncertainty, marks.jmp.value)
    yield Estimate(name, parameter, value, spread, method, methods.ABERLE)


def _over_levels(sweep: Sweep, others: Sequence[Sweep], marks: Metrics) -> Iterator[Estimate]:
    every = [sweep, *others]
    yield _read("light ideality", "ideality", light_ideality(every), "(dVoc/d ln G)/(Ns·kT/q)", KIRCHARTZ)
    shifted = resistance_from_levels(sweep, others)
    method = "shift of the points ΔJ = Jsc − Jmp below each level's Jsc"
    yield _read("Rs from light levels", "series_resistance", shifted, method, methods.WOLF)
    curve = pseudo_curve(every)
    brightest = max(every, key=lambda level: measure(level).jsc.value or 0.0)
    if isinstance(curve, str) or brightest is not sweep:
        why = curve if isinstance(curve, str) else "It belongs to the brightest level."
        yield _read("Rs from Voc at each level", "series_resistance", Reading(None, note=why), "", methods.SINTON)
        return
    shifted = resistance_from_pseudo_curve(sweep, curve)
    yield _read("Rs from Voc at each level", "series_resistance", shifted, "(Vpseudo − V)/J", methods.SINTON)
    yield from _pseudo_fill_factor(curve, marks)


def _pseudo_fill_factor(curve: PseudoCurve, marks: Metrics) -> Iterator[Estimate]:
    pseudo = curve.fill_factor()
    method = "largest power of the curve of Voc over Jsc at each level"
    yield _read("pseudo fill factor", "fill_factor", pseudo, method, methods.SINTON)
    if pseudo.value is None or marks.fill_factor.value is None:
        return
    jsc, voc, fill_factor = marks.jsc.value, marks.voc.value, marks.fill_factor.value
    value = methods.from_fill_factors_at_maximum(fill_factor, pseudo.value, voc, jsc, marks.jmp.value)
    spread = None
    if marks.fill_factor.uncertainty is not None:
        spread = marks.fill_factor.uncertainty * voc * jsc / marks.jmp.value**2
    name = "Rs from the pseudo fill factor"
    yield Estimate(name, "series_resistance", value, spread, "(pFF − FF)·Voc·Jsc/Jmp²", methods.PYSCH)


def _fill_factor(
    sweep: Sweep, marks: Metrics, model: Model | None, line: DarkSlope | None, found: Sequence[Estimate]
) -> Estimate:
    """Measured Jsc and Voc with n, Rs and Rsh from the fit, or from the estimates where there is no fit."""
    name, method = "fill factor from v, r_s and r_sh", "published expression"
    jsc, voc = marks.jsc.value, marks.voc.value
    if jsc is None or voc is None or not jsc > 0:
        return Estimate(name, "fill_factor", None, None, method, GREEN, "It needs Jsc and Voc.")
    if model is not None:
        one = model if isinstance(model, OneDiode) else one_diode_like(model)
        ideality, series, shunt = one.ideality, one.series_resistance, one.shunt_resistance
        note = "With n, Rs and Rsh of the fit" + ("." if one is model else ", taken for one diode.")
    else:
        resistances = [e.value for e in found if e.parameter == "series_resistance" and e.value is not None]
        if line is None or not resistances:
            note = "It needs a fit, or a dark sweep to read n and Rs from."
            return Estimate(name, "fill_factor", None, None, method, GREEN, note)
        ideality, series = line.ideality, max(float(np.median(resistances)), 0.0)
        shunt = marks.slope_resistance_jsc.value or math.inf
        note = "With n, Rs and Rsh of the estimates above."
    values = normalised(
        jsc, voc, ideality, series, shunt, series_cells=sweep.series_cells, temperature=sweep.temperature
    )
    result = published(values)
    note = " ".join([note, *result.warnings])
    return Estimate(name, "fill_factor", result.value, None, result.expression, GREEN, note)


def _read(name: str, parameter: str, reading: Reading, method: str, source: str) -> Estimate:
    return Estimate(name, parameter, reading.value, reading.uncertainty, method, source, reading.note)


def _together(first: float | None, second: float | None, current: float) -> float | None:
    """Uncertainty of (V₁ − V₂)/J."""
    return None if first is None or second is None else math.hypot(first, second) / current


def _figure(value: float) -> str:
    """Three digits, without an exponent where a person would not write one."""
    return f"{float(f'{value:.3g}'):g}"


def _sentence(reason: str) -> str:
    return f"{reason[0].upper()}{reason[1:]}." if reason else ""
