"""Whether the frames of a dwell hold what a steady dwell gives."""

from __future__ import annotations

import numpy as np
from scipy.stats import chi2

from recon.acquisition import Frames
from recon.fit.statistic import Statistic
from recon.imaging.yield_trend import YieldTrend, yield_trend

PASSED = 0.01  # relative change over the dwell that is let pass


def trend_of(frames: Frames, eta: np.ndarray) -> YieldTrend | None:
    """Return how the frames change (`yield_trend`); None for readings, a single frame, and no electrons."""
    usable = np.ones(frames.shape, bool) if frames.mask is None else frames.mask
    if frames.law is not None or frames.frames < 2 or not frames.counts[:, usable].any():
        return None
    return yield_trend(frames, np.maximum(eta, 0.0))


def drift_statistic(trend: YieldTrend, threshold: float) -> Statistic:
    """Return the change of the frames' electrons over the dwell.

    Most of the chance of a false alarm goes to a straight line, whose p is that of a normal law, a quarter to
    any other change from frame to frame: p is the least of 1.5 p of the line and 4 p of the rest, which
    is half of `YieldTrend.p_value` where that is not the line's. p is 1 for a line below one per cent.
    """
    line = float(chi2.sf((trend.change / trend.standard_error) ** 2, 1))
    p = 1.0 if abs(trend.change) < PASSED else 1.5 * line
    if trend.p_value < 1.99 * line:  # it is that of the rest
        p = min(p, 2.0 * trend.p_value)
    name = "change of the frames over the dwell"
    return Statistic(name, trend.change, 0.0, trend.standard_error, min(p, 1.0), threshold)
