"""Two columns without headings: refused where they can be no sweep, read where they may be one."""

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from core.diode import OneDiode
from core.errors import UnreadableFile
from core.reading import read_sweeps

SAMPLES = Path(__file__).parents[3] / "sample_sweeps"
TEXTS = [path for path in sorted(SAMPLES.rglob("*")) if path.suffix in {".csv", ".txt", ".tsv"}]


def bare(volts, amps, delimiter="\t"):
    return "\n".join(f"{v:.7g}{delimiter}{i:.7g}" for v, i in zip(volts, amps, strict=True)).encode()


def read_bare(volts, amps):
    return read_sweeps(bare(volts, amps), "bare.txt")


def diffraction(angles, seed=1):
    """Counts over a falling background, with a few narrow lines [-]."""
    random = np.random.default_rng(seed)
    counts = 400 * np.exp(-angles / 25) + 20
    for at, high in ((14.1, 3000), (28.4, 2000), (31.9, 1200), (43.2, 300)):
        counts = counts + high * np.exp(-(((angles - at) / 0.12) ** 2))
    return random.poisson(counts)


NANOMETRES = np.arange(300, 1101, 10.0)
EFFICIENCY = 85 / (1 + np.exp((340 - NANOMETRES) / 12)) / (1 + np.exp((NANOMETRES - 790) / 10))


@pytest.mark.parametrize(
    ("first", "second"),
    [
        (np.arange(10, 60, 0.02), diffraction(np.arange(10, 60, 0.02))),
        (np.arange(5, 90, 0.05), diffraction(np.arange(5, 90, 0.05))),
        (np.arange(10, 61.0), np.random.default_rng(2).uniform(80, 980, 51)),
        (NANOMETRES, EFFICIENCY),
        (NANOMETRES, EFFICIENCY / 100),
        (np.arange(300, 351.0), 10 + 1.6 * np.arange(51)),
        (np.arange(400, 801, 5.0), 92 - 3 * np.cos(np.arange(81) / 3)),  # transmittance [%]
        (np.arange(300, 801, 5.0), 2 * np.exp(-(((np.arange(300, 801, 5) - 520) / 60) ** 2)) + 0.1),  # absorbance
    ],
)
def test_other_measurements_are_refused_and_told_what_to_do(first, second):
    with pytest.raises(UnreadableFile, match="do not look like a sweep: .* write headings such as “voltage"):
        read_bare(first, second)


def test_headings_let_any_shape_through():
    text = b"voltage (mV)\tcurrent (mA)\n" + bare(NANOMETRES, EFFICIENCY)
    assert len(read_sweeps(text, "a.txt")[0].voltage) == NANOMETRES.size


@pytest.mark.parametrize("path", TEXTS, ids=lambda path: path.name)
def test_samples_are_read_without_their_headings(path):
    known = read_sweeps(path.read_bytes(), path.name)
    unknown = [s for one in known for s in read_bare(one.voltage, 1e3 * one.current)]
    assert len(unknown) == len(known)


RANDOM = {"allow_nan": False, "allow_infinity": False}


@settings(max_examples=400, deadline=None)
@given(
    cells=st.sampled_from([1, 1, 1, 2, 6, 36, 60]),
    photocurrent=st.sampled_from([0.0, 2e-4, 5e-3, 22e-3, 40e-3]),
    saturation=st.floats(-14, -6, **RANDOM),
    ideality=st.floats(1.0, 2.5, **RANDOM),
    series=st.floats(0, 60, **RANDOM),
    shunt=st.floats(1.5, 6, **RANDOM),
    noise=st.sampled_from([0.0, 0.001, 0.01, 0.05]),
    barrier=st.sampled_from([0.0, 0.0, 0.22]),
    points=st.integers(12, 300),
    start=st.floats(-0.3, 0.0, **RANDOM),
    sign=st.sampled_from([1, -1]),
    both=st.booleans(),
    unit=st.sampled_from([1.0, 1e3]),
    seed=st.integers(0, 2**16),
)
def test_sweeps_of_every_kind_are_read_without_headings(
    cells, photocurrent, saturation, ideality, series, shunt, noise, barrier, points, start, sign, both, unit, seed
):
    """Lit and dark, modules, noisy, nearly ohmic, S-shaped, one way or there and back, in V or mV, A or mA."""
    model = OneDiode(photocurrent, 10**saturation, ideality, series, 10**shunt, series_cells=cells)
    voc = model.landmarks().voc if photocurrent else 0.7 * cells
    volts = np.linspace(start * cells, 1.1 * voc, points)
    # A barrier at the contact takes up part of the voltage around the fall; below 0.25 the current still falls throughout.
    amps = model.current(volts - barrier * voc * np.tanh(4 * (volts / voc - 0.7)) if barrier and voc else volts)
    level = np.max(np.abs(amps)) if not photocurrent else photocurrent
    amps = amps + noise * level * np.random.default_rng(seed).standard_normal(points)
    if both:
        volts, amps = np.r_[volts, volts[::-1]], np.r_[amps, 0.97 * amps[::-1]]
    sweeps = read_bare(unit * volts, sign * unit * amps)
    assert sum(len(sweep.voltage) for sweep in sweeps) >= points


CELL = OneDiode(22e-3, 1e-12, 1.6, 3.0, 2000.0)


@pytest.mark.parametrize(
    ("model", "low", "high"),
    [
        (CELL, 0.4, 1.15),  # starts at 0.4 V and crosses zero current
        (CELL, 0.3, 1.0),  # crosses neither axis, but bends down
        (CELL, -1.0, 0.5),  # plateau only
        (OneDiode(0.0, 1e-10, 1.5, 1.0, 1e5), 0.3, 0.8),  # a diode's rise in the dark
        (OneDiode(0.0, 1e-30, 1.0, 1e-3, 100.0), 0.3, 1.0),  # a resistor
        (OneDiode(0.0, 1e-30, 1.0, 1e-3, 100.0), -1.0, 1.0),
        (OneDiode(22e-3, 1e-12, 1.6, 0.0, 30.0), 0.0, 0.7),  # falls in a straight line
    ],
)
@pytest.mark.parametrize("noise", [0.0, 0.005])
def test_sweeps_that_do_not_cross_both_axes_are_read(model, low, high, noise):
    volts = np.linspace(low, high, 71)
    amps = model.current(volts)
    amps = amps * (1 + noise * np.random.default_rng(3).standard_normal(71))
    [sweep] = read_bare(volts, 1e3 * amps)
    assert sweep.voltage.size == 71


def test_the_bump_of_a_fast_sweep_is_no_reason_to_refuse():
    volts = np.linspace(-0.1, 1.05, 116)
    [sweep] = read_bare(volts, 1e3 * (CELL.current(volts) + 8e-3 * np.exp(-(((volts - 0.7) / 0.1) ** 2))))
    assert sweep.lit


def test_noise_about_zero_in_reverse_bias_is_read():
    volts = np.linspace(-1.0, 0.1, 111)
    assert read_bare(volts, 1e-9 * np.random.default_rng(4).standard_normal(111))
