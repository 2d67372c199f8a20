"""Means over regions: closed forms, no bias from the prior, and intervals that hold the truth."""

import numpy as np
import pytest

import priors
import recon
from recon.errors import InputError
from recon.likelihoods import BernoulliTrials, DetectionTimes, Gaussian, Poisson, PoissonMarks
from recon.uncertainty import region_average

SCENE = np.full((32, 32), 0.5)
SCENE[8:16, 8:16] = 2.0
REGION = np.zeros((32, 32), bool)
REGION[9:15, 9:15] = True
TRUTH = 2.0


def blurred(likelihood, weight):
    problem = recon.Problem(likelihood, priors.Smoothness(weight))
    return recon.solve(problem, tolerance=1e-3, max_iterations=300).image


def likelihood_of(kind, seed):
    if kind == "poisson":
        return Poisson(recon.simulate.counts(SCENE, 1, 2.0, 0.4, several_per_trial=True, seed=seed))
    if kind == "trials":
        return BernoulliTrials(recon.simulate.counts(SCENE, 20, 1.0, seed=seed))
    if kind == "marks":
        return PoissonMarks(recon.simulate.frames(SCENE, 0.1, 20, seed=seed))
    return Gaussian(SCENE + 0.5 * np.random.default_rng(seed).standard_normal(SCENE.shape), 0.25)


@pytest.mark.parametrize("weight", [0.3, 300.0])
def test_poisson_counts_in_closed_form(weight: float) -> None:
    """Mean of counts over exposure, less the background, whatever the image."""
    counts = recon.simulate.counts(SCENE, 3, 2.0, 0.4, several_per_trial=True, seed=4)
    likelihood = Poisson(counts)
    found = region_average(likelihood, blurred(likelihood, weight), REGION)
    expected = np.mean((counts.detections[REGION] / 3.0 - 0.4) / 2.0)
    assert found.mean == pytest.approx(expected, rel=1e-6)
    assert found.pixels == 36
    # variance of the mean, at the truth: (gain x + background) / (gain^2 trials pixels)
    assert found.uncertainty == pytest.approx(np.sqrt((2.0 * 2.0 + 0.4) / (4.0 * 3.0 * 36)), rel=0.1)


def test_gaussian_readings_in_closed_form() -> None:
    rng = np.random.default_rng(1)
    variance, reading = rng.uniform(0.1, 2.0, (32, 32)), rng.normal(-3.0, 1.0, (32, 32))
    found = region_average(Gaussian(reading, variance), np.zeros((32, 32)), REGION)
    assert found.mean == pytest.approx(reading[REGION].mean(), rel=1e-5)
    expected = np.sqrt(variance[REGION].sum()) / 36
    assert found.uncertainty == pytest.approx(expected, rel=1e-5)
    low, high = found.interval_68
    assert (low, high) == pytest.approx((found.mean - expected, found.mean + expected), rel=1e-5)
    low, high = found.interval_95
    assert high - low == pytest.approx(2 * 1.959964 * expected, rel=1e-5)
    assert found.of_image == 0.0


@pytest.mark.parametrize(
    ("kind", "weight", "runs"),
    [
        ("poisson", 2.0, 200),
        pytest.param("poisson", 100.0, 200),
        ("trials", 3.0, 200),
        pytest.param("trials", 100.0, 200),
        ("gaussian", 20.0, 200),
        pytest.param("marks", 100.0, 60),
    ],
)
def test_no_bias_and_coverage_where_the_prior_smoothed_away_much(kind: str, weight: float, runs: int) -> None:
    means, held, of_image, widths = [], np.zeros(2), [], []
    for seed in range(runs):
        likelihood = likelihood_of(kind, seed)
        found = region_average(likelihood, blurred(likelihood, weight), REGION)
        means.append(found.mean)
        of_image.append(found.of_image)
        widths.append(found.uncertainty)
        for place, (low, high) in enumerate((found.interval_68, found.interval_95)):
            held[place] += low <= TRUTH <= high
    error = np.std(means) / np.sqrt(runs)
    assert np.mean(of_image) < TRUTH - 0.1
    # pixels at many detections a trial are curved: their own bias is below 2 %
    assert abs(np.mean(means) - TRUTH) < 4.0 * error + 0.02 * TRUTH
    for share, found in zip((0.68, 0.95), held / runs, strict=True):
        assert found == pytest.approx(share, abs=4.0 * np.sqrt(share * (1.0 - share) / runs))
    assert np.mean(widths) == pytest.approx(np.std(means), rel=4.0 / np.sqrt(2 * runs))


def test_the_public_way() -> None:
    counts = recon.simulate.counts(SCENE, 1, 4.0, several_per_trial=True, seed=0)
    image = recon.reconstruct(counts).reflectivity
    found = image.region(REGION)
    assert found.mean == pytest.approx(counts.detections[REGION].mean() / 4.0, rel=1e-6)
    assert found.of_image == pytest.approx(float(image.image[REGION].mean()), rel=1e-6)


def test_masked_pixels_and_pixels_of_nothing() -> None:
    """Pixels without data are left out; those without a detection count."""
    found, mask = np.zeros((32, 32), int), np.ones((32, 32), bool)
    found[9:15, 9:12] = 4
    mask[9:11] = False
    likelihood = Poisson(recon.Counts(found, 1, 2.0, mask=mask, several_per_trial=True))
    result = region_average(likelihood, likelihood.estimate(), REGION)
    assert result.pixels == 24
    assert result.mean == pytest.approx(1.0, rel=1e-6)


def ranging(depth, seed, signal=3.0, background=1.0):
    pulse, period = recon.GaussianPulse(0.27e-9), 100e-9
    tags = recon.simulate.time_tags(
        depth, np.ones(depth.shape), 1000, period, pulse, signal / 1000, background / 1000, seed=seed
    )
    return DetectionTimes(tags, 1.0)


def test_one_step_of_depth_weighs_pixels_by_their_information() -> None:
    likelihood = ranging(np.full((32, 32), 6.0), 0)
    image = np.full((32, 32), 6.01)
    found = region_average(likelihood, image, REGION, shared=True)
    seen = REGION & likelihood.has_data
    g, i = likelihood.gradient(image)[seen], likelihood.fisher_information(image)[seen]
    each = np.divide(g, i)
    assert found.mean == pytest.approx(6.01 - np.average(each, weights=i), rel=1e-9)
    assert found.uncertainty == pytest.approx(i.sum() ** -0.5, rel=1e-9)
    assert found.pixels == np.count_nonzero(seen)


@pytest.mark.parametrize("off", [0.0, 0.008, -0.008])
def test_depth_of_a_flat_target(off: float) -> None:
    """From an image that is off by a fifth of the pulse; coverage over seeds, and the pull."""
    pulls = []
    for seed in range(100):
        likelihood = ranging(np.full((16, 16), 6.0), seed)
        region = np.zeros((16, 16), bool)
        region[2:12, 3:13] = True
        found = region_average(likelihood, np.full((16, 16), 6.0 + off), region, shared=True)
        pulls.append((found.mean - 6.0) / found.uncertainty)
    pulls = np.array(pulls)
    assert abs(pulls.mean()) < 0.5
    assert np.mean(np.abs(pulls) < 1.0) == pytest.approx(0.68, abs=0.19)
    assert np.mean(np.abs(pulls) < 1.959964) == pytest.approx(0.95, abs=0.09)


def test_what_cannot_be_used_is_refused() -> None:
    likelihood = likelihood_of("gaussian", 0)
    image = np.ones((32, 32))
    with pytest.raises(InputError, match="region has shape"):
        region_average(likelihood, image, REGION[:3])
    with pytest.raises(InputError, match="type int64; give booleans"):
        region_average(likelihood, image, REGION.astype(np.int64))
    with pytest.raises(InputError, match="region holds no pixel with data"):
        region_average(likelihood, image, np.zeros((32, 32), bool))
