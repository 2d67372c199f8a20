"""Secondary-electron yield from frames."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from recon.acquisition import Frames
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort, image_of, judged
from recon.imaging.yield_estimators import conventional_yield, one_frame_note, total_dose
from recon.likelihoods.contract import Likelihood
from recon.likelihoods.gaussian import Gaussian
from recon.problem import Prior, Problem, Sum, default_prior
from recon.weights import held_out_fits, settle

TRENDED = 16  # frames from which on a trend over the dwell is looked for
UNLIKELY = 1e-3  # chance of a trend by accident below which a note says so
ROUGHLY = 3.0  # standard deviations of a first look, beyond which a second is taken
SATURATED = 1e-3  # share of readings at the ceiling from which on a note says so


def electron_yield(
    frames: Frames,
    prior: Prior | Sum | None = None,
    effort: Effort | None = None,
    *,
    unknown_current: bool = False,
    moving: bool = False,
) -> PhysicalImage:
    """Return the yield image: mean detected electrons per primary particle.

    Uses how the electrons fall on the frames, not their total alone: a frame with several electrons
    holds fewer primaries than its count suggests. With a mark law the frames hold readings.

    unknown_current: whether to estimate the dose of every line from the frames first (`estimate_current`).
    moving: whether to register the frames (`register`) and to fit them where they were (`MovingFrames`).

    Both take counts, not readings. Raises InputError.
    """
    effort = effort or Effort()
    notes = list(_notes(frames))
    if unknown_current:
        from recon.imaging.beam_current import estimate_current

        current = estimate_current(frames)
        frames = Frames(frames.counts, frames.dose, frames.mask, current=current.factors)
        notes.append(current.note)
    if moving:
        from recon.imaging.registration import register

        drift = register(frames)
        notes.append(drift.note)
        return _at_shifts(frames, drift.shifts, prior, effort, tuple(filter(None, notes)))
    return image_of(
        "electron_yield",
        yield_likelihood(frames),
        prior,
        "1",
        effort,
        folds=lambda number, seed: frame_folds(frames, number, seed),
        notes=tuple(filter(None, notes)),
    )


def _at_shifts(
    frames: Frames, shifts: np.ndarray, prior: Prior | Sum | None, effort: Effort, notes: tuple[str, ...]
) -> PhysicalImage:
    """Return the yield image of frames that moved.

    The weight is that of frames at rest: the information of `MovingFrames`, pixel by pixel, leaves out what
    a frame says of four pixels together.
    """
    from recon.likelihoods.moving_frames import MovingFrames

    still = yield_likelihood(frames)
    settled = settle(
        default_prior() if prior is None else prior,
        still,
        still.default_bounds,
        effort.weight,
        lambda number, seed: frame_folds(frames, number, seed),
        effort.of_weight("electron_yield"),
    )
    moved, prior = MovingFrames(frames, shifts), Sum(*settled.terms)
    image = image_of("electron_yield", moved, prior, "1", replace(effort, judge=False), notes=notes)
    fits = settled.fits or held_out_fits(settled.terms, still, still.default_bounds, image.image)
    uncertainty = judged(Problem(still, settled.terms, image.bounds), image.image, fits)
    return replace(image, uncertainty=uncertainty, held_out=fits, choice=settled.choice)


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
    """Return the conventional ratio v as a reading whose score is the squared distance from it.

    Its variance is (spread eta + eta^2) / D + readout, D primaries being expected; spread is 1 and readout 0
    where electrons are counted. It is declared as (spread v + v^2 + D readout) / (D + 1), which is that on
    average, and no less than a thousandth of its mean.
    """
    ratio, dose = conventional_yield(frames).image.astype(np.float64), total_dose(frames)
    known = np.isfinite(ratio)
    ratio = np.where(known, ratio, 0.0)
    spread, readout = 1.0, 0.0
    if frames.law is not None:
        spread += frames.law.variance / frames.law.gain**2
        readout = frames.frames * (frames.law.noise / frames.law.gain / dose) ** 2
    variance = (spread * ratio + ratio * ratio + dose * readout) / (dose + 1.0)
    least = 1e-3 * float(variance[known].mean()) if known.any() else 0.0
    variance = np.maximum(variance, least if least > 0.0 else 1.0)
    return Gaussian.from_arrays(ratio, np.where(known, 1.0 / variance, 0.0).astype(np.float32))


def _changes(frames: Frames) -> bool:
    """Whether the electrons of the frames vary more than they should, or rise or fall; quick, and rough."""
    if frames.current is not None:
        return True
    usable = np.ones(frames.shape, bool) if frames.mask is None else frames.mask
    electrons = np.array([int(np.sum(frame, where=usable, dtype=np.int64)) for frame in frames.counts])
    expected = frames.counts.sum(axis=0, dtype=np.int64)[usable] / frames.frames
    eta = expected / np.broadcast_to(frames.dose, frames.shape)[usable]
    variance = max(float(np.sum(expected * (1.0 + eta))), 1.0)
    centred = np.linspace(-1.0, 1.0, frames.frames)
    slope = (centred @ electrons) / np.sqrt(variance * np.sum(centred**2))
    spread = (np.var(electrons) / variance - 1.0) * np.sqrt(0.5 * frames.frames)
    return bool(abs(slope) > ROUGHLY or spread > ROUGHLY)


def _notes(frames: Frames) -> Iterator[str]:
    if frames.frames == 1:
        dose = float(np.mean(total_dose(frames)))
        eta = max(float(np.nanmean(conventional_yield(frames).image)), 1e-3)
        yield "a single frame: its counts are taken under the law of the total. " + one_frame_note(dose, eta)
    if frames.law is None and frames.frames >= TRENDED and _changes(frames):
        from recon.imaging.yield_trend import yield_trend

        trend = yield_trend(frames)
        if trend.p_value < UNLIKELY:
            yield trend.note
    if frames.dropped:
        listed = ", ".join(str(f) for f in frames.dropped)
        yield f"frames without finite readings were dropped: {listed}"
    if frames.saturated > SATURATED:
        yield f"{100.0 * frames.saturated:.2g} % of readings are at the ceiling, taken as at least that"
