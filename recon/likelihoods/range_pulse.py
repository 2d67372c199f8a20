"""The pulse as a smooth density of range, tabulated for compiled kernels.

A tag at time t is a signal from range z with density p(y - z) per metre, y being the range from which an
echo arrives at t. p is periodic with the unambiguous range; where the pulse, or the interval of a coarse
clock, is so long that neighbouring periods overlap, the table holds their sum.

The table is the pulse as masses on a fine grid, convolved with a Gaussian and averaged over the interval:

- a Gaussian pulse is one mass and its own Gaussian, hence exact;
- a sampled pulse is smoothed by a Gaussian a tenth as wide as its core, which adds 1 % to the variance of
  a Gaussian. The straight lines between samples have corners, and steps at their ends, where the
  likelihood of depth would have no curvature, and majorise-minimise nothing to hold on to.

Between knots log p is the polynomial of degree 5 that takes the exact log p and its first two
derivatives at both ends (for a Gaussian pulse it is exact throughout).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from scipy.interpolate import CubicSpline
from scipy.special import ndtr

from recon.acquisition.pulses import GaussianPulse, SampledPulse
from recon.acquisition.time_tags import SPEED_OF_LIGHT
from recon.errors import InputError

if TYPE_CHECKING:
    from recon.acquisition.time_tags import TimeTags

KNOTS = 8  # knots in the rms of the Gaussian
REACH = 12.0  # rms of the Gaussian to which the table extends; exp(-REACH^2 / 2) is below any background
SMOOTHING = 0.1  # rms of the Gaussian over that of a sampled pulse's core
EMPTY = 1e-35  # of the peak; a density below it is taken as this
LARGEST = 1 << 20  # knots


@dataclass(frozen=True, eq=False)
class RangePulse:
    """p(u), u in metres from `low` to `low + step * len(pieces)`, zero elsewhere within the period.

    pieces: (cells, 6), coefficients of log p(low + step (cell + v)) in powers of v, 0 <= v < 1; p in 1/m.
    period: the unambiguous range, m.
    interval: width in m of the interval a tag stands for; 0 = exact tags.
    resolution: rms in m of the finest detail of p.
    mode: where p is largest, m, to within a step.
    core: m; the rms of the Gaussian whose square has the same integral.
    log_concave: whether log p is concave with -(log p)'' <= 1 / resolution^2.
    """

    low: float
    step: float
    pieces: np.ndarray
    period: float
    interval: float
    resolution: float
    mode: float
    core: float
    log_concave: bool

    @property
    def knots(self) -> np.ndarray:
        """Where the pieces start, m."""
        return self.low + self.step * np.arange(len(self.pieces))

    def density(self, u: np.ndarray) -> np.ndarray:
        """Return p at any u (m), 1/m."""
        u = np.asarray(u, np.float64)
        x = (u - self.low - self.period * np.floor((u - self.low) / self.period)) / self.step
        cell = np.minimum(x.astype(np.intp), len(self.pieces) - 1)
        v = x - cell
        logarithm = np.zeros_like(x)
        for power in range(5, -1, -1):
            logarithm = logarithm * v + self.pieces[cell, power]
        return np.exp(np.where(v <= 1.0, logarithm, -np.inf))

    def cumulative(self, u: np.ndarray) -> np.ndarray:
        """Return the integral of p from `low` to any u (m); a period further on it is 1 more."""
        u = np.asarray(u, np.float64)
        turns = np.floor((u - self.low) / self.period)
        x = (u - self.low - self.period * turns) / self.step
        cell = np.minimum(x.astype(np.intp), len(self.shares) - 1)
        v = np.minimum(x - cell, 1.0)
        share = np.zeros_like(x)
        for power in range(5, -1, -1):
            share = share * v + self.shares[cell, power]
        return turns + share

    @cached_property
    def shares(self) -> np.ndarray:
        """The integral of p from `low`, as `pieces` gives log p; Gauss-Legendre from knot to knot."""
        powers = np.arange(6)
        nodes, weights = np.polynomial.legendre.leggauss(8)
        logarithm = self.pieces @ (0.5 + 0.5 * nodes) ** powers[:, None]
        share = np.concatenate([[0.0], np.cumsum(np.exp(logarithm) @ weights)])
        p, slope = self._at_knots
        return _pieces(np.array([share / share[-1], p, slope]), self.step)

    @cached_property
    def turning(self) -> float:
        """An upper bound of the integral of |p''| over a period, 1/m^2."""
        slope = self._at_knots[1]  # its largest values lie between knots, by less than a hundredth
        return 1.01 * float(np.sum(np.abs(np.diff(slope, append=slope[0]))))

    @property
    def _at_knots(self) -> tuple[np.ndarray, np.ndarray]:
        """p and p' at every knot, the last included."""
        last = self.pieces[-1]
        p = np.exp(np.append(self.pieces[:, 0], last.sum()))
        return p, p * np.append(self.pieces[:, 1], np.arange(6) @ last) / self.step

    def information(self, noise: np.ndarray) -> np.ndarray:
        """Return the Fisher information on depth, 1/m^2, of an exact tag over background of density `noise`.

        It is the integral of p'^2 / (p + noise), over 1 + noise period (Bar-David 1969), by the
        trapezoid rule, which is exact for so smooth a function; between nodes of noise, by a spline.
        """
        p, slope = np.exp(self.pieces[:, 0]), self.pieces[:, 1] / self.step
        least, most = float(noise.min()), float(noise.max())
        nodes = least * np.exp(np.arange(0.0, math.log(most / least) + 0.5, 0.125))
        each = [self.step * float(np.sum((p * slope) ** 2 / (p + n))) for n in nodes]
        spline = CubicSpline(np.log(nodes), np.log(each))
        return np.exp(spline(np.log(noise))) / (1.0 + noise * self.period)

    def sharpest(self, floor: np.ndarray) -> np.ndarray:
        """Return the largest -(log(p + c))'' over u, 1/m^2, for every floor c > 0 (1/m)."""
        p, slope = np.exp(self.pieces[:, 0]), self.pieces[:, 1] / self.step
        bend = 2.0 * self.pieces[:, 2] / self.step**2
        least = float(floor.min())
        node = (10.0 * np.log(floor / least)).astype(np.intp)  # the one below: a lower floor bends more
        floors = least * np.exp(0.1 * np.arange(node.max() + 1))
        share = (p / (p + c) for c in floors)
        largest = [float(np.max(-q * (bend + (1.0 - q) * slope**2))) for q in share]
        return 1.01 * np.asarray(largest)[node]


def range_pulse(tags: TimeTags) -> RangePulse:
    """Return the pulse of an acquisition as a density of range.

    Raises InputError if a sampled pulse is too long for its detail to be tabulated.
    """
    metres = SPEED_OF_LIGHT / (2.0 * tags.refractive_index)
    period = tags.unambiguous_range
    interval = 0.0 if tags.interval is None else metres * tags.interval
    if isinstance(tags.pulse, GaussianPulse):
        resolution = metres * tags.pulse.rms
        first, length = 0.0, 0.0
    else:
        resolution = SMOOTHING * metres * _core(tags.pulse)
        first = metres * tags.pulse.support[0]
        length = metres * tags.pulse.support[1] - first
    step = resolution / KNOTS
    whole = length + 2.0 * REACH * resolution + interval
    if whole > period:  # knots must then fall on each other from period to period
        step = period / (2 * math.ceil(period / (2.0 * step)))
    if whole > LARGEST * step:
        raise InputError(
            f"pulse spans {whole / resolution:.3g} times its finest detail; cut the samples of its tail to"
            " fewer than 60000 times."
        )
    masses, first = _masses(tags.pulse, metres, first, length, step)
    kernel = _kernel(resolution, interval, step)
    knots = np.array([np.convolve(masses, part) for part in kernel])
    low = first - step * (kernel.shape[1] // 2)
    if whole > period:
        knots = _folded(knots, round(period / step))
    pieces = _pieces(_logarithm(knots), step)
    p = np.exp(pieces[:, 0])
    core = 1.0 / (2.0 * math.sqrt(math.pi) * step * float(np.sum(p * p)))
    mode = low + step * int(np.argmax(p))
    return RangePulse(
        low, step, pieces, period, interval, resolution, mode, core, isinstance(tags.pulse, GaussianPulse)
    )


def _core(pulse: SampledPulse) -> float:
    """The rms (s) of the Gaussian whose squared density has the same integral as the pulse's."""
    density = pulse.density(pulse.times)
    left, right = density[:-1], density[1:]
    square = np.sum(np.diff(pulse.times) * (left * left + left * right + right * right)) / 3.0
    return float(1.0 / (2.0 * math.sqrt(math.pi) * square))


def _masses(
    pulse: GaussianPulse | SampledPulse, metres: float, first: float, length: float, step: float
) -> tuple[np.ndarray, float]:
    """Return the pulse before smoothing as masses, one a step, and the place of the first."""
    if isinstance(pulse, GaussianPulse):
        return np.ones(1), 0.0
    edges = first + step * np.arange(math.ceil(length / step) + 1)
    masses = np.maximum(np.diff(pulse.cumulative(edges / metres)), 0.0)
    return masses / masses.sum(), first + 0.5 * step


def _kernel(rms: float, interval: float, step: float) -> np.ndarray:
    """Return the Gaussian averaged over the interval, and its first two derivatives, at multiples of step."""
    half = math.ceil((REACH * rms + 0.5 * interval) / step)
    u = step * np.arange(-half, half + 1)

    def gaussian(x: np.ndarray) -> np.ndarray:
        return np.exp(-0.5 * (x / rms) ** 2) / (rms * math.sqrt(2.0 * math.pi))

    if interval == 0.0:
        p = gaussian(u)
        return np.array([p, -u / rms**2 * p, (u**2 / rms**2 - 1.0) / rms**2 * p])
    near, far = np.abs(u) - 0.5 * interval, np.abs(u) + 0.5 * interval
    share = ndtr(-near / rms) - ndtr(-far / rms)
    before, after = u - 0.5 * interval, u + 0.5 * interval
    slope = gaussian(after) - gaussian(before)
    bend = (before * gaussian(before) - after * gaussian(after)) / rms**2
    return np.array([share, slope, bend]) / interval


def _folded(knots: np.ndarray, cells: int) -> np.ndarray:
    """Return the knots of one period, all periods summed, and the first one again."""
    turns = -(-knots.shape[1] // cells)
    padded = np.zeros((3, turns * cells))
    padded[:, : knots.shape[1]] = knots
    once = padded.reshape(3, turns, cells).sum(axis=1)
    return np.concatenate([once, once[:, :1]], axis=1)


def _logarithm(knots: np.ndarray) -> np.ndarray:
    """Return log p and its first two derivatives, from p and its."""
    p, slope, bend = knots
    p = p + EMPTY * p.max()
    return np.array([np.log(p), slope / p, bend / p - (slope / p) ** 2])


def _pieces(knots: np.ndarray, step: float) -> np.ndarray:
    """Return the coefficients of the polynomials between knots (value, slope, bend)."""
    value, slope, half = knots[0], step * knots[1], 0.5 * step**2 * knots[2]
    rise = np.diff(value)
    a, b, c, d = slope[:-1], slope[1:], half[:-1], half[1:]
    return np.stack(
        [
            value[:-1],
            a,
            c,
            10.0 * rise - 6.0 * a - 4.0 * b - 3.0 * c + d,
            -15.0 * rise + 8.0 * a + 7.0 * b + 3.0 * c - 2.0 * d,
            6.0 * rise - 3.0 * a - 3.0 * b - c + d,
        ],
        axis=1,
    )
