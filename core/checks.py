"""Whether a sweep can be trusted: findings, each with what it means and what to do."""

from __future__ import annotations

import numpy as np

from .constants import ONE_SUN
from .curve_shape import (
    Shape,
    bends_up,
    dark_offset,
    held_current,
    held_voltage,
    jumps,
    shape_of,
)
from .finding import Finding
from .hysteresis import check_pair
from .reach import out_of_reach
from .sweep import Sweep

__all__ = ["Finding", "check", "check_pair"]

# Figures without a source below are common practice.
_FEW_POINTS = 20
# With fewer, the bend of the knee alone looks like noise of up to 100 % of Jsc.
_TELLING_POINTS = 12
# The knee is where the power is above this share of its maximum, and needs this many points.
_KNEE_SHARE, _KNEE_POINTS = 0.9, 4
# Scatter of the points as a share of Jsc.
_NOISY_SHARE = 0.01
# Offset of a dark sweep's zero that matters [V].
_DARK_OFFSET = 0.005
# Current density of one junction at one sun [A cm⁻²]; all of AM1.5G up to 4 µm gives about 69 mA cm⁻².
_DENSITY_OF_SUN = 0.070
_VOLTS_OF_CELL = 1.4
_HIGHEST_FILL_FACTOR = 0.91
# A straight line through Jsc and Voc has a fill factor of 0.25; no diode with Rs and Rsh goes below.
_LOWEST_FILL_FACTOR = 0.25


def check(sweep: Sweep) -> tuple[Finding, ...]:
    """Findings on one sweep, the gravest first; raises for no sweep whatever."""
    with np.errstate(all="ignore"):  # wild numbers give nan and infinity, which no comparison takes for a finding
        return _check(sweep)


def _check(sweep: Sweep) -> tuple[Finding, ...]:
    shape = shape_of(sweep)
    voltage = shape.voltage
    if voltage.size < 3 or not np.any(shape.current):
        return (
            Finding(
                "points",
                "stop",
                f"The sweep has {voltage.size} points at different voltages that can be used."
                if voltage.size < 3
                else "The current is zero at every point.",
                "Nothing can be read off it.",
                "Measure it again or check the file.",
            ),
        )
    findings = [*_common(shape), *(_of_lit(shape) if sweep.lit else _of_dark(shape)), *_assumed(sweep)]
    findings += out_of_reach(sweep)
    return tuple(sorted(findings, key=lambda f: ("stop", "caution", "note").index(f.severity)))


def _amount(shape: Shape, value: float) -> str:
    return f"{1e3 * value:.3g} mA cm⁻²" if shape.sweep.per_area else f"{value:.3g} A"


def _common(shape: Shape) -> list[Finding]:
    findings = []
    voltage = shape.voltage
    if voltage.size < _FEW_POINTS:
        findings.append(
            Finding(
                "points",
                "caution",
                f"The sweep has only {voltage.size} points.",
                "Figures of merit and fits rest on very few readings.",
                f"Measure at {_FEW_POINTS} voltages or more, closer together at the knee.",
            )
        )
    findings += _limits(shape)
    jumping = jumps(shape)
    if jumping.size:
        where = ", ".join(f"{v:.3g} V" for v in voltage[jumping[:3]])
        count = "One point jumps" if jumping.size == 1 else f"{jumping.size} points jump"
        findings.append(
            Finding(
                "outliers",
                "caution",
                f"{count} away from both neighbours ({where}).",
                "A loose contact or a change of range can do this; such a point pulls a fit.",
                "Exclude it, or refine with the robust loss.",
            )
        )
    return findings + (_noise(shape) if shape.sweep.lit else [])


def _noise(shape: Shape) -> list[Finding]:
    size = shape.sweep.voltage.size  # points at one voltage tell the noise too
    if size < _TELLING_POINTS:
        return [
            Finding(
                "noise",
                "note",
                f"How much the points scatter cannot be told from {size} of them.",
                "Between so few, the bend of the curve and noise look alike, so uncertainties are missing or rough.",
                f"Measure at {_FEW_POINTS} voltages or more, or repeat the sweep.",
            )
        ]
    findings = []
    scale = abs(shape.jsc) if shape.jsc else np.max(np.abs(shape.current))
    if shape.noise > _NOISY_SHARE * scale:
        findings.append(
            Finding(
                "noise",
                "caution",
                f"The points scatter by {100 * shape.noise / scale:.1f} % of the short-circuit current.",
                "Fill factor and resistances are uncertain, and small differences between devices mean nothing.",
                "Average longer, check contacts and lamp, and look at the intervals before comparing.",
            )
        )
    return findings


def _limits(shape: Shape) -> list[Finding]:
    """Current or voltage held by the source-meter's compliance."""
    findings = []
    held = held_current(shape)
    if held is not None:
        where = f"from {held.voltage:.3g} V on" if held.to_the_end else f"up to {held.voltage:.3g} V"
        findings.append(
            Finding(
                "compliance",
                "caution",
                f"The current stands still at {_amount(shape, held.current)} {where}.",
                "The source-meter's current limit was reached, and these points are not the device's.",
                "Raise the limit and measure again, or exclude these points.",
            )
        )
    end = held_voltage(shape.sweep)
    if end is not None:
        findings.append(
            Finding(
                "compliance",
                "note",
                f"The voltage stands still at {end:.4g} V over several points.",
                "The source-meter's voltage limit may have been reached, or the voltage was held on purpose.",
                "Check the limit, and exclude these points if it was.",
            )
        )
    return findings


def _of_lit(shape: Shape) -> list[Finding]:
    findings = []
    voltage = shape.voltage
    if shape.jsc is None:
        findings.append(
            Finding(
                "short circuit",
                "caution",
                f"The sweep does not reach V = 0; it runs from {voltage[0]:.3g} to {voltage[-1]:.3g} V.",
                "Jsc and fill factor cannot be read off it.",
                "Measure again from a voltage a little below zero.",
            )
        )
    if shape.jsc is not None and shape.jsc <= 0:
        findings.append(
            Finding(
                "no photocurrent",
                "stop",
                "The sweep is marked as light but delivers no current at V = 0.",
                "It may be a dark sweep, or the lamp, shutter or contacts failed.",
                "Correct light or dark in its conditions, or measure again.",
            )
        )
        return findings
    if shape.voc is None:
        findings.append(
            Finding(
                "open circuit",
                "caution",
                "The current does not come to zero within the sweep.",
                "Voc and fill factor cannot be read off it.",
                "Measure again to a voltage a little above Voc.",
            )
        )
    if shape.jsc is None or shape.voc is None:
        return findings + _plausible(shape, None)
    power = shape.voltage * shape.current
    best = np.max(power[(voltage > 0) & (voltage < shape.voc)], initial=0.0)
    findings += _knee(shape, power, best)
    fill_factor = best / (shape.jsc * shape.voc)
    findings += _s_shape(shape, fill_factor)
    return findings + _plausible(shape, fill_factor)


def _knee(shape: Shape, power: np.ndarray, best: float) -> list[Finding]:
    near = shape.voltage[power >= _KNEE_SHARE * best]
    if near.size >= _KNEE_POINTS or shape.voltage.size < 5 or best <= 0:
        return []
    step = float(np.median(np.diff(shape.voltage)))
    return [
        Finding(
            "knee",
            "caution",
            f"Only {near.size} points lie at the knee; the voltage step is {1e3 * step:.3g} mV.",
            "Maximum power and ideality are read off too few points.",
            f"Measure with steps of {1e3 * shape.voc / 50:.2g} mV or less.",  # about five points within 90 % of Pmp
        )
    ]


def _s_shape(shape: Shape, fill_factor: float) -> list[Finding]:
    # Between two points the true maximum of a straight line is missed by up to (step/Voc)².
    missed = 2 * (np.max(np.diff(shape.voltage)) / shape.voc) ** 2
    straight = fill_factor < _LOWEST_FILL_FACTOR * (1 - missed) - 2 * shape.noise / shape.jsc
    if not straight and not bends_up(shape):
        return []
    what = (
        f"The fill factor, {fill_factor:.2f}, is below that of a straight line, {_LOWEST_FILL_FACTOR}."
        if straight
        else "Between V = 0 and Voc the curve bends the other way for a stretch (S-shape)."
    )
    return [
        Finding(
            "s-shape",
            "caution",
            what,
            "No diode with series and shunt resistance does this: a barrier at a contact or poor extraction is likely.",
            "Do not trust diode parameters of this sweep; look at the contacts and layers.",
        )
    ]


def _plausible(shape: Shape, fill_factor: float | None) -> list[Finding]:
    findings = []
    sweep = shape.sweep
    level = shape.jsc if shape.jsc is not None else shape.current[0]
    suns = sweep.irradiance / ONE_SUN
    if sweep.per_area and suns > 0 and level > _DENSITY_OF_SUN * suns:
        findings.append(
            Finding(
                "density",
                "caution",
                f"A short-circuit current of {_amount(shape, level)} is more than {suns:.3g} suns can give one junction.",
                "Area, unit or irradiance is wrong, and the efficiency with it.",
                "Check the area in cm², the unit of current and the irradiance.",
            )
        )
    if shape.voc is not None and shape.voc > _VOLTS_OF_CELL * sweep.series_cells:
        cells = "one cell" if sweep.series_cells == 1 else f"{sweep.series_cells} cells in series"
        findings.append(
            Finding(
                "cells in series",
                "caution",
                f"A Voc of {shape.voc:.3g} V is much for {cells}.",
                "The ideality factor comes out too large if there are more cells in series, or several junctions.",
                "Set the number of cells in series, or check the unit of voltage.",
            )
        )
    if fill_factor is not None and fill_factor > _HIGHEST_FILL_FACTOR + 2 * shape.noise / abs(level):
        findings.append(
            Finding(
                "fill factor",
                "caution",
                f"A fill factor of {fill_factor:.2f} is more than a diode reaches.",
                "The sweep was too fast for the device, or part of it was cut off at a limit.",
                "Sweep more slowly in both directions and check the limits of the source-meter.",
            )
        )
    return findings


def _of_dark(shape: Shape) -> list[Finding]:
    if shape.jsc is None:
        return []
    offset, clear = dark_offset(shape)
    if offset <= _DARK_OFFSET or not clear:
        return []
    leak = shape.jsc > 0
    return [
        Finding(
            "dark current at V = 0",
            "caution",
            f"In the dark {_amount(shape, abs(shape.jsc))} {'is delivered' if leak else 'flows'} at V = 0.",
            "Stray light reached the device." if leak else "The source-meter has an offset, or the device was charged.",
            "Cover the device and measure again." if leak else "Zero the source-meter and sweep more slowly.",
        )
    ]


_ASSUMED_WORDS = {
    "area": "area",
    "temperature": "temperature",
    "irradiance": "irradiance",
    "series_cells": "cells in series",
    "lit": "light or dark",
}


def _assumed(sweep: Sweep) -> list[Finding]:
    findings = []
    if "units" in sweep.assumed:
        findings.append(
            Finding(
                "units",
                "caution",
                "The file does not give all units.",
                "Current or voltage may be wrong by a factor of a thousand, or the current may be a density.",
                "Compare Jsc and Voc with what you know, and write units into the headings of the file.",
            )
        )
    words = [word for name, word in _ASSUMED_WORDS.items() if name in sweep.assumed]
    if words:
        findings.append(
            Finding(
                "assumed",
                "note",
                f"Assumed, as the file does not say: {', '.join(words)}.",
                "Efficiency and ideality factor depend on these.",
                "Confirm or correct them in the conditions.",
            )
        )
    return findings
