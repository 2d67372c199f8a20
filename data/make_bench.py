"""Makes bench.h5: an invented ranging-bench scene, rendered by casting one ray per pixel.

Run from the project root: python data/make_bench.py

The camera sits at the origin: x to the right, y down, z ahead, metres. Depth is the range along the ray.
Reflectivity is the albedo shaded by the angle to the lamp, which sits at the camera.
"""

from collections.abc import Callable
from pathlib import Path

import numpy as np

from recon.acquisition import GaussianPulse, TimeTags
from recon.files import save
from recon.simulate import time_tags

PATH = Path(__file__).with_name("bench.h5")
SEED = 20_240_817
SIZE = 256
FOCAL = 350.0  # pixels: a field of view of 40 degrees
TRIALS = 1000
PERIOD = 100e-9  # s
PULSE_RMS = 0.27e-9  # s
DARK = 0.055  # albedo of the dark post
DETECTIONS = 0.5  # signal and background alike, expected per pixel on average
NOTE = (
    "Invented ranging-bench scene, drawn with known truth; no instrument recorded it. "
    "truth/depth is the range along the ray in metres; truth/reflectivity has no unit."
)

Vector = tuple[float, float, float]
Albedo = float | Callable[[np.ndarray], np.ndarray]


class Scene:
    """The nearest surface met so far along each ray."""

    def __init__(self) -> None:
        row, column = np.mgrid[:SIZE, :SIZE] - (SIZE - 1) / 2
        rays = np.stack([column, row, np.full_like(row, FOCAL)], axis=-1)
        self.rays = rays / np.linalg.norm(rays, axis=-1, keepdims=True)
        self.depth = np.full((SIZE, SIZE), np.inf)
        self.reflectivity = np.zeros((SIZE, SIZE))

    def meet(self, depth: np.ndarray, normal: np.ndarray, albedo: Albedo) -> None:
        """Let a surface hide what lies behind it; `depth` is inf where a ray misses it."""
        points = self.rays * np.where(np.isfinite(depth), depth, 0.0)[..., None]
        colour = albedo(points) if callable(albedo) else albedo
        cosine = np.abs(np.sum(self.rays * normal, axis=-1))
        nearer = (depth > 0) & (depth < self.depth)
        shaded = np.clip(colour * (0.2 + 0.8 * cosine), 0.03, 1.0)
        self.depth = np.where(nearer, depth, self.depth)
        self.reflectivity = np.where(nearer, shaded, self.reflectivity)

    def plane(self, point: Vector, normal: Vector, albedo: Albedo, inside: Callable | None = None) -> None:
        """Add a plane, or the part of it whose points are `inside`."""
        n = np.array(normal) / np.linalg.norm(normal)
        depth = np.dot(point, n) / (self.rays @ n)
        depth = np.where(depth > 0, depth, np.inf)
        if inside is not None:
            points = self.rays * np.where(np.isfinite(depth), depth, 0.0)[..., None]
            depth = np.where(inside(points), depth, np.inf)
        self.meet(depth, n, albedo)

    def sphere(self, centre: Vector, radius: float, albedo: Albedo) -> None:
        """Add a sphere."""
        along = self.rays @ np.array(centre)
        inside = radius**2 - np.dot(centre, centre) + along**2
        depth = np.where(inside > 0, along - np.sqrt(np.maximum(inside, 0)), np.inf)
        normal = self._normal(depth, lambda points: points - np.array(centre))
        self.meet(depth, normal, albedo)

    def rod(self, start: Vector, end: Vector, radius: float, albedo: Albedo) -> None:
        """Add a straight round rod (its flat ends are left open)."""
        start, end = np.array(start), np.array(end)
        length = np.linalg.norm(end - start)
        axis = (end - start) / length
        across = self.rays - (self.rays @ axis)[..., None] * axis
        base = start - (start @ axis) * axis
        a, b = np.sum(across**2, axis=-1), across @ base
        inside = b**2 - a * (base @ base - radius**2)
        depth = np.where(inside > 0, (b - np.sqrt(np.maximum(inside, 0))) / a, np.inf)
        height = np.where(np.isfinite(depth), depth, 0) * (self.rays @ axis) - start @ axis
        depth = np.where((height >= 0) & (height <= length), depth, np.inf)
        normal = self._normal(depth, lambda p: (p - start) - ((p - start) @ axis)[..., None] * axis)
        self.meet(depth, normal, albedo)

    def box(self, centre: Vector, size: Vector, turn: float, albedo: Albedo) -> None:
        """Add a box turned about the vertical axis by `turn` radians."""
        cos, sin = np.cos(turn), np.sin(turn)
        axes = np.array([[cos, 0, sin], [0, 1, 0], [-sin, 0, cos]])
        rays, origin = self.rays @ axes.T, -axes @ np.array(centre)
        half = np.array(size) / 2
        with np.errstate(divide="ignore"):
            near = (-np.sign(rays) * half - origin) / rays
            far = (np.sign(rays) * half - origin) / rays
        entry = near.max(axis=-1)
        depth = np.where(entry < far.min(axis=-1), entry, np.inf)
        self.meet(depth, axes[near.argmax(axis=-1)], albedo)

    def corrugated(self, z: float, height: float, pitch: float, albedo: Albedo, inside: Callable) -> None:
        """Add a sheet z = z + height * sin(2 pi x / pitch), or the part of it whose points are `inside`."""
        wave = 2 * np.pi / pitch
        depth = z / self.rays[..., 2]
        for _ in range(60):  # a contraction while the rays are steeper than the sheet
            depth = (z + height * np.sin(wave * depth * self.rays[..., 0])) / self.rays[..., 2]
        points = self.rays * depth[..., None]
        slope = height * wave * np.cos(wave * points[..., 0])
        normal = np.stack([slope, np.zeros_like(slope), -np.ones_like(slope)], axis=-1)
        normal /= np.linalg.norm(normal, axis=-1, keepdims=True)
        self.meet(np.where(inside(points), depth, np.inf), normal, albedo)

    def _normal(self, depth: np.ndarray, outwards: Callable) -> np.ndarray:
        normal = outwards(self.rays * np.where(np.isfinite(depth), depth, 0.0)[..., None])
        return normal / np.maximum(np.linalg.norm(normal, axis=-1, keepdims=True), 1e-12)


def checker(points: np.ndarray, pitch: float, dark: float, light: float) -> np.ndarray:
    """Return a checker of two albedos in x and y."""
    odd = (np.floor(points[..., 0] / pitch) + np.floor(points[..., 1] / pitch)) % 2
    return np.where(odd == 1, dark, light)


def within(points: np.ndarray, x: tuple[float, float], y: tuple[float, float]) -> np.ndarray:
    """Return where points lie in a rectangle of x and y."""
    px, py = points[..., 0], points[..., 1]
    return (px > x[0]) & (px < x[1]) & (py > y[0]) & (py < y[1])


def wall_albedo(points: np.ndarray) -> np.ndarray:
    """Return the back wall's paint: with a checker panel and a gradient strip at the wall's own depth."""
    albedo = np.where(points[..., 1] > 0.55, 0.42, 0.62)
    panel = within(points, (-0.35, 0.37), (-1.35, -0.63))
    albedo = np.where(panel, checker(points, 0.12, 0.12, 0.95), albedo)
    strip = within(points, (-0.35, 1.15), (-0.5, -0.32))
    return np.where(strip, 0.05 + 0.95 * (points[..., 0] + 0.35) / 1.5, albedo)


def grid(points: np.ndarray, pitch: float, wire: float) -> np.ndarray:
    """Return where the wires and the frame of a wire grid are."""
    x, y = points[..., 0] + 1.02, points[..., 1] + 0.82
    panel = (x > 0) & (x < 0.72) & (y > 0) & (y < 0.72)
    frame = (np.minimum(x, y) < 0.03) | (np.maximum(x, y) > 0.69)
    return panel & (frame | (x % pitch < wire) | (y % pitch < wire))


def lid(points: np.ndarray) -> np.ndarray:
    """Return where the top of the dark post is."""
    return np.hypot(points[..., 0] - 0.72, points[..., 2] - 3.1) < 0.12


def hoop(points: np.ndarray) -> np.ndarray:
    """Return where the hoop is."""
    return np.abs(np.hypot(points[..., 0] - 0.3, points[..., 1] + 0.62) - 0.2) < 0.018


def render() -> tuple[np.ndarray, np.ndarray]:
    """Return depth (m, along the ray) and reflectivity, each float32 (SIZE, SIZE)."""
    scene = Scene()
    room(scene)
    solids(scene)
    thin_things(scene)
    return scene.depth.astype(np.float32), scene.reflectivity.astype(np.float32)


def room(scene: Scene) -> None:
    """Add the walls, the floor with its joints, a ramp and a corrugated sheet."""
    scene.plane((0, 0, 4.6), (0.06, 0, -1), wall_albedo)
    scene.plane((0, 0.95, 4), (0, -1, 0), lambda p: np.where((p[..., 2] * 2.5) % 1 < 0.12, 0.3, 0.55))
    scene.plane((1.42, 0, 4), (-1, 0, -0.12), 0.5)
    ramp = (0, -np.cos(0.45), -np.sin(0.45))
    scene.plane((0.8, 0.95, 3.0), ramp, 0.75, lambda p: within(p, (0.44, 1.16), (0.52, 0.95)))
    scene.corrugated(4.2, 0.04, 0.2, 0.7, lambda p: within(p, (0.48, 1.08), (-1.3, -0.6)))


def solids(scene: Scene) -> None:
    """Add a stepped block whose steps differ in depth alone, a box, two balls and a dark post."""
    for step, rise in enumerate((0.14, 0.09, 0.05, 0.02, 0.0)):
        scene.box((0.11 * step, 0.47, 3.6 - rise), (0.11, 0.9, 0.3), 0.0, 0.7)
    scene.box((-0.95, 0.62, 3.5), (0.55, 0.66, 0.5), 0.6, 0.85)
    scene.sphere((-0.92, 0.09, 3.42), 0.2, 0.9)
    scene.sphere((-0.36, 0.16, 3.0), 0.09, 0.35)
    scene.rod((0.72, 0.95, 3.1), (0.72, 0.2, 3.1), 0.12, DARK)
    scene.plane((0.72, 0.2, 3.1), (0, -1, 0), DARK, lid)


def thin_things(scene: Scene) -> None:
    """Add a slanted wire grid with a brace, the legs under the small ball, a hoop and three rods."""
    scene.plane((0, 0, 2.9), (0.2, 0, -1), 0.85, lambda p: grid(p, 0.09, 0.012))
    for x, z in ((-0.58, 2.9), (-0.12, 2.9), (-0.36, 3.4)):
        scene.rod((-0.36, 0.16, 3.0), (x, 0.95, z), 0.011, 0.6)
    scene.plane((0.3, -0.62, 3.7), (0.3, 0.2, -1), 0.3, hoop)
    for i, radius in enumerate((0.004, 0.008, 0.012)):
        scene.rod((0.74 + 0.09 * i, -1.3, 2.7), (0.7 + 0.12 * i, 0.4, 2.7), radius, 0.8)


def draw(depth: np.ndarray, reflectivity: np.ndarray, seed: int = SEED) -> TimeTags:
    """Return the acquisition: half a signal and half a background detection per pixel on average."""
    return time_tags(
        depth,
        reflectivity,
        TRIALS,
        PERIOD,
        GaussianPulse(PULSE_RMS),
        gain=DETECTIONS / TRIALS / float(reflectivity.mean(dtype=np.float64)),
        background=DETECTIONS / TRIALS,
        seed=seed,
    )


def main() -> None:
    """Write bench.h5 beside this script."""
    depth, reflectivity = render()
    truth = {"depth": depth, "reflectivity": reflectivity}
    save(PATH, draw(depth, reflectivity), truth=truth, note=NOTE)


if __name__ == "__main__":
    main()
