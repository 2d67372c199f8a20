"""Depth and reflectivity from time tags: the open scene, coarse clocks, high flux, time and memory."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import fields

import numpy as np

import recon
from recon.imaging.ranging import ranging
from recon.imaging.reflectivity import gated_likelihood, live_counts, reflectivity
from recon.likelihoods import DetectionTimes
from tests.bench.measure import Row, apart, at_most, seconds
from tests.bench.open_scene import PULSE, acquisition, depth_error, open_scene, windowed

GROUP = "depth"
SEEDS = range(5)
# Signal and background detections a pixel; the mean error wanted, the best windows' rms, and what a window
# and other routes reached on a prototype (check values of the project).
LEVELS = {
    "signal-to-background 1": (0.5, 0.5, 0.046, (1.5, 2.0)),
    "signal-to-background 0.3": (0.3 / 1.3, 1.0 / 1.3, 0.071, (2.5, 3.0)),
    "signal-to-background 0.04": (3.0, 75.0, 0.042, (1.0, 1.5)),
}
PART = (slice(60, 180), slice(100, 260))  # of the scene, for what takes long


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    for name, (signal, background, wanted, widths) in LEVELS.items():
        yield from open_scene_rows(name, signal, background, wanted, widths)
    yield from clocks()
    yield from flat_target()
    yield from high_flux()
    yield from cost()


def open_scene_rows(
    name: str, signal: float, background: float, wanted: float, widths: tuple[float, ...]
) -> Iterator[Row]:
    """Errors over the seeds, against the best Gaussian window on the same draws."""
    truth, brightness = open_scene()
    ours, plain, counted, gated = [], [], [], []
    for seed in SEEDS:
        tags = acquisition(signal, background, seed)
        image, surface = ranging(tags)
        ours.append(depth_error(surface.image, truth))
        first = reflectivity(live_counts(tags)).image
        window = windowed(tags, np.maximum(first, 0.1 * first.mean()), widths)
        plain.append(min((depth_error(w, truth) for w in window), key=lambda e: e.mean))
        counted.append(np.mean((first - brightness) ** 2))
        gated.append(np.mean((image.image - brightness) ** 2))
    middle = sorted(ours, key=lambda e: e.mean)[len(ours) // 2]
    other = sorted(plain, key=lambda e: e.mean)[len(plain) // 2]
    yield at_most(GROUP, name, middle.mean, "m", wanted, f"{middle}; best window {other}")
    if name.endswith(" 1"):
        median = float(np.median([e.median for e in ours]))
        far = float(np.median([e.far for e in ours]))
        yield at_most(GROUP, f"{name}, median", median, "m", 0.0107, "")
        yield at_most(GROUP, f"{name}, off by more than 0.1 m", far, "%", 5.0, "")
    ratio = float(np.median(np.divide(gated, counted)))
    yield at_most(GROUP, f"{name}, reflectivity", ratio, "x", 1.0, "mean squared error, gated over counted")


def clocks() -> Iterator[Row]:
    """A clock of 0.4 ns, alone and with a known dither, over an ideal one."""
    truth = open_scene()[0]
    errors: dict[str, list[float]] = {"ideal": [], "coarse": [], "dithered": []}
    for seed in SEEDS:
        for name, settings in (
            ("ideal", {}),
            ("coarse", {"interval": 0.4e-9}),
            ("dithered", {"interval": 0.4e-9, "dither": 0.4e-9}),
        ):
            surface = ranging(acquisition(1.0, 1.0, seed, **settings))[1]
            errors[name].append(float(np.abs(surface.image - truth).mean()))
    for name, limit in (("coarse", 1.25), ("dithered", 1.15)):
        ratio = float(np.median(np.divide(errors[name], errors["ideal"])))
        yield at_most(
            GROUP, f"clock of 0.4 ns, {name}", ratio, "x", limit, f"ideal {errors['ideal'][0]:.4f} m"
        )


def flat_target() -> Iterator[Row]:
    """Pixelwise error of a flat target over the Cramer-Rao bound at 20 signal detections, no prior."""
    for name, background in (("no background", 0.0), ("signal-to-background 1", 20.0), ("0.04", 500.0)):
        ratios, lost = [], []
        for seed in SEEDS:
            depth = np.full((64, 64), 4.0 + 0.013 * seed)
            tags = recon.simulate.time_tags(
                depth, np.ones_like(depth), 1000, 100e-9, recon.GaussianPulse(PULSE), gain=0.02,
                background=background / 1000, seed=seed,
            )  # fmt: skip
            times = DetectionTimes(tags, 1.0)
            bound = np.sqrt(1.0 / np.mean(times.fisher_information(depth)))
            off = np.abs(times.estimate() - depth) / bound
            near = off < 6.0  # beyond, background was taken for the target: no matter of the bound
            ratios.append(float(np.sqrt(np.mean(off[near] ** 2))))
            lost.append(100.0 * float(np.mean(~near)))
        detail = f"rms over bound; {np.median(lost):.2g} % of pixels on background"
        yield at_most(GROUP, f"flat target, {name}", float(np.median(ratios)), "x", 1.1, detail)


def high_flux() -> Iterator[Row]:
    """Three photoelectrons a period, dead time 75 ns, against 5 % of periods and against ignorance."""
    truth, brightness = (image[PART] for image in open_scene())
    found: dict[str, list[float]] = {"live": [], "ignored": [], "faint": []}
    bias, shrunk, naive = [], [], []
    for seed in SEEDS:
        bright = _dead(3.0, seed)
        faint = _dead(-np.log1p(-0.05), seed)
        for name, tags in (("live", bright), ("ignored", _without_dead_time(bright)), ("faint", faint)):
            image, surface = ranging(tags)
            found[name].append(float(np.abs(surface.image - truth).mean()))
            if name == "live":
                alone = gated_likelihood(tags, surface.image).estimate()
                bias.append(float(alone.mean() / brightness.mean()))
                shrunk.append(float(image.image.mean() / brightness.mean()))
        seen = bright.counts().detections / 200.0 - bright.background
        naive.append(float((seen / bright.gain).mean() / brightness.mean()))
    for name, limit in (("faint", 0.35), ("ignored", 0.5)):
        ratio = float(np.median(np.divide(found["live"], found[name])))
        detail = f"{np.median(found['live']):.4f} m against {np.median(found[name]):.4f} m"
        yield at_most(GROUP, f"high flux over {name}", ratio, "x", limit, detail)
    off = float(np.median(np.abs(np.array(bias) - 1.0)))
    detail = (
        f"pixel by pixel; with the prior {np.median(shrunk):.3f} of the truth, the number of tags says"
        f" {np.median(naive):.2f}"
    )
    yield at_most(GROUP, "high flux, reflectivity off by", off, "", 0.02, detail)


def _dead(photons: float, seed: int) -> recon.TimeTags:
    """A third of the photoelectrons is background."""
    return acquisition(
        200 * photons * 2.0 / 3.0,
        200 * photons / 3.0,
        seed,
        PART,
        trials=200,
        dead_time=recon.DeadTime(75e-9),
    )


def _without_dead_time(tags: recon.TimeTags) -> recon.TimeTags:
    settings = {f.name: getattr(tags, f.name) for f in fields(tags) if f.init}
    return recon.TimeTags(**(settings | {"dead_time": None}))


def cost() -> Iterator[Row]:
    """Time of 256 x 256 pixels 2000 bins deep, its growth, and the memory of 1024 x 1024."""
    base = tiles(256, 50e-12 * 2000)
    ranging(base)
    plain = seconds(lambda: ranging(base), 1)
    yield at_most(GROUP, "256 x 256, 2000 bins", plain, "s", 15.0, f"{base.time.size} tags")
    deep = tiles(256, 50e-12 * 20000)
    longer = seconds(lambda: ranging(deep), 1)
    yield at_most(
        GROUP, "ten times the bins", longer / plain, "x", 1.7, f"{longer:.1f} s; levels grow from 3 to 5"
    )
    wide = tiles(512, 50e-12 * 2000)
    larger = seconds(lambda: ranging(wide), 1)
    yield at_most(GROUP, "four times the pixels and tags", larger / plain, "x", 4.8, f"{larger:.1f} s")
    took, peak = json.loads(apart(_LARGE))
    yield at_most(GROUP, "1024 x 1024, 10 million tags", peak / 1000.0, "GB", 4.0, f"{took:.0f} s")


_LARGE = """
import json, time
from recon.imaging.ranging import ranging
from tests.bench.depth import tiles
from tests.bench.measure import peak_megabytes
tags = tiles(1024, 100e-9, signal=5.0, background=5.0)
began = time.perf_counter()
ranging(tags)
print(json.dumps([time.perf_counter() - began, peak_megabytes()]))
"""


def tiles(size: int, period: float, signal: float = 0.5, background: float = 0.5) -> recon.TimeTags:
    """Draw the scene tiled to size x size."""
    depth, reflectivity = open_scene()
    again = (-(-size // depth.shape[0]), -(-size // depth.shape[1]))
    depth, reflectivity = (np.tile(image, again)[:size, :size] for image in (depth, reflectivity))
    return recon.simulate.time_tags(
        depth, reflectivity, 1000, period, recon.GaussianPulse(PULSE),
        gain=signal / 1000 / reflectivity.mean(), background=background / 1000, interval=50e-12, seed=0,
    )  # fmt: skip
