"""The problems that the engine's benchmarks solve."""

from __future__ import annotations

import numpy as np
from skimage import data

import priors
import recon
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson


def photograph() -> np.ndarray:
    """Return scikit-image's camera, 512 x 512, scaled to a maximum of 1."""
    image = data.camera().astype(float)
    return image / image.max()


def noisy(seed: int = 0) -> np.ndarray:
    """Return the photograph with Gaussian noise of 0.2."""
    return photograph() + 0.2 * np.random.default_rng(seed).standard_normal((512, 512))


def gaussian_problem(seed: int = 0) -> recon.Problem:
    """Return Gaussian noise 0.2 and total variation of weight 0.2."""
    return recon.Problem(Gaussian(noisy(seed), 1.0), priors.TotalVariation(0.2))


def counted(shape: tuple[int, int] = (512, 512)) -> np.ndarray:
    """Return the photograph scaled to 0.2 .. 4.2 counts, cropped at its middle or tiled to the shape."""
    image = 0.2 + 4.0 * photograph()
    if shape[0] <= 512:
        top, left = (512 - shape[0]) // 2, (512 - shape[1]) // 2
        return image[top : top + shape[0], left : left + shape[1]]
    return np.tile(image, (shape[0] // 512, shape[1] // 512))


def poisson_problem(shape: tuple[int, int] = (512, 512), seed: int = 0) -> recon.Problem:
    """Return Poisson counts with background 0.05 and total variation of weight 1 within (0, 20)."""
    counts = recon.simulate.counts(counted(shape), 1, background=0.05, several_per_trial=True, seed=seed)
    return recon.Problem(Poisson(counts), priors.TotalVariation(1.0), bounds=(0.0, 20.0))


def bernoulli_problem(shape: tuple[int, int] = (512, 512), seed: int = 0) -> recon.Problem:
    """Return the same expected counts in 100 trials of at most one detection."""
    counts = recon.simulate.counts(counted(shape), 100, gain=0.01, background=0.0005, seed=seed)
    return recon.Problem(BernoulliTrials(counts), priors.TotalVariation(1.0), bounds=(0.0, 20.0))
