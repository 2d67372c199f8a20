"""Pulses against closed forms, quadrature and differences."""

import math
from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

from recon.acquisition import GaussianPulse, SampledPulse
from recon.errors import InputError


def skewed(seed):
    rng = np.random.default_rng(seed)
    times = np.sort(rng.uniform(-2e-9, 5e-9, 40))
    return SampledPulse(times, rng.random(40) * np.exp(-times / 1e-9))


PULSES = [GaussianPulse(0.27e-9), skewed(1), skewed(2), SampledPulse([0, 1e-9], [0, 7])]


def breaks(pulse):
    return pulse.times if isinstance(pulse, SampledPulse) else np.linspace(*pulse.support, 9)


def integral(function, pulse, until=np.inf):
    until = min(until, breaks(pulse)[-1])
    edges = [*(t for t in breaks(pulse) if t < until), until]
    return sum(quad(function, a, b)[0] for a, b in pairwise(edges))


@pytest.mark.parametrize("pulse", PULSES)
def test_moments_and_area_by_quadrature(pulse):
    assert integral(pulse.density, pulse) == pytest.approx(1, rel=2e-9)
    mean = integral(lambda t: t * 1e9 * pulse.density(t), pulse) * 1e-9
    assert pulse.mean == pytest.approx(mean, rel=1e-8, abs=1e-17)
    square = integral(lambda t: ((t - mean) * 1e9) ** 2 * pulse.density(t), pulse) * 1e-18
    assert pulse.rms == pytest.approx(math.sqrt(square), rel=1e-7)


@pytest.mark.parametrize("pulse", PULSES)
def test_cumulative_is_the_integral_of_the_density(pulse):
    for t in np.linspace(*pulse.support, 7):
        assert pulse.cumulative(t) == pytest.approx(integral(pulse.density, pulse, until=t), abs=2e-9)
    assert pulse.cumulative([-1.0, 1.0]).tolist() == [0, 1]


@pytest.mark.parametrize("pulse", PULSES)
def test_support_holds_all_but_a_billionth(pulse):
    low, high = pulse.support
    assert low < pulse.mean < high
    assert pulse.cumulative(high) - pulse.cumulative(low) >= 1 - 1.0001e-9


@pytest.mark.parametrize("pulse", PULSES)
def test_score_is_the_slope_of_the_log_density(pulse):
    edges = breaks(pulse)
    t = edges[:-1] + np.diff(edges) * np.random.default_rng(3).uniform(0.2, 0.8, edges.size - 1)
    step = 1e-5 * np.diff(edges)
    slope = (pulse.log_density(t + step) - pulse.log_density(t - step)) / (2 * step)
    np.testing.assert_allclose(pulse.score(t), slope, rtol=1e-6, atol=1e-6 * np.abs(slope).max())
    np.testing.assert_allclose(np.exp(pulse.log_density(t)), pulse.density(t), rtol=1e-12)


def test_gaussian_against_scipy():
    pulse, reference = GaussianPulse(2e-10), norm(scale=2e-10)
    t = np.linspace(-3e-9, 3e-9, 101)
    np.testing.assert_allclose(pulse.density(t), reference.pdf(t), rtol=1e-12)
    np.testing.assert_allclose(pulse.log_density(t), reference.logpdf(t), rtol=1e-12)
    np.testing.assert_allclose(pulse.cumulative(t), reference.cdf(t), rtol=1e-12)


def test_triangle_in_closed_form():
    """A symmetric triangle of half width a: peak 1/a, variance a^2/6, share 1/8 in its first half rise."""
    a, centre = 3e-10, 1e-6
    pulse = SampledPulse([centre - a, centre, centre + a], [0, 4.2, 0])
    assert pulse.density(centre) == pytest.approx(1 / a)
    assert pulse.mean == pytest.approx(centre, rel=1e-14)
    assert pulse.rms == pytest.approx(a / math.sqrt(6), rel=1e-6)
    assert pulse.cumulative(centre - a / 2) == pytest.approx(1 / 8, rel=1e-6)
    assert pulse.density([centre - 1.1 * a, centre + 1.1 * a]).tolist() == [0, 0]
    assert pulse.log_density(0.0) == -np.inf
    assert pulse.score([0.0, 1.0]).tolist() == [0, 0]


def test_long_empty_ends_are_outside_the_support():
    values = np.zeros(1000)
    values[400:403] = [1, 3, 1]
    assert SampledPulse(np.arange(1000) * 1e-11, values).support == pytest.approx((399e-11, 403e-11))


@pytest.mark.parametrize("scale", [5e-324, 1e-300, 1.0, 1.7e308])
def test_scale_of_the_samples_does_not_matter(scale):
    pulse = SampledPulse([0, 1e-9, 2e-9, 3e-9], np.array([0, 1, 1, 0]) * scale)
    assert pulse.density(1.5e-9) == pytest.approx(0.5e9)
    assert pulse.values[1] == scale


def test_far_times_give_limits_without_warnings():
    for pulse in PULSES:
        assert pulse.density([-1e300, 1e300]).tolist() == [0, 0]
        assert pulse.log_density([-1e300, 1e300]).tolist() == [-np.inf, -np.inf]
        assert pulse.cumulative([-1e300, 1e300]).tolist() == [0, 1]


@pytest.mark.parametrize("rms", [0, -1e-9, np.nan, np.inf, 1e-30, "1 ns", None, True, [1e-9]])
def test_impossible_widths_are_refused(rms):
    with pytest.raises(InputError, match="rms "):
        GaussianPulse(rms)


@pytest.mark.parametrize(
    ("times", "values", "message"),
    [
        ([0, 2e-9, 1e-9], [0, 1, 0], r"times at \(2,\) is 1e-09; give increasing times"),
        ([0, 1e-9, 1e-9], [0, 1, 0], r"times at \(2,\) is 1e-09; give increasing times"),
        ([0, 1e-9], [0, 0], "values is 0 everywhere"),
        ([0, 1e-9], [1, -1], r"values at \(1,\) is -1\.0; give a finite number, 0 or more"),
        ([0, 1e-9], [1, np.nan], r"values at \(1,\) is nan"),
        ([0, np.inf], [1, 1], r"times at \(1,\) is inf"),
        ([0], [1], "two samples or more"),
        ([0, 1e-9], [1, 1, 1], r"times has shape \(2,\) and values \(3,\)"),
        ([[0, 1e-9]], [[1, 1]], r"times has shape \(1, 2\)"),
        ([], [], "times is empty"),
        ("ab", [1, 1], "times holds str"),
    ],
)
def test_impossible_samples_are_refused(times, values, message):
    with pytest.raises(InputError, match=message):
        SampledPulse(times, values)
