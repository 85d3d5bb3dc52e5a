"""Speed of the physics, as ratios measured in one run; asked for by naming this folder."""

import math
import time

import numpy as np
from scipy.optimize import brentq, curve_fit

from core.diode import OneDiode
from core.first_guess import first_guess
from core.metrics import measure
from core.refine import refine
from core.sweep import Sweep

CELL = OneDiode(0.022, 1e-12, 1.6, 3.0, 2000.0)
VOLTAGE = np.linspace(-0.05, 1.05, 200)


def median_time(task, repeats):
    task()
    times = []
    for _ in range(repeats):
        begin = time.perf_counter()
        task()
        times.append(time.perf_counter() - begin)
    return float(np.median(times))


def side_by_side(first, second, repeats):
    """Median times of two tasks, run in turns so that a busy machine slows both alike."""
    first(), second()
    times = []
    for _ in range(repeats):
        for task in (first, second):
            begin = time.perf_counter()
            task()
            times.append(time.perf_counter() - begin)
    return float(np.median(times[::2])), float(np.median(times[1::2]))


def show(*rows):
    print()
    for name, value in rows:
        print(f"  {name:<58}{value:>14}")


def lit_sweep(seed=0):
    noise = 2e-5 * np.random.default_rng(seed).standard_normal(VOLTAGE.size)
    return Sweep(VOLTAGE, CELL.current(VOLTAGE) + noise, per_area=True)


def test_curve_solve_against_bracketing_each_point():
    slope, conductance = CELL.slope_voltage, 1 / CELL.shunt_resistance

    def excess(current, voltage):
        junction = voltage + current * CELL.series_resistance
        diode = CELL.saturation_current * math.expm1(junction / slope)
        return CELL.photocurrent - diode - junction * conductance - current

    def bracketed():
        return [brentq(excess, -5.0, 0.03, args=(float(voltage),), xtol=1e-14) for voltage in VOLTAGE]

    assert np.allclose(bracketed(), CELL.current(VOLTAGE), atol=1e-12)
    exact, roots = median_time(lambda: CELL.current(VOLTAGE), 300), median_time(bracketed, 10)
    show(
        ("curve of 200 points", f"{exact * 1e6:.0f} µs"),
        ("scipy.optimize.brentq, point by point", f"{roots * 1e3:.2f} ms"),
        ("ratio", f"{roots / exact:.0f}"),
    )
    assert roots / exact >= 100


def test_refining_from_cold_against_curve_fit_with_a_good_start():
    sweep = lit_sweep()

    def curve(voltage, photocurrent, log_saturation, ideality, series, conductance):
        return OneDiode(photocurrent, math.exp(log_saturation), ideality, series, 1 / conductance).current(voltage)

    start = [0.0215, math.log(2e-12), 1.65, 2.5, 1 / 1500.0]  # within 10 % to 30 % of the truth

    def fitted():
        return curve_fit(curve, VOLTAGE, sweep.current, p0=start)

    ours = refine(sweep)
    np.testing.assert_allclose(ours.model.ideality, fitted()[0][2], rtol=1e-3)
    cold, library = side_by_side(lambda: refine(sweep), fitted, 60)
    show(
        ("refine from cold, 200 points, covariance included", f"{cold * 1e3:.2f} ms"),
        ("scipy.optimize.curve_fit from a good start, same curve", f"{library * 1e3:.2f} ms"),
        ("ratio", f"{cold / library:.2f}"),
        ("first guess alone", f"{median_time(lambda: first_guess(sweep), 60) * 1e3:.2f} ms"),
        ("metrics", f"{median_time(lambda: measure(sweep), 20) * 1e3:.2f} ms"),
    )
    assert cold / library <= 2
