"""What `solve` promises: limits, statuses, callbacks, and refusals."""

import numpy as np
import pytest

import priors
import recon
from recon.diagnostics import relative_gap
from recon.likelihoods import Gaussian, Poisson
from recon.solvers import State


@pytest.fixture
def problem() -> recon.Problem:
    counts = recon.simulate.counts(np.full((20, 30), 2.0), 1, background=0.1, several_per_trial=True, seed=4)
    return recon.Problem(Poisson(counts), priors.TotalVariation(1.0), bounds=(0.0, 20.0))


def test_the_certificate_is_that_of_the_image(problem: recon.Problem) -> None:
    solution = recon.solve(problem)
    d = solution.diagnostics
    assert solution.status is recon.Status.CONVERGED
    assert d.objective == pytest.approx(problem.objective(solution.image), rel=1e-6)
    assert d.relative_gap == pytest.approx((d.objective - d.dual_value) / d.objective)
    assert d.relative_gap <= 1e-4
    assert d.deviance_per_pixel == pytest.approx(2.0 * problem.likelihood.value(solution.image) / 600)
    assert solution.image.dtype == np.float32
    assert d.trace.iteration[-1] == d.iterations
    assert np.all(np.diff(d.trace.iteration) > 0)
    assert np.all(np.diff(d.trace.seconds) >= 0.0)


def test_the_iteration_limit_keeps_the_last_iterate(problem: recon.Problem) -> None:
    solution = recon.solve(problem, tolerance=1e-6, max_iterations=20)
    assert solution.status is recon.Status.ITERATION_LIMIT
    assert solution.diagnostics.iterations == 20
    assert solution.diagnostics.relative_gap > 1e-6
    assert np.ptp(solution.image) < np.ptp(problem.likelihood.estimate())
    assert "max_iterations" in solution.status.remedy


def test_the_callback_sees_every_state_and_can_stop(problem: recon.Problem) -> None:
    seen: list[State] = []

    def stop_at_third(state: State) -> bool:
        seen.append(state)
        return len(seen) == 3

    solution = recon.solve(problem, tolerance=1e-7, callback=stop_at_third)
    assert solution.status is recon.Status.STOPPED
    assert [s.iteration for s in seen] == list(solution.diagnostics.trace.iteration)


def test_a_value_that_is_not_finite_keeps_the_last_finite_image(problem: recon.Problem) -> None:
    def failing(problem, start, tolerance):
        yield State(1, np.full(problem.shape, 0.5, np.float32), 10.0, 1.0, 0.9)
        yield State(2, np.full(problem.shape, np.nan, np.float32), np.nan, 1.0, np.nan)

    solution = recon.solve(problem, solver=failing)
    assert solution.status is recon.Status.NOT_FINITE
    np.testing.assert_array_equal(solution.image, 0.5)
    assert solution.diagnostics.iterations == 1


def test_an_infinite_objective_on_the_way_does_not_end_the_solve(problem: recon.Problem) -> None:
    """Without background an early iterate clipped to zero may explain a detection by nothing."""

    def passing(problem, start, tolerance):
        yield State(1, np.zeros(problem.shape, np.float32), np.inf, 1.0, np.inf)
        yield State(2, np.full(problem.shape, 2.0, np.float32), 10.0, 10.0, 0.0)

    solution = recon.solve(problem, solver=passing)
    assert solution.converged
    np.testing.assert_array_equal(solution.image, 2.0)


def test_the_relative_gap_of_an_infinite_objective_is_infinite() -> None:
    assert relative_gap(np.inf, 1.0, 100) == np.inf


def test_a_start_near_the_answer_is_not_worse(problem: recon.Problem) -> None:
    cold = recon.solve(problem, tolerance=1e-5)
    warm = recon.solve(problem, tolerance=1e-4, start=cold.image)
    assert warm.converged
    assert warm.diagnostics.trace.objective[0] < recon.solve(problem).diagnostics.trace.objective[0]


def test_no_prior_gives_the_pixelwise_estimate() -> None:
    image = np.random.default_rng(0).random((6, 7))
    solution = recon.solve(recon.Problem(Gaussian(image, 0.1)))
    np.testing.assert_allclose(solution.image, image, atol=1e-6)
    assert solution.converged


def test_pixels_without_data_are_filled_by_the_prior() -> None:
    mask = np.ones((9, 9), bool)
    mask[3:6, 3:6] = False
    readings = np.where(mask, 1.5, np.nan)
    solution = recon.solve(recon.Problem(Gaussian(readings, 0.1, mask=mask), priors.TotalVariation(0.5)))
    np.testing.assert_allclose(solution.image, 1.5, atol=1e-3)


def test_flat_data_converges() -> None:
    solution = recon.solve(recon.Problem(Gaussian(np.full((8, 8), 3.0), 1.0), priors.TotalVariation(1.0)))
    assert solution.converged


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_no_detection_at_all_gives_zero(seed: int) -> None:
    counts = recon.Counts(np.zeros((8, 9), int), 5, background=0.1 * seed)
    solution = recon.solve(
        recon.Problem(recon.likelihoods.BernoulliTrials(counts), priors.TotalVariation(1.0))
    )
    assert solution.converged
    np.testing.assert_allclose(solution.image, 0.0, atol=1e-3)


def test_weight_has_one_direction() -> None:
    """A larger weight never gives a larger penalty at weight one."""
    image = np.random.default_rng(1).random((16, 16))
    for family in (
        priors.TotalVariation,
        priors.GeneralizedVariation,
        priors.Smoothness,
        priors.WaveletSparsity,
    ):
        rough = [
            family(1.0).value(
                recon.solve(recon.Problem(Gaussian(image, 0.05), family(w))).image.astype(float)
            )
            for w in (0.1, 1.0, 10.0)
        ]
        assert rough[0] > rough[1] > rough[2] - 1e-6, family


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"tolerance": 0.0}, "tolerance is 0.0"),
        ({"tolerance": float("nan")}, "tolerance is nan"),
        ({"max_iterations": 0}, "max_iterations is 0"),
        ({"max_iterations": 2.5}, "max_iterations is 2.5"),
        ({"solver": "newton"}, "solver is 'newton'"),
        ({"solver": "majorise-minimise"}, "leave solver out"),
        ({"start": np.zeros((2, 2))}, "start has shape"),
        ({"start": np.full((20, 30), np.inf)}, r"start at \(0, 0\)"),
    ],
)
def test_bad_arguments(problem: recon.Problem, arguments: dict, words: str) -> None:
    with pytest.raises(recon.InputError, match=words):
        recon.solve(problem, **arguments)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda L: recon.Problem(L, priors.TotalVariation()), "weight of TotalVariation is not set"),
        (lambda L: recon.Problem(L, ["tv"]), "priors holds a str"),
        (lambda L: recon.Problem(L, priors.TotalVariation(1.0), bounds=(2.0, 1.0)), "bounds is"),
        (lambda L: recon.Problem(L, priors.TotalVariation(1.0), bounds=(-5.0, 1.0)), "bounds is"),
        (lambda L: recon.Problem(L, priors.TotalVariation(1.0), bounds=3), "bounds is"),
        (lambda L: recon.Problem(7, priors.TotalVariation(1.0)), "likelihood is a int"),
        (
            lambda L: recon.Problem(L, priors.TotalVariation(1.0, mask=np.ones((3, 3), bool))),
            "mask has shape",
        ),
        (lambda L: priors.TotalVariation(-1.0), "weight is -1.0"),
        (lambda L: priors.TotalVariation(float("nan")), "weight is nan"),
        (lambda L: priors.Smoothness("much"), "weight is 'much'"),
        (lambda L: priors.TotalVariation(1.0, spacing=0.0), "spacing"),
        (lambda L: priors.TotalVariation(1.0, spacing=(1, 2, 3)), "spacing"),
        (lambda L: priors.TotalVariation(1.0, edge_weights=-np.ones((3, 3))), r"edge_weights at \(0, 0\)"),
        (lambda L: priors.TotalVariation(1.0, mask=np.ones((3, 3))), "mask has shape"),
        (lambda L: priors.GeneralizedVariation(1.0, second_order=0.0), "second_order is 0.0"),
    ],
)
def test_bad_problems(problem: recon.Problem, make, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        make(problem.likelihood)
