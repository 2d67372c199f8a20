"""Rates and counts under a dead time, against published formulas and drawn detections."""

import numpy as np
import pytest

from recon.acquisition import DeadTime, GaussianPulse
from recon.errors import InputError
from recon.instrument import (
    count_variance,
    non_paralysable_rate,
    paralysable_rate,
    true_rate,
    two_source_dead_time,
)
from recon.simulate import time_tags


def test_knoll():
    """Knoll, Radiation Detection and Measurement, chapter 4 (from memory, recomputed)."""
    assert non_paralysable_rate(1e6, 100e-9) == pytest.approx(909090.91, rel=1e-8)
    assert paralysable_rate(1e6, 100e-9) == pytest.approx(904837.42, rel=1e-8)
    assert two_source_dead_time(909090.91, 909090.91, 1666666.67) == pytest.approx(100e-9, rel=1e-6)


def test_the_inverse_undoes_the_loss():
    rates = np.array([[0.0, 1e3], [1e6, 1e9]])
    np.testing.assert_allclose(true_rate(non_paralysable_rate(rates, 50e-9), 50e-9), rates, rtol=1e-12)


@pytest.mark.parametrize("background", [0.0, 1e3, 2e5])
@pytest.mark.parametrize("tau", [0.0, 1e-9, 300e-9])
def test_two_sources_with_a_background(background, tau):
    true = np.array([7e5, 1.1e6, 1.8e6, 0.0]) + background
    m1, m2, m12, b = true / (1 + true * tau)
    assert two_source_dead_time(m1, m2, m12, b) == pytest.approx(tau, rel=1e-6, abs=1e-14)


@pytest.mark.parametrize(("m1", "m2", "background"), [(10.0, 20.0, 0.0), (19.0, 20.0, 3.0), (7.3, 7.3, 1.1)])
def test_a_saturated_detector(m1, m2, background):
    """Both sources together record no more than the stronger: a full detector, tau = 1 / m12."""
    assert two_source_dead_time(m1, m2, m2, background) == pytest.approx(1 / m2, rel=1e-6)


def test_mueller():
    """Mueller 1973 (from memory, recomputed): n tau = 0.1 gives 0.75131 n T."""
    assert count_variance(1e6, 100e-9, 1.0) == pytest.approx(0.75131e6, rel=1e-5)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_variance_of_drawn_counts(seed):
    flat = np.zeros((50, 60))
    tags = time_tags(
        flat, flat, 500, 1e-7, GaussianPulse(1e-9), 1.0, 2.0, dead_time=DeadTime(75e-9), seed=seed
    )
    numbers = tags.counts().detections
    expected = float(count_variance(2 / 1e-7, 75e-9, 500 * 1e-7))
    assert numbers.var() == pytest.approx(expected, rel=4 * np.sqrt(2 / numbers.size))
    assert numbers.mean() == pytest.approx(500 * 0.8, abs=4 * np.sqrt(expected / numbers.size) + 1)


CASES = [
    (non_paralysable_rate, (-1.0, 1e-9), "rate is -1"),
    (non_paralysable_rate, (1.0, np.inf), "dead_time is inf"),
    (paralysable_rate, ([1.0, np.nan], 1e-9), r"rate at \(1,\) is nan"),
    (true_rate, ([1.0, 1e7], 1e-7), r"recorded at \(1,\) is 1e\+07 per second"),
    (true_rate, (2e7, 1e-7), r"recorded is 2e\+07 per second"),
    (two_source_dead_time, (10.0, 10.0, 21.0), "m12 is 21"),
    (two_source_dead_time, (10.0, 10.0, 9.0), "m12 is 9"),
    (two_source_dead_time, (10.0, 10.0, 15.0, 11.0), "background 11"),
    (two_source_dead_time, (0.0, 0.0, 0.0), "m12 is 0"),
    (count_variance, (1.0, 1e-9, -1.0), "duration is -1"),
]


@pytest.mark.parametrize(("function", "arguments", "message"), CASES)
def test_one_sentence(function, arguments, message):
    with pytest.raises(InputError, match=message) as caught:
        function(*arguments)
    assert str(caught.value).endswith(".")
    assert ";" in str(caught.value)
