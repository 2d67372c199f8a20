"""The current of the beam, line by line, from the frames alone.

A line of a frame has the dose  dose * exp(s),  s = a(line) + c(frame) + b(line and frame), three Gaussian
effects of mean zero. Given the yield image eta, they maximise

    sum of log P(counts; dose exp(s), eta exp(e))  -  sum of a^2 / 2A + b^2 / 2B + c^2 / 2C + e^2 / 2E

by Fisher scoring, P being the law of Neyman (1939), Type A. e(line) is what the image has wrong in a whole
line, 5 % rms (the root of E), so that edges blurred by the prior do not become stripes. The variances A, B
and C come from the data, by expectation-maximisation (Dempster, Laird and Rubin 1977; empirical Bayes,
Morris 1983): a line without information keeps the factor 1. Given s, the image is reconstructed under the
prior. The two alternate.

Faint frames tell dose from yield by themselves: the frames in which a pixel shows something count the
primaries, whatever the yield, and the electrons of such a frame measure the yield.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from recon.acquisition import Frames
from recon.errors import InputError
from recon.likelihoods.neyman import coefficients
from recon.likelihoods.poisson_marks import PoissonMarks
from recon.problem import Prior, Problem, Sum, default_prior
from recon.solvers import solve
from recon.weights import weigh

ROUNDS = 4
_CLOSE = 2e-3  # tolerance of the solves in between
_STEPS = 12  # of expectation-maximisation in a round
_SURE = 3.0  # standard errors by which a change from frame to frame must show
_LINE_ERROR = 0.05  # relative error of the yields of a whole line, as allowed for
_ENOUGH = 0.25  # share of the information on the dose that must be left where the yield is not known
_SMALLEST = 1e-10  # variance of a logarithm that counts as none


@dataclass(frozen=True, eq=False)
class CurrentEstimate:
    """Factors of the dose of every line.

    factors: (frames, rows) float32, mean 1 over the dwell; what the frames recorded is contained. For
        `Frames(current=...)`.
    uncertainty: (frames, rows) float32, their standard uncertainty given the yield.
    rms: (3,) the rms of the logarithm that the data show: of lines, of frames, of single lines of frames.
    identified_by: "frames without electrons" or "nothing": what told the dose of a line from its yield.
    note: the same in a sentence or two.
    """

    factors: NDArray[np.float32]
    uncertainty: NDArray[np.float32]
    rms: NDArray[np.float64]
    identified_by: str
    note: str


def estimate_current(
    frames: Frames, prior: Prior | Sum | None = None, rounds: int = ROUNDS
) -> CurrentEstimate:
    """Estimate the dose factors of every line and frame together with the yield.

    The mean factor is set to 1: the dose is taken for that of the dwell. Where frames are bright, only the
    product of a line's factor and its yield is seen, and the prior cannot separate the two: edges along a
    line would pass for stripes. A factor that a line has in all frames is then left at 1.

    The error left is that of counting primaries: with N of them in a line over the dwell, 1 / sqrt(N) or
    a little more; a single line of a frame, with few, keeps most of its change unseen. Measured, 10 % rms
    that all frames share, 128 frames of dose 0.125, yields 1 to 5: 2.6 % left with lines of 128 pixels,
    1.4 to 1.6 % with 512.

    frames: counts. prior: of the yield image; None = total variation of a weight chosen from the data.
    rounds: how often image and factors are updated in turn.

    Raises InputError for readings, and where there are no electrons.
    """
    if frames.law is not None:
        raise InputError("frames hold analog readings, of law=MarkLaw(...); give counts of electrons.")
    usable = np.ones(frames.shape, bool) if frames.mask is None else frames.mask
    if not frames.counts.max(axis=0)[usable].any():
        raise InputError("counts holds no electron in a usable pixel; the current cannot be seen in it.")
    dose = (
        np.full((1, frames.shape[1]), frames.dose)
        if isinstance(frames.dose, float)
        else frames.dose.astype(np.float64)
    )
    recorded = frames.factors.astype(np.float64)
    effects = _Effects(frames.frames, frames.shape[0])
    seen = _Seen(frames, dose, usable, recorded)
    terms = image = None
    for _ in range(rounds):
        factors = effects.normalised(recorded)
        likelihood = PoissonMarks(replace(frames, current=factors.astype(np.float32)))
        terms = terms or weigh(default_prior() if prior is None else prior, likelihood)
        image = solve(Problem(likelihood, terms), tolerance=_CLOSE, start=image).image
        yields = np.maximum(image.astype(np.float64), 1e-3)
        for _ in range(2):
            seen.look(yields, effects)
            seen.fit(effects)
    factors = effects.normalised(recorded)
    return CurrentEstimate(
        factors.astype(np.float32),
        (factors * effects.uncertainty()).astype(np.float32),
        np.sqrt(effects.variances),
        *_words(effects, seen.share),
    )


class _Effects:
    """The logarithms of the factors: of lines, of frames, of single lines of frames; and their variances."""

    def __init__(self, frames: int, rows: int) -> None:
        self.lines, self.frames = np.zeros(rows), np.zeros(frames)
        self.single = np.zeros((frames, rows))
        self.variances = np.array([0.01, 0.01, 0.01])
        self.errors = [np.zeros(rows), np.zeros(frames), np.zeros((frames, rows))]

    def logarithms(self) -> NDArray[np.float64]:
        """Return s, (frames, rows)."""
        return self.lines + self.frames[:, None] + self.single

    def normalised(self, recorded: NDArray) -> NDArray[np.float64]:
        """Return the expected factors, recorded ones included, at mean 1."""
        # the mean of exp(b), not exp of its mean: many shrunk factors add up to a line's dose
        factors = recorded * np.exp(self.logarithms() + 0.5 * self.errors[2])
        return factors / factors.mean()

    def uncertainty(self) -> NDArray[np.float64]:
        """Return the standard uncertainty of s."""
        return np.sqrt(self.errors[0] + self.errors[1][:, None] + self.errors[2])

    def fit(self, seen: NDArray, weight: NDArray) -> None:
        """Fit effects and variances to `seen` = s + Gaussian error of variance 1 / weight."""
        # changes of frames and of single lines must show beyond the noise, else they are none
        rest = seen - self.lines
        every = weight.sum(axis=1)
        if not _shows(np.sum(weight * rest, axis=1) / every, every):
            self.variances[1] = 0.0
        if not _shows(rest - self.frames[:, None], weight):
            self.variances[2] = 0.0
        for _ in range(_STEPS):
            a, c, b = np.maximum(self.variances, _SMALLEST)
            w = weight / (1.0 + b * weight)
            total = w.sum(axis=0) + 1.0 / a
            self.lines = np.sum(w * (seen - self.frames[:, None]), axis=0) / total
            every = w.sum(axis=1) + 1.0 / c
            self.frames = np.sum(w * (seen - self.lines), axis=1) / every
            self.single = b * w * (seen - self.lines - self.frames[:, None])
            self.errors = [1.0 / total, 1.0 / every, 1.0 / (weight + 1.0 / b)]
            # the mean factor is 1
            self.lines -= self.lines.mean()
            self.frames -= self.frames.mean()
            parts = (self.lines, self.frames, self.single)
            new = [float(np.mean(x**2 + v)) for x, v in zip(parts, self.errors, strict=True)]
            self.variances = np.where(self.variances > _SMALLEST, new, 0.0)


def _shows(values: NDArray, weight: NDArray) -> bool:
    """Whether values of mean zero vary beyond their variance 1 / weight (score test of overdispersion)."""
    excess = np.sum(weight**2 * values**2 - weight)
    return bool(excess > _SURE * np.sqrt(2.0 * np.sum(weight**2)))


class _Seen:
    """What the lines of the frames say about their dose and yield: see `beam_current_kernels`."""

    def __init__(self, frames: Frames, dose: NDArray, usable: NDArray, recorded: NDArray) -> None:
        self._given = frames.counts, dose, usable
        self._recorded = recorded
        self.score = np.empty((*recorded.shape, 2))
        self.information = np.empty((*recorded.shape, 3))

    def look(self, yields: NDArray, effects: _Effects) -> None:
        """Find scores and information at the yields and effects."""
        from recon.imaging.beam_current_kernels import line_scores

        counts, dose, usable = self._given
        self._factors = effects.normalised(self._recorded)
        line_scores(counts, yields, dose, usable, self._factors, coefficients(), self.score, self.information)

    def fit(self, effects: _Effects) -> None:
        """Improve the effects; the yields of a line are known but for a factor of its own."""
        known = self.share >= _ENOUGH
        # a line's information summed over frames, spread as its dose is: that of one frame can be negative
        uu, uv, vv = self.information.sum(axis=0).T
        blurred = known * uv / (np.maximum(vv, 0.0) + 1.0 / _LINE_ERROR**2)
        information = np.maximum(uu - uv * blurred, 1e-12) * (self._factors / self._factors.sum(axis=0))
        score = self.score[..., 0] - blurred * self.score[..., 1]
        seen = np.log(self._factors / self._recorded) + score / information
        if not known:  # what a line has in all frames is taken for its yield
            seen -= np.sum(information * seen, axis=0) / np.sum(information, axis=0)
            effects.variances[0] = 0.0
        effects.fit(seen, information)

    @property
    def share(self) -> float:
        """The share of the information on the dose that is left where the yield is not known."""
        uu, uv, vv = self.information.sum(axis=(0, 1))
        return float(np.clip(1.0 - uv * uv / max(uu * vv, 1e-300), 0.0, 1.0))


def _words(effects: _Effects, share: float) -> tuple[str, str]:
    """Return what identifies the factors, and the note."""
    lines, every, single = 100.0 * np.sqrt(effects.variances)
    found = f"The current changes by {lines:.1f} % rms from line to line, {every:.1f} % from frame to frame"
    found += f", {single:.1f} % from line to line of a frame." if single > 0.0 else "."
    always = " Its mean over the dwell is not seen: it is set to 1."
    if share >= _ENOUGH:
        return "frames without electrons", (
            f"{found}{always} The number of frames without electrons tells the dose of a line from its yield."
        )
    return "nothing", (
        f"{found}{always} The frames are too bright to tell the dose of a line from its yield: a factor that"
        " a line has in every frame is left at 1. More, fainter frames of the same dwell would show it."
    )
