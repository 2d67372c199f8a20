"""Draws against the likelihood: the identities of Bartlett (1953).

If data are drawn at x and L is their negative log-likelihood, then at that x the gradient has mean
zero, and its variance and the mean curvature both equal the Fisher information.
"""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import require, require_at_most

DRAWS = 200
SIGMAS = 5.0
RELATIVE = 1e-5


def check_draws(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check that draws are reproducible, change nothing else, and obey the law that L states."""
    x = points.typical(likelihood, rng)
    _check_reproducible(likelihood, x)
    information = likelihood.fisher_information(x)
    informed = information > 0.0
    information = information[informed]
    require(
        informed.any() or not likelihood.has_data.any(),
        likelihood,
        "fisher_information is zero everywhere",
        0.0,
        "some information where there is data",
    )
    if not informed.any():
        return
    signs = rng.choice([-1.0, 1.0], information.size)  # errors of either sign must not cancel
    statistics = {
        "the gradient at the image drawn from has another mean": [],
        "the gradient at the image drawn from has another variance than fisher_information": [],
        "the mean curvature of draws is not fisher_information": [],
    }
    for _ in range(DRAWS):
        drawn = likelihood.draw(x, rng)
        score, curvature = drawn.gradient(x)[informed], drawn.curvature(x)[informed]
        normalised = (
            score / np.sqrt(information),
            score**2 / information - 1.0,
            curvature / information - 1.0,
        )
        for collected, numbers in zip(statistics.values(), normalised, strict=True):
            collected.append((float(np.mean(numbers)), float(np.mean(signs * numbers))))
    for claim, collected in statistics.items():
        _require_zero_mean(likelihood, claim, np.asarray(collected))


def _require_zero_mean(likelihood: Likelihood, claim: str, sample: np.ndarray) -> None:
    """Raise ConformanceError if a mean over draws is further from zero than chance allows."""
    error = np.std(sample, axis=0, ddof=1) / np.sqrt(len(sample))
    for mean, allowed in zip(np.mean(sample, axis=0), SIGMAS * error + RELATIVE, strict=True):
        where = f"a typical image, relative to fisher_information, over {len(sample)} draws"
        require(abs(mean) <= allowed, likelihood, claim, f"{mean:.4g}", f"0 to within {allowed:.2g}", where)


def _check_reproducible(likelihood: Likelihood, x: np.ndarray) -> None:
    before = likelihood.value_map(x)
    one, same, other = (likelihood.draw(x, seed) for seed in (7, 7, 8))
    generator = np.random.default_rng(7)
    first, second = likelihood.draw(x, generator), likelihood.draw(x, generator)
    equal = np.array_equal
    facts = [
        (type(one) is type(likelihood), "draw returns another class", type(one), type(likelihood)),
        (one.shape == likelihood.shape, "draw changes the shape", one.shape, likelihood.shape),
        (equal(one.has_data, likelihood.has_data), "draw changes has_data", "another map", "the same"),
        (equal(likelihood.value_map(x), before), "draw changes its own data", "others", "the same"),
    ]
    drawn = [d.value_map(x) for d in (one, same, other, first, second)]
    facts.append((equal(drawn[0], drawn[1]), "draws of one seed differ", "two value_maps", "one"))
    if likelihood.has_data.any():
        facts += [
            (not equal(drawn[0], drawn[2]), "draws of two seeds agree", "one value_map", "two"),
            (not equal(drawn[3], drawn[4]), "two draws of one generator agree", "one value_map", "two"),
        ]
    for holds, claim, got, expected in facts:
        require(holds, likelihood, claim, got, expected)
    require_at_most(likelihood, "value_map of a draw is negative", -drawn[0], 0.0, 1e-9, x)
