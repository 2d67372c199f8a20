"""Priors compared on held-out data: the truly better one is never called worse; equal ones are alike."""

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter

import priors
import recon
from recon.errors import InputError
from recon.imaging.blocks import SIDE, sum_with_error
from recon.imaging.compare import NO_DIFFERENCE, compare
from recon.likelihoods import Poisson
from recon.weights import HeldOutFit, held_out_scores

SIZE = 64
TOTAL, QUADRATIC = priors.TotalVariation(), priors.Smoothness()


def blocks():
    image = np.full((SIZE, SIZE), 0.3)
    image[8:40, 10:36] = 1.2
    image[30:56, 40:58] = 0.8
    return image


def hills():
    i, j = np.mgrid[:SIZE, :SIZE] / SIZE
    return 0.6 + 0.3 * np.sin(5.0 * i) * np.cos(6.0 * j)


def drawn(scene, seed, level=8.0):
    return recon.simulate.counts(scene, 1, level, several_per_trial=True, seed=seed)


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("scene", [blocks, hills])
def test_the_better_prior_is_not_called_worse(scene, seed: int) -> None:
    """Better by the true squared error; on the blocks the worse one is told, too."""
    truth = scene()
    found = compare(drawn(truth, seed), [QUADRATIC, TOTAL])
    errors = [np.mean((each.image.image - truth) ** 2) for each in found.candidates]
    better = int(np.argmin(errors))
    assert found.candidates[better].as_good
    assert found.candidates[found.best].as_good
    assert found.candidates[found.best].difference == 0.0
    assert all(each.difference >= 0.0 for each in found.candidates)
    if scene is blocks:
        assert better == found.best == 1
        assert not found.candidates[0].as_good
        assert found.verdict == "TotalVariation predicts held-out data best"


@pytest.mark.parametrize("seed", range(2))
def test_the_difference_is_that_of_the_true_errors(seed: int) -> None:
    """Of the fits to three quarters, four of them, each scored in every pixel."""
    truth = blocks()
    found = compare(drawn(truth, seed), [QUADRATIC, TOTAL])
    worse, best = (
        sum(np.sum((fit.image - truth) ** 2) for fit in each.image.held_out) for each in found.candidates
    )
    one = found.candidates[0]
    assert abs(one.difference - (worse - best)) < 3.0 * one.standard_error


@pytest.mark.parametrize("acquisition", ["counts", "trials", "frames"])
def test_a_prior_is_as_good_as_itself(acquisition: str) -> None:
    truth = blocks()
    data = {
        "counts": lambda: drawn(truth, 0),
        "trials": lambda: recon.simulate.counts(truth, 30, 0.2, seed=0),
        "frames": lambda: recon.simulate.frames(1.0 + truth, 0.5, 12, seed=0),
    }[acquisition]()
    found = compare(data, [priors.TotalVariation(), priors.TotalVariation()], tolerance=2e-3)
    assert [each.difference for each in found.candidates] == [0.0, 0.0]
    assert [each.standard_error for each in found.candidates] == [0.0, 0.0]
    assert all(each.as_good for each in found.candidates)
    assert found.verdict == f"{NO_DIFFERENCE} between TotalVariation and TotalVariation"
    assert found.kind == ("electron_yield" if acquisition == "frames" else "reflectivity")
    assert found.folds == 4


def test_depth_is_compared_by_its_tags() -> None:
    i, j = np.mgrid[:20, :20]
    scene = 5.0 + 0.01 * i + 0.015 * j
    tags = recon.simulate.time_tags(
        scene, np.ones((20, 20)), 1000, 100e-9, recon.GaussianPulse(0.3e-9), 0.003, 0.001, seed=1
    )
    found = compare(
        tags, [priors.TotalVariation(), priors.TotalVariation(3000.0)], tolerance=0.05, max_iterations=300
    )
    assert found.kind == "depth"
    assert found.folds == 2
    error = [np.mean(np.abs(each.image.image - scene)) for each in found.candidates]
    assert error[0] < error[1]
    assert found.best == 0
    assert found.candidates[0].as_good


def test_the_paired_standard_error_over_simulated_held_out_sets() -> None:
    """Two fixed images, and the spread of the difference of their scores over many draws."""
    truth = blocks()
    rng = np.random.default_rng(5)
    one, other = (
        np.maximum(truth + 0.2 * gaussian_filter(rng.standard_normal(truth.shape), 2.0), 0.02).astype(
            np.float32
        )
        for _ in range(2)
    )
    differences, errors = [], []
    for seed in range(200):
        parts = [score for _, score in Poisson(drawn(truth, seed)).folds(3, seed)]
        scores = held_out_scores([[HeldOutFit(image, part) for part in parts] for image in (one, other)])
        difference, error = sum_with_error(scores[0] - scores[1])
        differences.append(difference)
        errors.append(error)
    ratio = np.sqrt(np.mean(np.square(errors))) / np.std(differences, ddof=1)
    # no less than the spread of the draws; the scene's own differences among blocks come on top
    assert 1.0 - 4.0 / np.sqrt(400) < ratio < 1.6


def test_blocks_of_noise_add_up() -> None:
    """Independent pixels, at a size that no block divides: the root of the sum of variances."""
    rng = np.random.default_rng(0)
    shape = (5 * SIDE + 3, 6 * SIDE + 1)
    errors = []
    for _ in range(400):
        difference, error = sum_with_error(rng.standard_normal(shape))
        errors.append(error**2)
        assert abs(difference) < 6.0 * np.sqrt(shape[0] * shape[1])
    assert np.mean(errors) == pytest.approx(shape[0] * shape[1], rel=0.08)
    ones = sum_with_error(np.ones((16, 16)))
    assert ones == (256.0, 0.0)


def test_more_than_two_and_sums() -> None:
    truth = blocks()
    both = priors.TotalVariation(1.0) + priors.Smoothness(0.1)
    found = compare(drawn(truth, 1), [QUADRATIC, TOTAL, both], tolerance=2e-3)
    assert len(found.candidates) == 3
    assert found.candidates[2].prior is both
    assert found.best in (1, 2)
    assert found.verdict.endswith("predicts held-out data best") or NO_DIFFERENCE in found.verdict
    for each in found.candidates:
        assert 1.0 < each.freedom.number < SIZE * SIZE
        assert each.seconds > 0.0
        assert each.image.image.shape == truth.shape
    free = [each.freedom.number for each in found.candidates]
    assert free[0] > free[1]  # quadratic smoothing keeps more of the noise here


def test_unfinished_solves_are_said() -> None:
    found = compare(
        drawn(blocks(), 0), [priors.TotalVariation(2.0), priors.Smoothness(1.0)], max_iterations=2
    )
    assert "NOT CONVERGED: " in found.verdict
    assert "TotalVariation" in found.verdict.split("NOT CONVERGED")[1]


def test_what_cannot_be_used_is_refused() -> None:
    counts = drawn(blocks(), 0)
    for given in ([], [TOTAL]):
        with pytest.raises(InputError, match=rf"priors holds {len(given)}; give two or more to compare\."):
            compare(counts, given)
    with pytest.raises(InputError, match="priors holds 1"):
        compare(counts, TOTAL)
    with pytest.raises(InputError, match="prior is a int"):
        compare(counts, [3, 4])
    with pytest.raises(InputError, match="acquisition is a ndarray"):
        compare(np.ones((4, 4)), [TOTAL, QUADRATIC])
    few = recon.Counts(np.eye(8, dtype=int), 10)
    with pytest.raises(InputError, match="too few detections to hold any out"):
        compare(few, [TOTAL, QUADRATIC])


@pytest.mark.parametrize("rule", ["auto", "discrepancy", "risk"])
def test_every_factor_that_is_tried_is_told(rule: str) -> None:
    told = []
    counts = drawn(blocks(), 0)
    image = recon.reconstruct(counts, weight=rule, on_weight=lambda *one: told.append(one)).reflectivity
    assert {name for name, _ in told} == {"reflectivity"}
    assert sorted(factor for _, factor in told) == image.choice.factors.tolist()
