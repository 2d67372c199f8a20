"""Autocorrelation of residuals, and lone bright pixels."""

import numpy as np
import pytest
from scipy.stats import poisson

import recon
from recon.fit.structure import structure
from recon.fit.tails import brightest_lone, lone_pixels, without_peaks
from recon.likelihoods import Poisson


@pytest.mark.parametrize("seed", range(3))
def test_white_residuals_have_none(seed):
    noise = np.random.default_rng(seed).standard_normal((200, 250))
    noise[40:50, 60:80] = np.nan
    row, column, four, eight = structure(noise)
    assert abs(row) < 4.0 / np.sqrt(noise.size)
    assert abs(column) < 4.0 / np.sqrt(noise.size)
    assert abs(four) < 4.0 * np.sqrt(2.0 * 16 / noise.size)
    assert abs(eight) < 4.0 * np.sqrt(2.0 * 64 / noise.size)


def test_averages_of_two_columns():
    """A moving average of two has a correlation of one half, along its direction only."""
    noise = np.random.default_rng(0).standard_normal((300, 401))
    row, column, four, _ = structure(noise[:, 1:] + noise[:, :-1])
    assert row == pytest.approx(0.5, abs=0.02)
    assert column == pytest.approx(0.0, abs=0.02)
    # the sum of four has the variance 2 + 2 + 2 + 2 + 2 (1 + 1 + 1) = 14 against 8
    assert four == pytest.approx(0.75, abs=0.1)


def test_nothing_to_compare():
    np.testing.assert_array_equal(structure(np.full((4, 4), np.nan)), 0.0)
    np.testing.assert_array_equal(structure(np.zeros((4, 4))), 0.0)


def test_a_lone_pixel_and_a_bright_patch():
    counts = np.ones((20, 20), int)
    counts[5, 5] = 12
    counts[12:15, 12:15] = 12
    likelihood = Poisson(recon.Counts(counts, 1, several_per_trial=True))
    level = np.ones((20, 20))
    found = lone_pixels(likelihood, level)
    assert found[5, 5]
    assert found.sum() == 1
    followed = level.copy()
    followed[5, 5] = 10.0
    np.testing.assert_array_equal(lone_pixels(likelihood, followed), found)


def test_the_least_likely_lone_pixel():
    """Its chance against scipy's Poisson law, over all 400 pixels; in the dark the law of a twentieth."""
    counts = np.ones((20, 20), int)
    counts[5, 5], counts[15, 8] = 9, 12
    likelihood = Poisson(recon.Counts(counts, 1, several_per_trial=True))
    flat = np.ones((20, 20))
    found = brightest_lone(likelihood, flat, lone_pixels(likelihood, flat))
    assert (found.row, found.column, found.number) == (15, 8, 12.0)
    assert found.mean == found.variance == pytest.approx(1.0)
    assert found.chance == pytest.approx(400 * poisson.sf(11, 1.0), rel=1e-6)
    half = np.ones((20, 20))
    half[:, :10] = counts[:, :10] = 0.0
    counts[15, 8] = 4
    likelihood = Poisson(recon.Counts(counts, 1, several_per_trial=True))
    dark = brightest_lone(likelihood, half, lone_pixels(likelihood, half))
    assert dark.mean == pytest.approx(0.05 * half.mean(), rel=1e-6)
    assert dark.chance == pytest.approx(400 * poisson.sf(3, 0.025), rel=1e-5)
    even = Poisson(recon.Counts(np.ones((20, 20), int), 1, several_per_trial=True))
    assert brightest_lone(even, flat, lone_pixels(even, flat)) is None


def test_peaks_of_one_pixel_are_cut():
    image = np.zeros((5, 6))
    image[2, 2], image[0, 4:] = 3.0, 2.0
    expected = image.copy()
    expected[2, 2] = 0.0
    np.testing.assert_array_equal(without_peaks(image), expected)
