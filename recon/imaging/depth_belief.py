"""Where the surface is, before the convex problem: what a pixel's tags and its neighbours' say together.

Along a row or a column of pixels the sum-product algorithm is exact (Pearl 1988): it takes a time linear
in pixels to weigh every surface through the line. The image is covered by two trees, rows with the columns
that hang off them and columns with the rows that hang off them. Messages that have travelled count for a
little less than they say, since what hangs off a tree's line is not independent of its neighbours' hangings.

Depth is cut into bins, coarse ones first. Only the bins that are still likely are cut further, so that time
and memory grow with pixels times the logarithm of the number of bins, and with the number of tags.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from recon.imaging.depth_lattice import SPLIT, SPLIT_BITS, DepthLattice, depth_lattice, trust
from recon.likelihoods.detection_times import DetectionTimes

# All measured on open scenes at signal-to-background 1, 0.3 and 0.04; see DEVELOPERS.md.
ANEW = 0.2  # share of neighbours whose depth has nothing to do with the pixel's
APART = 0.1  # share of neighbours on the same object, some way off
NEAR, FAR = 0.275, 4.5  # of the pulse's core: lengths over which the two laws of neighbours fall by e
DAMPING = 0.85  # what a message that has travelled counts for
LEAVE, COME = 0.01, 0.01  # share of neighbours without target beside one with, and the reverse
LEAST = 3e-5  # of the likeliest bin's probability; less likely bins are not cut further
MOST = 24  # bins of a pixel that are cut further
WORTH = 0.2  # signal detections: the least a target is taken to cause when it is asked whether there is one
NEVER = 1e-30  # likelihood of no target while depth is asked
PHASES = 8  # places of a tag within its bin
FAINT = 0.01  # of the noise; fainter parts of the pulse are left out


@dataclass(frozen=True, eq=False)
class DepthBelief:
    """The probability of each pixel's depth, given all tags, on the bins where it is not negligible.

    lattice: the bins; those listed are of its finest level.
    shape: (rows, columns).
    first, place: pixel q = row * columns + column has the bins place[e], e from first[q] to first[q + 1].
    probability: (entries,) float32, if there is a target; in each pixel they sum to 1.
    absent: float32 (rows, columns), the probability that there is no target.
    """

    lattice: DepthLattice
    shape: tuple[int, int]
    first: np.ndarray
    place: np.ndarray
    probability: np.ndarray
    absent: np.ndarray

    @property
    def depth(self) -> np.ndarray:
        """The median depth of each pixel if there is a target, m (float32)."""
        return self.quantile(0.5)

    def quantile(self, share: float) -> np.ndarray:
        """Return the depth below which a share of the probability lies if there is a target, m (float32)."""
        from recon.imaging import depth_belief_kernels as kernels

        out = np.empty(self.absent.size, np.float32)
        kernels.quantile(self.first, self.place, self.probability, share, out)
        return self.lattice.width * out.reshape(self.shape)

    def probability_within(self, low: np.ndarray, high: np.ndarray) -> np.ndarray:
        """Return the probability that depth lies between two images, m, if there is a target (float32)."""
        from recon.imaging import depth_belief_kernels as kernels

        out = np.empty(self.absent.size, np.float32)
        ends = [np.ravel(np.asarray(end, np.float64) / self.lattice.width) for end in (low, high)]
        kernels.mass(self.first, self.place, self.probability, *ends, out)
        return out.reshape(self.shape)


def depth_belief(likelihood: DetectionTimes, lattice: DepthLattice | None = None) -> DepthBelief:
    """Return the belief in depth.

    The likelihood of a bin of depth is the mean over the bin of exp(-L), L as in `DetectionTimes`. Whether
    there is a target is asked on the coarsest bins, of which none are left out: the odds of a pixel's own
    tags, given what its neighbours say of its depth, against all tags being background where
    `likelihood.signal` expects others; and then its neighbours', by the same trees.
    """
    lattice = depth_lattice(likelihood) if lattice is None else lattice
    level = top = lattice.levels - 1
    size = lattice.scene[level].size
    pixels = likelihood.noise.size
    first = np.arange(pixels + 1, dtype=np.int64) * size
    place = np.tile(np.arange(size, dtype=np.int32), pixels)
    own = _Evidence(likelihood, lattice)
    while True:
        probability, odds = _beliefs(own, lattice, level, first, place, both=level in (0, top))
        if level == top:
            absent = _absence(odds * own.dimmed, likelihood.shape)
        if level == 0:
            return DepthBelief(lattice, likelihood.shape, first, place, probability, absent)
        level -= 1
        first, place = _cut(first, place, probability, lattice.scene[level].size)


class _Evidence:
    """What each pixel's own tags say about its bins."""

    def __init__(self, likelihood: DetectionTimes, lattice: DepthLattice) -> None:
        pulse, noise = likelihood.pulse, likelihood.noise
        self.shape, self.core = likelihood.shape, pulse.core
        self._bins, self._width = lattice.scene[0].size, lattice.width
        used = likelihood.has_data
        kind = np.full(noise.shape, -1, np.int32)
        least = float(noise[used].min()) if used.any() else 1.0
        kind[used] = 10.0 * np.log(noise[used] / least)
        levels = least * np.exp(0.1 * (np.arange(max(int(kind.max()), 0) + 1) + 0.5))
        height = pulse.density(pulse.knots)
        seen = pulse.knots[height >= min(FAINT * least, 0.5 * height.max())]
        # For a tag at y the pulse is seen from depths y - last knot to y - first knot.
        first = math.floor(-seen[-1] / self._width) - 1
        length = min(math.ceil(-seen[0] / self._width) + 2 - first, self._bins)
        tag = (np.arange(PHASES) + 0.5) / PHASES
        middle = first + np.arange(length) + 0.5
        p = pulse.density(self._width * (tag[:, None] - middle))
        table = np.log1p(p / levels[:, None, None]).astype(np.float32)
        at = likelihood.y / self._width
        whole = at.astype(np.int32)
        phase = np.minimum((at - whole) * PHASES, PHASES - 1).astype(np.uint8)
        begin = (whole + np.int32(first)) % np.int32(self._bins)
        weight = trust(likelihood).ravel()
        expected = np.where(likelihood.exposed, likelihood.signal * likelihood.trials, 0.0)
        expected = expected.ravel().astype(np.float32) * weight
        missing = np.where(likelihood.exposed, np.maximum(WORTH - expected.reshape(self.shape), 0.0), 0.0)
        self.dimmed = np.exp(-missing).ravel()
        live = likelihood.live
        level = live.level
        if not live.is_whole:
            level = live.level / np.repeat(live.trials.ravel(), np.diff(live.begin))
        half = math.ceil(max(abs(seen[0]), abs(seen[-1])) / self._width)
        taps = pulse.density(self._width * np.arange(-half, half + 1)) * self._width
        self._arguments = (
            begin, phase, likelihood.start, kind.ravel(), weight, table, expected, live.edge, level,
            live.begin, (taps / taps.sum()).astype(np.float32),
        )  # fmt: skip

    def on(self, level: int, first: np.ndarray, place: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return the likelihoods of the listed bins of a level, and of no target (pixels,)."""
        from recon.imaging import depth_evidence_kernels as kernels

        likely, absent = np.empty(place.size, np.float32), np.empty(first.size - 1, np.float32)
        kernels.evidence(
            *self._arguments, SPLIT_BITS * level, self._width, first, (place, self._bins), likely, absent
        )
        return likely, absent


def _beliefs(
    own: _Evidence, lattice: DepthLattice, level: int, first: np.ndarray, place: np.ndarray, both: bool
) -> tuple[np.ndarray, np.ndarray]:
    """Return the probability of the listed bins, and each pixel's own odds of a target (pixels,).

    both: whether both trees are asked; else the one of rows alone.
    """
    from recon.imaging import depth_belief_kernels as kernels

    likely, absent = own.on(level, first, place)
    scene, law = lattice.scene[level], _law(lattice, level, own.core)
    messages = _messages(place, first, likely, np.full_like(absent, NEVER), scene, law, own.shape, both)[0]
    odds = np.empty_like(absent)
    kernels.believe(first, place, likely, messages, scene, np.float32(DAMPING), likely, odds)
    return likely, odds / absent


def _messages(
    place: np.ndarray, first: np.ndarray, likely: np.ndarray, absent: np.ndarray, scene: np.ndarray,
    law: np.ndarray, shape: tuple[int, int], both: bool,
) -> tuple[np.ndarray, np.ndarray]:  # fmt: skip
    """Return the log messages that reach each bin, and the state without target, mean of the trees asked."""
    from recon.imaging import depth_belief_kernels as kernels

    data, damping = (place, first, likely, absent), np.float32(DAMPING)
    messages = [np.zeros_like(likely), np.zeros_like(absent)]
    for down in (True, False) if both else (True,):
        hanging = [np.empty_like(likely), np.empty_like(absent)]
        other = [np.zeros_like(likely), np.zeros_like(absent)]
        kernels.chains(*data, *other, scene, law, damping, down, shape, *hanging)
        kernels.chains(*data, *hanging, scene, law, damping, not down, shape, *other)
        for kept, one, two in zip(messages, hanging, other, strict=True):
            kept += one
            kept += two
    return tuple(0.5 * part if both else part for part in messages)


def _absence(odds: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
    """Return the probability of no target (rows, columns), from each pixel's own odds of one."""
    first = np.arange(odds.size + 1)
    law = np.array([0.0, 1.0 - LEAVE, 0.0, 0.0, 0.0, COME, LEAVE], np.float32)
    likely = np.minimum(odds, np.float32(1e20)).astype(np.float32)
    largest = np.maximum(likely, np.float32(1.0))
    there, not_there = likely / largest, np.float32(1.0) / largest
    place, scene = np.zeros(odds.size, np.int32), np.ones(1, np.float32)
    present, absent = _messages(place, first, there, not_there, scene, law, shape, both=True)
    with np.errstate(over="ignore"):
        against = np.log(not_there / there) + DAMPING * (absent - present) + math.log(LEAVE / COME)
        return (1.0 / (1.0 + np.exp(-against.astype(np.float64)))).astype(np.float32).reshape(shape)


def _law(lattice: DepthLattice, level: int, core: float) -> np.ndarray:
    """Return the law of neighbours on a level, as the kernels take it.

    From a depth anywhere in a bin, a two-sided exponential law of length l leaves the bin, of width w, with
    probability l / w (1 - exp(-w / l)); the geometric law on bins is the one that does so, too.
    """
    width = SPLIT**level * lattice.width
    ratios = []
    for length in (NEAR * core, FAR * core):
        leaving = -length / width * math.expm1(-width / length)
        ratios.append(leaving / (2.0 - leaving))
    near, far = ratios
    same = (1.0 - ANEW - APART) * (1.0 - near) / (1.0 + near)
    apart = APART * (1.0 - far) / (1.0 + far)
    return np.array([near, same, far, apart, ANEW, 0.0, 0.0], np.float32)


def _cut(
    first: np.ndarray, place: np.ndarray, probability: np.ndarray, size: int
) -> tuple[np.ndarray, np.ndarray]:
    """Return the lists of the next finer level, of `size` bins: what is still likely, in parts."""
    from recon.imaging import depth_belief_kernels as kernels

    keep = np.empty(place.size, np.bool_)
    kernels.kept(first, probability, LEAST, MOST, keep)
    parts = (place[keep, None] * SPLIT + np.arange(SPLIT, dtype=np.int32)).astype(np.int32)
    inside = parts < size
    number = np.zeros(place.size + 1, np.int64)
    number[1:][keep] = inside.sum(axis=1)
    return np.cumsum(number)[first], parts[inside]
