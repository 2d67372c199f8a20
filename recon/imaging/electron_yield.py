"""Secondary-electron yield from frames."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from recon.acquisition import Frames
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort, image_of
from recon.imaging.yield_estimators import conventional_yield, one_frame_note, total_dose
from recon.likelihoods.contract import Likelihood
from recon.likelihoods.gaussian import Gaussian
from recon.likelihoods.poisson import Poisson
from recon.problem import Prior, Sum

SATURATED = 1e-3  # share of readings at the ceiling from which on a note says so


def electron_yield(
    frames: Frames, prior: Prior | Sum | None = None, effort: Effort | None = None
) -> PhysicalImage:
    """Return the yield image: mean detected electrons per primary particle.

    Uses how the electrons fall on the frames, not their total alone: a frame with several electrons
    holds fewer primaries than its count suggests. With a mark law the frames hold readings.
    """
    return image_of(
        "electron_yield",
        yield_likelihood(frames),
        prior,
        "1",
        effort or Effort(),
        folds=lambda number, seed: frame_folds(frames, number, seed),
        notes=tuple(_notes(frames)),
    )


def yield_likelihood(frames: Frames) -> Likelihood:
    """Return the law of the frames: `PoissonMarks` of counts, `AnalogMarks` of readings."""
    if frames.law is None:
        from recon.likelihoods.poisson_marks import PoissonMarks

        return PoissonMarks(frames)
    from recon.likelihoods.analog_marks import AnalogMarks

    return AnalogMarks(frames)


def frame_folds(frames: Frames, number: int, seed: int) -> list[tuple[Likelihood, Likelihood]]:
    """Return pairs that share out the frames, each frame in the part that scores of one pair.

    Frames are dealt out at random, the number alike. The score is the squared distance from the
    conventional ratio of the frames held out, which has no bias. A stack of fewer frames than twice the
    number hides whole pixels.
    """
    if frames.frames < 2 * number:
        return yield_likelihood(frames).folds(number, seed)
    dealt = np.random.default_rng(seed).permutation(frames.frames) % number
    pairs: list[tuple[Likelihood, Likelihood]] = []
    for part in range(number):
        pairs.append((yield_likelihood(some(frames, dealt != part)), _ratio(some(frames, dealt == part))))
    return pairs


def some(frames: Frames, chosen: np.ndarray) -> Frames:
    """Return an acquisition of some of the frames; chosen: boolean (frames,)."""
    current = None if frames.current is None else frames.current[chosen]
    return Frames(frames.counts[chosen], frames.dose, frames.mask, law=frames.law, current=current)


def _ratio(frames: Frames) -> Likelihood:
    """Return a law of the conventional ratio, whose score is the squared distance from it."""
    if frames.law is not None:
        ratio = conventional_yield(frames).image
        known = np.isfinite(ratio)
        return Gaussian.from_arrays(np.where(known, ratio, 0.0), known.astype(np.float32))
    usable = np.ones(frames.shape, bool) if frames.mask is None else frames.mask
    electrons = np.where(usable, frames.counts.sum(axis=0, dtype=np.int64), 0)
    return Poisson.from_arrays(electrons, np.where(usable, total_dose(frames), 0.0), 0.0, usable)


def _notes(frames: Frames) -> Iterator[str]:
    if frames.frames == 1:
        dose = float(np.mean(total_dose(frames)))
        eta = max(float(np.nanmean(conventional_yield(frames).image)), 1e-3)
        yield "a single frame: its counts are taken under the law of the total. " + one_frame_note(dose, eta)
    if frames.dropped:
        listed = ", ".join(str(f) for f in frames.dropped)
        yield f"frames without finite readings were dropped: {listed}"
    if frames.saturated > SATURATED:
        yield f"{100.0 * frames.saturated:.2g} % of readings are at the ceiling, taken as at least that"
