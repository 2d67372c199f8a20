"""How far each pixel is off, what the prior smoothed away included: calibrated on data that were held out.

The error of a penalised image is mostly bias: an edge blurred, a detail lost, a plateau too low. Neither
Fisher information nor a bootstrap from the image itself sees that. Three things go with it, pixel by pixel,

    J  the variance of the image, from fits to parts of the data (grouped jackknife; Quenouille 1956)
    A  the variance of the image among its neighbours (a Gaussian window of 1 pixel): edges may be off
    F  a share of the variance that the pixel's own data leave (1 / Fisher information)

and u^2 = a J + b A + c F. The factors are near 1 for any scene, and what this scene says of them is taken
from the held-out data: a fit to the others is off by r = (dL/dx) / I in each pixel, noise and error
together; the noise of neighbours is independent, so the mean of r_i r_j over neighbours i, j is that of their
errors alone. It is compared among smooth, mixed and edgy pixels, and the factors are those most probable
given it and their usual spread (a normal law of their logarithms).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import gaussian_filter, uniform_filter

from recon.likelihoods.contract import Likelihood
from recon.weights import HeldOutFit
from recon.weights.scoring import lifted, scoring_step

# Measured on 8 scenes at 1, 4 and 16 counts, 128 x 128; see DEVELOPERS.md.
OWN = 0.012  # share of the pixel's own variance in F
BLUR = 2.0  # pixels: J is averaged so far
NEAR = 1.0  # pixels: the window of A
EDGES = (0.15, 0.6)  # shares of A in u^2 that part smooth, mixed and edgy pixels
SPREAD = 0.4  # of the logarithm of a factor, and of one that all share, among scenes
UNSURE = 0.3  # of the logarithm of the correlation of neighbours' errors
FALL = 0.6  # in a 5 x 5 window that correlation is itself to this power less
ROUGH = 0.1  # relative, how well that holds
GROWTH = 0.45  # the mean squared error falls with the data to this power
STANDARD = 0.87  # of u: half the width that holds 68 % of errors
OF_95 = 2.5  # times that: half the width that holds 95 %
FEW = 30  # pixels of a kind below which it is not asked
LEAST = 0.02  # of the mean of an image: taken where it is less, for the information


def calibrated_uncertainty(
    likelihood: Likelihood, image: np.ndarray, fits: Sequence[HeldOutFit]
) -> np.ndarray:
    """Return the standard uncertainty of each pixel (float32): 68 % of true values lie within it.

    fits: to all data but a part, two or more, with what scores them. Where a pixel has no data of its own
    it is at least the spread of the whole image.
    """
    image = np.asarray(image, np.float64)
    parts = _parts(likelihood, image, fits)
    total = parts.sum(axis=0)
    edgy = np.digitize(parts[1] / np.maximum(total, 1e-300), EDGES)
    factors = _factors(list(_kinds(parts, edgy, fits)), len(fits))
    u = STANDARD * np.sqrt(np.tensordot(factors, parts, 1))
    u = np.where(likelihood.has_data, u, np.maximum(u, image.std()))
    return u.astype(np.float32)


def _parts(likelihood: Likelihood, image: NDArray, fits: Sequence[HeldOutFit]) -> NDArray:
    """Return J, A and F, (3, rows, columns)."""
    number = len(fits)
    spread = np.var([fit.image for fit in fits], axis=0, dtype=np.float64, ddof=1)
    jackknife = gaussian_filter((number - 1.0) / number * spread, BLUR)
    mean = gaussian_filter(image, NEAR)
    among = np.maximum(gaussian_filter(image * image, NEAR) - mean * mean, 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        own = 1.0 / likelihood.fisher_information(lifted(mean, likelihood, LEAST))
    known = np.isfinite(own) & likelihood.has_data
    own = np.where(known, own, np.median(own[known]) if known.any() else 0.0)
    return np.array([jackknife, among, OWN * own])


@dataclass(frozen=True)
class _Kind:
    """What the pixels of a kind say.

    parts: the mean of J, A and F. correlated: what the correlation of neighbours' errors usually is.
    shared, error: the mean of r_i r_j over neighbours j in a 3 x 3 and in a 5 x 5 window, and their errors.
    own: the mean of r_i^2 less its variance, and its error; None where the variance is not known.
    """

    parts: NDArray
    correlated: float
    shared: tuple[float, float]
    error: tuple[float, float]
    own: tuple[float, float] | None


def _kinds(parts: NDArray, edgy: NDArray, fits: Sequence[HeldOutFit]) -> Iterator[_Kind]:
    level = float(np.mean(parts[2])) / OWN
    if not level > 0.0:
        return
    products = [_products(fit) for fit in fits]
    for kind in range(len(EDGES) + 1):
        chosen = edgy == kind
        near, wide = (np.concatenate([p[w][0][chosen & p[w][1]] for p in products]) for w in (0, 1))
        if near.size < FEW:
            continue
        mine = parts[:, chosen].mean(axis=1)
        correlated = float(np.clip(0.38 - 0.083 * np.log(mine.sum() / level), 0.2, 0.95))
        # a pair is counted twice
        errors = tuple(float(np.sqrt(2.0 * np.mean(p * p) / p.size)) for p in (near, wide))
        own = None
        if all(fit.score.has_linear_score for fit in fits):
            squares = np.concatenate([p[2][0][chosen & p[2][1]] for p in products])
            own = float(squares.mean()), float(squares.std() / np.sqrt(squares.size))
        yield _Kind(mine, correlated, (float(near.mean()), float(wide.mean())), errors, own)


def _products(fit: HeldOutFit) -> list[tuple[NDArray, NDArray]]:
    """Return r times the mean r of neighbours, 3 x 3 and 5 x 5, r^2 less its variance, and where they are.

    The variance is that of the law at the unbiased estimate x - r, which it equals on average.
    """
    x = lifted(np.asarray(fit.image, np.float64), fit.score, LEAST)
    off, _, known = scoring_step(fit.score, x, LEAST)
    out = []
    for side in (3, 5):
        number = side**2 * uniform_filter(known.astype(np.float64), side, mode="constant") - known
        beside = side**2 * uniform_filter(off, side, mode="constant") - off
        out.append((off * beside / np.maximum(number, 1.0), known & (number > 0.5)))
    with np.errstate(divide="ignore", invalid="ignore"):
        variance = 1.0 / fit.score.fisher_information(x - off)
    out.append((off * off - np.where(known, variance, 0.0), known & np.isfinite(variance)))
    return out


def _factors(kinds: Sequence[_Kind], number: int) -> NDArray:
    """Return the most probable factors of the three parts; number: of fits."""
    from scipy.optimize import least_squares

    larger = (1.0 - 1.0 / number) ** -GROWTH

    def misfit(logarithms: NDArray) -> NDArray:
        factors = np.exp(logarithms[:3] + logarithms[3])
        out = [*(logarithms[:4] / SPREAD), *(logarithms[4:] / UNSURE)]
        for kind, change in zip(kinds, logarithms[4:], strict=True):
            correlated = min(kind.correlated * np.exp(change), 1.0)
            expected = larger * correlated * float(factors @ kind.parts)
            further = expected * correlated**FALL
            out.append((kind.shared[0] - expected) / kind.error[0])
            if kind.own is not None:
                alone = expected / correlated
                out.append((kind.own[0] - alone) / np.hypot(kind.own[1], ROUGH * alone))
            out.append((kind.shared[1] - further) / np.hypot(kind.error[1], ROUGH * further))
        return np.array(out)

    best = least_squares(misfit, np.zeros(4 + len(kinds))).x
    return np.exp(best[:3] + best[3])
