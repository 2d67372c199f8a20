"""The time in which a pixel could record, exactly, from its own tags.

A detector with a dead time that photons do not prolong was blind at time t in exactly as many periods as
have a tag whose blind window covers t; a gate closes the rest of the period. So the number of periods in
which a pixel was awake,

    E(t) = gate(t) (trials - number of blind windows over t),

is known, and given it the tags are Poisson with rate E(t) r(t) (for one tag a period: Coates 1968). A
window runs from its tag for the dead time, over the end of the period into the next or, if the detector is
reset every period, to the end of the period at most. What a window covers beyond the pixel's last period
is left out of account. A window that starts at a tag known only to an interval covers in part: a pulse
averaged over the interval (`RangePulse`) takes account of it. The ends of a gate, and of windows that end
with the period, are blurred by the interval too, which shows where a pulse lies across them.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from recon.acquisition.time_tags import TimeTags
from recon.likelihoods.range_pulse import RangePulse


@dataclass(frozen=True, eq=False)
class LiveExposure:
    """E as a function of range y in m, periodic, pixel by pixel; between edges it is constant.

    trials: (rows, columns) float64, periods.
    edge, level: (edges,), ranges in [0, period), ascending within a pixel, and the periods lost from each
        to the next (from the last one on to the first of the next period).
    begin: (pixels + 1,), the edges of pixel q are begin[q] to begin[q + 1]; a pixel without loses nothing.
    period: the unambiguous range, m.
    """

    trials: np.ndarray
    edge: np.ndarray
    level: np.ndarray
    begin: np.ndarray
    period: float

    @property
    def is_whole(self) -> bool:
        """Whether every pixel was awake all the time."""
        return self.edge.size == 0

    @property
    def edges(self) -> tuple[np.ndarray, ...]:
        """What the kernels take."""
        return self.edge, self.level, self.begin

    def losses(
        self, z: np.ndarray, pulse: RangePulse, used: np.ndarray | None = None
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return trials - integral of E(y) p(y - z) dy, and its first two derivatives by z (float64 maps).

        used: boolean map; elsewhere all three are 0. None takes all pixels.
        """
        from recon.likelihoods import live_exposure_kernels as kernels

        written = tuple(np.zeros(self.trials.shape) for _ in range(3))
        if not self.is_whole:
            used = np.ones(self.trials.shape, bool) if used is None else used
            kernels.losses(np.asarray(z, np.float64), *self.edges, used, *_table(pulse), *written)
        return written

    def gated(
        self, z: np.ndarray, reach: np.ndarray, y: np.ndarray, start: np.ndarray, pulse: RangePulse
    ) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return what lies from z - reach to z + reach, half a period at most to either side (maps).

        The tags (int64), the integral of E(y) p(y - z) dy and that of E(y) dy / period (float64, periods).
        y, start: as in `DetectionTimes`. reach: m, a map or (1, 1).
        """
        from recon.likelihoods import live_exposure_kernels as kernels

        inside = np.zeros(self.trials.shape, np.int64)
        signal, uniform = np.zeros(self.trials.shape), np.zeros(self.trials.shape)
        kernels.gated(
            np.asarray(z, np.float64), reach, y, start, self.trials, *self.edges, pulse.low, pulse.step,
            pulse.shares, pulse.period, inside, signal, uniform,
        )  # fmt: skip
        return inside, signal, uniform

    def awake(self, place: np.ndarray, pixel: np.ndarray) -> np.ndarray:
        """Return E at a place (m) of a pixel, pair by pair, as a share of the trials."""
        from recon.likelihoods import live_exposure_kernels as kernels

        lost = np.zeros(place.size)
        kernels.levels_at(place, pixel, *self.edges, self.period, lost)
        return 1.0 - lost / self.trials.ravel()[pixel]

    @cached_property
    def uniform(self) -> np.ndarray:
        """The mean of E over the period, in periods."""
        lost = np.zeros(self.trials.size)
        if not self.is_whole:
            width = np.append(np.diff(self.edge), 0.0)
            filled = np.flatnonzero(np.diff(self.begin))
            first, last = self.begin[filled], self.begin[filled + 1] - 1
            width[last] = self.edge[first] + self.period - self.edge[last]
            lost[filled] = np.add.reduceat(width * self.level, first)
        return self.trials - lost.reshape(self.trials.shape) / self.period

    @cached_property
    def swing(self) -> np.ndarray:
        """The largest E of every pixel less its smallest, periods."""
        swing = np.zeros(self.trials.size)
        if not self.is_whole:
            filled = np.flatnonzero(np.diff(self.begin))
            first = self.begin[filled]
            swing[filled] = np.maximum.reduceat(self.level, first) - np.minimum.reduceat(self.level, first)
        return swing.reshape(self.trials.shape)


def live_exposure(tags: TimeTags, y: np.ndarray, zero: np.ndarray, metres: float) -> LiveExposure:
    """Return the live exposure of an acquisition.

    y: (tags,) ranges in m, ascending within a pixel. zero: range of the start of the period, m, in
    [0, period), a map or (1, 1). metres: of range per second.
    """
    from recon.likelihoods import live_exposure_kernels as kernels

    trials = np.ascontiguousarray(np.broadcast_to(np.asarray(tags.trials, np.float64), tags.shape))
    detections = np.diff(tags.start)
    number = np.zeros(detections.size, np.int64)
    blind, turns, reset = -1.0, 0, False
    if tags.dead_time is not None:
        reset = tags.dead_time.reset_every_period
        number += 2 * detections + (reset & (detections > 0))
        if reset:
            blind = min(tags.dead_time.blind, tags.period)
        else:
            turns = math.floor(tags.dead_time.blind / tags.period)
            blind = max(tags.dead_time.blind - turns * tags.period, 0.0)
    opening, width = 0.0, -1.0
    if tags.gate is not None:
        number += 2
        opening, width = tags.gate[0], tags.gate[1] - tags.gate[0]
    begin = np.concatenate([[0], np.cumsum(number)])
    edge, level = np.empty(begin[-1]), np.empty(begin[-1])
    period = metres * tags.period
    if edge.size:
        kernels.fill(
            y, tags.start, begin, trials, zero, metres * blind if blind >= 0.0 else -1.0, float(turns), reset,
            metres * opening, metres * width if width >= 0.0 else -1.0, period, edge, level,
        )  # fmt: skip
    return LiveExposure(trials, edge, level, begin, period)


def _table(pulse: RangePulse) -> tuple[float, float, np.ndarray, np.ndarray, float]:
    return pulse.low, pulse.step, pulse.pieces, pulse.shares, pulse.period
