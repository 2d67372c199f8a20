"""Electrons released by primaries that nobody counts, read by an analog chain: the yield."""

from __future__ import annotations

from functools import cached_property

import numpy as np

from recon.acquisition.frames import Frames
from recon.errors import InputError
from recon.likelihoods.contract import Interval
from recon.likelihoods.frame_tally import tally
from recon.likelihoods.inputs import drawing_image
from recon.likelihoods.mark_table import classify
from recon.likelihoods.marks import Marks
from recon.likelihoods.neyman import coefficients
from recon.likelihoods.neyman_information import line_classes, stack_information
from recon.likelihoods.poisson import Poisson
from recon.validation import BLOCK, NONNEGATIVE, refuse

_LEAST = 1e-8  # yields below it have its derivatives


class AnalogMarks(Marks):
    """Half the deviance of frames of analog readings, as a function of the yield eta.

        value(eta) = sum over pixels and frames of  log P(V; lam, best) - log P(V; lam, eta)
        P(V; lam, eta) = sum over N of  P(N; lam, eta) f(V | N)

    with P(N) the law of Neyman (1939), Type A, of the electrons of a frame, lam its dose, and f the law of
    a reading, `MarkLaw`: Gaussian, of mean offset + gain N and variance variance N + noise^2. Readings are
    taken to be in the class they are in, an interval a quarter of the noise wide, and f is the probability
    of the class; a saturated reading is one at or above the ceiling. best is the yield that fits the
    pixel's readings best. Not convex in eta.

    frames: the acquisition, with a `law`. What its readings say about each pixel is kept, the number of
        times that each class occurs. Masked pixels contribute zero. If the dose differs from line to line,
        lam is that of the line, as in `PoissonMarks`.

    Yields below 1e-8 have the derivatives of that yield. Raises InputError if there is no law, or if a
    reading is far beyond what electrons and noise explain.
    """

    def __init__(self, frames: Frames) -> None:
        if frames.law is None:
            raise InputError("frames hold counts, without a law; give them to PoissonMarks.")
        self.shape = frames.shape
        self._dose, self._law, self._frames = frames.dose, frames.law, frames.frames
        self._has_data = np.ones(self.shape, bool) if frames.mask is None else frames.mask.copy()
        self._factors = None if frames.current is None else frames.factors
        codes, self._marks = classify(frames.counts, frames.law)
        self._tally = tally(codes, self._has_data, self._factors)

    @property
    def domain(self) -> Interval:
        """eta >= 0: noise alone can explain any reading, if badly."""
        return Interval(0.0, np.inf)

    @property
    def electrons(self) -> float:
        """See `Marks.electrons`; by the best yields of the pixels."""
        return float(np.sum(self._best * self._dose, where=self._has_data)) * self._frames

    @property
    def constant(self) -> float:
        """See `Likelihood.constant`; of the probabilities of classes of readings."""
        return -float(np.sum(self._best_value))

    def estimate(self) -> np.ndarray:
        """Return the yield of greatest likelihood; the mean of the others where there is no data."""
        image = self._best.astype(np.float32)
        image[~self._has_data] = image[self._has_data].mean()
        return image

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`; inf where x is negative."""
        eta = self._yields(x)
        value = self._best_value - self._sums(eta)[0]
        return np.where(self._has_data & np.isnan(eta), np.where(np.isnan(x), np.nan, np.inf), value)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """Return the expected primaries less the expected electrons / eta, given the readings."""
        return -self._sums(self._lifted(x))[1]

    def curvature(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.curvature`; it may be negative."""
        return -self._sums(self._lifted(x))[2]

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """Return the Fisher information of all readings, one by one (see `analog_marks_information`)."""
        from recon.likelihoods.analog_marks_information import mark_shares

        eta = self._lifted(x)
        shown = self._has_data & np.isfinite(eta)
        out = np.where(self._has_data, np.nan, 0.0)
        if shown.any():
            inside = np.where(shown, eta, eta[shown].min())
            shares = mark_shares(self._law)
            out[shown] = stack_information(inside, self._lam, self._lines, shares)[shown]
        return out

    def residuals(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`; positive where the likelihood rises with the yield."""
        return np.sign(-self.gradient(x)) * np.sqrt(2.0 * np.maximum(self.value_map(x), 0.0))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> AnalogMarks:
        """Return the same likelihood on as many frames of readings drawn at the yield x >= 0."""
        eta = drawing_image(x, self.shape)
        if eta.min() < 0.0:
            refuse("the image", eta, eta < 0.0, NONNEGATIVE.words)
        eta = np.where(self._has_data, eta, 0.0)
        rng, law = np.random.default_rng(seed), self._law
        frames = np.empty((self._frames, *self.shape), np.float32)
        block = max(1, BLOCK // eta.size)
        for begin in range(0, self._frames, block):
            out = frames[begin : begin + block]
            factors = 1.0 if self._factors is None else self._factors[begin : begin + block, :, None]
            electrons = rng.poisson(rng.poisson(self._dose * factors, out.shape) * eta)
            spread = np.sqrt(law.variance * electrons + law.noise**2)
            out[...] = law.offset + law.gain * electrons + spread * rng.standard_normal(out.shape)
        drawn = Frames(frames, self._dose, self._has_data, law=law, current=self._factors)
        return AnalogMarks(drawn)

    def majorise(self, x: np.ndarray) -> Poisson:
        """Return the Poisson likelihood of the electrons, with the primaries for exposure, expected at x.

        The step of expectation-maximisation: if primaries M and electrons N were known, the log
        likelihood would be N log eta - M eta, and a constant. Raises InputError where x is not a finite
        number, 0 or more; a yield below 1e-8 is raised to that.
        """
        eta = self._lifted(x)
        bad = self._has_data & ~np.isfinite(eta)
        if bad.any():
            refuse("the image", np.asarray(x), bad, NONNEGATIVE.words)
        _, first, _, primaries = self._sums(eta)
        electrons = eta * (first + primaries)
        electrons[~(electrons > 0.01 * _LEAST * np.maximum(primaries, 1.0))] = 0.0  # less than rounding
        primaries = np.maximum(primaries, np.where(self._has_data, np.finfo(np.float32).tiny, 0.0))
        return Poisson.from_arrays(
            electrons.astype(np.float32), primaries.astype(np.float32), has_data=self._has_data
        )

    def _yields(self, x: np.ndarray) -> np.ndarray:
        """Return the image as float64, NaN in place of negative yields."""
        eta = np.ascontiguousarray(x, np.float64)
        if eta.shape != self.shape:
            raise InputError(
                f"the image has shape {eta.shape} but the data has {self.shape}; make them equal."
            )
        return np.where(eta < 0.0, np.nan, eta)

    def _lifted(self, x: np.ndarray) -> np.ndarray:
        """Return the image as float64, at least 1e-8, NaN in place of negative yields."""
        return np.maximum(self._yields(x), _LEAST)

    @cached_property
    def _lam(self) -> np.ndarray:
        """The dose, (rows, columns), or (1, columns) where it is the same in every pixel."""
        if isinstance(self._dose, float):
            return np.full((1, self.shape[1]), self._dose)
        return self._dose.astype(np.float64)

    @cached_property
    def _lines(self) -> list[tuple[np.ndarray, np.ndarray]]:
        """The factors of the dose of every row and how often they occur."""
        if self._factors is None:
            return [(np.ones(1), np.full(1, float(self._frames)))] * self.shape[0]
        return line_classes(self._factors)

    def _sums(self, eta: np.ndarray) -> np.ndarray:
        """Return the log likelihood, two derivatives and the expected primaries, zero without data."""
        from recon.likelihoods.analog_marks_kernels import sums

        out = np.zeros((4, *self.shape))
        marks = self._marks
        sums(
            eta, self._lam, self._has_data, *self._tally.parts, marks.parts, marks.most, coefficients(), out
        )  # fmt: skip
        return out

    @cached_property
    def _best(self) -> np.ndarray:
        """The yield of greatest likelihood; zero where there is no data."""
        from recon.likelihoods.analog_marks_estimate import best_yield

        ones = np.ones(self.shape[0])
        factor = ones if self._factors is None else self._factors.mean(axis=0, dtype=np.float64)
        return best_yield(self._lam, self._has_data, self._tally, self._marks, factor)

    @cached_property
    def _best_value(self) -> np.ndarray:
        """The log likelihood at the best yield; zero where there is no data."""
        return self._sums(self._best)[0]
