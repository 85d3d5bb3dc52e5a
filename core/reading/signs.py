"""Light or dark, and which way round current and voltage are."""

from __future__ import annotations

import numpy as np

# Below this share of the largest current, the current at V = 0 is an offset and no photocurrent.
_LIT_SHARE = 2e-3
# A zero of the current closer to V = 0 than this share of the range says nothing of the voltage's sign.
_ZERO_SHARE = 0.05
# A diode whose one side carries this much more current conducts on that side.
_RECTIFIES = 10.0


def current_at_zero(voltage: np.ndarray, current: np.ndarray) -> float | None:
    """Current at V = 0 by a straight line between neighbours; None if V = 0 is outside."""
    order = np.argsort(voltage, kind="stable")
    volts = voltage[order]
    if not volts[0] <= 0.0 <= volts[-1]:
        return None
    return float(np.interp(0.0, volts, current[order]))


def looks_lit(voltage: np.ndarray, current: np.ndarray) -> bool:
    """Whether a sweep shows a photocurrent; the sign convention does not matter."""
    largest = float(np.max(np.abs(current)))
    at_zero = current_at_zero(voltage, current)
    if at_zero is not None:
        if abs(at_zero) < _LIT_SHARE * largest:
            return False
        # An ohmic offset crosses zero right beside V = 0, a photocurrent crosses at Voc or not at all.
        order = np.argsort(voltage, kind="stable")
        volts, amps = voltage[order], current[order] * np.sign(at_zero)
        delivering = volts[amps > 0]
        reach = max(float(np.max(delivering, initial=0.0)), -float(np.min(delivering, initial=0.0)))
        return bool(reach > _ZERO_SHARE * max(abs(volts[0]), abs(volts[-1])) / 2)
    order = np.argsort(np.abs(voltage), kind="stable")
    amps = current[order]
    signs = np.sign(amps[np.abs(amps) > 1e-3 * largest])
    if signs.size and np.any(signs != signs[0]):
        return True
    # Towards Voc the current of a lit device falls with |V|, that of a dark one rises.
    third = max(1, len(amps) // 3)
    return float(np.median(np.abs(amps[:third]))) > float(np.median(np.abs(amps[-third:])))


def current_is_turned(voltage: np.ndarray, current: np.ndarray, lit: bool) -> bool:
    """Whether the file counts current the other way: delivered current below zero."""
    at_zero = current_at_zero(voltage, current)
    largest = float(np.max(np.abs(current)))
    if lit and at_zero is not None and abs(at_zero) > _LIT_SHARE * largest:
        return at_zero < 0
    # Current delivered always falls with voltage, whatever the light.
    order = np.argsort(voltage, kind="stable")
    amps = current[order]
    tenth = max(1, len(amps) // 10)
    low, high = float(np.median(amps[:tenth])), float(np.median(amps[-tenth:]))
    return high > low


def voltage_is_turned(voltage: np.ndarray, current: np.ndarray, lit: bool) -> bool:
    """Whether the device stands the other way round: it works, or conducts, at negative voltage.

    True only where this is beyond doubt; the sign of the current does not matter.
    """
    order = np.argsort(voltage, kind="stable")
    volts, amps = voltage[order], current[order]
    reach = max(abs(float(volts[0])), abs(float(volts[-1])))
    if lit:
        at_zero = current_at_zero(voltage, current)
        if at_zero is None or at_zero == 0:
            return False
        delivered = amps * np.sign(at_zero)
        left = volts[(volts < -_ZERO_SHARE * reach) & (delivered < -0.02 * abs(at_zero))]
        right = volts[(volts > 0) & (delivered < -0.02 * abs(at_zero))]
        # Beyond open circuit the current flows the other way; that happens at one end only.
        return left.size > 0 and right.size == 0
    positive, negative = float(volts[-1]), -float(volts[0])
    if min(positive, negative) < 0.3 * reach or reach <= 0:
        return False
    at = min(positive, negative)
    up, down = abs(float(np.interp(at, volts, amps))), abs(float(np.interp(-at, volts, amps)))
    return down > _RECTIFIES * up and at >= 0.3
