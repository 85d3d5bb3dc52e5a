"""Speed of the physics, as ratios measured in one run; asked for by naming this folder.

``SWEEPBENCH_STUDY=10000 pytest -s tests/benchmarks -k optimum`` counts how many random devices reach the global
optimum from cold, and how often their intervals hold the truth.
"""

import math
import os
import time

import numpy as np
import pytest
from scipy.optimize import brentq, curve_fit

from core.diode import PARAMETERS, OneDiode
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


def random_device(random):
    photocurrent, ideality, voc = 10 ** random.uniform(-3, -1.3), random.uniform(1, 2.5), random.uniform(0.4, 1.25)
    resistance = voc / photocurrent
    series = 0.0 if random.random() < 0.1 else 10 ** random.uniform(-3, -0.6) * resistance
    saturation = photocurrent / np.expm1(voc / (ideality * 0.0256926))
    return OneDiode(photocurrent, saturation, ideality, series, 10 ** random.uniform(0.6, 3.5) * resistance)


def random_sweep(device, random):
    marks, points = device.landmarks(), int(random.integers(30, 501))
    voltage = np.linspace(-0.1 * random.random(), 1 + 0.15 * random.random(), points) * marks.voc
    voltage = np.sort(voltage + random.uniform(-0.3, 0.3, points) * (voltage[1] - voltage[0]))
    noise = 10 ** random.uniform(math.log10(3e-4), -2) * marks.jsc
    return Sweep(voltage, device.current(voltage) + noise * random.standard_normal(points), per_area=True)


@pytest.mark.skipif("SWEEPBENCH_STUDY" not in os.environ, reason="a study of minutes; set SWEEPBENCH_STUDY to a number")
def test_share_of_random_devices_that_reach_the_global_optimum():
    """Parameters over lab ranges, noise 0.03 to 1 %, 30 to 500 unevenly spaced points; the truth is the rival start."""
    count, random = int(os.environ["SWEEPBENCH_STUDY"]), np.random.default_rng(2)
    reached, inside, times = 0, np.zeros(5), []
    for _ in range(count):
        device = random_device(random)
        sweep = random_sweep(device, random)
        begin = time.perf_counter()
        cold = refine(sweep)
        times.append(time.perf_counter() - begin)
        reached += cold.rmse <= refine(sweep, device).rmse * (1 + 1e-7)
        inside += [cold.intervals[name][0] <= getattr(device, name) <= cold.intervals[name][1] for name in PARAMETERS]
    names = [f"95 % interval holds the truth: {name.replace('_', ' ')}" for name in PARAMETERS]
    show(
        ("devices", count),
        ("reach the global optimum from cold", f"{100 * reached / count:.2f} %"),
        *((name, f"{100 * held / count:.1f} %") for name, held in zip(names, inside, strict=True)),
        ("median, 95th percentile of refine", f"{np.median(times) * 1e3:.1f}, {np.quantile(times, 0.95) * 1e3:.1f} ms"),
    )
    assert reached / count >= 0.999
