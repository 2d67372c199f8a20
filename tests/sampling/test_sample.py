"""What a run of the sampler returns, says and refuses."""

import numpy as np
import pytest
from scipy.special import digamma, polygamma

import priors
import recon
from recon.errors import InputError
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson
from recon.sampling import Posterior, Progress, sample


def problem(shape: tuple[int, int] = (5, 6), seed: int = 0, weight: float = 1.0) -> recon.Problem:
    count = np.random.default_rng(seed).poisson(3.0, shape).astype(float)
    return recon.Problem(Poisson.from_arrays(count, 1.0), priors.TotalVariation(weight))


@pytest.fixture(scope="module")
def posterior() -> Posterior:
    return sample(problem(), draws=500, seed=4)


def test_the_same_seed_gives_the_same_draws(posterior: Posterior) -> None:
    again, other = sample(problem(), draws=500, seed=4), sample(problem(), draws=500, seed=5)
    assert np.array_equal(again.images, posterior.images)
    assert not np.array_equal(other.images, posterior.images)
    assert again.step == posterior.step


def test_what_is_returned(posterior: Posterior) -> None:
    assert posterior.converged
    assert posterior.words.startswith("converged")
    assert posterior.words.endswith(".")
    assert posterior.images.shape == (2000, 5, 6)
    for image in (posterior.mean, posterior.standard_deviation, posterior.images, *posterior.interval(0.68)):
        assert image.dtype == np.float32
    assert posterior.mean == pytest.approx(posterior.images.mean(axis=0), rel=1e-5)
    assert posterior.standard_deviation == pytest.approx(posterior.images.std(axis=0, ddof=1), rel=1e-4)
    narrow, wide = posterior.interval(0.68), posterior.interval(0.95)
    assert np.all((wide[0] < narrow[0]) & (narrow[0] < narrow[1]) & (narrow[1] < wide[1]))
    assert 0.6 < posterior.acceptance < 0.9
    assert posterior.draws == 500


def test_far_too_few_draws_are_not_believed() -> None:
    few = sample(problem(), draws=20, burn_in=10)
    assert not few.converged
    assert few.words.startswith("NOT CONVERGED")
    assert "more draws" in few.words


def test_a_step_that_is_far_too_short_is_not_believed() -> None:
    stuck = sample(problem(), draws=60, burn_in=0, step=1e-4)
    assert stuck.step == pytest.approx(1e-4)
    assert stuck.r_hat > 1.5
    assert not stuck.converged


def test_a_step_that_is_far_too_long_is_not_believed() -> None:
    stuck = sample(problem(), draws=300, burn_in=0, step=1e4)
    assert not stuck.converged
    assert stuck.effective_samples < 50.0


def test_a_run_can_be_stopped_and_says_so() -> None:
    told: list[Progress] = []

    def stop(progress: Progress) -> bool:
        told.append(progress)
        return progress.made == 60

    stopped = sample(problem(), draws=200, burn_in=50, callback=stop)
    assert len(told) == 60
    assert [p.burning_in for p in told] == [True] * 50 + [False] * 10
    assert told[0].total == 250
    assert stopped.draws == 10
    assert stopped.images.shape == (40, 5, 6)
    assert "asked to stop" in stopped.words
    assert not stopped.converged


def test_a_run_stopped_while_burning_in_has_no_image() -> None:
    stopped = sample(problem(), draws=200, burn_in=50, callback=lambda progress: True)
    assert stopped.draws == 0
    assert np.isnan(stopped.mean).all()
    assert np.isnan(stopped.standard_deviation).all()
    assert not stopped.converged


@pytest.mark.parametrize(
    "prior",
    [
        priors.WaveletSparsity(0.5, wavelet="haar", levels=1),
        priors.WaveletSparsity(0.5, wavelet="haar", levels=1, translation_invariant=False),
        priors.TotalVariation(0.5) + priors.Smoothness(0.2),
    ],
    ids=["invariant", "orthonormal", "sum"],
)
def test_steps_that_do_not_matter_to_the_law(prior: priors.Prior) -> None:
    """Draws with two different steps and starts have the same law: the step only proposes."""
    readings = np.random.default_rng(2).normal(2.0, 1.0, (4, 4))
    task = recon.Problem(Gaussian(readings, 1.0), prior, bounds=(0.0, 5.0))
    one = sample(task, draws=400, burn_in=150, seed=1)
    two = sample(task, draws=400, burn_in=150, seed=2, step=0.5 * one.step)
    error = np.hypot(1.0 / np.sqrt(one.effective_samples), 1.0 / np.sqrt(two.effective_samples))
    assert max(one.r_hat, two.r_hat) < 1.1
    assert np.abs((one.mean - two.mean) / one.standard_deviation).max() < 4.0 * error
    assert np.abs(one.standard_deviation / two.standard_deviation - 1.0).max() < 4.0 * error


def test_trials() -> None:
    # With hardly a prior, 1 - exp(-x) has a beta law of k + 1 and n - k: a uniform law of x, not of it.
    trials = recon.simulate.counts(np.full((3, 4), 0.3), 20, gain=1.0, seed=0)
    k, n = np.asarray(trials.detections, float), 20.0
    bounds = (0.0, 6.0)
    drawn = sample(recon.Problem(BernoulliTrials(trials), priors.TotalVariation(1e-9), bounds), draws=800)
    mean, sd = digamma(n + 1.0) - digamma(n - k), np.sqrt(polygamma(1, n - k) - polygamma(1, n + 1.0))
    assert drawn.converged
    assert np.abs((drawn.mean - mean) / sd).max() < 0.12
    assert drawn.standard_deviation == pytest.approx(sd, rel=0.1)


class Unconvex(Gaussian):
    """Readings whose likelihood is declared not convex."""

    convex = False


def test_a_likelihood_that_is_not_convex_is_said_to_be() -> None:
    readings = np.random.default_rng(0).normal(2.0, 1.0, (4, 4))
    task = recon.Problem(Unconvex(readings, 1.0), priors.Smoothness(1.0), bounds=(-5.0, 9.0))
    drawn = sample(task, draws=300, start=np.full((4, 4), 2.0))
    assert not drawn.log_concave
    assert "not convex" in drawn.words
    exact = sample(
        recon.Problem(Gaussian(readings, 1.0), priors.Smoothness(1.0), bounds=(-5.0, 9.0)), draws=300
    )
    assert drawn.mean == pytest.approx(exact.mean, abs=0.2)


def test_few_images_are_kept_of_large_ones(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("recon.sampling.record.KEPT_BYTES", 4 * 30 * 50)
    drawn = sample(problem(), draws=103, burn_in=20)
    assert drawn.images.shape == (4 * 12, 5, 6)
    with pytest.raises(InputError, match="only 48 draws are kept"):
        drawn.interval(0.99)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"draws": 2}, "draws is 2"),
        ({"draws": 10.5}, r"draws is 10\.5"),
        ({"draws": True}, "draws is True"),
        ({"burn_in": -1}, "burn_in is -1"),
        ({"burn_in": 0}, "burn_in is 0 and step is None"),
        ({"chains": 1}, "chains is 1"),
        ({"seed": -3}, "seed is -3"),
        ({"seed": 0.5}, r"seed is 0\.5"),
        ({"step": 0.0}, r"step is 0\.0"),
        ({"step": np.nan}, "step is nan"),
        ({"start": np.zeros((2, 2))}, r"start has shape \(2, 2\)"),
        ({"start": np.zeros((5, 6))}, "infinite objective"),
        ({"start": np.full((5, 6), np.nan)}, "start"),
    ],
)
def test_arguments_that_cannot_be_used(changes: dict, words: str) -> None:
    with pytest.raises(InputError, match=words):
        sample(problem(), **changes)


def test_problems_that_cannot_be_drawn_from() -> None:
    import cvxpy as cp

    with pytest.raises(InputError, match="problem is a str"):
        sample("problem")
    custom = recon.Problem(problem().likelihood, priors.Custom(lambda x: cp.norm1(x)))
    with pytest.raises(InputError, match="exists only as a cvxpy expression"):
        sample(custom)
    hidden = Gaussian(np.zeros((3, 3)), mask=np.eye(3) > 0)
    with pytest.raises(InputError, match="give finite bounds"):
        sample(recon.Problem(hidden, priors.TotalVariation(1.0), bounds=(-np.inf, np.inf)))


def test_shares_and_regions_that_cannot_be_used(posterior: Posterior) -> None:
    for share in (0.0, 1.0, np.nan, 95.0):
        with pytest.raises(InputError, match="share"):
            posterior.interval(share)
    for mask in (np.zeros((5, 6), bool), np.ones((2, 2), bool), np.ones((5, 6)), None):
        with pytest.raises(InputError, match="mask"):
            posterior.region(mask)
