"""Figures of merit from the points of a sweep, never from a model.

Local fits around V = 0, J = 0 and the largest power give each value with its statistical standard
uncertainty. What the sweep does not reach is "not reached": nothing here is extrapolated.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from itertools import tee
from operator import itemgetter

import numpy as np

from .local_fits import (
    Estimate,
    LocalCurve,
    Reading,
    fit_drop,
    fit_line,
    grow,
    until_it_bends,
    windows,
)
from .noise import Points, merged_points, noise_level, noise_of_points
from .quantity import Metrics, Quantity
from .sweep import Sweep

__all__ = ["Metrics", "Quantity", "measure", "noise_level"]

_DARK = "not defined for a dark sweep"
_TOO_FEW = "too few points"
# A source-meter set to 0 V reads back a little beside it: this share of the point spacing still counts as reached.
_READBACK = 0.1
# Fewer points than this do not show where the largest power lies.
_POINTS_FOR_POWER = 5
# The place of the largest power must be known to this share of its window.
_FIRM = 0.02
# Where the largest power is looked for first, in shares of a window.
_GRID = np.linspace(0.0, 1.0, 33)


def measure(sweep: Sweep) -> Metrics:
    """Metrics of a sweep, measured on its points.

    Parameters
    ----------
    sweep : Sweep
        Of either direction, any spacing.

    Returns
    -------
    Metrics
        Each with value and standard uncertainty (scatter of the points only), or with the reason why not.
    """
    # Wild points can carry a local fit out of the range of floats; what is not finite is then not read.
    with np.errstate(all="ignore"):
        points = merged_points(sweep)
        return _measure(sweep, points, noise_of_points(points))


def _measure(sweep: Sweep, points: Points, noise: float) -> Metrics:
    jsc, plateau, jsc_reason = _short_circuit(points, noise)
    slope_resistance_jsc = _resistance(plateau, jsc_reason)
    if not sweep.lit:
        dark = Quantity(reason=_DARK)
        return Metrics(*[dark] * 7, slope_resistance_jsc, dark)
    voc, fall, voc_reason = _open_circuit(points, noise)
    pmp, vmp, jmp, power_reason = _largest_power(points, noise)
    return Metrics(
        jsc=_quantity(jsc, jsc_reason),
        voc=_quantity(voc, voc_reason),
        jmp=_quantity(jmp, power_reason),
        vmp=_quantity(vmp, power_reason),
        pmp=_quantity(pmp, power_reason),
        fill_factor=_fill_factor(jsc, voc, pmp, jsc_reason or voc_reason or power_reason),
        efficiency=_efficiency(pmp, power_reason, sweep),
        slope_resistance_jsc=slope_resistance_jsc,
        slope_resistance_voc=_resistance(fall, voc_reason),
    )


def _quantity(estimate: Estimate | None, reason: str) -> Quantity:
    if estimate is None:
        return Quantity(reason=reason or "not reached: the points there are too rough")
    return Quantity(estimate.value, estimate.uncertainty, "" if estimate.known else f"{_TOO_FEW} for an uncertainty")


def _short_circuit(points: Points, noise: float) -> tuple[Estimate | None, Estimate | None, str]:
    """Jsc and dJ/dV there."""
    if reason := _beside_zero_volt(points):
        return None, None, reason
    lines = until_it_bends((fit_line(points, window) for window in windows(points, 0.0, 1)), noise)
    levels, slopes = _each(2, lines, lambda line: _level_and_slope(line, 0.0))
    level = grow(levels, points, noise)
    # The plateau is nearly straight and its slope hard to see: let only a clear disagreement end the window.
    slope = grow(slopes, points, noise, 3.0)
    return level, slope, ""


def _beside_zero_volt(points: Points) -> str:
    if points.voltage.size < 2:
        return _TOO_FEW
    tolerance = _READBACK * float(np.median(points.voltage[1:] - points.voltage[:-1]))
    if points.voltage[0] <= tolerance and points.voltage[-1] >= -tolerance:
        return ""
    return "not reached: the sweep does not come to V = 0"


def _open_circuit(points: Points, noise: float) -> tuple[Estimate | None, Estimate | None, str]:
    """Voc and dJ/dV there."""
    voltage, current = points.voltage, points.current
    falls = np.flatnonzero((current[:-1] >= 0) & (current[1:] <= 0) & (current[:-1] > current[1:]) & (voltage[1:] > 0))
    if falls.size == 0:
        return None, None, "not reached: the current does not come to zero within the sweep"
    first = falls[falls.size // 2]  # noise makes neighbouring points cross more than once: take the middle one
    near, far = float(voltage[first]), float(voltage[first + 1])
    crossing = near + (far - near) * float(current[first] / (current[first] - current[first + 1]))
    curves = _drops(points, crossing, 3, _ceiling(points, noise), noise)
    voltages, slopes = _each(2, curves, lambda curve: _at_zero_current(curve, points, crossing, noise))
    voc = grow(voltages, points, noise)
    if voc is None:  # too rough for a smooth fit: the straight line between the two points that bracket J = 0
        line = fit_line(points, slice(first, first + 2))
        voc = grow(_each(2, [line], lambda curve: _at_zero_current(curve, points, crossing, noise))[0], points, noise)
    return voc, grow(slopes, points, noise), "" if voc else "not reached: no clear crossing of J = 0"


def _each(
    count: int, curves: Iterable[LocalCurve | None], read: Callable[[LocalCurve], tuple[Reading, ...] | None]
) -> list[Iterator[Reading | None]]:
    """The readings of each curve, as ``count`` streams. A curve is fitted and read once, when the first stream that
    gets so far asks for it."""
    nothing = (None,) * count
    return _streams(count, ((curve and read(curve)) or nothing for curve in curves))


def _streams(count: int, rows: Iterable[tuple[Reading | None, ...]]) -> list[Iterator[Reading | None]]:
    return [map(itemgetter(place), copy) for place, copy in enumerate(tee(rows, count))]


def _level_and_slope(curve: LocalCurve, place: float) -> tuple[Reading, Reading]:
    level, slope, _ = curve.current(place)
    of_level, of_slope = curve.sensitivity(place)
    return Reading(curve, level, of_level, place), Reading(curve, slope, of_slope, place)


def _at_zero_current(
    curve: LocalCurve, points: Points, crossing: float, noise: float
) -> tuple[Reading, ...] | None:
    """Where a curve falls through J = 0, and its slope there; None where it does not."""
    place, (low, high) = crossing, _ends(points, curve)
    for _ in range(20):
        value, slope, bend = curve.current(place)
        if not slope < 0:
            return None
        step = value / slope
        place = min(max(place - step, low), high)
        if abs(step) < 1e-13 * max(abs(place), 1e-3):
            break
    else:
        if not abs(value) < noise:
            return None
    _, slope, bend = curve.current(place)
    of_level, of_slope = curve.sensitivity(place)
    return (
        Reading(curve, place, -of_level / slope, place),
        Reading(curve, slope, of_slope - bend / slope * of_level, place),
    )


def _drops(points: Points, centre: float, order: int, ceiling: float, noise: float) -> Iterator[LocalCurve | None]:
    """Fits over growing windows, from the first window on whose currents differ by clearly more than noise."""
    if points.voltage.size < 4:
        return iter([fit_line(points, next(windows(points, centre, 1)))])
    ranges = _clear(points, windows(points, centre, max(order - 1, 2)), noise)
    return until_it_bends((fit_drop(points, window, order, ceiling) for window in ranges), noise)


def _clear(points: Points, nested: Iterator[slice], noise: float) -> Iterator[slice]:
    """The windows whose currents differ by clearly more than noise, each wider than the one before; else all points."""
    clear = False
    for window in nested:
        current = points.current[window]
        clear = clear or current.max() - current.min() > 10 * noise
        if clear:
            yield window
    if not clear:
        yield slice(0, points.voltage.size)


def _ends(points: Points, curve: LocalCurve) -> tuple[float, float]:
    """Lowest and highest voltage of a curve's window."""
    return float(points.voltage[curve.window.start]), float(points.voltage[curve.window.stop - 1])


def _ceiling(points: Points, noise: float) -> float:
    """A level a little above the plateau, so that the drop from it is positive at every point."""
    inside = points.current[points.voltage >= 0]
    top = float(np.max(inside if inside.size else points.current))
    return top + 0.01 * abs(top) + 4 * noise


def _largest_power(
    points: Points, noise: float
) -> tuple[Estimate | None, Estimate | None, Estimate | None, str]:
    """Pmp, Vmp and Jmp."""
    nothing = None, None, None
    voltage = points.voltage
    if voltage.size < _POINTS_FOR_POWER:
        return *nothing, f"{_TOO_FEW} to find the largest power"
    power = voltage * points.current
    # A running mean keeps a lucky point of a noisy sweep from being taken for the maximum.
    span = 2 * (voltage.size // 60) + 1
    smooth = np.convolve(power, np.ones(span) / span, mode="valid")
    best = int(np.argmax(smooth)) + span // 2
    if not power[best] > 0:
        return *nothing, "not reached: the sweep delivers no power"
    if best - span // 2 <= 0 or best + span // 2 >= voltage.size - 1:
        return *nothing, "not reached: the power still rises at the end of the sweep"
    curves = _drops(points, _between(voltage, power, best), 4, _ceiling(points, noise), noise)
    of_power, of_voltage, of_current = _streams(3, _peaks(points, curves, noise))
    pmp = grow(of_power, points, noise)
    if pmp is None:
        return *nothing, "not reached: the points show no clear largest power"
    return pmp, grow(of_voltage, points, noise), grow(of_current, points, noise), ""


def _peaks(
    points: Points, curves: Iterable[LocalCurve | None], noise: float
) -> Iterator[tuple[Reading, Reading, Reading]]:
    """Largest power, its voltage and its current of each curve that has a firm peak; else of the widest with any peak.

    In a window where noise could carry the peak across, its place would look better known than it is.
    """
    widest, any_firm = None, False
    for curve in curves:
        place = None if curve is None else _peak(curve, *_ends(points, curve))
        if place is None:
            continue
        value, slope, bend = curve.current(place)
        of_level, of_slope = curve.sensitivity(place)
        # P' = J + V·J' is zero there, and a disturbance moves the place by −δP'/P''.
        shift = -(of_level + place * of_slope) / (2 * slope + place * bend)
        widest = (
            Reading(curve, place * value, place * of_level, place),
            Reading(curve, place, shift, place),
            Reading(curve, value, of_level + slope * shift, place),
        )
        if noise * curve.spread(shift) < _FIRM * 2 * curve.width:
            any_firm = True
            yield widest
    if widest is not None and not any_firm:
        yield widest


def _between(voltage: np.ndarray, power: np.ndarray, best: int) -> float:
    """The voltage from which windows grow: beside the best point, on the side of its better neighbour."""
    neighbour = best + 1 if power[best + 1] > power[best - 1] else best - 1
    return 0.5 * float(voltage[best] + voltage[neighbour])


def _peak(curve: LocalCurve, low: float, high: float) -> float | None:
    """Voltage of the largest power between the ends of the window, None if it lies at one or is no maximum."""
    places = low + (high - low) * _GRID
    best = int(np.argmax(places * curve.currents(places)))
    if best in (0, places.size - 1):
        return None
    low, place, high = places[best - 1 : best + 2].tolist()
    for _ in range(20):
        value, slope, bend = curve.current(place)
        curvature = 2 * slope + place * bend
        if not curvature < 0:
            return None
        step = (value + place * slope) / curvature
        place = min(max(place - step, low), high)
        if abs(step) < 1e-12 * abs(place):
            break
    return place


def _fill_factor(jsc: Estimate | None, voc: Estimate | None, pmp: Estimate | None, reason: str) -> Quantity:
    if jsc is None or voc is None or pmp is None:
        return Quantity(reason=reason)
    if not (jsc.value > 0 and voc.value > 0):
        return Quantity(reason="not defined: the sweep delivers no power")
    value = pmp.value / (jsc.value * voc.value)
    # Shared points move all three together; combining point by point counts that.
    response = value * (pmp.response / pmp.value - jsc.response / jsc.value - voc.response / voc.value)
    return _quantity(Estimate(value, response, pmp.voltage, pmp.known), "")


def _efficiency(pmp: Estimate | None, reason: str, sweep: Sweep) -> Quantity:
    if not sweep.per_area:
        return Quantity(reason="no area")
    if not sweep.irradiance > 0:
        return Quantity(reason="no irradiance")
    if pmp is None:
        return Quantity(reason=reason)
    share = 1.0 / sweep.irradiance
    return _quantity(Estimate(pmp.value * share, pmp.response * share, pmp.voltage, pmp.known), "")


def _resistance(slope: Estimate | None, reason: str) -> Quantity:
    """−dV/dJ from dJ/dV."""
    if slope is None:
        return Quantity(reason=reason or "not reached: no clear slope")
    spread = slope.uncertainty
    if not -slope.value > 1e-100 or (spread is not None and -slope.value < 2 * spread):
        return Quantity(reason="not determined: the slope is flat within the noise")
    return Quantity(
        -1.0 / slope.value,
        None if spread is None else float(spread / slope.value**2),
        "" if slope.known else f"{_TOO_FEW} for an uncertainty",
    )
