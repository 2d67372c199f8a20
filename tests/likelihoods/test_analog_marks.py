"""The likelihood of readings against quadrature, sums over electrons, counts, and simulation."""

import math
from functools import cache

import numpy as np
import pytest
from scipy.stats import norm, poisson

from recon.acquisition.frames import Frames
from recon.acquisition.mark_law import MarkLaw
from recon.errors import InputError
from recon.likelihoods import AnalogMarks, PoissonMarks
from recon.likelihoods.mark_table import class_width, classify
from recon.testing import check_likelihood

LAW = MarkLaw(gain=1.0, variance=1.0, noise=0.3)
SATURATED = MarkLaw(gain=2.0, variance=0.5, offset=-3.0, noise=0.5, ceiling=9.0)


def simulated(eta, dose, frames, law, seed, mask=None, current=None):
    """Readings and the counts behind them, drawn electron by electron."""
    rng = np.random.default_rng(seed)
    shape = np.shape(eta)
    factors = np.ones((frames, shape[0])) if current is None else current
    electrons = rng.poisson(rng.poisson(dose * factors[:, :, None], (frames, *shape)) * eta)
    spread = np.sqrt(law.variance * electrons + law.noise**2)
    readings = law.offset + law.gain * electrons + spread * rng.standard_normal(electrons.shape)
    return (
        Frames(readings, dose, mask, law=law, current=current),
        Frames(electrons, dose, mask, current=current),
    )


@cache
def neyman(lam, eta, size):
    """P(N), and d/d eta and d2/d eta2 of it, for N < size: a sum over primaries."""
    n, m = np.arange(size), np.arange(1, int(lam + 14.0 * math.sqrt(lam) + 25.0))[:, None]
    joint = poisson.pmf(m, lam) * poisson.pmf(n, m * eta)
    score = n / eta - m
    out = np.array([joint.sum(0), (joint * score).sum(0), (joint * (score**2 - n / eta**2)).sum(0)])
    out[0, 0] += math.exp(-lam)
    return out


def class_probability(low, high, law, size):
    """P(reading in the class | N) for N < size."""
    n = np.arange(size)
    law_of_n = norm(law.offset + law.gain * n, np.sqrt(law.variance * n + law.noise**2))
    middle = law_of_n.mean() < 0.5 * (low + high)
    return np.where(middle, law_of_n.sf(low) - law_of_n.sf(high), law_of_n.cdf(high) - law_of_n.cdf(low))


@pytest.mark.parametrize(("law", "dose", "frames"), [(LAW, 0.3, 30), (SATURATED, 1.0, 10), (LAW, 12.0, 2)])
def test_value_and_derivatives_against_sums_over_electrons(law, dose, frames):
    rng = np.random.default_rng(5)
    eta = rng.uniform(0.5, 4.0, (3, 4))
    data, _ = simulated(eta, dose, frames, law, 2)
    likelihood = AnalogMarks(data)
    width, size = class_width(law), 400
    assert width <= law.noise / 4.0
    value, first, second = (np.zeros(eta.shape) for _ in range(3))
    for f, i, j in np.ndindex(data.counts.shape):
        reading = float(data.counts[f, i, j])
        place = math.floor((reading - law.offset) / width + 0.5)
        low, high = law.offset + (place - 0.5) * width, law.offset + (place + 0.5) * width
        if reading >= law.ceiling:
            low, high = law.ceiling, math.inf
            weights = norm.sf(low, law.offset + law.gain * np.arange(size), _spread(law, size))
        else:
            weights = class_probability(low, min(high, law.ceiling), law, size)
        p, slope, bend = neyman(dose, eta[i, j], size) @ weights
        value[i, j] -= math.log(p)
        first[i, j] -= slope / p
        second[i, j] += (slope / p) ** 2 - bend / p
    total = likelihood.value(eta) + likelihood.constant
    assert math.isclose(total, value.sum(), rel_tol=1e-10)
    np.testing.assert_allclose(likelihood.gradient(eta), first, rtol=1e-7, atol=1e-7)
    np.testing.assert_allclose(likelihood.curvature(eta), second, rtol=1e-6, atol=1e-6)


def _spread(law, size):
    return np.sqrt(law.variance * np.arange(size) + law.noise**2)


@pytest.mark.parametrize(("dose", "eta"), [(0.125, 3.0), (2.0, 1.5)])
def test_information_against_quadrature(dose, eta):
    # integral of P'(V)^2 / P(V) of the density, by the trapezoid rule; the classes lose little
    p, slope, _ = neyman(dose, eta, 120)
    reading = np.arange(-4.0, 80.0, 0.01)[:, None]
    density = norm.pdf(reading, np.arange(120), _spread(LAW, 120))
    expected = 0.01 * np.sum((density @ slope) ** 2 / (density @ p))
    likelihood = AnalogMarks(simulated(np.full((2, 2), eta), dose, 10, LAW, 0)[0])
    got = likelihood.fisher_information(np.full((2, 2), eta))
    np.testing.assert_allclose(got, 10.0 * expected, rtol=0.01)
    assert np.all(got < 10.0 * expected * (1.0 + 1e-6))


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("current", [False, True])
def test_clean_readings_are_counts(seed, current):
    rng = np.random.default_rng(seed)
    eta = rng.uniform(1.0, 5.0, (5, 6))
    factors = rng.choice([0.5, 1.0, 1.7], (20, 5)) if current else None
    law = MarkLaw(gain=2.5, variance=0.0, offset=5.0, noise=0.03)
    readings, counts = simulated(eta, 0.3, 20, law, seed, current=factors)
    analog, counted = AnalogMarks(readings), PoissonMarks(counts)
    np.testing.assert_allclose(analog.estimate(), counted.estimate(), rtol=1e-5, atol=1e-6)
    for name in ("gradient", "curvature", "fisher_information"):
        np.testing.assert_allclose(getattr(analog, name)(eta), getattr(counted, name)(eta), rtol=1e-6)
    np.testing.assert_allclose(analog.value_map(eta), counted.value_map(eta), rtol=1e-6, atol=1e-9)
    for one, other in ((analog.majorise(eta), counted.majorise(eta)),):
        np.testing.assert_allclose(one.gradient(eta), other.gradient(eta), rtol=1e-4, atol=1e-4)


@pytest.mark.parametrize("law", [LAW, SATURATED])
@pytest.mark.parametrize(("dose", "frames"), [(0.2, 40), (5.0, 2)])
def test_no_yield_fits_better_than_the_estimate(law, dose, frames):
    data, _ = simulated(np.full((3, 4), 2.0), dose, frames, law, 1)
    likelihood = AnalogMarks(data)
    for eta in np.geomspace(0.01, 60.0, 150):
        assert likelihood.value_map(np.full((3, 4), eta)).min() > -1e-9
    best = likelihood._best
    inside = (best > 0.0) & (best < 60.0)
    assert inside.sum() > 6
    slope = likelihood.gradient(best) / np.sqrt(likelihood.fisher_information(np.maximum(best, 0.01)))
    assert np.all(np.abs(slope[inside]) < 1e-5)


@pytest.mark.parametrize("seed", range(3))
def test_estimate_beats_the_conventional_ratio(seed):
    data, _ = simulated(np.full((32, 32), 3.0), 0.125, 128, LAW, seed)
    estimate = AnalogMarks(data).estimate()
    ratio = data.counts.mean(axis=0) / 0.125
    gain = np.mean((ratio - 3.0) ** 2) / np.mean((estimate - 3.0) ** 2)
    assert gain > 1.3  # 1.68 in the limit of many frames, by the information
    assert abs(estimate.mean() - 3.0) < 5.0 * estimate.std() / 32.0 + 0.06


@pytest.mark.parametrize("seed", range(3))
def test_majorising_climbs(seed):
    data, _ = simulated(np.full((4, 5), 2.0), 0.5, 12, SATURATED, seed)
    likelihood = AnalogMarks(data)
    x = np.full((4, 5), 1.0)
    for _ in range(20):
        above = likelihood.majorise(x)
        new = np.maximum(above.estimate().astype(float), 1e-6)
        assert np.all(likelihood.value_map(new) <= likelihood.value_map(x) + 1e-6)
        x = new


CONFORMING = {
    "many faint frames": (128, 0.125, LAW, False),
    "saturated, few frames": (4, 2.0, MarkLaw(1.0, 0.3, 0.0, 0.3, 6.0), False),
    "noise above the gain": (30, 0.3, MarkLaw(1.0, 0.3, 0.0, 2.0), False),
    "current": (10, 0.3, MarkLaw(1.0, 0.2, 1.0, 0.3), True),
}


@pytest.mark.parametrize("name", CONFORMING)
def test_keeps_the_contract(name):
    frames, dose, law, current = CONFORMING[name]
    rng = np.random.default_rng(3)
    eta, mask = rng.uniform(0.6, 6.0, (4, 5)), np.ones((4, 5), bool)
    mask[2, 1:4] = False
    factors = rng.choice([0.5, 1.0, 2.0], (frames, 4)) if current else None
    check_likelihood(AnalogMarks(simulated(eta, dose, frames, law, 1, mask, factors)[0]), seed=2)


def test_zero_and_negative_yields():
    likelihood = AnalogMarks(simulated(np.full((3, 4), 0.3), 0.2, 10, LAW, 1)[0])
    zero = np.zeros((3, 4))
    assert np.all(np.isfinite(likelihood.value_map(zero)))
    assert np.all(np.isinf(likelihood.value_map(zero - 0.1)))
    assert np.isnan(likelihood.gradient(zero - 0.1)).all()
    assert 0.0 in likelihood.domain
    assert likelihood.majorise(zero).convex


def test_every_reading_is_in_its_class():
    data, _ = simulated(np.full((5, 6), 3.0), 0.5, 40, SATURATED, 4)
    codes, table = classify(data.counts, SATURATED)
    readings = data.counts.astype(np.float64) - SATURATED.offset
    assert codes.min() == 1
    assert np.all(readings >= table.low[codes - 1] - 1e-9)
    assert np.all(readings <= np.where(np.isinf(table.high), np.inf, table.high)[codes - 1] + 1e-9)
    assert (codes == codes.max()).sum() == (data.counts >= SATURATED.ceiling).sum() > 0


def test_refused_input():
    counts = Frames(np.zeros((2, 3, 3), int), 0.5)
    with pytest.raises(InputError, match="PoissonMarks"):
        AnalogMarks(counts)
    readings, _ = simulated(np.full((3, 3), 2.0), 0.5, 4, LAW, 0)
    with pytest.raises(InputError, match="AnalogMarks"):
        PoissonMarks(readings)
    far = readings.counts.copy()
    far[1, 2, 0] = 3e6
    with pytest.raises(InputError, match=r"counts at \(1, 2, 0\) is 3e\+06"):
        AnalogMarks(Frames(far, 0.5, law=LAW))
    likelihood, eta = AnalogMarks(readings), np.full((3, 3), 1.0)
    with pytest.raises(InputError, match=r"shape \(2, 3\)"):
        likelihood.value(eta[:2])
    eta[1, 1] = -2.0
    for call in (likelihood.majorise, lambda x: likelihood.draw(x, 0)):
        with pytest.raises(InputError, match=r"\(1, 1\) is -2.0"):
            call(eta)
