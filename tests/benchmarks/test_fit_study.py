"""How well and how fast fits are made, over random devices; asked for by naming this file.

``SWEEPBENCH_STUDY=10000 pytest -s tests/benchmarks/test_fit_study.py`` sets the number of devices (200 without it).
"""

import math
import os
import time

import lmfit
import numpy as np
from scipy import constants
from scipy.optimize import least_squares

from core.diode import PARAMETERS, OneDiode
from core.first_guess import first_guess
from core.profile import profile_intervals
from core.refine import refine
from core.sweep import Sweep

COUNT = int(os.environ.get("SWEEPBENCH_STUDY", "200"))
CELL = OneDiode(0.022, 1e-12, 1.6, 3.0, 2000.0)


def show(*rows):
    print()
    for name, value in rows:
        print(f"  {name:<66}{value:>16}")


def random_device(random):
    """Jph 1 to 50 mA cm⁻², n 1 to 2.5, Voc 0.4 to 1.25 V, Rs to a quarter of Voc/Jph, Rsh from four times to 3000 times of it."""
    photocurrent, ideality, voc = 10 ** random.uniform(-3, -1.3), random.uniform(1, 2.5), random.uniform(0.4, 1.25)
    resistance = voc / photocurrent
    series = 0.0 if random.random() < 0.1 else 10 ** random.uniform(-3, -0.6) * resistance
    saturation = photocurrent / np.expm1(voc / (ideality * 0.0256926))
    return OneDiode(photocurrent, saturation, ideality, series, 10 ** random.uniform(0.6, 3.5) * resistance)


def random_sweep(device, random):
    """30 to 500 unevenly spaced points, noise of 0.03 to 1 % of Jsc."""
    marks, points = device.landmarks(), int(random.integers(30, 501))
    voltage = np.linspace(-0.1 * random.random(), 1 + 0.15 * random.random(), points) * marks.voc
    voltage = np.sort(voltage + random.uniform(-0.3, 0.3, points) * (voltage[1] - voltage[0]))
    noise = 10 ** random.uniform(math.log10(3e-4), -2) * marks.jsc
    return Sweep(voltage, device.current(voltage) + noise * random.standard_normal(points), per_area=True)


def test_share_that_reaches_the_global_optimum_and_coverage_of_intervals():
    """The rival of the cold start is the truth itself. Coverage is also counted without the parameters that end at a bound."""
    random = np.random.default_rng(2)
    reached, worst, inside, apart, inside_apart, times = 0, 0.0, np.zeros(5), np.zeros(5), np.zeros(5), []
    for _ in range(COUNT):
        device = random_device(random)
        sweep = random_sweep(device, random)
        begin = time.perf_counter()
        cold = refine(sweep)
        times.append(time.perf_counter() - begin)
        lag = cold.rmse / refine(sweep, device).rmse - 1
        reached, worst = reached + (lag <= 1e-7), max(worst, lag)
        holds = np.array([cold.intervals[name][0] <= getattr(device, name) <= cold.intervals[name][1] for name in PARAMETERS])
        # An interval that starts or ends at the physical bound is one-sided and holds more than it says.
        two_sided = np.array([cold.standard_errors[name] is not None for name in PARAMETERS])
        two_sided &= [cold.intervals[name][0] > 0 and math.isfinite(cold.intervals[name][1]) for name in PARAMETERS]
        inside, apart, inside_apart = inside + holds, apart + two_sided, inside_apart + (holds & two_sided)
    show(
        ("devices", COUNT),
        ("reach the global optimum from cold", f"{100 * reached / COUNT:.2f} %"),
        ("farthest above it (rmse)", f"{100 * worst:.2g} %"),
        *(
            (f"95 % interval holds the truth: {name.replace('_', ' ')} (two-sided ones)", f"{100 * a:.2f} ({100 * b:.2f}) %")
            for name, a, b in zip(PARAMETERS, inside / COUNT, inside_apart / apart, strict=True)
        ),
        ("median, 95th percentile of refine", f"{np.median(times) * 1e3:.1f}, {np.quantile(times, 0.95) * 1e3:.1f} ms"),
    )
    assert reached / COUNT >= 0.999
    slack = 3 * math.sqrt(0.95 * 0.05 / COUNT)
    assert np.all(inside / COUNT >= 0.93 - slack) and np.all(inside / COUNT <= 0.97 + slack)


def test_refining_from_cold_against_least_squares_without_a_jacobian_from_the_same_start():
    """The library moves Jph, ln J0, n, Rs and 1/Rsh, each in its own scale, from the same first guess."""
    voltage = np.linspace(-0.05, 1.05, 200)
    noise = 2e-5 * np.random.default_rng(0).standard_normal(200)
    sweep = Sweep(voltage, CELL.current(voltage) + noise, per_area=True)

    def library():
        guess = first_guess(sweep)
        start = [guess.photocurrent, math.log(guess.saturation_current), guess.ideality, guess.series_resistance]
        start.append(1.0 / guess.shunt_resistance)

        def residual(place):
            model = OneDiode(place[0], math.exp(place[1]), place[2], place[3], 1.0 / place[4])
            return model.current(voltage) - sweep.current

        found = least_squares(residual, start, x_scale=[0.02, 1.0, 0.1, 1.0, 1e-4], xtol=1e-10, ftol=1e-12, gtol=None)
        return math.sqrt(2 * found.cost / 200)

    assert refine(sweep).rmse <= library() * (1 + 1e-6)
    times = np.empty((60, 2))
    for row in times:  # in turns, so that a busy machine slows both alike
        for column, task in enumerate((lambda: refine(sweep), library)):
            begin = time.perf_counter()
            task()
            row[column] = time.perf_counter() - begin
    ours, theirs = np.median(times, axis=0)
    show(
        ("refine of 200 points from cold, covariance included: median", f"{ours * 1e3:.2f} ms"),
        ("scipy.optimize.least_squares without Jacobian, same first guess", f"{theirs * 1e3:.2f} ms"),
        ("ratio", f"{theirs / ours:.1f}"),
    )
    assert theirs / ours >= 5


def test_profile_intervals_of_five_parameters():
    random = np.random.default_rng(4)
    times = []
    for _ in range(min(COUNT, 200)):
        sweep = random_sweep(random_device(random), random)
        refined = refine(sweep)
        begin = time.perf_counter()
        profile_intervals(sweep, refined)
        times.append(time.perf_counter() - begin)
    median, late, longest = (1e3 * np.quantile(times, share) for share in (0.5, 0.95, 1.0))
    show(("profile intervals of five: median, 95th percentile, longest", f"{median:.0f}, {late:.0f}, {longest:.0f} ms"))
    assert median <= 150


def test_coverage_of_profile_intervals():
    random, count = np.random.default_rng(6), min(COUNT, 2000)
    inside, closed, inside_closed = np.zeros(5), np.zeros(5), np.zeros(5)
    for _ in range(count):
        device = random_device(random)
        sweep = random_sweep(device, random)
        found = profile_intervals(sweep, refine(sweep))
        holds = np.array([found[name].low <= getattr(device, name) <= found[name].high for name in PARAMETERS])
        two_sided = np.array([found[name].low_bounded and found[name].high_bounded for name in PARAMETERS])
        inside, closed, inside_closed = inside + holds, closed + two_sided, inside_closed + (holds & two_sided)
    show(
        *(
            (f"95 % profile interval holds the truth: {name.replace('_', ' ')} (with two ends)", f"{100 * a:.2f} ({100 * b:.2f}) %")
            for name, a, b in zip(PARAMETERS, inside / count, inside_closed / closed, strict=True)
        )
    )
    slack = 3 * np.sqrt(0.95 * 0.05 / closed)
    assert np.all(inside / count >= 0.93 - slack) and np.all(np.abs(inside_closed / closed - 0.95) <= 0.02 + slack)


def test_agreement_with_lmfit():
    """Parameters and standard errors of random sweeps whose optimum lies inside the bounds.

    The library fits a curve solved here, apart from core, from a start some standard errors beside our optimum.
    """
    random, gaps, errors, compared = np.random.default_rng(8), [], [], 0
    while compared < min(COUNT, 200):
        sweep = random_sweep(random_device(random), random)
        ours = refine(sweep)
        if any(ours.standard_errors[name] is None for name in PARAMETERS) or ours.intervals["series_resistance"][0] <= 0:
            continue
        compared += 1
        theirs = lmfit_fit(sweep, ours)
        for name in PARAMETERS:
            value, error = theirs[name]
            here = scaled(name, getattr(ours.model, name))
            spread = ours.standard_errors[name] * abs(derivative(name, getattr(ours.model, name)))
            gaps.append(abs(here - value) / spread)
            errors.append(abs(error / spread - 1))
    show(
        ("sweeps compared with lmfit", compared),
        ("parameters: median, largest gap in standard errors", f"{np.median(gaps):.1e}, {np.max(gaps):.1e}"),
        ("standard errors: median, largest relative gap", f"{np.median(errors):.1e}, {np.max(errors):.1e}"),
    )
    assert np.max(gaps) < 1e-3 and np.max(errors) < 5e-3


def test_agreement_of_profile_intervals_with_lmfit():
    """Ends on the scale of each parameter, as a share of the interval's width; sweeps whose intervals all have two ends."""
    random, gaps, compared, wanted = np.random.default_rng(10), [], 0, min(max(COUNT // 20, 5), 200)
    while compared < wanted:
        sweep = random_sweep(random_device(random), random)
        refined = refine(sweep)
        ours = profile_intervals(sweep, refined)
        if not all(interval.low_bounded and interval.high_bounded for interval in ours.values()):
            continue
        if ours["series_resistance"].low <= 0.2 * refined.model.series_resistance:
            continue  # the library has no bound there
        compared += 1
        moved = {n: refined.standard_errors[n] * abs(derivative(n, getattr(refined.model, n))) for n in PARAMETERS}
        for name, ends in lmfit_profile(sweep, refined, moved).items():
            here = sorted(scaled(name, end) for end in (ours[name].low, ours[name].high))
            gaps.extend(abs(a - b) / (here[1] - here[0]) for a, b in zip(here, ends, strict=True))
    show(
        ("sweeps whose profile intervals were compared with lmfit", compared),
        ("ends: median, largest gap as a share of the width", f"{np.median(gaps):.1e}, {np.max(gaps):.1e}"),
    )
    assert np.max(gaps) < 0.02


def scaled(name, value):
    return math.log(value) if name == "saturation_current" else 1 / value if name == "shunt_resistance" else value


def derivative(name, value):
    return 1 / value if name == "saturation_current" else 1 / value**2 if name == "shunt_resistance" else 1.0


def independent_current(voltage, photocurrent, saturation_current, ideality, series_resistance, shunt_resistance):
    """J(V) of one diode by bisection in the junction voltage, then Newton; nothing of core in it."""
    m = ideality * constants.k * 298.15 / constants.e

    def current(u):
        return photocurrent - saturation_current * np.expm1(u / m) - u / shunt_resistance

    # V = u − J(u)·Rs rises with u.
    high = np.maximum(voltage, 0.0) + series_resistance * photocurrent + 1e-3
    low = np.minimum(voltage, 0.0) - 1e-3
    low = low - series_resistance * np.abs(current(low))
    for _ in range(60):
        middle = 0.5 * (low + high)
        above = middle - series_resistance * current(middle) > voltage
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    u = 0.5 * (low + high)
    for _ in range(3):
        slope = 1 + series_resistance * (saturation_current / m * np.exp(u / m) + 1 / shunt_resistance)
        u = u - (u - series_resistance * current(u) - voltage) / slope
    return current(u)


def lmfit_problem(sweep, ours, unit, beside=0.05):
    """Jph, ln J0, n, Rs and 1/Rsh in units of our standard errors, for lmfit, and its minimiser."""
    middle = {n: scaled(n, getattr(ours.model, n)) for n in PARAMETERS}
    size = 1 / ours.rmse
    # Moved about 1, so that differences are taken over a sensible step, from beside the optimum.
    values = lmfit.Parameters()
    for name in PARAMETERS:
        values.add(name, 1 + beside)

    def residual(moved):
        at = {name: middle[name] + unit[name] * (moved[name].value - 1) for name in PARAMETERS}
        curve = independent_current(
            sweep.voltage,
            at["photocurrent"],
            math.exp(at["saturation_current"]),
            at["ideality"],
            abs(at["series_resistance"]),
            1 / abs(at["shunt_resistance"]),
        )
        return size * (curve - sweep.current)

    minimiser = lmfit.Minimizer(residual, values)
    return middle, minimiser, minimiser.minimize(xtol=1e-12, ftol=1e-12, epsfcn=1e-10)


def lmfit_fit(sweep, ours):
    """Value and standard error of each parameter on its scale."""
    unit = {n: ours.standard_errors[n] * abs(derivative(n, getattr(ours.model, n))) for n in PARAMETERS}
    middle, _, found = lmfit_problem(sweep, ours, unit, beside=3.0)
    return {n: (middle[n] + unit[n] * (found.params[n].value - 1), unit[n] * found.params[n].stderr) for n in PARAMETERS}


def lmfit_profile(sweep, ours, unit):
    """Ends of the 95 % interval of each parameter on its scale."""
    middle, minimiser, found = lmfit_problem(sweep, ours, unit)
    rows = lmfit.conf_interval(minimiser, found, sigmas=[0.95])
    return {n: tuple(middle[n] + unit[n] * (rows[n][i][1] - 1) for i in (0, 2)) for n in PARAMETERS}
