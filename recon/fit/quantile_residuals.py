"""Randomised quantile residuals (Dunn and Smyth 1996)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr, ndtri

from recon.fit.count_laws import count_law
from recon.likelihoods.contract import Likelihood

DRAWS = 39  # among which a residual is ranked, where there is no closed form
EDGES = np.linspace(-4.0, 4.0, 33)


@dataclass(frozen=True, eq=False)
class Histogram:
    """How many residuals fall between edges (n + 1), counts (n), and how many a normal law expects.

    The outer classes hold all that is beyond them.
    """

    edges: np.ndarray
    counts: np.ndarray
    expected: np.ndarray


def quantile_residuals(likelihood: Likelihood, x: np.ndarray, seed: int = 0) -> np.ndarray:
    """Return normal residuals (rows, columns), positive where the data ask for a larger x; NaN without data.

    A residual is the normal quantile of u, drawn uniformly between the chance of less light than was seen
    and that of as much or less; if x is true and independent of the data, residuals are independent and
    standard normal, however few the counts. Poisson, binomial, negative binomial and Neyman's law (totals
    of frames) are exact; for others u is drawn from the rank of the pixel's deviance residual among those
    of 39 draws at x.
    """
    rng = np.random.default_rng(seed)
    shown = likelihood.has_data
    law = count_law(likelihood, x)
    out = np.full(likelihood.shape, np.nan)
    share = rng.random(int(np.count_nonzero(shown)))
    if law is None:
        upper = _ranks(likelihood, x, rng)[shown] + share / (DRAWS + 1.0)
    else:
        more, least = law.tails(shown)
        upper = more + share * (least - more)
    out[shown] = -ndtri(np.clip(upper, 1e-300, 1.0 - 1e-16))
    return out


def _ranks(likelihood: Likelihood, x: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """Return the share of draws with a residual above that of the data, ties broken at random."""
    observed = likelihood.residuals(x)
    above = np.zeros(likelihood.shape)
    for _ in range(DRAWS):
        drawn = likelihood.draw(x, rng).residuals(x)
        above += (drawn > observed) + (drawn == observed) * (rng.random(likelihood.shape) < 0.5)
    return above / (DRAWS + 1.0)


def histogram(residuals: np.ndarray) -> Histogram:
    """Return the histogram of the residuals that are numbers."""
    known = residuals[np.isfinite(residuals)]
    counts = np.histogram(np.clip(known, EDGES[0], EDGES[-1]), EDGES)[0]
    share = ndtr(EDGES)
    share[0], share[-1] = 0.0, 1.0
    return Histogram(EDGES.copy(), counts, known.size * np.diff(share))
