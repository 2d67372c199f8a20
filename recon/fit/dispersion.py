"""The dispersion index: whether numbers scatter as much as their law says."""

from __future__ import annotations

import numpy as np

from recon.fit.count_laws import CountLaw


def weights(law: CountLaw, shown: np.ndarray) -> np.ndarray:
    """Return what a squared deviation counts for, v / (2 v^2 + k4): v over the variance of the square.

    k4 is the fourth cumulant; where it is negative it is left out, lest trials of one half decide alone.
    """
    v = law.variance
    spread = 2.0 * v * v + np.maximum(law.fourth, 0.0)
    return np.divide(v, spread, out=np.zeros(v.shape), where=shown & (spread > 0.0))


def dispersion(law: CountLaw, shown: np.ndarray) -> float:
    """Return sum w (k - m)^2 / sum w v: 1 in expectation at the true image.

    m, v: mean and variance of the law; w: `weights`, with which the index is most exact if it is near 1, and
    dark pixels, whose squares over their variance scatter most, decide least. NaN where nothing is shown.
    """
    w = weights(law, shown)
    total = float(np.sum(w * law.variance))
    return float(np.sum(w * (law.number - law.mean) ** 2)) / total if total > 0.0 else np.nan


def dispersion_deviation(law: CountLaw, shown: np.ndarray) -> float:
    """Return the standard deviation of `dispersion` at the true image: Var (k - m)^2 = 2 v^2 + k4."""
    if not law.has_moments:  # the square of a normal residual
        return np.sqrt(2.0 / max(int(np.count_nonzero(shown)), 1))
    w = weights(law, shown)
    total = float(np.sum(w * law.variance))
    square = float(np.sum(w * w * (2.0 * law.variance**2 + law.fourth)))
    return np.sqrt(max(square, 0.0)) / total if total > 0.0 else np.nan
