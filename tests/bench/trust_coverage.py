"""Whether the intervals hold the truth as often as they say, and are not wider than they need be."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

import recon
from recon.imaging import PhysicalImage
from tests.bench.measure import Row, at_most
from tests.bench.open_scene import PERIOD, PULSE
from tests.bench.trust_scenes import brightness, surfaces

GROUP = "trust"
SEEDS = range(3)
LEVELS = (1, 4, 16)  # counts a pixel at most; primaries a pixel; signal tags a pixel with two background ones
WITHIN, WIDEST = 0.05, 1.3


@dataclass(frozen=True)
class Cover:
    """Shares of pixels within the 68 and the 95 % interval, and widths over those that would hold as many.

    `fixed` is the mean width over that of an interval of the same width everywhere that holds 68 %.
    """

    share_68: float
    share_95: float
    width_68: float
    width_95: float
    fixed: float


def cover(image: PhysicalImage, truth: np.ndarray, asked: np.ndarray | None = None) -> Cover:
    """Return the cover of an image over the pixels asked."""
    asked = np.ones(truth.shape, bool) if asked is None else asked
    error, u = np.abs(image.image - truth)[asked], image.uncertainty[asked]
    low, high = image.interval(0.95)
    ratio = np.maximum(truth - image.image, 0.0) / np.maximum(high - image.image, 1e-9)
    ratio = np.maximum(ratio, np.maximum(image.image - truth, 0.0) / np.maximum(image.image - low, 1e-9))
    ratio = ratio[asked]
    return Cover(
        float(np.mean(error <= u)),
        float(np.mean(ratio <= 1.0)),
        float(1.0 / np.quantile(error / u, 0.68)),
        float(1.0 / np.quantile(ratio, 0.95)),
        float(u.mean() / np.quantile(error, 0.68)),
    )


def reflectivity(scene: np.ndarray, level: int, seed: int, trials: int | None) -> Cover:
    """Counts at most `level` a pixel, Poisson or in trials of one detection at most."""
    if trials is None:
        drawn = recon.simulate.counts(scene, 1, gain=level, several_per_trial=True, seed=seed)
    else:
        drawn = recon.simulate.counts(scene, trials * level, gain=1 / trials, background=0.002, seed=seed)
    return cover(recon.reconstruct(drawn).reflectivity, scene)


def electron_yield(scene: np.ndarray, level: int, seed: int) -> Cover:
    """Yields of 0.5 to 3.5 at `level` primaries a pixel."""
    truth = 0.5 + 3.0 * scene
    drawn = recon.simulate.frames(truth, 0.125, 8 * level, seed=seed)
    return cover(recon.reconstruct(drawn).electron_yield, truth)


def depth(scene: tuple[np.ndarray, np.ndarray], level: int, seed: int) -> Cover:
    """Depth where a target is found on the likeliest surface."""
    truth, bright = scene
    tags = recon.simulate.time_tags(
        truth, bright, 1000, PERIOD, recon.GaussianPulse(PULSE), gain=level / 1000 / bright.mean(),
        background=0.002, seed=seed,
    )  # fmt: skip
    image = recon.reconstruct(tags).depth
    return cover(image, truth, (image.target > 0.5) & (image.wrong_surface < 0.5))


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    images = brightness()
    yield from _kind("reflectivity, Poisson", images, lambda s, n, seed: reflectivity(s, n, seed, None))
    yield from _kind("reflectivity, trials", images, lambda s, n, seed: reflectivity(s, n, seed, 20))
    yield from _kind("yield", images, electron_yield)
    yield from _kind("depth", surfaces(), depth)


def _kind(name: str, scenes: dict, run: Callable[..., Cover]) -> Iterator[Row]:
    """Yield the mean over scenes and levels, with every cell in the detail."""
    cells = {
        f"{scene} {level}": [run(given, level, seed) for seed in SEEDS]
        for scene, given in scenes.items()
        for level in LEVELS
    }
    for share, kind in ((0.68, "share_68"), (0.95, "share_95")):
        each = {cell: float(np.mean([getattr(c, kind) for c in found])) for cell, found in cells.items()}
        mean = float(np.mean(list(each.values())))
        near = sum(abs(value - share) <= WITHIN for value in each.values())
        listed = ", ".join(f"{cell} {value:.2f}" for cell, value in each.items())
        detail = f"mean {mean:.3f}; {near} of {len(each)} cells within {WITHIN:g}: {listed}"
        yield at_most(GROUP, f"{name}: off {share:g}", abs(mean - share), "", WITHIN, detail)
    widths = [
        np.mean([getattr(c, kind) for c in found])
        for kind in ("width_68", "width_95")
        for found in cells.values()
    ]
    fixed = np.mean([c.fixed for found in cells.values() for c in found])
    detail = f"largest {max(widths):.2f}; over a fixed width that holds 68 %: {fixed:.2f}"
    yield at_most(GROUP, f"{name}: width over needed", float(np.mean(widths)), "x", WIDEST, detail)
