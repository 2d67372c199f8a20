"""The forecast histogram against closed forms and detectors drawn photon by photon."""

import numpy as np
import pytest
from scipy import constants, optimize, stats

from recon.acquisition import DeadTime, GaussianPulse
from recon.errors import InputError
from recon.instrument import forecast, live_exposure, pile_up_correction
from recon.simulate import time_tags

PERIOD = 100e-9
ECHO = 40e-9
PULSE = 1e-9


def scene(bins, signal=2.0, background=1.0):
    """Expected detections per bin and period without dead time."""
    edges = np.linspace(0.0, PERIOD, bins + 1)
    return signal * np.diff(stats.norm.cdf(edges, ECHO, PULSE)) + background / bins


def drawn(dead_time, periods, seed, shape=(20, 20)):
    flat = np.ones(shape)
    return time_tags(
        flat * ECHO * constants.c / 2, flat, periods, PERIOD, GaussianPulse(PULSE), 2.0, 1.0,
        dead_time=dead_time, seed=seed,
    )  # fmt: skip


@pytest.mark.parametrize("bins", [1, 7, 100, 1000])
def test_uniform_light(bins):
    """n / (1 + n tau), flat: 2 photons a period, dead for 0.75 of it, give 0.8 detections a period."""
    recorded = forecast(np.full(bins, 2.0 / bins), PERIOD / bins, DeadTime(0.75 * PERIOD))
    np.testing.assert_allclose(recorded, 0.8 / bins, rtol=1e-10)


@pytest.mark.parametrize("blind", [0.003, 0.31, 0.99, 1.0, 1.7, 4.2])
def test_detections_of_uniform_light_for_any_dead_time(blind):
    recorded = forecast(np.full(200, 0.02), PERIOD / 200, DeadTime(blind * PERIOD))
    np.testing.assert_allclose(recorded.sum(), 4 / (1 + 4 * blind), rtol=1e-10)


def test_first_photons():
    """Coates 1968 (recomputed): rates and detection fractions where a period records its first photon."""
    rate = np.array([0.1, 0.2, 0.4, 0.2, 0.1])
    recorded = forecast(rate, 1e-9, DeadTime(5e-9, reset_every_period=True))
    np.testing.assert_allclose(recorded, [0.0951626, 0.1640192, 0.2442329, 0.0900156, 0.0386902], atol=1e-7)
    np.testing.assert_allclose(pile_up_correction(recorded, 1.0), rate, rtol=1e-12)
    # dead for all but the last thousandth of the period: nearly the same, by the other way of reckoning
    nearly = forecast(rate, 1e-9, DeadTime(4.999e-9, reset_every_period=True))
    np.testing.assert_allclose(nearly, recorded, rtol=1e-3)


@pytest.mark.parametrize("blind", [0.3, 3.3, 61.8034, 75.0, 99.99, 100.0, 230.7])
def test_live_exposure_gives_the_rate_back(blind):
    """To rounding where no bin expects more than 0.1."""
    rate, width, dead_time = scene(1000), PERIOD / 1000, DeadTime(blind * 1e-9)
    recorded = forecast(rate, width, dead_time)
    np.testing.assert_allclose(recorded / live_exposure(recorded, 1.0, width, dead_time), rate, rtol=1e-9)


@pytest.mark.parametrize("blind", [3.3, 61.8034, 75.0, 230.7])
def test_live_exposure_gives_the_rate_back_with_resets(blind):
    """To rounding, but to lam^2 / 12 where the forecast is the exact one of first photons."""
    rate, width, dead_time = scene(1000), PERIOD / 1000, DeadTime(blind * 1e-9, 0.0, True)
    recorded = forecast(rate, width, dead_time)
    off = 1.1 * rate.max() ** 2 / 12 if blind > 100 else 1e-9
    np.testing.assert_allclose(recorded / live_exposure(recorded, 1.0, width, dead_time), rate, rtol=off)


@pytest.mark.parametrize("reset", [False, True])
def test_coarse_bins_are_those_of_fine_ones(reset):
    """Bins too bright for the sums of live exposure; each has a rate uniform within."""
    coarse = np.array([0.0, 3.0, 0.1, 0.1, 6.0])
    dead_time = DeadTime(1.3e-9, 0.0, reset)
    fine = forecast(np.repeat(coarse / 400, 400), 1e-9 / 400, dead_time).reshape(5, 400).sum(axis=1)
    np.testing.assert_allclose(forecast(coarse, 1e-9, dead_time), fine, rtol=1e-3)


DETECTORS = [
    DeadTime(75e-9),
    DeadTime(13.3e-9),
    DeadTime(230.7e-9),
    DeadTime(61.8e-9, reset_every_period=True),
    DeadTime(120e-9, reset_every_period=True),
]


@pytest.mark.parametrize("dead_time", DETECTORS)
def test_drawn_detections(dead_time):
    """Pixels are independent repeats: z scores of 50 groups of bins, over three seeds."""
    bins, groups, periods = 2000, 50, 2000
    expected = forecast(scene(bins), PERIOD / bins, dead_time).reshape(groups, -1).sum(axis=1)
    scores = []
    for seed in (1, 2, 3):
        tags = drawn(dead_time, periods, seed)
        group = (tags.row * 20 + tags.column) * groups + (tags.time / PERIOD * groups).astype(int)
        seen = np.bincount(group, minlength=400 * groups).reshape(400, groups) / periods
        scores.append((seen.mean(axis=0) - expected) / (seen.std(axis=0, ddof=1) / 20))
    scores = np.array(scores)
    assert np.abs(scores).max() < 4.5
    assert np.mean(scores**2) == pytest.approx(1.0, abs=0.5)


def fitted(histogram, exposure):
    """Signal, echo time (ns) and background of greatest Poisson likelihood; the pulse is known."""
    edges = np.linspace(0.0, 100.0, histogram.size + 1)

    def loss(p):
        rate = p[0] * np.diff(stats.norm.cdf(edges, p[1], 1.0)) + p[2] / histogram.size
        return np.sum(exposure * rate - histogram * np.log(rate))

    limits = [(0.01, 10), (37, 43), (0.01, 10)]
    return optimize.minimize(loss, [1.0, 39.5, 0.5], bounds=limits, method="Nelder-Mead").x


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_bright_light_through_a_long_dead_time(seed):
    """Period 100 ns, dead for 75 ns, 2 signal and 1 background photons at 40 ns.

    The histogram as it is tells of a third of the signal, at 39.4 ns. Its errors with live exposure are
    those of the Poisson law: 1.5 % of the signal and 9 ps at 10 000 detections.
    """
    dead_time, periods, bins = DeadTime(75e-9), 15_000, 1000
    tags = drawn(dead_time, periods, seed, shape=(1, 1))
    histogram = np.histogram(tags.time, bins, (0.0, PERIOD))[0]
    signal, echo, _ = fitted(histogram, np.full(bins, float(periods)))
    assert signal < 0.7
    assert echo == pytest.approx(39.4, abs=0.05)
    live = live_exposure(histogram, periods, PERIOD / bins, dead_time)
    signal, echo, background = fitted(histogram, live)
    assert signal == pytest.approx(2.0, abs=4 * 2.0 * 0.015)
    assert echo == pytest.approx(40.0, abs=4 * 0.012)
    assert background == pytest.approx(1.0, abs=4 * 0.03)


def test_no_light():
    assert forecast([0.0, 0.0, 0.0], 1e-9, DeadTime(2e-9)).tolist() == [0.0, 0.0, 0.0]


CASES = [
    (([0.1, -0.1], 1e-9, DeadTime(1e-9)), r"rate at \(1,\) is -0.1"),
    (([[0.1]], 1e-9, DeadTime(1e-9)), r"rate has shape \(1, 1\)"),
    (([0.1], -1e-9, DeadTime(1e-9)), "bin_width is -1e-09"),
    (([0.1], 1e-9, 1e-9), "dead_time is float"),
    (([0.1, 1e9], 1e-9, DeadTime(1e-9)), r"rate at 1 is 1e\+09 in one of 2 bins"),
]


@pytest.mark.parametrize(("arguments", "message"), CASES)
def test_one_sentence(arguments, message):
    with pytest.raises(InputError, match=message) as caught:
        forecast(*arguments)
    assert str(caught.value).endswith(".")
    assert ";" in str(caught.value)
