"""The solver against other ways to the same optimum."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from skimage.restoration import denoise_tv_chambolle

import recon
from tests.bench.measure import Row, at_least, at_most, seconds
from tests.bench.scenes import bernoulli_problem, gaussian_problem, noisy, poisson_problem

GROUP = "engine"


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    yield gaussian()
    yield conic()
    yield iterations()
    yield bernoulli()


def gaussian() -> Row:
    """Time to a certified gap of 1e-4, against a dual projection method to within 1e-4 of the optimum."""
    problem = gaussian_problem()
    image = noisy()
    best = recon.solve(problem, tolerance=2e-6).diagnostics
    optimum = 0.5 * (best.objective + best.dual_value)

    def excess(steps: int) -> float:
        found = denoise_tv_chambolle(image, weight=0.2, eps=0.0, max_num_iter=steps)
        return problem.objective(found.astype(np.float32)) / optimum - 1.0

    low, high = 1, 64
    while excess(high) > 1e-4:
        low, high = high, 2 * high
    while high - low > max(1, low // 50):
        middle = (low + high) // 2
        low, high = (middle, high) if excess(middle) > 1e-4 else (low, middle)
    theirs = seconds(lambda: denoise_tv_chambolle(image, weight=0.2, eps=0.0, max_num_iter=high), 3)
    ours = seconds(lambda: recon.solve(problem), 9)
    solution = recon.solve(problem)
    detail = (
        f"ours {ours * 1e3:.0f} ms ({solution.diagnostics.iterations} iterations, gap"
        f" {solution.diagnostics.relative_gap:.1e}), denoise_tv_chambolle {theirs:.2f} s ({high} iterations)"
    )
    return at_least(GROUP, "Gaussian + TV, 512 x 512, speed", theirs / ours, "x", 40.0, detail)


def conic() -> Row:
    """Time to a gap of 1e-4, against cvxpy with Clarabel."""
    problem = poisson_problem((128, 128))
    ours = seconds(lambda: recon.solve(problem), 9)
    theirs = seconds(lambda: recon.solve(problem, solver="conic", tolerance=1e-4), 1)
    first, second = recon.solve(problem), recon.solve(problem, solver="conic")
    apart = first.diagnostics.objective / second.diagnostics.objective - 1.0
    detail = f"ours {ours * 1e3:.0f} ms, cvxpy {theirs:.2f} s, objectives apart {apart:.1e}"
    return at_least(GROUP, "Poisson + TV, 128 x 128, speed", theirs / ours, "x", 30.0, detail)


def iterations() -> Row:
    """Iterations to a gap of 1e-4 at 512 x 512."""
    found = [recon.solve(poisson_problem(seed=seed)).diagnostics for seed in range(3)]
    counts = [d.iterations for d in found]
    detail = f"three seeds {counts}, {np.median([d.seconds for d in found]):.2f} s"
    return at_most(GROUP, "Poisson + TV, 512 x 512", float(max(counts)), "iterations", 800.0, detail)


def bernoulli() -> Row:
    """Time of Bernoulli trials over that of Poisson at equal counts."""
    poisson, trials = poisson_problem(), bernoulli_problem()
    ours, plain = seconds(lambda: recon.solve(trials), 3), seconds(lambda: recon.solve(poisson), 3)
    detail = f"Bernoulli {ours:.2f} s, Poisson {plain:.2f} s"
    return at_most(GROUP, "Bernoulli over Poisson, 512 x 512", ours / plain, "x", 6.0, detail)
