"""Estimates of secondary-electron yield, pixel by pixel, to compare with each other and with images."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.acquisition.frames import Frames
from recon.errors import InputError
from recon.likelihoods.contract import Likelihood
from recon.validation import POSITIVE, number

_ROUNDS = 500  # the error falls by more than half in each, nearly always


@dataclass(frozen=True, eq=False)
class YieldEstimate:
    """A yield image and how sure each of its pixels is.

    image: (rows, columns) float64, electrons per primary; NaN in masked pixels.
    uncertainty: (rows, columns) float64, standard uncertainty of each pixel; NaN in masked pixels.
    """

    image: np.ndarray
    uncertainty: np.ndarray


def conventional_yield(frames: Frames) -> YieldEstimate:
    """Return the electrons of all frames over the dose of all frames.

    Of readings: the sum of (reading - offset) / gain over the dose; saturated readings count as the ceiling,
    so that bright pixels come out too dark. The variance of a count is dose eta (1 + eta), that of a sum
    of readings dose eta (1 + eta + variance / gain^2) + frames noise^2 / gain^2. The uncertainty is its
    root at the estimate, over the dose, with one electron at least.
    """
    dose, law = total_dose(frames), frames.law
    if law is None:
        electrons, spread, noise = frames.counts.sum(axis=0, dtype=np.float64), 0.0, 0.0
    else:
        total = frames.counts.sum(axis=0, dtype=np.float64)
        electrons = (total - frames.frames * law.offset) / law.gain
        spread, noise = law.variance / law.gain**2, frames.frames * (law.noise / law.gain) ** 2
    image = electrons / dose
    eta = np.maximum(electrons, 1.0) / dose
    return _estimate(frames, image, np.sqrt(dose * eta * (1.0 + eta + spread) + noise) / dose)


def primaries_seen_yield(frames: Frames) -> YieldEstimate:
    """Return the electrons over the primaries: those that were seen, and those expected to have gone unseen.

    eta = Y / (M + lam exp(-eta)), with Y the electrons, M the frames with electrons and lam the dose of
    all frames: in continuous time, where every primary has a frame of its own, the best estimate. A frame
    in which two primaries released electrons counts as one: at a dose per frame that is not small, M is
    too small and the estimate too large, by a share of dose (1 - exp(-eta))^2 / (2 (1 - eta exp(-eta)))
    for small doses. The largest root, if there are several. The uncertainty is that of continuous time,
    sqrt(eta / (lam (1 - eta exp(-eta)))), with one electron at least.

    Raises InputError for readings, in which noise and electrons look alike.
    """
    _require_counts(frames, "primaries_seen_yield")
    electrons = frames.counts.sum(axis=0, dtype=np.float64)
    hit, lam = np.count_nonzero(frames.counts, axis=0), total_dose(frames)
    return _estimate(frames, *primaries_seen(electrons, hit, lam))


def primaries_seen(electrons: np.ndarray, hit: np.ndarray, lam: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the yield and its uncertainty from electrons, frames with electrons and dose (arrays alike).

    The iteration eta <- Y / (M + lam exp(-eta)) from the largest yield possible, Y / M, only falls, to the
    largest root.
    """
    electrons, hit, lam = (np.asarray(values, np.float64) for values in (electrons, hit, lam))
    eta = electrons / np.maximum(hit, 1.0)
    for _ in range(_ROUNDS):
        before = eta
        eta = electrons / (hit + lam * np.exp(-eta))
        if np.all(before - eta <= 1e-13 * eta):
            break
    known = np.maximum(eta, 1.0 / lam)
    return eta, np.sqrt(known / (lam * (1.0 - known * np.exp(-known))))


def time_resolved_yield(frames: Frames) -> YieldEstimate:
    """Return the yield of greatest likelihood, frame by frame (`PoissonMarks`, or `AnalogMarks` of readings).

    The uncertainty is 1 / sqrt(Fisher information) at the estimate, with one electron at least.
    """
    return _of_likelihood(frames, _likelihood(frames))


def total_count_yield(frames: Frames) -> YieldEstimate:
    """Return the yield of greatest likelihood of the total count, under its Neyman law of the total dose.

    What could be known without frames. The uncertainty is as in `time_resolved_yield`.

    Raises InputError for readings, whose noise adds up: split them by frames.
    """
    _require_counts(frames, "total_count_yield")
    from recon.likelihoods.poisson_marks import PoissonMarks

    total = frames.counts.sum(axis=0, dtype=np.int64)[None]
    return _of_likelihood(frames, PoissonMarks(Frames(total, total_dose(frames), frames.mask)))


def one_frame_note(dose: float, eta: float) -> str:
    """Return what it costs to have the dwell of a pixel in frames of this dose, in words.

    The cost is the Fisher information per primary of very many faint frames, 1 / eta - exp(-eta), over that
    of frames of the dose; it tends to (1 + eta) (1 - eta exp(-eta)) at large doses.

    dose: primaries per frame, above 0; eta: yield, above 0. Raises InputError.
    """
    cost = cost_of_frames(dose, eta)
    return (
        f"At {dose:g} primaries a frame and a yield of {eta:g}, the same dose in many faint frames would "
        f"tell {cost:.3g} times as much: the variance of the yield would be {cost:.3g} times smaller."
    )


def cost_of_frames(dose: float, eta: float) -> float:
    """Return the ratio that `one_frame_note` states. Raises InputError."""
    from recon.likelihoods.neyman_information import counted_shares

    dose, eta = number(dose, "dose", POSITIVE), number(eta, "eta", POSITIVE)
    # 1 - eta exp(-eta) is the share in the faint limit, of what counted primaries would tell
    return float((1.0 - eta * np.exp(-eta)) / counted_shares(np.array([dose]), np.array([eta]))[0, 0])


def total_dose(frames: Frames) -> np.ndarray:
    """Return the primaries expected in all frames of every pixel, (rows, columns) float64."""
    lines = np.full(frames.shape[0], float(frames.frames))
    if frames.current is not None:
        lines = frames.factors.sum(axis=0, dtype=np.float64)
    return lines[:, None] * np.broadcast_to(np.asarray(frames.dose, np.float64), frames.shape)


def _likelihood(frames: Frames) -> Likelihood:
    if frames.law is not None:
        from recon.likelihoods.analog_marks import AnalogMarks

        return AnalogMarks(frames)
    from recon.likelihoods.poisson_marks import PoissonMarks

    return PoissonMarks(frames)


def _of_likelihood(frames: Frames, likelihood: Likelihood) -> YieldEstimate:
    """Return the estimate of a likelihood, with the uncertainty that its information leaves."""
    image = likelihood.estimate().astype(np.float64)
    known = np.maximum(image, 1.0 / total_dose(frames))
    with np.errstate(divide="ignore"):
        return _estimate(frames, image, 1.0 / np.sqrt(likelihood.fisher_information(known)))


def _estimate(frames: Frames, image: np.ndarray, uncertainty: np.ndarray) -> YieldEstimate:
    if frames.mask is not None:
        image, uncertainty = (np.where(frames.mask, values, np.nan) for values in (image, uncertainty))
    image.setflags(write=False)
    uncertainty.setflags(write=False)
    return YieldEstimate(image, uncertainty)


def _require_counts(frames: Frames, name: str) -> None:
    if frames.law is not None:
        raise InputError(
            f"frames hold analog readings, in which {name} cannot tell electrons; use time_resolved_yield."
        )
