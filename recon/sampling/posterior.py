"""What the draws say: moments, intervals, regions, and whether to believe them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.errors import InputError
from recon.validation import Range, number, usable_pixels

MOST_R_HAT = 1.05
LEAST_EFFECTIVE = 200.0


@dataclass(frozen=True)
class Region:
    """The mean over a region: its posterior mean, standard deviation and central intervals."""

    mean: float
    standard_deviation: float
    interval_68: tuple[float, float]
    interval_95: tuple[float, float]
    pixels: int


@dataclass(frozen=True, eq=False)
class Posterior:
    """The posterior of an image, from draws of several chains.

    mean, standard_deviation: of every pixel, from all draws (float32, rows x columns).
    images: draws that were kept, evenly thinned (float32, draws x rows x columns): at most 2000 images and
        256 MB, and at least two a chain. Intervals and regions are of these.
    effective_samples: how many independent draws would tell the mean, the spread and both 5 % tails as well,
        for the worst of up to 1024 pixels spread over the image; median_effective_samples for the median one;
        objective_effective_samples for the objective.
    r_hat: the largest split R-hat of any pixel or of the objective; 1 where chains agree.
    acceptance: mean share of trajectories accepted after the burn-in.
    step, steps: the Langevin step h in units of the image, and the mean number of steps a draw.
    smoothing: width h^2 / 4 of the likelihood's envelope; it only proposes, the draws are exact.
    draws, burn_in, chains: draws made a chain, those thrown away before them, and chains.
    log_concave: whether the likelihood is convex, so that the posterior has a single peak.
    stopped: whether the callback ended the run.
    seconds: wall-clock time.
    """

    mean: np.ndarray
    standard_deviation: np.ndarray
    images: np.ndarray
    effective_samples: float
    median_effective_samples: float
    objective_effective_samples: float
    r_hat: float
    acceptance: float
    step: float
    steps: float
    smoothing: float
    draws: int
    burn_in: int
    chains: int
    log_concave: bool
    stopped: bool
    seconds: float

    @property
    def converged(self) -> bool:
        """Whether R-hat is at most 1.05, and pixels and objective are worth 200 independent draws or more.

        Then a mean is off by at most about 0.07 of a standard deviation, and a standard deviation by 5 %,
        one time in three at the worst pixel.
        """
        return not self._faults()

    def _faults(self) -> list[str]:
        faults = []
        if self.stopped:
            faults.append("the callback asked to stop")
        if not self.r_hat <= MOST_R_HAT:
            faults.append(f"chains differ (R-hat {self.r_hat:.3g}, above {MOST_R_HAT})")
        least = min(self.effective_samples, self.objective_effective_samples)
        if not least >= LEAST_EFFECTIVE:
            faults.append(
                f"the draws are worth only {least:.0f} independent ones, below {LEAST_EFFECTIVE:.0f}"
            )
        return faults

    @property
    def words(self) -> str:
        """One sentence: converged, or NOT CONVERGED with the reason and the remedy."""
        faults = self._faults()
        if faults:
            told = (
                f"NOT CONVERGED: {' and '.join(faults)}; do not use these intervals, give more draws (now"
                f" {self.draws} a chain) and a longer burn_in (now {self.burn_in})"
            )
        else:
            told = (
                f"converged: {self.chains} chains agree (R-hat {self.r_hat:.3f}) and are worth at least"
                f" {min(self.effective_samples, self.objective_effective_samples):.0f} independent draws"
            )
        if not self.log_concave:
            told += "; this likelihood is not convex, so there may be other peaks that no chain has found"
        return told + "."

    def interval(self, share: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
        """Return the central interval (low, high) that holds this share of every pixel's law (float32).

        Raises InputError for a share outside (0, 1), or too few kept draws for it: each tail needs one.
        """
        share = number(share, "share", Range("a share between 0 and 1, such as 0.95", 1e-6, 1.0 - 1e-6))
        low, high = quantiles(self.images, share)
        return low.astype(np.float32), high.astype(np.float32)

    def region(self, mask: np.ndarray) -> Region:
        """Return what the kept draws say of the mean over the pixels where the mask is True.

        Raises InputError for a mask that is not a boolean map of the image's shape, or is empty.
        """
        if mask is None:
            raise InputError("mask is None; give a boolean map, True in the region.")
        inside = usable_pixels(mask, self.mean.shape)
        means = self.images[:, inside].mean(axis=1, dtype=np.float64)
        return Region(
            float(means.mean()),
            float(means.std(ddof=1)),
            tuple(float(q) for q in quantiles(means, 0.68)),
            tuple(float(q) for q in quantiles(means, 0.95)),
            int(np.count_nonzero(inside)),
        )


def quantiles(draws: np.ndarray, share: float) -> tuple[np.ndarray, np.ndarray]:
    """Return the ends of the central interval; axis 0 counts draws."""
    tail = 0.5 * (1.0 - share)
    if tail * len(draws) < 1.0:
        raise InputError(
            f"share is {share} but only {len(draws)} draws are kept; give at most"
            f" {max(1.0 - 2.0 / len(draws), 0.0):.3g}, or make more draws."
        )
    low, high = np.quantile(draws, (tail, 1.0 - tail), axis=0)
    return low, high
