"""What is kept of the draws: sums for the moments, thinned images, and every draw of some pixels.

Memory: four float64 images a chain, kept images of at most KEPT_BYTES, and the series of at most
WATCHED pixels.
"""

from __future__ import annotations

import numpy as np

from recon.sampling.effective import r_hat

KEPT = 2000  # images
KEPT_BYTES = 256 << 20
WATCHED = 1024  # pixels, spread evenly, of which every draw is kept


class Record:
    """Draws of several chains, taken in as they come."""

    def __init__(self, chains: int, draws: int, reference: np.ndarray) -> None:
        shape = reference.shape
        self.done = 0
        self._draws = draws
        self._reference = reference.astype(np.float64)
        self._sums = np.zeros((chains, 2, 2, *shape))  # chain, half, power
        most = max(min(KEPT, KEPT_BYTES // (4 * reference.size)) // chains, 2)
        self._thin = -(-draws // most)
        self._kept = np.empty((chains, -(-draws // self._thin), *shape), np.float32)
        count = min(WATCHED, reference.size)
        self._watched = np.linspace(0, reference.size - 1, count).round().astype(np.int64)
        self._series = np.empty((chains, draws, count), np.float32)
        self._objective = np.empty((chains, draws, 1))

    def take(self, images: list[np.ndarray], objectives: list[float]) -> None:
        """Take in one draw of every chain."""
        half = int(self.done >= self._draws // 2)
        for chain, image in enumerate(images):
            off = image - self._reference
            self._sums[chain, half, 0] += off
            off *= off
            self._sums[chain, half, 1] += off
            self._series[chain, self.done] = image.ravel()[self._watched]
            if self.done % self._thin == 0:
                self._kept[chain, self.done // self._thin] = image
        self._objective[:, self.done, 0] = objectives
        self.done += 1

    def moments(self) -> tuple[np.ndarray, np.ndarray]:
        """Return the mean and the standard deviation of all draws (float64)."""
        count = len(self._sums) * self.done
        first, second = self._sums.sum(axis=(0, 1)) / max(count, 1)
        variance = np.maximum(second - first * first, 0.0) * count / max(count - 1, 1)
        return self._reference + first, np.sqrt(variance)

    def images(self) -> np.ndarray:
        """Return the kept draws, chain after chain."""
        kept = self._kept[:, : -(-self.done // self._thin)]
        return kept.reshape(-1, *kept.shape[2:])

    def series(self) -> tuple[np.ndarray, np.ndarray]:
        """Return every draw of the watched pixels and of the objective: (chains, draws, columns)."""
        return self._series[:, : self.done], self._objective[:, : self.done]

    def worst_r_hat(self) -> float:
        """Return the largest split R-hat of any pixel; inf where the draws ended before they were halved."""
        half = self._draws // 2
        if self.done < self._draws or half < 2:
            return float("inf")
        counts = np.array([half, self._draws - half])[None, :, None, None]
        means = self._sums[:, :, 0] / counts
        variances = (self._sums[:, :, 1] / counts - means * means) * counts / (counts - 1)
        shape = self._reference.shape
        return float(
            r_hat(means.reshape(-1, *shape), np.maximum(variances, 0.0).reshape(-1, *shape), half).max()
        )
