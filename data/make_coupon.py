"""Makes coupon.h5: an invented beam-microscopy coupon, imaged by secondary electrons.

Run from the project root: python data/make_coupon.py

A height map and a map of the materials' yields are laid out on a grid three times finer than the image.
Slopes and edges release more electrons, hollows keep some back, and the beam and the pixel blur the rest.
"""

from pathlib import Path

import numpy as np
from scipy.ndimage import gaussian_filter

from recon.acquisition import Frames
from recon.files import save
from recon.simulate import frames

PATH = Path(__file__).with_name("coupon.h5")
SEED = 20_240_917
SIZE = 256
FINE = 3  # fine points per pixel and side
DOSE = 0.125  # primaries per pixel per frame
FRAMES = 160
NOTE = (
    "Invented beam-microscopy coupon, drawn with known truth; no instrument recorded it. "
    "truth/electron_yield is in detected electrons per primary."
)


class Coupon:
    """Height (pixels) and flat yield (electrons per primary) on the fine grid; x and y in pixels."""

    def __init__(self) -> None:
        self.y, self.x = (np.mgrid[: SIZE * FINE, : SIZE * FINE] + 0.5) / FINE
        self.height = np.zeros_like(self.x)
        shade = np.sin(self.x / 47) * np.cos(self.y / 61 + 0.7)  # of the bare substrate
        self.material = 1.5 * (1 + 0.1 * shade)

    def box(self, left: float, top: float, width: float, height: float) -> np.ndarray:
        """Return where points lie in a rectangle."""
        return (self.x >= left) & (self.x < left + width) & (self.y >= top) & (self.y < top + height)

    def raise_by(self, where: np.ndarray, height: float, material: float) -> None:
        """Put a flat layer of a material down."""
        self.height = np.where(where, self.height + height, self.height)
        self.material = np.where(where, material, self.material)

    def grain(self, x: float, y: float, radius: float, material: float) -> None:
        """Put a round grain down, the upper half of a ball resting on what is there."""
        square = 1 - ((self.x - x) ** 2 + (self.y - y) ** 2) / radius**2
        dome = radius * np.sqrt(np.maximum(square, 0))
        self.material = np.where(dome > self.height, material, self.material)
        self.height = np.maximum(self.height, dome)

    def image(self) -> np.ndarray:
        """Return the yield seen in each pixel, float32 (SIZE, SIZE)."""
        relief = gaussian_filter(self.height, 0.45 * FINE)
        down, right = np.gradient(relief, 1 / FINE)
        slope = np.sqrt(1 + down**2 + right**2)
        tilted = self.material * (1 + 0.8 * (1 - 1 / slope) + 0.25 * np.minimum(slope - 1, 2.0))
        edge = np.tanh(0.45 * (relief - gaussian_filter(relief, 1.6 * FINE)))
        hollow = np.tanh(0.12 * (relief - gaussian_filter(relief, 6 * FINE)))
        emitted = tilted * (1 + 0.45 * edge) * (1 + 0.2 * hollow)
        seen = gaussian_filter(emitted, 0.4 * FINE)
        pixels = seen.reshape(SIZE, FINE, SIZE, FINE).mean(axis=(1, 3))
        return pixels.astype(np.float32)


def edges(coupon: Coupon) -> None:
    """Lay stepped terraces, a slanted edge, a disc, a ring and a groove (upper left)."""
    for step in range(4):
        inset = 9 * step
        terrace = coupon.box(8 + inset, 8 + inset, 78 - 2 * inset, 62 - 2 * inset)
        coupon.raise_by(terrace, 1.5, 1.8 + 0.35 * step)
    x, y = coupon.x, coupon.y
    coupon.raise_by(coupon.box(94, 8, 34, 62) & (x - 104 + 0.18 * (y - 39) > 0), 4.0, 2.6)
    coupon.raise_by(np.hypot(x - 29, y - 98) < 19, 3.0, 2.2)
    coupon.raise_by(np.hypot(x - 29, y - 98) < 8, 3.0, 3.0)
    ring = np.hypot(x - 75, y - 98)
    coupon.raise_by((ring < 19) & (ring > 14), 3.0, 2.8)
    coupon.raise_by(ring < 3, 5.0, 2.8)
    groove = np.abs(y - 98 - 14 * np.sin((x - 100) / 4.5)) < 4
    coupon.raise_by(coupon.box(99, 76, 29, 44) & ~groove, 3.5, 2.0)


def gratings(coupon: Coupon) -> None:
    """Lay gratings of six pitches, a grating of dots and a fan of spokes (upper right)."""
    x, y = coupon.x, coupon.y
    for i, pitch in enumerate((16.0, 11.0, 8.0, 6.0, 4.0, 3.0)):
        left, top = 138 + 39 * (i % 3), 8 + 33 * (i // 3)
        along = x - left if i % 2 == 0 else y - top
        coupon.raise_by(coupon.box(left, top, 34, 28) & (along % pitch < pitch / 2), 2.5, 2.4)
    dots = np.hypot((x - 138) % 7 - 3.5, (y - 76) % 7 - 3.5) < 2
    coupon.raise_by(coupon.box(138, 76, 49, 49) & dots, 2.5, 2.6)
    angle, radius = np.arctan2(y - 101, x - 222), np.hypot(x - 222, y - 101)
    coupon.raise_by((radius < 26) & (np.sin(16 * angle) > 0), 2.0, 2.6)


def grains(coupon: Coupon, rng: np.random.Generator) -> None:
    """Scatter grains of many sizes, light and heavy, that do not overlap (lower left)."""
    placed: list[tuple[float, float, float]] = []
    sizes, numbers = (15, 12, 10, 8, 6, 5, 4, 3, 2, 1.2), (1, 1, 2, 3, 4, 4, 8, 12, 22, 30)
    for radius in np.repeat(sizes, numbers):
        for _ in range(200):
            x, y = rng.uniform(8 + radius, 124 - radius), rng.uniform(134 + radius, 248 - radius)
            if all(np.hypot(x - u, y - v) > radius + other + 0.5 for u, v, other in placed):
                placed.append((x, y, radius))
                coupon.grain(x, y, radius, 2.7 if rng.random() < 0.4 else 1.9)
                break


def smooth_parts(coupon: Coupon, rng: np.random.Generator) -> None:
    """Lay a ramp of yields, soft mounds, and a fine texture of low contrast with marks (lower right)."""
    x, y = coupon.x, coupon.y
    ramp = coupon.box(138, 134, 110, 22)
    coupon.material = np.where(ramp, 1.2 + 4.2 * (x - 138) / 110, coupon.material)
    mounds = coupon.box(138, 162, 52, 86)
    swell = 0.5 * np.sin((x - 138) / 52 * 2 * np.pi) * np.sin((y - 162) / 86 * 3 * np.pi)
    coupon.material = np.where(mounds, 2.6 * np.exp(swell), coupon.material)
    fine = gaussian_filter(rng.standard_normal(x.shape), 0.9 * FINE)
    weave = 2.6 * (1 + 0.06 * fine / fine.std() + 0.1 * np.sin((x + y) / 1.3))
    texture = coupon.box(196, 162, 52, 86)
    coupon.material = np.where(texture, weave, coupon.material)
    for mark in range(4):  # faint discs
        disc = np.hypot(x - 209 - 26 * (mark % 2), y - 183 - 44 * (mark // 2)) < 8
        coupon.material = np.where(disc, coupon.material * (1.08, 0.88, 1.18, 0.76)[mark], coupon.material)


def render(seed: int = SEED) -> np.ndarray:
    """Return the yield, electrons per primary, float32 (SIZE, SIZE)."""
    rng = np.random.default_rng(seed)
    coupon = Coupon()
    edges(coupon)
    gratings(coupon)
    grains(coupon, rng)
    smooth_parts(coupon, rng)
    return coupon.image()


def draw(eta: np.ndarray, seed: int = SEED) -> Frames:
    """Return the acquisition, FRAMES frames of DOSE primaries per pixel."""
    return frames(eta, DOSE, FRAMES, seed=seed)


def main() -> None:
    """Write coupon.h5 beside this script."""
    eta = render()
    save(PATH, draw(eta), truth={"electron_yield": eta}, note=NOTE)


if __name__ == "__main__":
    main()
