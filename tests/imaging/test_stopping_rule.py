"""What a record of counts says of the rule by which its pixels stopped."""

import numpy as np
import pytest

import recon
from recon.imaging.reflectivity import counting_likelihood, stopping_rule

IMAGE = np.linspace(0.05, 0.5, 40 * 50).reshape(40, 50)


@pytest.mark.parametrize("wanted", [1, 3])
@pytest.mark.parametrize("seed", range(3))
def test_waiting_is_seen(wanted: int, seed: int) -> None:
    free = recon.simulate.counts(IMAGE, None, stop_after=wanted, seed=seed)
    assert stopping_rule(free) == (wanted, None)
    limited = recon.simulate.counts(IMAGE, 20, stop_after=wanted, seed=seed)
    assert stopping_rule(limited) == (wanted, 20)


@pytest.mark.parametrize("seed", range(3))
def test_a_number_of_trials_set_before_is_not_waiting(seed: int) -> None:
    trials = np.random.default_rng(seed).integers(1, 30, IMAGE.shape)
    assert stopping_rule(recon.simulate.counts(IMAGE, trials, seed=seed)) == (None, None)
    assert stopping_rule(recon.simulate.counts(IMAGE, 30, seed=seed)) == (None, None)
    few = recon.Counts(np.ones((2, 3), int), np.arange(1, 7).reshape(2, 3))
    assert stopping_rule(few) == (None, None)


def test_waiting_hides_whole_pixels() -> None:
    counts = recon.simulate.counts(IMAGE, None, stop_after=1, seed=0)
    for fit, score in counting_likelihood(counts).folds(3, 0):
        assert not np.any(fit.has_data & score.has_data)


@pytest.mark.parametrize("seed", range(3))
def test_the_weight_of_first_detections_is_near_the_best(seed: int) -> None:
    truth = np.full((80, 100), 0.05)
    truth[20:60, 30:70] = 0.3
    counts = recon.simulate.counts(truth, None, stop_after=1, seed=seed)
    chosen = recon.reconstruct(counts).reflectivity
    weight = chosen.priors[0].weight
    errors = []
    for factor in (0.3, 0.5, 0.7, 1.0, 1.4, 2.0, 3.0):
        prior = type(chosen.priors[0])(weight * factor)
        errors.append(np.mean((recon.reconstruct(counts, prior).reflectivity.image - truth) ** 2))
    assert np.mean((chosen.image - truth) ** 2) < 1.15 * min(errors)
