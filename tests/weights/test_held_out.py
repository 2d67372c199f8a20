"""The weight chosen by held-out data."""

import numpy as np
import pytest

import priors
import recon
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson
from recon.weights import settle


def scene(size: int = 96) -> np.ndarray:
    """Return discs and a slope, 0.1 to 1."""
    i, j = np.mgrid[:size, :size] / size
    image = 0.1 + 0.3 * j
    image[(i - 0.4) ** 2 + (j - 0.4) ** 2 < 0.06] = 0.9
    image[(i - 0.75) ** 2 + (j - 0.7) ** 2 < 0.02] = 0.6
    return image


def likelihoods(seed: int) -> dict[str, recon.likelihoods.Likelihood]:
    truth = scene()
    counts = recon.simulate.counts(truth, 1, gain=4.0, several_per_trial=True, seed=seed)
    trials = recon.simulate.counts(truth, 100, gain=0.04, seed=seed)
    noisy = truth + 0.3 * np.random.default_rng(seed).standard_normal(truth.shape)
    return {
        "poisson": Poisson(counts), "trials": BernoulliTrials(trials), "gaussian": Gaussian(noisy, 0.09)
    }  # fmt: skip


def decibels(image: np.ndarray) -> float:
    return float(-10.0 * np.log10(np.mean((image - scene()) ** 2)))


@pytest.mark.parametrize("kind", ["poisson", "trials", "gaussian"])
@pytest.mark.parametrize("seed", range(3))
def test_the_chosen_weight_loses_little_against_the_best(kind: str, seed: int) -> None:
    likelihood, bounds = likelihoods(seed)[kind], (0.0, 3.0)
    settled = settle(priors.TotalVariation(), likelihood, bounds)
    terms, choice = settled.terms, settled.choice
    chosen = recon.solve(recon.Problem(likelihood, terms, bounds), tolerance=1e-3).image
    best = max(
        decibels(
            recon.solve(
                recon.Problem(likelihood, priors.TotalVariation(terms[0].weight * factor), bounds),
                tolerance=1e-3,
            ).image
        )
        for factor in (0.35, 0.5, 0.7, 1.0, 1.4, 2.0, 2.8)
    )
    assert best - decibels(chosen) < 0.3
    assert not choice.at_edge
    assert choice.folds == 4
    assert choice.score.min() == 0.0
    assert np.all(np.diff(choice.factors) > 0.0)


def test_a_weight_that_is_given_is_kept() -> None:
    settled = settle(priors.TotalVariation(1.5), likelihoods(0)["poisson"], (0.0, 3.0))
    terms, choice = settled.terms, settled.choice
    assert terms[0].weight == 1.5
    assert choice is None


def test_the_rule_of_thumb_on_demand() -> None:
    likelihood = likelihoods(0)["poisson"]
    settled = settle(priors.TotalVariation(), likelihood, (0.0, 3.0), "rule")
    terms, choice = settled.terms, settled.choice
    assert choice is None
    assert terms[0].weight == recon.weights.weigh(priors.TotalVariation(), likelihood)[0].weight


def test_both_weights_of_a_generalized_variation() -> None:
    settled = settle(priors.GeneralizedVariation(), likelihoods(1)["gaussian"], (0.0, 3.0))
    terms, choice = settled.terms, settled.choice
    assert choice.second_order in (1.0, 2.0, 4.0)
    assert terms[0].second_order == choice.second_order


def test_the_same_data_give_the_same_weight() -> None:
    first, second = (
        settle(priors.TotalVariation(), likelihoods(2)["poisson"], (0.0, 3.0)).terms[0].weight
        for _ in range(2)
    )
    assert first == second


@pytest.mark.parametrize("detections", [0, 1])
def test_too_little_to_hold_out_is_said(detections: int) -> None:
    found = np.zeros((16, 16), int)
    found[3, 4] = detections
    image = recon.reconstruct(recon.Counts(found, 10)).reflectivity
    assert image.choice.folds == 0
    assert any("too few detections" in note for note in image.notes)


def test_an_unknown_way_is_refused() -> None:
    with pytest.raises(recon.InputError, match=r"weight is 'best'; give one of auto, rule"):
        recon.reconstruct(recon.Counts(np.ones((4, 4), int), 10), weight="best")
