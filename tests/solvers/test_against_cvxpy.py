"""Every convex likelihood with every prior reaches the conic optimum, with a true certificate."""

import numpy as np
import pytest

import priors
import recon
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson

SIDE = 24
SHAPE = (SIDE, SIDE)


def scene(seed: int, side: int) -> np.ndarray:
    rows, columns = np.mgrid[:side, :side] / side
    image = 0.4 + 0.8 * columns + 1.2 * ((rows - 0.5) ** 2 + (columns - 0.4) ** 2 < 0.09)
    return image + 0.05 * np.random.default_rng(seed).random(image.shape)


def likelihood(name: str, seed: int, side: int = SIDE) -> recon.likelihoods.Likelihood:
    rng = np.random.default_rng(seed)
    x = scene(seed, side)
    mask = rng.random(x.shape) > 0.05
    gain = 0.5 + rng.random(x.shape)
    if name == "gaussian":
        return Gaussian(x + 0.3 * rng.standard_normal(x.shape), 0.09, mask=mask)
    if name == "poisson":
        counts = recon.simulate.counts(x, 2, gain=gain, background=0.1, several_per_trial=True, seed=seed)
        return Poisson(recon.Counts(counts.detections, 2, gain, 0.1, mask, several_per_trial=True))
    stop_after = {"fixed": None, "first": 1, "third": 3}[name]
    if stop_after is None:
        counts = recon.simulate.counts(x, 20, gain=gain / 10, background=0.02, seed=seed)
    else:
        counts = recon.simulate.counts(
            x, None, gain=gain / 10, background=0.02, stop_after=stop_after, seed=seed
        )
    return BernoulliTrials(counts, stop_after=stop_after)


PRIORS = {
    "total variation": lambda: priors.TotalVariation(1.0),
    "anisotropic, spaced": lambda: priors.TotalVariation(1.0, isotropic=False, spacing=(1.0, 2.0)),
    "missing pixels, edge weights": lambda: priors.TotalVariation(
        1.0, mask=np.random.default_rng(5).random(SHAPE) > 0.1,
        edge_weights=np.random.default_rng(6).random(SHAPE),
    ),
    "generalized variation": lambda: priors.GeneralizedVariation(1.0),
    "wavelets, translation-invariant": lambda: priors.WaveletSparsity(1.0, levels=2),
    "wavelets, orthonormal": lambda: priors.WaveletSparsity(1.0, "db2", 2, False),
    "smoothness": lambda: priors.Smoothness(2.0),
    "sum": lambda: priors.TotalVariation(0.7) + priors.Smoothness(0.5),
}  # fmt: skip


@pytest.mark.parametrize("name", ["gaussian", "poisson", "fixed", "first", "third"])
@pytest.mark.parametrize("prior", PRIORS)
def test_objective_and_certificate(name: str, prior: str) -> None:
    side = 14 if prior == "wavelets, translation-invariant" else SIDE  # of which cvxpy needs the whole matrix
    problem = recon.Problem(likelihood(name, 1, side), PRIORS[prior](), bounds=(0.0, 8.0))
    ours = recon.solve(problem, tolerance=5e-5)
    reference = recon.solve(problem, solver="conic")
    best = reference.diagnostics.objective
    assert reference.converged
    assert ours.converged
    assert abs(ours.diagnostics.objective - best) <= 1e-4 * best
    # What the conic solver reports is the objective in numpy too, and bounds the dual value.
    reached = problem.objective(np.asarray(reference.image, float))
    np.testing.assert_allclose(reached, best, rtol=2e-5)
    assert ours.diagnostics.dual_value <= reached * (1.0 + 1e-6)
    assert ours.diagnostics.objective >= reference.diagnostics.dual_value * (1.0 - 1e-5)


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_the_dual_value_is_never_above_the_optimum_on_the_way(seed: int) -> None:
    problem = recon.Problem(likelihood("poisson", seed), priors.TotalVariation(1.5), bounds=(0.0, 8.0))
    best = recon.solve(problem, solver="conic").diagnostics.objective
    seen = []
    recon.solve(problem, tolerance=1e-6, callback=lambda state: seen.append(state.dual_value))
    assert len(seen) >= 4
    assert max(seen) <= best * (1.0 + 2e-6)
    assert seen[0] < seen[-1]


def test_a_custom_prior_is_solved_conically_and_only_so() -> None:
    import cvxpy as cp

    likely = likelihood("gaussian", 3)
    custom = priors.Custom(
        lambda x: 1.0 * (cp.sum(cp.abs(cp.diff(x, 1, 0))) + cp.sum(cp.abs(cp.diff(x, 1, 1))))
    )
    ours = recon.solve(
        recon.Problem(likely, priors.TotalVariation(1.0, isotropic=False), (0.0, 8.0)), tolerance=1e-5
    )
    theirs = recon.solve(recon.Problem(likely, custom, (0.0, 8.0)), solver="conic")
    np.testing.assert_allclose(ours.diagnostics.objective, theirs.diagnostics.objective, rtol=1e-5)
    with pytest.raises(recon.InputError, match="conic"):
        recon.solve(recon.Problem(likely, custom, (0.0, 8.0)))
