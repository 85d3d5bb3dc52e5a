"""AICc: two diodes where there are two, one where there is one."""

import math

import numpy as np
import pytest

from core.diode import OneDiode
from core.errors import FitFailed
from core.fit_settings import FitSettings
from core.model_choice import compare_models
from core.sweep import Sweep
from core.two_diode import TwoDiode
from tests.core import published

TWO = TwoDiode(0.035, 3e-13, 4e-9, 0.8, 2500.0)
ONE = OneDiode(0.035, 3e-13, 1.3, 0.8, 2500.0)


def sweep_of(device, points=120, noise=1e-3, seed=0):
    marks = device.landmarks()
    voltage = np.linspace(-0.1, 1.04, points) * marks.voc
    current = device.current(voltage) + noise * marks.jsc * np.random.default_rng(seed).standard_normal(points)
    return Sweep(voltage, current, per_area=True)


def test_each_model_wins_on_its_own_curve():
    two = compare_models(sweep_of(TWO, noise=3e-4))
    assert two.aicc_two < two.aicc_one - 10
    assert "Two diodes (n₁ = 1 and n₂ = 2) describe this sweep clearly better" in two.sentence
    one = compare_models(sweep_of(ONE, noise=3e-4))
    assert one.aicc_one < one.aicc_two - 2 and "One diode describes" in one.sentence


def test_a_noisy_sweep_does_not_tell_them_apart():
    choice = compare_models(sweep_of(TWO, points=20, noise=2e-2))
    assert abs(choice.aicc_two - choice.aicc_one) < 2 and "keep the simpler one" in choice.sentence


def test_the_criterion_is_that_of_its_definition():
    """n·ln(S/n) + 2K + 2K(K + 1)/(n − K − 1), with the noise counted among the K parameters."""
    sweep = published.cell()
    choice = compare_models(sweep)
    for fit, criterion in ((choice.one, choice.aicc_one), (choice.two, choice.aicc_two)):
        n, k = 26, len(fit.free) + 1
        assert criterion == pytest.approx(n * math.log(fit.rmse**2) + 2 * k + 2 * k * (k + 1) / (n - k - 1))
    assert len(choice.one.free) == len(choice.two.free) == 5
    assert "somewhat better" in choice.sentence or "clearly better" in choice.sentence


def test_freeing_both_n_costs_two_parameters():
    sweep = sweep_of(ONE)
    free = compare_models(sweep, FitSettings(model="two diodes", hold=frozenset()))
    assert len(free.two.free) == 7
    assert free.aicc_two > free.aicc_one + 2


def test_exact_curves_and_too_few_points_end_in_a_sentence():
    assert math.isfinite(compare_models(sweep_of(ONE, noise=0.0)).aicc_one)
    with pytest.raises(FitFailed, match="too few to choose"):
        compare_models(sweep_of(ONE, points=7))
