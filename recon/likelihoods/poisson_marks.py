"""Electrons released by primaries that nobody counts: the yield, from frames of a dwell."""

from __future__ import annotations

import math
from functools import cached_property

import numpy as np
from scipy.interpolate import CubicSpline

from recon.acquisition.frames import Frames
from recon.errors import InputError
from recon.likelihoods import neyman_kernels as kernels
from recon.likelihoods.contract import Interval
from recon.likelihoods.frame_tally import FrameTally, tally
from recon.likelihoods.inputs import drawing_image
from recon.likelihoods.marks import Marks
from recon.likelihoods.neyman import coefficients
from recon.likelihoods.neyman_estimate import best_yield
from recon.likelihoods.neyman_information import line_classes, stack_information
from recon.likelihoods.poisson import Poisson
from recon.validation import NONNEGATIVE, refuse

_FEW = 4096  # pixels below which a spline does not pay
_NODES = 64  # of it, for a factor e of yield


class PoissonMarks(Marks):
    """Half the deviance of frames of electron counts, as a function of the yield eta.

        value(eta) = sum over pixels and frames of  log P(y; lam, best) - log P(y; lam, eta)

    P is the law of Neyman (1939), Type A: a Poisson number of primaries with mean lam, the dose of a
    frame, each releasing a Poisson number of electrons with mean eta. best is the yield that fits
    the pixel's frames best. Not convex in eta.

    frames: the acquisition. What its counts say about each pixel is kept, not the counts: memory
        and time do not grow with the number of frames. Masked pixels contribute zero. If its dose
        differs from line to line, lam is that of the line: exact up to 64 different factors; where
        there are more, a line with electrons takes the mean of a class half a per cent wide.

    Raises InputError if a count is too large to be one of electrons, or if the frames hold readings.
    """

    def __init__(self, frames: Frames) -> None:
        if frames.law is not None:
            raise InputError("frames hold analog readings, of law=MarkLaw(...); give them to AnalogMarks.")
        self.shape = frames.shape
        self._dose = frames.dose
        self._has_data = np.ones(self.shape, bool) if frames.mask is None else frames.mask.copy()
        self._factors = None if frames.current is None else frames.factors
        self._tally: FrameTally = tally(frames.counts, self._has_data, self._factors)
        self._electrons = self._tally.electrons.reshape(self.shape)

    @property
    def domain(self) -> Interval:
        """eta > 0, or eta >= 0 if no electron was detected."""
        return Interval(0.0, np.inf, low_open=bool(self._electrons.any()))

    @property
    def electrons(self) -> float:
        """See `Marks.electrons`."""
        return float(self._electrons.sum(dtype=np.float64))

    @property
    def constant(self) -> float:
        """See `Likelihood.constant`."""
        return -float(np.sum(self._best_value))

    def estimate(self) -> np.ndarray:
        """Return the yield of greatest likelihood; the mean of the others where there is no data.

        With many faint frames this is the time-resolved estimate, which tells a primary that gave many
        electrons from many that gave one each.
        """
        image = self._best.astype(np.float32)
        image[~self._has_data] = image[self._has_data].mean()
        return image

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`; inf where x is negative, or zero with electrons detected."""
        eta = self._yields(x)
        out = np.zeros(self.shape)
        kernels.log_likelihood(eta, *self._data, out)
        return np.where(self._has_data & (np.asarray(x) < 0.0), np.inf, self._best_value - out)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """Return the expected primaries, given the electrons, less electrons / eta."""
        eta = self._yields(x)
        return self._primaries(eta)[0] - self._electrons_over(eta)

    def curvature(self, x: np.ndarray) -> np.ndarray:
        """Return electrons / eta^2 less the variance of the primaries, given the electrons."""
        eta = self._yields(x)
        return self._electrons_over(eta * eta) - self._primaries(eta)[1]

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """Return the Fisher information of all frames, one by one (see `neyman_information`)."""
        eta = self._yields(x)
        shown = self._has_data & np.isfinite(eta)
        out = np.where(self._has_data, np.nan, 0.0)
        if shown.any():
            out[shown] = self._information(np.where(shown, eta, eta[shown].min()))[shown]
        return out

    def _information(self, eta: np.ndarray) -> np.ndarray:
        """Return the Fisher information; of many pixels with the same dose, by a spline in log eta."""
        same = np.ptp(self._lam) == 0.0 and all(line is self._lines[0] for line in self._lines)
        low, high = float(eta.min()), float(eta.max())
        if not same or eta.size < _FEW or low <= 0.0 or low == high:
            return stack_information(eta, self._lam, self._lines)
        nodes = np.geomspace(low, high, max(33, math.ceil(_NODES * math.log(high / low))))
        dose = np.full((1, nodes.size), self._lam[0, 0])
        known = stack_information(nodes[None], dose, self._lines[:1])[0]
        return np.exp(CubicSpline(np.log(nodes), np.log(known))(np.log(eta)))

    def residuals(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`; positive where the likelihood rises with the yield."""
        return np.sign(-self.gradient(x)) * np.sqrt(2.0 * np.maximum(self.value_map(x), 0.0))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> PoissonMarks:
        """Return the same likelihood on as many frames drawn at the yield x >= 0."""
        eta = drawing_image(x, self.shape)
        if eta.min() < 0.0:
            refuse("the image", eta, eta < 0.0, NONNEGATIVE.words)
        eta = np.where(self._has_data, eta, 0.0)
        rng = np.random.default_rng(seed)
        frames = []
        for f in range(self._tally.frames):
            dose = self._dose if self._factors is None else self._dose * self._factors[f][:, None]
            electrons = rng.poisson(rng.poisson(dose, self.shape) * eta)
            frames.append(electrons.astype(np.min_scalar_type(electrons.max())))
        return PoissonMarks(Frames(np.stack(frames), self._dose, self._has_data, current=self._factors))

    def majorise(self, x: np.ndarray) -> Poisson:
        """Return the Poisson likelihood of the electrons, with the primaries expected at x for exposure.

        The step of expectation-maximisation: the primaries, were they known, would leave a Poisson
        problem. Raises InputError where x is not a finite number, 0 or more.
        """
        eta = self._yields(x)
        bad = self._has_data & ~np.isfinite(eta)
        if bad.any():
            refuse("the image", np.asarray(x), bad, NONNEGATIVE.words)
        # Where eta is so large that a pixel without electrons expects no primaries, float32 keeps a trace.
        mean = np.maximum(self._primaries(eta)[0], np.where(self._has_data, np.finfo(np.float32).tiny, 0.0))
        return Poisson.from_arrays(
            self._electrons.astype(np.float32), mean.astype(np.float32), has_data=self._has_data
        )

    def _yields(self, x: np.ndarray) -> np.ndarray:
        """Return the image as float64, NaN in place of negative yields."""
        eta = np.ascontiguousarray(x, np.float64)
        if eta.shape != self.shape:
            raise InputError(
                f"the image has shape {eta.shape} but the data has {self.shape}; make them equal."
            )
        return np.where(eta < 0.0, np.nan, eta)

    @cached_property
    def _lam(self) -> np.ndarray:
        """The dose, (rows, columns), or (1, columns) where it is the same in every pixel."""
        if isinstance(self._dose, float):
            return np.full((1, self.shape[1]), self._dose)
        return self._dose.astype(np.float64)

    @property
    def _data(self) -> tuple:
        """What the kernels take after the image."""
        return self._lam, self._has_data, *self._tally.parts, coefficients()

    @cached_property
    def _lines(self) -> list[tuple[np.ndarray, np.ndarray]]:
        """The factors of the dose of every row and how often they occur."""
        if self._factors is None:
            return [(np.ones(1), np.full(1, float(self._tally.frames)))] * self.shape[0]
        return line_classes(self._factors)

    @cached_property
    def _best(self) -> np.ndarray:
        """The yield of greatest likelihood; zero where there is no data."""
        return best_yield(self._lam, self._has_data, self._tally)

    @cached_property
    def _best_value(self) -> np.ndarray:
        """The log likelihood at the best yield; zero where there is no data."""
        out = np.zeros(self.shape)
        kernels.log_likelihood(self._best, *self._data, out)
        return out

    def _primaries(self, eta: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return the mean and the variance of the primaries given the electrons, zero without data."""
        mean, variance = np.zeros(self.shape), np.zeros(self.shape)
        kernels.primaries(eta, *self._data, mean, variance)
        return mean, variance

    def _electrons_over(self, divisor: np.ndarray) -> np.ndarray:
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.divide(self._electrons, divisor, out=np.zeros(self.shape), where=self._electrons > 0)
