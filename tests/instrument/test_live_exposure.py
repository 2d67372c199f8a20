"""Live exposure against dead windows laid out one by one."""

import numpy as np
import pytest

from recon.acquisition import DeadTime
from recon.errors import InputError
from recon.instrument import live_exposure

BINS = 8
PLACES = (np.arange(200) + 0.5) / 200  # of a detection within its bin


def laid_out(bin_of_detection, blind, reset):
    """Mean number of times each bin is covered by the window of one detection; bins of width 1."""
    covered = np.zeros(BINS)
    for u in PLACES:
        begin = bin_of_detection + u
        end = begin + blind
        if reset:
            end = min(end, BINS)
        for b in range(int(begin), int(np.ceil(end))):
            covered[b % BINS] += max(min(end, b + 1) - max(begin, b), 0.0)
    return covered / PLACES.size


@pytest.mark.parametrize("reset", [False, True])
@pytest.mark.parametrize("blind", [0.25, 1.0, 1.6, 2.0, 5.3, 7.0, 7.7, 8.0, 8.4, 19.5])
def test_one_window_after_another(blind, reset):
    histogram = np.array([0, 3, 0, 0, 1, 7, 0, 2])
    periods = 1000.0
    expected = periods - sum(c * laid_out(b, blind, reset) for b, c in enumerate(histogram))
    found = live_exposure(histogram, periods, 0.5e-9, DeadTime(blind * 0.5e-9, 0.0, reset))
    np.testing.assert_allclose(found, expected, atol=1e-3)


def test_the_longer_dead_time_counts():
    histogram = np.array([4, 0, 0, 0, 0, 0, 0, 1])
    one, other = (live_exposure(histogram, 50, 1e-9, d) for d in (DeadTime(3e-9), DeadTime(1e-9, 3e-9)))
    np.testing.assert_array_equal(one, other)
    np.testing.assert_allclose(one, [47, 45, 45.5, 48, 50, 50, 50, 49.5])


def test_every_pixel_by_itself():
    rng = np.random.default_rng(0)
    histograms, periods = rng.integers(0, 4, (3, 4, BINS)), rng.integers(100, 200, (3, 4))
    dead_time = DeadTime(2.7e-9)
    together = live_exposure(histograms, periods, 1e-9, dead_time)
    for place in np.ndindex(3, 4):
        alone = live_exposure(histograms[place], periods[place], 1e-9, dead_time)
        np.testing.assert_allclose(together[place], alone, rtol=1e-14)


def test_never_below_zero():
    assert live_exposure([9, 9], 3, 1e-9, DeadTime(5e-9)).tolist() == [0.0, 0.0]


CASES = [
    (([1, np.nan], 3, 1e-9, DeadTime(1e-9)), r"histogram at \(1,\) is nan"),
    (([1, 2], -3, 1e-9, DeadTime(1e-9)), "periods is -3"),
    (([1, 2], [3, 4], 1e-9, DeadTime(1e-9)), r"periods has shape \(2,\)"),
    (([1, 2], 3, 0.0, DeadTime(1e-9)), "bin_width is 0"),
    (([1, 2], 3, 1e-9, 1e-9), "dead_time is float"),
]


@pytest.mark.parametrize(("arguments", "message"), CASES)
def test_one_sentence(arguments, message):
    with pytest.raises(InputError, match=message) as caught:
        live_exposure(*arguments)
    assert str(caught.value).endswith(".")
    assert ";" in str(caught.value)
