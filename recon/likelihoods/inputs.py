"""What the likelihoods ask of the images given to them, and the bounds they offer."""

from __future__ import annotations

import numpy as np

from recon.errors import InputError


def drawing_image(x: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
    """Return x as float64, or raise InputError unless it is a finite image of `shape`."""
    image = np.asarray(x, np.float64)
    if image.shape != tuple(shape):
        raise InputError(
            f"the image has shape {image.shape} but the data has {tuple(shape)}; make them equal."
        )
    bad = ~np.isfinite(image)
    if bad.any():
        place = tuple(int(i) for i in np.argwhere(bad)[0])
        raise InputError(f"the image has {image[place]} at {place}; give finite values to draw from.")
    return image


def pixelwise_bound(estimate: np.ndarray) -> float:
    """Return an upper bound to solve within: twice the largest value that a pixel gives by itself.

    A penalty of differences never takes a minimiser beyond the pixels' own estimates; the factor
    leaves room for priors that overshoot at an edge.
    """
    largest = float(np.max(estimate))
    return 2.0 * largest if largest > 0.0 else 1.0
