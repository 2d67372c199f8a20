"""Scenes, 128 x 128 or so, whose images are asked how good they are."""

from __future__ import annotations

import numpy as np
from skimage import data

from recon.bundled import bundled
from recon.files import load_truth
from tests.bench.open_scene import open_scene
from tests.bench.scenes import photograph

SIZE = 128
PART = (slice(60, 180), slice(100, 260))  # of the open scene


def block_means(image: np.ndarray, side: int) -> np.ndarray:
    """Return the means of square blocks."""
    rows, columns = (n // side for n in image.shape)
    return image[: rows * side, : columns * side].reshape(rows, side, columns, side).mean(axis=(1, 3))


def brightness() -> dict[str, np.ndarray]:
    """Return images of largest value 1: a photograph, coins, a phantom, bench, coupon, and two drawn."""
    i, j = np.mgrid[:SIZE, :SIZE] / SIZE
    blocks = np.full((SIZE, SIZE), 0.2)
    blocks[30:90, 40:100], blocks[50:60], blocks[100:103, 10:110] = 0.8, 0.5, 1.0
    images = {
        "photograph": block_means(photograph(), 4),
        "coins": block_means(data.coins().astype(float), 2)[:SIZE, :SIZE],
        "phantom": block_means(data.shepp_logan_phantom()[8:392, 8:392], 3) + 0.05,
        "bench": load_truth(bundled("bench.h5"))["reflectivity"][::2, ::2].astype(float),
        "coupon": load_truth(bundled("coupon.h5"))["electron_yield"][64:192, 64:192].astype(float),
        "smooth": 1.0 + 0.6 * np.sin(6.0 * i) * np.cos(5.0 * j),
        "blocks": blocks,
    }
    return {name: image / image.max() for name, image in images.items()}


def surfaces() -> dict[str, tuple[np.ndarray, np.ndarray]]:
    """Return depth (m) and reflectivity: an outdoor scene, the bench, stairs, a slope with a bump."""
    truth = load_truth(bundled("bench.h5"))
    depth, bright = open_scene()
    i, j = np.mgrid[:112, :128]
    stairs = 5.0 + 0.3 * (i // 28) + 0.15 * (j // 32)
    slope = 4.0 + 0.01 * i + 0.004 * j + 0.5 * np.exp(-((i - 56) ** 2 + (j - 64) ** 2) / 800.0)
    return {
        "open": (depth[PART], bright[PART]),
        "bench": tuple(truth[name][::2, ::2].astype(float) for name in ("depth", "reflectivity")),
        "stairs": (stairs, 0.3 + 0.5 * ((i // 14 + j // 16) % 2)),
        "slope": (slope, 0.5 + 0.3 * np.sin(i / 9.0) * np.cos(j / 13.0)),
    }
