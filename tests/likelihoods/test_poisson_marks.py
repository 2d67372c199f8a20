"""The likelihood of the yield, frame by frame, against mixtures, scans, differences and simulation."""

import math

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import poisson

from recon.acquisition import Frames
from recon.errors import InputError
from recon.likelihoods import PoissonMarks
from recon.simulate import frames as simulate_frames

SEEDS = range(3)


def log_probability(y, lam, eta):
    """Log of the Neyman Type A probability as a mixture over primaries (arrays broadcast)."""
    lam, eta = np.asarray(lam, float), np.asarray(eta, float)
    most = int(lam.max() + 12.0 * math.sqrt(lam.max()) + 20.0) + int(np.max(y))
    total = 0.0
    for m in range(most):
        total = total + poisson.pmf(m, lam) * poisson.pmf(y, m * eta)
    return np.log(total)


def example(seed, frames=12, shape=(4, 5), lam=0.6, yields=(0.5, 6.0), mask=None):
    """Frames at random yields and doses, one pixel of which saw nothing; and the yields."""
    rng = np.random.default_rng(seed)
    eta = rng.uniform(*yields, shape)
    dose = lam * rng.uniform(0.5, 1.5, shape)
    counts = simulate_frames(eta, dose, frames, seed=rng).counts.copy()
    counts[:, 0, 0] = 0
    return Frames(counts, dose, mask), eta


@pytest.mark.parametrize("seed", SEEDS)
def test_value_and_constant_give_the_log_probability(seed):
    data, eta = example(seed)
    likelihood = PoissonMarks(data)
    expected = -log_probability(data.counts, data.dose, eta).sum()
    assert math.isclose(likelihood.value(eta) + likelihood.constant, expected, rel_tol=1e-11)
    single = eta.astype(np.float32)
    np.testing.assert_array_equal(likelihood.value_map(single), likelihood.value_map(single.astype(float)))


CASES = [
    (12, 0.6, (0.5, 6.0)), (60, 0.1, (1.0, 9.0)), (1, 20.0, (0.5, 9.0)),
    (1, 0.5, (10.0, 60.0)), (3, 0.4, (20.0, 80.0)),
]  # fmt: skip


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize(("frames", "lam", "yields"), CASES)
def test_no_yield_fits_better_than_the_estimate(frames, lam, yields, seed):
    # Bright frames make several optima: the scan is fine enough to find the highest of them.
    data, _ = example(seed, frames, lam=lam, yields=yields)
    likelihood = PoissonMarks(data)
    best = likelihood.estimate()
    assert np.all(np.abs(likelihood.value_map(best)) < 1e-9)
    scan = np.geomspace(0.05, 500.0, 1200)
    every = (frames, best.size, scan.size)
    copies = np.broadcast_to(data.counts.reshape(frames, -1, 1), every)
    doses = np.broadcast_to(data.dose.reshape(-1, 1), every[1:])
    values = PoissonMarks(Frames(copies, doses)).value_map(np.broadcast_to(scan, every[1:]))
    assert values.min() > -1e-9
    hit = data.counts.any(axis=0).ravel()
    assert np.all(values[hit].min(axis=1) < 0.02)
    assert np.all(best.ravel()[~hit] == 0.0)


def test_estimate_of_single_electrons():
    # Counts of 0 and 1 tell which frames were hit: eta (F lam exp(-eta) + H) = H.
    counts = np.zeros((20, 1, 3), np.uint8)
    for column, hits in enumerate((1, 4, 9)):
        counts[:hits, 0, column] = 1
    got = PoissonMarks(Frames(counts, 0.3)).estimate()[0]
    for hits, eta in zip((1, 4, 9), got, strict=True):
        root = brentq(lambda e, h=hits: e * (20 * 0.3 * math.exp(-e) + h) - h, 1e-6, 1.0, xtol=1e-14)
        assert math.isclose(eta, root, rel_tol=1e-6)


def test_estimate_of_a_long_dwell_with_a_known_number_of_primaries():
    # So large a yield leaves no doubt about the primaries: electrons over primaries.
    counts = np.array([[[400]], [[0]], [[830]]])
    got = PoissonMarks(Frames(counts, 0.9)).estimate()[0, 0]
    assert math.isclose(got, 1230 / 3, rel_tol=1e-6)


@pytest.mark.parametrize("seed", SEEDS)
def test_gradient_and_curvature_against_differences(seed):
    rng = np.random.default_rng(seed)
    for frames, lam, yields in ((12, 0.6, (0.5, 6.0)), (1, 40.0, (1.0, 8.0)), (1, 0.7, (100.0, 300.0))):
        data, eta = example(seed, frames, lam=lam, yields=yields)
        likelihood = PoissonMarks(data)
        x = eta * rng.uniform(0.7, 1.4, eta.shape)
        h = np.minimum(1e-3 * x, 0.03)
        for function, derivative in (
            (likelihood.value_map, likelihood.gradient), (likelihood.gradient, likelihood.curvature),
        ):  # fmt: skip
            coarse = (function(x + h) - function(x - h)) / (2.0 * h)
            fine = (function(x + h / 2) - function(x - h / 2)) / h
            expected = (4.0 * fine - coarse) / 3.0
            size = np.abs(expected).max() + data.counts.sum(axis=0) / x**2
            np.testing.assert_array_less(np.abs(derivative(x) - expected), 1e-7 * size + 1e-9)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize(("frames", "lam", "eta"), [(8, 0.125, 2.0), (1, 5.0, 3.0), (2, 1.0, 12.0)])
def test_information_is_the_mean_square_of_the_score(seed, frames, lam, eta):
    image = np.full((80, 80), eta)
    likelihood = PoissonMarks(simulate_frames(image, lam, frames, seed=seed))
    score, information = likelihood.gradient(image), likelihood.fisher_information(image)
    for sample in (score, score**2 - information, likelihood.curvature(image) - information):
        assert abs(sample.mean()) < 4.5 * sample.std() / math.sqrt(sample.size)


@pytest.mark.parametrize("seed", SEEDS)
def test_draw_follows_the_likelihood(seed):
    image = np.random.default_rng(seed).uniform(0.5, 5.0, (70, 70))
    mask = np.ones(image.shape, bool)
    mask[3, 4] = False
    dose = np.random.default_rng(seed + 50).uniform(0.2, 0.6, image.shape)
    given = PoissonMarks(Frames(np.zeros((6, 70, 70), int), dose, mask))
    drawn = given.draw(image, seed)
    score, information = drawn.gradient(image)[mask], drawn.fisher_information(image)[mask]
    for sample in (score / np.sqrt(information), score**2 / information - 1.0):
        assert abs(sample.mean()) < 4.5 * sample.std() / math.sqrt(sample.size)
    np.testing.assert_array_equal(drawn.has_data, mask)
    np.testing.assert_array_equal(drawn.value_map(image), given.draw(image, seed).value_map(image))
    assert drawn.value(image) != given.draw(image, seed + 1).value(image)


@pytest.mark.parametrize("seed", SEEDS)
def test_time_resolution_reaches_its_information(seed):
    # Gain of frames over one dwell; at 160 primaries a pixel the estimate is as good as its information says.
    image = np.full((50, 50), 2.0)
    stack = simulate_frames(image, 0.125, 1280, seed=seed)
    frames = PoissonMarks(stack)
    dwell = PoissonMarks(Frames(stack.counts.sum(axis=0, dtype=np.int64)[None], 160.0))
    for likelihood in (frames, dwell):
        error = (likelihood.estimate() - 2.0) ** 2 * likelihood.fisher_information(image)
        assert abs(error.mean() - 1.0) < 0.15


def random_images(likelihood, eta, rng):
    for spread in (0.05, 0.8):
        yield eta * np.exp(spread * rng.standard_normal(eta.shape))


@pytest.mark.parametrize("seed", SEEDS)
def test_majoriser_touches_and_lies_above(seed):
    rng = np.random.default_rng(seed)
    for frames, lam, yields in ((12, 0.6, (0.5, 6.0)), (1, 20.0, (0.5, 9.0)), (2, 0.7, (30.0, 90.0))):
        data, eta = example(seed, frames, lam=lam, yields=yields)
        likelihood = PoissonMarks(data)
        for start in random_images(likelihood, eta, rng):
            above = likelihood.majorise(start)
            assert above.convex
            here = likelihood.value_map(start)
            offset = here - above.value_map(start)
            gradient = likelihood.gradient(start)
            slack = 1e-6 * (data.counts.sum(axis=0) / start + np.abs(gradient) + 1.0)  # float32 exposure
            assert np.all(np.abs(above.gradient(start) - gradient) < slack)
            for z in random_images(likelihood, start, rng):
                excess = above.value_map(z) + offset - likelihood.value_map(z)
                assert np.all(excess > -slack * np.abs(z - start) - 1e-6 * (1.0 + here))
            assert likelihood.value(above.estimate()) <= likelihood.value(start) + 1e-6


@pytest.mark.parametrize("dtype", [np.uint8, np.int32, float])
def test_order_and_type_of_frames_do_not_matter(dtype):
    data, eta = example(0)
    shuffled = Frames(data.counts[::-1].astype(dtype), data.dose)
    for name in ("value_map", "gradient", "curvature"):
        want, got = (getattr(PoissonMarks(d), name)(eta) for d in (data, shuffled))
        np.testing.assert_allclose(got, want, rtol=1e-12, atol=1e-12)


def test_masked_pixels_contribute_nothing_and_others_stay():
    data, eta = example(1)
    mask = np.ones(data.shape, bool)
    mask[1, 2] = mask[0, 0] = False
    whole, masked = PoissonMarks(data), PoissonMarks(Frames(data.counts, data.dose, mask))
    for name in ("value_map", "gradient", "curvature", "fisher_information", "residuals"):
        got, want = getattr(masked, name)(eta), getattr(whole, name)(eta)
        assert np.all(got[~mask] == 0.0)
        np.testing.assert_allclose(got[mask], want[mask], rtol=1e-6)
    assert math.isclose(masked.estimate()[1, 2], masked.estimate()[mask].mean(), rel_tol=1e-6)
    above = masked.majorise(eta)
    assert np.all(above.gradient(eta)[~mask] == 0.0)
    np.testing.assert_array_equal(above.has_data, mask)


@pytest.mark.parametrize("seed", SEEDS)
def test_residuals_are_signed_roots_of_the_deviance(seed):
    data, eta = example(seed, frames=40)
    likelihood = PoissonMarks(data)
    best = likelihood.estimate()
    for factor, sign in ((0.5, 1.0), (1.5, -1.0)):
        x = np.where(best > 0.0, best * factor, eta)
        residuals = likelihood.residuals(x)
        np.testing.assert_allclose(residuals**2, 2.0 * likelihood.value_map(x), rtol=1e-12)
        assert np.all(residuals[best > 0.0] * sign > 0.0)
        assert np.all(residuals[best == 0.0] < 0.0)


def test_zero_and_negative_yields():
    counts = np.zeros((3, 1, 2), int)
    counts[1, 0, 1] = 170
    likelihood = PoissonMarks(Frames(counts, 0.5))
    zero, below = np.zeros((1, 2)), np.full((1, 2), -0.1)
    np.testing.assert_array_equal(likelihood.value_map(zero), [[0.0, np.inf]])
    np.testing.assert_array_equal(likelihood.gradient(zero), [[1.5, -np.inf]])
    np.testing.assert_array_equal(likelihood.value_map(below), [[np.inf, np.inf]])
    assert np.isnan(likelihood.gradient(below)).all()
    assert 0.0 not in likelihood.domain
    assert 0.0 in PoissonMarks(Frames(np.zeros((3, 1, 2), int), 0.5)).domain
    assert likelihood.majorise(zero).convex


def test_refused_input():
    data, eta = example(2)
    likelihood = PoissonMarks(data)
    negative = eta.copy()
    negative[1, 3] = -2.0
    with pytest.raises(InputError, match=r"shape \(5, 4\)"):
        likelihood.value(eta.T)
    for call in (likelihood.majorise, lambda x: likelihood.draw(x, 0)):
        with pytest.raises(InputError, match=r"\(1, 3\) is -2.0"):
            call(negative)
    readings = np.zeros((2, 3, 3), np.int64)
    readings[1, 2, 0] = 2_000_000
    with pytest.raises(InputError, match=r"counts at \(1, 2, 0\) is 2000000"):
        PoissonMarks(Frames(readings, 0.5))


def uneven(seed, factors, eta=None, dose=0.4, mask=None):
    """Frames whose dose differs from line to line, factors (frames, rows); and the yields."""
    rng = np.random.default_rng(seed)
    eta = rng.uniform(0.5, 6.0, (factors.shape[1], 6)) if eta is None else eta
    lam = dose * factors[:, :, None]
    counts = rng.poisson(rng.poisson(np.broadcast_to(lam, (len(factors), *eta.shape))) * eta)
    return Frames(counts, dose, mask, current=factors), eta


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("dose", [0.4, "map"])
def test_dose_of_every_line(seed, dose):
    rng = np.random.default_rng(seed)
    dose = rng.uniform(0.2, 1.0, (4, 6)) if dose == "map" else dose
    factors = rng.choice([0.5, 0.75, 1.0, 2.0], (30, 4))
    data, eta = uneven(seed, factors, dose=dose)
    likelihood = PoissonMarks(data)
    lam = dose * factors[:, :, None] * np.ones(eta.shape)
    expected = -log_probability(data.counts, lam, eta).sum()
    assert math.isclose(likelihood.value(eta) + likelihood.constant, expected, rel_tol=1e-11)
    h = 1e-4 * eta
    slope = (likelihood.value_map(eta + h) - likelihood.value_map(eta - h)) / (2.0 * h)
    np.testing.assert_allclose(likelihood.gradient(eta), slope, rtol=1e-5, atol=1e-5)
    bend = (likelihood.gradient(eta + h) - likelihood.gradient(eta - h)) / (2.0 * h)
    np.testing.assert_allclose(likelihood.curvature(eta), bend, rtol=1e-5, atol=1e-5)
    one_by_one = sum(
        PoissonMarks(Frames(np.zeros((1, *eta.shape), int), lam[f])).fisher_information(eta)
        for f in range(30)
    )
    np.testing.assert_allclose(likelihood.fisher_information(eta), one_by_one, rtol=1e-6)
    for x in np.geomspace(0.05, 100.0, 200):
        assert likelihood.value_map(np.full(eta.shape, x)).min() > -1e-9
    assert np.all(np.abs(likelihood.value_map(likelihood.estimate())) < 1e-9)


@pytest.mark.parametrize("seed", SEEDS)
def test_many_different_doses_are_put_into_close_classes(seed):
    factors = np.random.default_rng(seed).uniform(0.4, 2.0, (200, 4))
    data, eta = uneven(seed, factors)
    exact = -log_probability(data.counts, 0.4 * factors[:, :, None] * np.ones(eta.shape), eta)
    likelihood = PoissonMarks(data)
    # half a per cent of the dose moves the log probability of a frame by half a per cent of a primary
    value = likelihood.value(eta) + likelihood.constant
    assert abs(value - exact.sum()) < 0.005 * math.sqrt(exact.size)
    assert np.unique(likelihood._tally.kind).size < math.log(5.0) / 0.005 + 2


def test_a_current_of_one_changes_nothing():
    data, eta = example(3, frames=40)
    same, plain = PoissonMarks(Frames(data.counts, data.dose, current=np.ones(40))), PoissonMarks(data)
    for name in ("value_map", "gradient", "curvature", "fisher_information"):
        got, want = getattr(same, name)(eta), getattr(plain, name)(eta)
        np.testing.assert_allclose(got, want, rtol=1e-11, atol=1e-11)
    np.testing.assert_array_equal(same.estimate(), plain.estimate())


@pytest.mark.parametrize("seed", SEEDS)
def test_draws_follow_the_dose_of_every_line(seed):
    factors = np.random.default_rng(seed).choice([0.25, 1.0, 3.0], (6, 70))
    eta = np.random.default_rng(seed).uniform(0.5, 5.0, (70, 70))
    drawn = PoissonMarks(uneven(seed, factors, eta)[0]).draw(eta, seed)
    score, information = drawn.gradient(eta), drawn.fisher_information(eta)
    for sample in (score / np.sqrt(information), score**2 / information - 1.0):
        assert abs(sample.mean()) < 4.5 * sample.std() / math.sqrt(sample.size)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize(("frames", "lam", "eta"), [(128, 0.125, 3.0), (300, 0.02, 8.0), (20, 1.0, 1.0)])
def test_one_dose_and_a_map_of_doses_give_the_same_estimate(seed, frames, lam, eta):
    # the yields of one dose are read off a table, those of a map are searched for one by one
    image = np.full((20, 30), eta)
    counts = simulate_frames(image, lam, frames, seed=seed).counts
    doses = np.full(image.shape, lam)
    doses[0, 0] *= 1.01
    one, other = PoissonMarks(Frames(counts, lam)).estimate(), PoissonMarks(Frames(counts, doses)).estimate()
    np.testing.assert_allclose(one.ravel()[1:], other.ravel()[1:], rtol=2e-6)


@pytest.mark.parametrize("largest", [5, 62, 63, 200])
@pytest.mark.parametrize("frames", [1, 2, 90, 260])
def test_sums_do_not_depend_on_how_frames_are_tallied(largest, frames):
    rng = np.random.default_rng(frames)
    counts = rng.integers(0, largest + 1, (frames, 3, 4)) * (rng.random((frames, 3, 4)) < 0.3)
    counts[0, 0, 0] = largest
    eta = rng.uniform(1.0, 5.0, (3, 4))
    likelihood = PoissonMarks(Frames(counts, 2.0))
    expected = -log_probability(counts, 2.0, eta).sum()
    assert math.isclose(likelihood.value(eta) + likelihood.constant, expected, rel_tol=1e-9)
