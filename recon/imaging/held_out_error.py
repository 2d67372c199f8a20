"""The mean squared error of any estimate of the yield, without a reference."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from recon.acquisition import Frames
from recon.errors import InputError
from recon.imaging.blocks import sum_with_error
from recon.imaging.electron_yield import some


@dataclass(frozen=True)
class HeldOutError:
    """The mean squared error of a fit to a part of the frames.

    error: estimated mean over usable pixels of (fit - yield)^2; by chance it may be below zero.
    standard_error: of error, from its spread over blocks of 8 x 8 pixels.
    dose_share: the share of the dose that the fit was given, mean over the folds. The error is that of
        such a fit; a fit to all frames is better, by how much is not known from it.
    folds: how often the frames were split.
    """

    error: float
    standard_error: float
    dose_share: float
    folds: int


def held_out_error(
    frames: Frames,
    fit: Callable[[Frames], NDArray],
    folds: int = 4,
    seed: int | np.random.Generator = 0,
) -> HeldOutError:
    """Estimate the mean squared error of `fit`, unbiased, from frames that it was not given.

    The frames are split at random into folds; each is held out once. From the held-out frames comes
    v, electrons (or readings less their offset, over the gain) over the expected primaries: unbiased, and
    independent of the fit x. As E (x - v)^2 = (x - eta)^2 + Var v,

        error = mean over folds and pixels of  x^2 - 2 x v + q,

    q being an unbiased estimate of eta^2 from all frames, which does not depend on the fit and is less
    noisy than v^2 - Var v of the held-out frames alone. With D primaries expected in all frames,
    Var v = (eta + eta^2) / D, hence q = v^2 - (v + v^2) / (D + 1), v being that of all frames; readings add
    the variance of the chain.

    fit: takes Frames, returns an image of their shape. folds: 2 to the number of frames. seed: of the split.

    Raises InputError, also for readings at their ceiling, which are biased.
    """
    if not isinstance(frames, Frames):
        raise InputError(f"frames is a {type(frames).__name__}; give recon.Frames.")
    if isinstance(folds, bool) or not isinstance(folds, int | np.integer) or not 2 <= folds <= frames.frames:
        raise InputError(f"folds is {folds!r}; give a whole number from 2 to the {frames.frames} frames.")
    if frames.saturated > 0.0:
        raise InputError("frames hold readings at their ceiling, which are biased; lower the gain.")
    usable = np.ones(frames.shape, bool) if frames.mask is None else frames.mask
    order = np.random.default_rng(seed).permutation(frames.frames)
    everything, primaries = _ratio(frames, np.arange(frames.frames))
    terms = _square(frames, everything, primaries)
    share = 0.0
    for held in np.array_split(order, folds):
        kept = np.setdiff1d(order, held)
        image = np.asarray(fit(some(frames, kept)), np.float64)
        if image.shape != frames.shape:
            raise InputError(f"fit returns shape {image.shape}; return an image of shape {frames.shape}.")
        bad = usable & ~np.isfinite(image)
        if bad.any():
            place = tuple(int(i) for i in np.argwhere(bad)[0])
            raise InputError(f"fit returns {image[place]} at {place}; return finite numbers.")
        v, seen = _ratio(frames, held)
        terms += (image * image - 2.0 * image * v) / folds
        share += float(1.0 - seen[usable].sum() / primaries[usable].sum()) / folds
    mean = float(terms[usable].mean())
    _, error = sum_with_error(np.where(usable, terms - mean, 0.0))
    return HeldOutError(mean, error / np.count_nonzero(usable), share, folds)


def _ratio(frames: Frames, chosen: NDArray) -> tuple[NDArray, NDArray]:
    """Return the unbiased ratio of the chosen frames, and the primaries expected in them."""
    total = np.zeros(frames.shape)
    for f in chosen:
        total += frames.counts[f]
    primaries = (
        np.asarray(frames.dose, np.float64) * frames.factors[chosen].sum(axis=0, dtype=np.float64)[:, None]
    )
    if frames.law is not None:
        total = (total - len(chosen) * frames.law.offset) / frames.law.gain
    primaries = np.broadcast_to(primaries, frames.shape)
    return total / primaries, primaries


def _square(frames: Frames, v: NDArray, primaries: NDArray) -> NDArray[np.float64]:
    """Return an unbiased estimate of the squared yield: v^2 less an unbiased estimate of Var v."""
    # Var v = (spread eta + eta^2) / D + readout; E v^2 = eta^2 + Var v; solved for Var v
    spread, readout = 1.0, 0.0
    if frames.law is not None:
        spread = 1.0 + frames.law.variance / frames.law.gain**2
        readout = frames.frames * (frames.law.noise / frames.law.gain) ** 2 / primaries**2
    return v * v - (spread * v + v * v + primaries * readout) / (primaries + 1.0)
