"""The tabulated pulse against closed forms, quadrature and published timing bounds."""

import numpy as np
import pytest
from scipy import constants, stats
from scipy.integrate import quad, trapezoid

from recon.acquisition import GaussianPulse, SampledPulse, TimeTags
from recon.errors import InputError
from recon.likelihoods import detection_time_kernels as kernels
from recon.likelihoods.range_pulse import range_pulse

PERIOD = 100e-9
TIMES = np.arange(-1.5, 8.0, 0.05) * 1e-9
TAILED = SampledPulse(
    TIMES, np.where(TIMES < 0.0, np.exp(-0.5 * (TIMES / 0.2e-9) ** 2), np.exp(-TIMES / 0.9e-9))
)


def table(pulse, period=PERIOD, interval=None, refractive_index=1.0):
    return range_pulse(
        TimeTags(
            [0], [0], [0.0], shape=(1, 1), trials=1, period=period, pulse=pulse, interval=interval,
            refractive_index=refractive_index,
        )
    )  # fmt: skip


def metres(seconds, refractive_index=1.0):
    return 0.5 * constants.c / refractive_index * seconds


def test_a_gaussian_pulse_is_exact():
    pulse, rms = table(GaussianPulse(0.27e-9), refractive_index=1.33), metres(0.27e-9, 1.33)
    u = np.linspace(-9.0, 9.0, 1001) * rms
    np.testing.assert_allclose(pulse.density(u), stats.norm.pdf(u, scale=rms), rtol=1e-11)
    assert pulse.core == pytest.approx(rms, rel=1e-9)


@pytest.mark.parametrize("interval", [0.05e-9, 0.4e-9, 3e-9])
def test_an_interval_averages_the_gaussian(interval):
    pulse, rms, half = table(GaussianPulse(0.27e-9), interval=interval), metres(0.27e-9), metres(interval) / 2
    u = np.linspace(-half - 8.0 * rms, 0.0, 500)
    share = stats.norm.cdf((u + half) / rms) - stats.norm.cdf((u - half) / rms)
    np.testing.assert_allclose(pulse.density(u), share / (2.0 * half), rtol=1e-6)
    np.testing.assert_allclose(pulse.density(-u), share / (2.0 * half), rtol=1e-6)


def test_a_sampled_pulse_is_smoothed_by_a_tenth_of_its_core():
    pulse = table(TAILED)
    squared = trapezoid(TAILED.density(np.linspace(-2e-9, 8e-9, 200_001)) ** 2, dx=5e-14)
    smooth = 0.1 / (2.0 * np.sqrt(np.pi) * squared)
    around = np.linspace(-9.0, 9.0, 200_001) * smooth
    for t in (-0.6e-9, -0.1e-9, 0.0, 0.02e-9, 0.5e-9, 4e-9, 7.95e-9):
        expected = trapezoid(TAILED.density(t - around) * stats.norm.pdf(around, scale=smooth), around)
        assert metres(pulse.density(metres(t))) == pytest.approx(expected, rel=2e-3)


@pytest.mark.parametrize("pulse", [GaussianPulse(1e-9), TAILED])
@pytest.mark.parametrize("interval", [None, 2e-9])
def test_periods_that_overlap_are_summed(pulse, interval):
    short, long = table(pulse, 6e-9, interval), table(pulse, PERIOD, interval)
    u = np.linspace(0.0, short.period, 301)
    expected = sum(long.density(u + turn * short.period) for turn in range(-5, 6))
    np.testing.assert_allclose(short.density(u), expected, rtol=1e-4)
    np.testing.assert_allclose(short.density(u + short.period), short.density(u), rtol=1e-9)


def test_the_share_of_a_gaussian_pulse_is_exact():
    pulse, rms = table(GaussianPulse(0.27e-9)), metres(0.27e-9)
    u = np.linspace(-9.0, 9.0, 1001) * rms
    np.testing.assert_allclose(pulse.cumulative(u), stats.norm.cdf(u, scale=rms), rtol=0.0, atol=1e-9)
    turns = np.array([[-3.0], [0.0], [2.0]])
    expected = turns + stats.norm.cdf(u, scale=rms)
    np.testing.assert_allclose(pulse.cumulative(u + turns * pulse.period), expected, atol=1e-9)


@pytest.mark.parametrize(("pulse", "period"), [(GaussianPulse(1e-9), 6e-9), (TAILED, 6e-9), (TAILED, PERIOD)])
@pytest.mark.parametrize("interval", [None, 2e-9])
def test_the_share_is_the_integral_of_the_density(pulse, period, interval):
    pulse = table(pulse, period, interval)
    ends = np.random.default_rng(0).uniform(-1.5, 1.5, (10, 2)) * metres(6e-9)
    for a, b in ends:
        expected = quad(pulse.density, a, b, limit=1000, epsabs=1e-10, points=np.linspace(a, b, 40)[1:-1])[0]
        assert np.diff(pulse.cumulative([a, b]))[0] == pytest.approx(expected, abs=1e-8)
    assert np.diff(pulse.cumulative([0.3, 0.3 + pulse.period]))[0] == pytest.approx(1.0, abs=1e-12)


def test_the_compiled_share_is_the_same():
    pulse = table(TAILED, 6e-9)
    u = np.linspace(-3.0, 3.0, 501) * pulse.period
    each = [kernels.cumulative(x, pulse.low, pulse.step, pulse.shares, pulse.period) for x in u]
    np.testing.assert_allclose(each, pulse.cumulative(u), rtol=0.0, atol=1e-12)


def test_how_much_a_gaussian_turns():
    """The integral of |p''| is four times the largest slope, at one rms."""
    pulse, rms = table(GaussianPulse(0.27e-9)), metres(0.27e-9)
    turning = 4.0 * stats.norm.pdf(1.0) / rms**2
    assert turning <= pulse.turning <= 1.011 * turning


@pytest.mark.parametrize("pulse", [GaussianPulse(0.27e-9), TAILED])
@pytest.mark.parametrize("interval", [None, 0.4e-9])
def test_derivatives_match_at_the_knots(pulse, interval):
    pieces = table(pulse, interval=interval).pieces
    powers = np.arange(6)
    for order in range(3):
        factor = np.prod([powers - k for k in range(order)], axis=0) if order else np.ones(6)
        ends = (pieces * factor).sum(axis=1)
        starts = pieces[:, order] * factor[order]
        np.testing.assert_allclose(ends[:-1], starts[1:], rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize(
    ("ratio", "expected"), [(0.01, 0.853586), (0.1, 0.498052), (1.0, 0.116612), (10.0, 0.013806)]
)
def test_information_over_a_uniform_background(ratio, expected):
    """J sigma^2 / S at b sigma / S (Bar-David 1969, from memory, recomputed)."""
    pulse = table(GaussianPulse(1e-9), 1e-6)
    sigma = metres(1e-9)
    noise = np.array([ratio / sigma])
    whole = pulse.information(noise) * (1.0 + noise * pulse.period)  # of a signal tag and its background
    assert whole[0] * sigma**2 == pytest.approx(expected, abs=1e-6)


@pytest.mark.parametrize(("ratio", "expected"), [(1.0, 0.940218), (0.04, 0.575780)])
def test_information_at_a_signal_to_background_ratio(ratio, expected):
    """Period 100 ns, rms 270 ps (Bar-David 1969, from memory, recomputed)."""
    pulse = table(GaussianPulse(0.27e-9))
    noise = np.array([1.0 / ratio / pulse.period])
    whole = pulse.information(noise) * (1.0 + noise * pulse.period)
    assert whole[0] * metres(0.27e-9) ** 2 == pytest.approx(expected, abs=1e-6)


def test_information_between_the_nodes():
    pulse = table(TAILED)
    noise = np.geomspace(1e-8, 1e3, 500)
    one_by_one = [pulse.information(np.array([n]))[0] for n in noise]
    np.testing.assert_allclose(pulse.information(noise), one_by_one, rtol=1e-6)


def test_the_sharpest_bend_of_a_gaussian_is_at_its_peak():
    """-(log p)'' = 1 / rms^2 everywhere; a floor c leaves p / (p + c) of it at the peak."""
    pulse, rms = table(GaussianPulse(0.27e-9)), metres(0.27e-9)
    floor = np.array([1e-6, 1e-3, 1.0, 10.0])
    peak = stats.norm.pdf(0.0, scale=rms)
    sharpest = pulse.sharpest(floor) * rms**2
    assert np.all(sharpest >= peak / (peak + floor))
    assert np.all(sharpest <= 1.02)
    assert np.all(np.diff(sharpest) <= 0.0)


def test_a_pulse_of_too_much_detail_is_refused():
    comb = SampledPulse([0.0, 1e-15, 2e-15, 1e-8], [0.0, 1.0, 0.0, 0.0])
    with pytest.raises(InputError, match="pulse spans"):
        table(SampledPulse([0.0, 1e-15, 2e-15, 1e-8], [0.0, 1.0, 1e-12, 1e-8]), PERIOD)
    assert table(comb, PERIOD).core < 1e-6
