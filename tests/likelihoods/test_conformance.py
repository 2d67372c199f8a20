"""Every likelihood of ours keeps the contract, on data with gaps, zeros, background and large counts."""

from dataclasses import replace

import numpy as np
import pytest

import recon
from recon import likelihoods, simulate
from recon.testing import check_likelihood

SHAPE = (6, 8)
RNG = np.random.default_rng(11)
TRUTH = RNG.uniform(0.2, 2.0, SHAPE)
GAIN = RNG.uniform(0.02, 0.3, SHAPE)
BACKGROUND = RNG.uniform(0.005, 0.05, SHAPE)
MASK = np.ones(SHAPE, bool)
MASK[2] = False


def _trials(most):
    trials = RNG.integers(1, most, SHAPE).astype(float)
    trials[0, :2] = 0.0
    return trials


def _poisson(exposure, gain=1.0, background=0.0, mask=None):
    detections = RNG.poisson(exposure * (gain * TRUTH + background))
    return likelihoods.Poisson(
        recon.Counts(detections, exposure, gain, background, mask, several_per_trial=True)
    )


def _fixed(trials, gain=1.0, background=0.0, mask=None):
    p = -np.expm1(-(gain * TRUTH + background))
    detections = RNG.binomial(np.asarray(trials, int), p, SHAPE)
    return likelihoods.BernoulliTrials(recon.Counts(detections, trials, gain, background, mask))


def _waiting(wanted, gain, background=0.0, mask=None):
    p = -np.expm1(-(gain * TRUTH + background))
    trials = RNG.negative_binomial(wanted, p) + wanted
    counts = recon.Counts(np.full(SHAPE, wanted), trials, gain, background, mask)
    return likelihoods.BernoulliTrials(counts, stop_after=wanted)


def _waiting_with_a_limit(wanted, limit, gain):
    clicks = RNG.random((limit, *SHAPE)) < -np.expm1(-gain * TRUTH)
    seen = np.cumsum(clicks, axis=0)
    reached = seen[-1] >= wanted
    trials = np.where(reached, np.argmax(seen >= wanted, axis=0) + 1, limit)
    counts = recon.Counts(np.where(reached, wanted, seen[-1]), trials, gain)
    return likelihoods.BernoulliTrials(counts, stop_after=wanted, most_trials=limit)


def _gaussian(variance, gain=1.0, offset=0.0, mask=None):
    readings = gain * TRUTH + offset + np.sqrt(variance) * RNG.standard_normal(SHAPE)
    return likelihoods.Gaussian(readings, variance, gain, offset, mask)


def _times(pulse, mask=None, **settings):
    depth, reflectivity = RNG.uniform(6.0, 9.0, SHAPE), RNG.uniform(0.0, 1.0, SHAPE)
    tags = simulate.time_tags(depth, reflectivity, 100.0, 1e-7, pulse, 0.05, seed=RNG, **settings)
    if mask is not None:
        tags = replace(tags, mask=mask)
    return likelihoods.DetectionTimes(tags, reflectivity)


def _tailed_pulse():
    times = np.arange(-2e-9, 6e-9, 1e-10)
    rise = np.exp(-0.5 * (times / 3e-10) ** 2)
    return recon.SampledPulse(times, np.where(times < 0.0, rise, np.exp(-times / 8e-10)))


def _marks(number, dose, mask=None):
    return likelihoods.PoissonMarks(replace(simulate.frames(3.0 * TRUTH, dose, number, seed=RNG), mask=mask))


CASES = {
    "Poisson, one count a pixel": _poisson(1.0),
    "Poisson, maps, gaps": _poisson(_trials(200), GAIN, BACKGROUND, MASK),
    "Poisson, mostly background": _poisson(50.0, 0.02, 0.3),
    "Poisson, large counts": _poisson(1e5, GAIN, 0.01),
    "fixed trials, one number": _fixed(100.0, 0.05, 0.002),
    "fixed trials, maps, gaps": _fixed(_trials(200), GAIN, BACKGROUND, MASK),
    "fixed trials, few and bright": _fixed(3.0, 1.0, 0.1),
    "fixed trials, many and faint": _fixed(1e7, 1e-6, 1e-8),
    "first detection": _waiting(1, 0.05),
    "first detection, maps, gaps": _waiting(1, GAIN, BACKGROUND, MASK),
    "fifth detection": _waiting(5, 0.3, 0.01),
    "third detection within a limit": _waiting_with_a_limit(3, 20, 0.1),
    "Gaussian": _gaussian(0.04),
    "Gaussian, maps, gaps": _gaussian(RNG.uniform(0.01, 4.0, SHAPE), GAIN, -3.0, MASK),
    "marks, many faint frames": _marks(40, 0.1, MASK),
    "marks, a map of doses": _marks(5, RNG.uniform(0.5, 4.0, SHAPE)),
    "marks, one long dwell": _marks(1, 20.0),
    "times": _times(recon.GaussianPulse(3e-10), background=0.05),
    "times, no background, gaps": _times(recon.GaussianPulse(3e-10), MASK),
    "times, maps, medium, delay": _times(
        recon.GaussianPulse(1e-9),
        MASK,
        background=BACKGROUND,
        refractive_index=1.33,
        time_zero=4e-9,
        offset=RNG.uniform(0.0, 1e-9, SHAPE),
    ),
    "times, pulse with a tail": _times(_tailed_pulse(), background=0.02),
    "times, coarse clock": _times(recon.GaussianPulse(3e-10), background=0.02, interval=1e-9),
}


@pytest.mark.parametrize("name", CASES)
def test_likelihood_keeps_the_contract(name):
    check_likelihood(CASES[name], seed=list(CASES).index(name))
