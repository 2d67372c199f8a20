"""Whether the yield, or the beam, changed during the dwell: charging, contamination, a drifting source."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.stats import chi2

from recon.acquisition import Frames
from recon.errors import InputError
from recon.likelihoods.neyman import coefficients
from recon.likelihoods.poisson_marks import PoissonMarks
from recon.problem import Problem, default_prior
from recon.solvers import solve
from recon.validation import NONNEGATIVE, number_or_map
from recon.weights import weigh

DOUBT = 0.01  # p value below which constancy is denied
SURE = 3.0  # standard errors by which a cause must show


@dataclass(frozen=True)
class YieldTrend:
    """How the electrons of a frame changed over the dwell.

    change: relative change of the electrons a frame, from the first frame to the last, along a straight
        line, over their mean; factors of the dose that are recorded are allowed for.
    standard_error: of change.
    p_value: of constancy: the chance that a steady dwell shows as much, as a trend or as any other
        variation from frame to frame.
    yield_change, yield_error: the part of the yield (electrons per primary), and its standard error.
    current_change, current_error: the part of the beam's current (primaries).
    cause: "none", "yield", "current", "both", "uneven" (frames vary, but along no line) or "unknown" (a trend
        whose cause the data do not tell).
    note: the same in a sentence.
    """

    change: float
    standard_error: float
    p_value: float
    yield_change: float
    yield_error: float
    current_change: float
    current_error: float
    cause: str
    note: str


def yield_trend(frames: Frames, result_image: ArrayLike | None = None) -> YieldTrend:
    """Compare the electrons of every frame with what a steady yield gives.

    Under the law of Neyman (1939), Type A, the electrons T of a frame have the mean sum of lam eta and the
    variance sum of lam eta (1 + eta) over its pixels. The slope of T along the frames gives the change; the
    statistic of the slope and that of what is left (chi square with frames - 2 degrees of freedom) give
    the p value, twice the smaller of theirs. The cause comes from a step of Fisher scoring from no change, in
    the logarithms of the dose and of the yield: the frames in which pixels stay empty count the primaries,
    the electrons of the others measure the yield.

    frames: counts, two frames or more. result_image: yields (rows, columns); None = one reconstructed here.

    Raises InputError for readings, for a single frame and where there are no electrons.
    """
    if frames.law is not None:
        raise InputError("frames hold analog readings, of law=MarkLaw(...); give counts of electrons.")
    if frames.frames < 2:
        raise InputError("frames holds one frame; a change shows in two or more.")
    usable = np.ones(frames.shape, bool) if frames.mask is None else frames.mask
    totals = np.array([frame[usable].sum(dtype=np.float64) for frame in frames.counts])
    if not totals.any():
        raise InputError("counts holds no electron in a usable pixel; nothing can be said of the yield.")
    if result_image is None:
        likelihood = PoissonMarks(frames)
        problem = Problem(likelihood, weigh(default_prior(), likelihood))
        eta = solve(problem, tolerance=1e-3).image.astype(np.float64)
    else:
        eta = np.broadcast_to(
            number_or_map(result_image, "result_image", frames.shape, NONNEGATIVE), frames.shape
        )
        eta = eta.astype(np.float64)
    eta = np.maximum(eta, 1e-3 * eta[usable].mean())
    dose = np.broadcast_to(np.asarray(frames.dose, np.float64), frames.shape)
    factors = frames.factors.astype(np.float64)
    mean = factors @ np.sum(dose * eta * usable, axis=1)
    variance = factors @ np.sum(dose * eta * (1.0 + eta) * usable, axis=1)
    scale = totals.sum() / mean.sum()
    mean, variance = scale * mean, scale * variance

    weight = mean**2 / variance
    time = np.linspace(-0.5, 0.5, frames.frames)
    time -= np.sum(weight * time) / np.sum(weight)
    excess = totals / mean - 1.0
    information = np.sum(weight * time**2)
    change = float(np.sum(weight * time * excess) / information)
    error = float(information**-0.5)
    line = (change / error) ** 2
    rest = float(np.sum(weight * excess**2)) - line
    p_line = float(chi2.sf(line, 1))
    p_rest = float(chi2.sf(rest, frames.frames - 2)) if frames.frames > 2 else 1.0
    p_value = min(1.0, 2.0 * min(p_line, p_rest))

    parts, errors = _parts(frames, eta, dose, usable, factors, time)
    cause = _cause(p_value, p_line, p_rest, parts / errors)
    found = change, error, p_value, parts[1], errors[1], parts[0], errors[0]
    return YieldTrend(*map(float, found), cause, _words(cause, change, error, p_value, parts, errors))


def _parts(
    frames: Frames, eta: NDArray, dose: NDArray, usable: NDArray, factors: NDArray, time: NDArray
) -> tuple[NDArray, NDArray]:
    """Return the relative changes of dose and yield over the dwell, and their standard errors."""
    from recon.imaging.beam_current_kernels import line_scores

    score, information = np.empty((*factors.shape, 2)), np.empty((*factors.shape, 3))
    settings = np.ascontiguousarray(dose), usable, factors, coefficients()
    line_scores(frames.counts, eta, *settings, score, information)
    gradient = np.einsum("f,fik->k", time, score)
    uu, uv, vv = np.einsum("f,fik->k", time**2, information)
    covariance = np.linalg.pinv(np.array([[uu, uv], [uv, vv]]), hermitian=True)
    return covariance @ gradient, np.sqrt(np.maximum(np.diag(covariance), 1e-300))


def _cause(p_value: float, p_line: float, p_rest: float, pulls: NDArray) -> str:
    if p_value >= DOUBT:
        return "none"
    if p_line > p_rest and p_line >= DOUBT:
        return "uneven"
    current, yields = np.abs(pulls) > SURE
    if current and yields:
        return "both"
    return "current" if current else "yield" if yields else "unknown"


def _words(cause: str, change: float, error: float, p_value: float, parts: NDArray, errors: NDArray) -> str:
    size = f"{100.0 * change:+.1f} % (standard error {100.0 * error:.1f} %)"
    if cause == "none":
        return f"The electrons of a frame change by {size} over the dwell: mere chance (p = {p_value:.2g})."
    if cause == "uneven":
        return (
            f"The frames differ by more than chance (p = {p_value:.2g}), but along no line over the dwell:"
            " look for jumps of the beam or the stage."
        )
    begin = f"The electrons of a frame change by {size} over the dwell, not by chance (p = {p_value:.2g}): "
    current = f"{100.0 * parts[0]:+.1f} % ({100.0 * errors[0]:.1f} %) in the current"
    yields = f"{100.0 * parts[1]:+.1f} % ({100.0 * errors[1]:.1f} %) in the yield"
    tail = {
        "yield": "the yield changes, as by charging or contamination.",
        "current": "the beam's current changes, the yield does not show it.",
        "both": "the beam's current and the yield change.",
        "unknown": "whether by the beam's current or by the yield, these frames do not tell.",
    }
    return f"{begin}{current}, {yields}; {tail[cause]}"
