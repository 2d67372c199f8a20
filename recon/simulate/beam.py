"""Draws the frames of a scanned beam, primary by primary."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import Frames
from recon.simulate.inputs import affordable, generator, image_of, positive_whole, product
from recon.validation import POSITIVE, number_or_map

MOST_PIXELS = 2e9  # more would not fit the memory of an ordinary computer
MOST_PARTICLES = 1e9  # in a pixel of a frame, so that its count fits four bytes


def frames(eta: ArrayLike, dose: ArrayLike, frames: int, *, seed: int | np.random.Generator) -> Frames:
    """Draw the electron counts of every frame.

    In each frame a pixel is hit by a Poisson number of primaries, `dose` expected, and each primary
    releases a Poisson number of detected electrons, `eta` expected.

    Parameters
    ----------
    eta : yield, electrons per primary, image (rows, columns), zero or more.
    dose : primaries per pixel per frame, above zero, scalar or map (rows, columns).
    frames : number of frames.
    seed : whole number, or a numpy Generator to go on drawing from.

    The counts have the smallest unsigned type that holds them. Raises InputError if an argument is not as
    described.
    """
    eta = image_of(eta, "eta")
    dose = number_or_map(dose, "dose", eta.shape, POSITIVE)
    frames = positive_whole(frames, "frames")
    rng = generator(seed)
    affordable("eta and frames", frames * eta.size, "pixels in all frames", MOST_PIXELS)
    particles = max(product(eta.shape, dose).max(), product(eta.shape, dose, eta).max())
    affordable("eta and dose", particles, "particles in a pixel of a frame", MOST_PARTICLES)
    return Frames(np.stack([_frame(eta, dose, rng) for _ in range(frames)]), dose)


def _frame(eta: NDArray, dose: float | NDArray, rng: np.random.Generator) -> NDArray:
    """Draw one frame.

    The electrons of M primaries, each a Poisson number of mean eta, are a Poisson number of mean M eta.
    """
    counts = rng.poisson(rng.poisson(dose, eta.shape) * eta)
    return counts.astype(np.min_scalar_type(counts.max()))  # before all frames stand in memory together
