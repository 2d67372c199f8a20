"""Where the stage was in every frame, from frames with less than one count a pixel.

A frame by itself says little, but stages drift smoothly. The shifts d maximise

    sum over frames  log P(counts; dose, eta(p - d))  -  mu / 2 x sum of |second differences of d|^2

by Fisher scoring, P being the law of Neyman (1939), Type A, and eta the image that all frames give when
moved back by d, blurred as far as its noise asks. mu maximises the marginal likelihood (a smoothing spline;
Wahba 1985), so a stage that jumps from frame to frame is followed as well, as closely as its frames allow.
The start is the better of no drift and of blocks of frames, all correlated with each other; the blur
shrinks on the way.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cholesky_banded, solveh_banded
from scipy.ndimage import gaussian_filter

from recon.acquisition import Frames
from recon.errors import InputError
from recon.likelihoods.neyman import coefficients
from recon.likelihoods.neyman_information import counted_shares

BLOCKS = 12
FAINTEST = 400  # electrons a frame, of many: tested down to these
_BLURS = (4.0, 4.0, 3.0, 2.0, 2.0)  # pixels, on the way
_LAST_BLURS = (0.7, 1.0, 1.4, 2.0, 2.8, 4.0)
_LAST = 6  # steps at the last blur
_KNOTS = 512  # more frames share the knots of the path
_SMALLEST = 16  # rows and columns
_LONGEST = 2.0  # pixels a step
_FAR = 0.5  # pixels of uncertainty beyond which shifts are of no use
_MU = np.logspace(-2, 9, 34)


@dataclass(frozen=True, eq=False)
class StageDrift:
    """Shifts of the scene in every frame.

    shifts: (frames, 2) float64, pixels (row, column), mean zero: frame f sees at pixel p the image at
        p - shifts[f], the image being that at the mean position.
    uncertainty: (frames, 2), their standard uncertainty in pixels, given the image.
    note: what was found, and whether the frames are too faint for it, in a sentence or two.
    """

    shifts: NDArray[np.float64]
    uncertainty: NDArray[np.float64]
    note: str


class _Stack:
    """The frames as the kernels take them."""

    def __init__(self, frames: Frames) -> None:
        self.counts, self.factors = frames.counts, frames.factors
        self.shape, self.frames = frames.shape, frames.frames
        self.usable = np.ones(frames.shape, bool) if frames.mask is None else frames.mask
        one = isinstance(frames.dose, float)
        self.dose = np.full((1, frames.shape[1]), frames.dose) if one else frames.dose.astype(np.float64)

    @cached_property
    def _shares(self) -> tuple[NDArray, NDArray]:
        """Logarithms of yields, and the share of the electrons' information that frames keep at them."""
        level = float(
            (self.counts.sum(axis=0) * self.usable).sum() / (self.usable * self.dose).sum() / self.frames
        )
        yields = level * np.logspace(-3, 2, 80)
        mean = np.array([float(np.mean(np.broadcast_to(self.dose, self.shape)[self.usable]))])
        return np.log(yields), counted_shares(mean, yields)[0]

    def share(self, eta: NDArray) -> NDArray[np.float64]:
        """Return the Fisher information of the yield times eta / dose."""
        return np.interp(np.log(eta), *self._shares)

    def moved(self, shifts: NDArray) -> tuple[NDArray, NDArray]:
        """Return the electrons and the expected primaries of the image, all frames moved back."""
        from recon.imaging.registration_kernels import gather

        rows, columns = self.shape
        electrons, primaries = np.zeros((rows + 1, columns + 1)), np.zeros((rows + 1, columns + 1))
        gather(self.counts, shifts, self.factors, self.dose, self.usable, electrons, primaries)
        return electrons[:rows, :columns], primaries[:rows, :columns]


def register(frames: Frames) -> StageDrift:
    """Estimate the shift of every frame, relative to the mean position of the dwell.

    Tested on 128 frames of 128 x 128 pixels of discs, bars and gratings, drifting by 2 pixels (rms error of
    a shift): 5000 electrons a frame, 0.01 to 0.08 pixels; 800, 0.03 to 0.2; 400, 0.03 to 0.4. With fewer
    the note warns. A jitter from frame to frame is found where a single frame shows it (5000 electrons, to
    0.25 pixels); where it does not, it is taken for none and the uncertainty leaves it out. Drifts up to a
    quarter of the image are searched.

    Raises InputError for readings, images under 16 x 16 pixels, and where there are no electrons.
    """
    if frames.law is not None:
        raise InputError("frames hold analog readings, of law=MarkLaw(...); give counts of electrons.")
    if min(frames.shape) < _SMALLEST:
        raise InputError(
            f"frames have the shape {frames.shape}; registration needs {_SMALLEST} rows and columns or more."
        )
    stack = _Stack(frames)
    if not frames.counts.max(axis=0)[stack.usable].any():
        raise InputError("counts holds no electron in a usable pixel; no drift can be seen in it.")
    if frames.frames == 1:
        return StageDrift(np.zeros((1, 2)), np.zeros((1, 2)), "One frame has no drift.")
    still = np.zeros((frames.frames, 2))
    farthest = 0.4 * np.array(frames.shape)
    shifts = max((still, _from_blocks(stack)), key=lambda given: _sharpness(stack, given))
    for blur in _BLURS:
        shifts, _ = _path(shifts, *_scores(stack, shifts, blur)[:2], farthest)
    # the last blur is that which leaves most information
    sharpest = max(_LAST_BLURS, key=lambda blur: _told(*_information(stack, shifts, blur)))
    for step in range(_LAST):
        score, raw, own = _scores(stack, shifts, sharpest)
        shifts, uncertainty = _path(shifts, score, raw, farthest, with_error=step == _LAST - 1)
    uncertainty = uncertainty * np.sqrt(np.diag(raw) / np.diag(own))
    electrons = frames.counts.sum(dtype=np.float64, where=stack.usable) / frames.frames
    return StageDrift(shifts, uncertainty, _note(shifts, uncertainty, electrons))


def _blurred(stack: _Stack, shifts: NDArray, blur: float) -> tuple[NDArray, NDArray]:
    """Return the image that the frames give, moved back, and its expected primaries, both blurred."""
    electrons, primaries = (gaussian_filter(x, blur, mode="constant") for x in stack.moved(shifts))
    level = electrons.sum() / primaries.sum()
    least = 1e-3 * primaries.max()  # of what hardly any frame saw, the mean is as good a guess
    return np.maximum((electrons + least * level) / (primaries + least), 1e-3 * level), primaries + least


def _information(stack: _Stack, shifts: NDArray, blur: float) -> tuple[NDArray, NDArray]:
    """Return the information on a frame's shift, (2, 2), with and without what the image's noise feigns."""
    eta, primaries = _blurred(stack, shifts, blur)
    slopes = np.stack(np.gradient(eta))
    each = stack.dose * stack.share(eta) / eta * stack.usable
    raw = np.einsum("ij,aij,bij->ab", each, slopes, slopes)
    point = np.zeros((65, 65))
    point[32, 32] = 1.0
    gain = np.sum(np.gradient(gaussian_filter(point, blur), axis=0) ** 2)
    noise = gain * np.sum(each * eta * (1.0 + eta) / primaries)
    values, axes = np.linalg.eigh(raw)
    kept = np.maximum(values - noise, 0.02 * values) + 1e-12
    return raw + 1e-12 * np.eye(2), (axes * kept) @ axes.T


def _told(raw: NDArray, own: NDArray) -> float:
    """Return how well a frame's shift is told, the poorer axis: the score has the variance raw."""
    return float(np.min(np.diag(own) ** 2 / np.diag(raw)))


def _scores(stack: _Stack, shifts: NDArray, blur: float) -> tuple[NDArray, NDArray, NDArray]:
    """Return each frame's derivative to its shift, (frames, 2), and `_information`."""
    from recon.imaging.registration_kernels import shift_scores

    eta, _ = _blurred(stack, shifts, blur)
    edge = ((0, 1), (0, 1))
    wide = np.pad(eta, edge, mode="edge")
    steep = np.pad(np.stack(np.gradient(eta)), ((0, 0), *edge))
    score = np.empty((stack.frames, 2))
    given = stack.counts, shifts, stack.factors, stack.dose, stack.usable
    shift_scores(*given, wide, steep, steep * np.exp(-wide), coefficients(), score)
    return score, *_information(stack, shifts, blur)


def _path(
    shifts: NDArray, score: NDArray, information: NDArray, farthest: NDArray, with_error: bool = False
) -> tuple[NDArray, NDArray | None]:
    """Return the smooth path one step of Fisher scoring on, and its uncertainty if asked for."""
    frames = len(shifts)
    group = -(-frames // _KNOTS)
    begins = np.arange(0, frames, group)
    size = np.diff([*begins, frames])
    middle = begins + 0.5 * (size - 1)
    values, axes = np.linalg.eigh(information)
    precision = size[:, None] * values  # along the two axes
    before = np.add.reduceat(shifts @ axes, begins) / size[:, None]
    step = np.add.reduceat(score @ axes, begins) / precision
    order = min(2, len(begins) - 1)
    difference = np.diff(np.eye(len(begins)), order, axis=0)
    penalty = difference.T @ difference
    fits = [_smooth(before + step, precision, penalty, order, mu) for mu in _MU]
    _, mu, smooth = min(fits, key=lambda fit: fit[0])
    smooth = before + np.clip(smooth - before, -_LONGEST, _LONGEST)
    knots = (smooth - smooth.mean(axis=0)) @ axes.T
    every = np.arange(frames)
    path = np.stack([np.interp(every, middle, k) for k in knots.T], axis=1)
    path = np.clip(path - path.mean(axis=0), -farthest, farthest)
    if not with_error:
        return path, None
    centre = np.eye(len(begins)) - 1.0 / len(begins)
    inverse = [np.linalg.inv(np.diag(p) + mu * penalty) for p in precision.T]
    variance = np.stack([np.diag(centre @ x @ centre) for x in inverse], axis=1) @ (axes.T**2)
    return path, np.stack([np.interp(every, middle, np.sqrt(v)) for v in variance.T], axis=1)


def _smooth(
    seen: NDArray, precision: NDArray, penalty: NDArray, order: int, mu: float
) -> tuple[float, float, NDArray]:
    """Return -2 log marginal likelihood, mu, and the smoothed path along both axes."""
    knots = len(seen)
    band = np.zeros((order + 1, knots))
    for k in range(order + 1):
        band[order - k, k:] = mu * np.diag(penalty, k)
    cost, path = 0.0, np.empty_like(seen)
    for axis in range(2):
        full = band.copy()
        full[order] += precision[:, axis]
        path[:, axis] = solveh_banded(full, precision[:, axis] * seen[:, axis])
        rest = seen[:, axis] - path[:, axis]
        cost += np.sum(precision[:, axis] * rest * seen[:, axis])
        cost += 2.0 * np.sum(np.log(cholesky_banded(full)[order])) - (knots - order) * np.log(mu)
    return float(cost), float(mu), path


def _from_blocks(stack: _Stack) -> NDArray[np.float64]:
    """Return shifts from the correlation of blocks of frames, every one with every other."""
    edges = np.linspace(0, stack.frames, min(BLOCKS, stack.frames) + 1).astype(int)
    sums = np.stack([
        (stack.counts[a:b].sum(axis=0, dtype=np.float64) * stack.usable) / stack.factors[a:b].mean()
        for a, b in pairwise(edges)
    ])  # fmt: skip
    rows, columns = stack.shape
    taper = np.outer(np.hanning(rows + 2)[1:-1], np.hanning(columns + 2)[1:-1]) ** 0.5
    fine = gaussian_filter(sums, (0, 1.5, 1.5))
    fine -= gaussian_filter(sums, (0, rows / 8, columns / 8))
    spectra = np.fft.rfft2(fine * taper)
    reach = rows // 4, columns // 4
    pairs, seen = [], []
    for a in range(len(sums)):
        for b in range(a + 1, len(sums)):
            surface = np.fft.fftshift(np.fft.irfft2(spectra[b] * spectra[a].conj(), s=stack.shape))
            pairs.append((a, b))
            seen.append(_peak(surface, reach))
    pairs, seen = np.array(pairs), np.array(seen)
    design = np.zeros((len(pairs), len(sums)))
    design[np.arange(len(pairs)), pairs[:, 0]] = -1.0
    design[np.arange(len(pairs)), pairs[:, 1]] = 1.0
    weight = np.ones(len(pairs))
    for _ in range(20):  # least absolute distances: a pair with a false peak does not pull the others
        normal = design.T @ (weight[:, None] * design) + 1e-9 * np.eye(len(sums))
        places = np.linalg.solve(normal, design.T @ (weight[:, None] * seen))
        weight = 1.0 / (0.1 + np.hypot(*(seen - design @ places).T))
    middle = 0.5 * (edges[:-1] + edges[1:] - 1)
    path = np.stack([np.interp(np.arange(stack.frames), middle, p) for p in places.T], axis=1)
    return path - path.mean(axis=0)


def _peak(surface: NDArray, reach: tuple[int, int]) -> tuple[float, float]:
    """Return the place of the highest peak within reach of the centre, between pixels by a parabola."""
    ci, cj = surface.shape[0] // 2, surface.shape[1] // 2
    near = surface[ci - reach[0] : ci + reach[0] + 1, cj - reach[1] : cj + reach[1] + 1]
    i, j = np.unravel_index(int(np.argmax(near)), near.shape)

    def between(low: float, mid: float, high: float) -> float:
        bend = low - 2.0 * mid + high
        return 0.5 * (low - high) / bend if bend < 0.0 else 0.0

    down = between(*near[i - 1 : i + 2, j]) if 0 < i < near.shape[0] - 1 else 0.0
    right = between(*near[i, j - 1 : j + 2]) if 0 < j < near.shape[1] - 1 else 0.0
    return i + down - reach[0], j + right - reach[1]


def _sharpness(stack: _Stack, shifts: NDArray) -> float:
    """Return the variance of the image that the frames give, moved back: largest where they agree."""
    electrons, primaries = (gaussian_filter(x, 1.5) for x in stack.moved(shifts))
    seen = primaries > 0.5 * primaries.max()
    return float(np.var(electrons[seen] / primaries[seen])) if seen.any() else 0.0


def _note(shifts: NDArray, uncertainty: NDArray, electrons: float) -> str:
    worst = float(np.max(uncertainty))
    reach = float(np.max(np.ptp(shifts, axis=0)))
    if worst > _FAR:
        return (
            f"The frames are too faint, or the scene too plain, to register: the shifts are known to"
            f" {worst:.1f} pixels at worst. Do not use them; more dose or larger frames would show the drift."
        )
    found = f"The scene moves by {reach:.2f} pixels over the dwell, known to {worst:.2f} pixels at worst."
    if electrons < FAINTEST:
        found += (
            f" Frames of {electrons:.0f} electrons are fainter than tested ({FAINTEST}): check the image."
        )
    return found
