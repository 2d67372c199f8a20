"""A depth image as points in space."""

from __future__ import annotations

import numpy as np

from recon.errors import InputError
from recon.imaging.depth import DepthImage
from recon.imaging.image import PhysicalImage
from recon.validation import POSITIVE, Range, number

POINT = np.dtype(
    [("x", "f8"), ("y", "f8"), ("z", "f8"), ("reflectivity", "f4"), ("uncertainty", "f4"), ("row", "i4"),
     ("column", "i4")]
)  # fmt: skip
ANGLE = Range("an angle between 1e-9 and 3.1 rad", 1e-9, 3.1)
PROBABILITY = Range("a probability between 0 and 1", 0.0, 1.0)


def point_cloud(
    depth: DepthImage,
    reflectivity: PhysicalImage,
    *,
    pitch: float | tuple[float, float] | None = None,
    field_of_view: tuple[float, float] | None = None,
    least_target: float = 0.5,
    filled: bool = False,
) -> np.ndarray:
    """Return the surface as a structured array: x, y, z in m, reflectivity, uncertainty (m), row, column.

    The instrument looks along z; x runs with the columns, y against the rows (up in the picture), and the
    middle of the image is at x = y = 0. Give one of:

    pitch: distance between pixels on the scene, m, one number or (rows, columns): parallel rays, z = range.
    field_of_view: angles (vertical, horizontal) in radians between the outer edges of the image: rays from
        the instrument, equally spaced in angle, a pixel's range along its own ray.

    least_target: points are left out where the probability of a target is below this.
    filled: whether pixels that the prior alone fills in give points, too.

    uncertainty is that of the range, along the ray. Raises InputError.
    """
    if (pitch is None) == (field_of_view is None):
        raise InputError("give either pitch or field_of_view.")
    least_target = number(least_target, "least_target", PROBABILITY)
    rows, columns = depth.image.shape
    if reflectivity.image.shape != (rows, columns):
        raise InputError(
            f"reflectivity has shape {reflectivity.image.shape}; give that of depth, {(rows, columns)}."
        )
    keep = depth.target >= least_target
    if not filled:
        keep &= ~depth.filled
    row, column = np.nonzero(keep)
    up, across = 0.5 * (rows - 1) - row, column - 0.5 * (columns - 1)
    far = depth.image[keep].astype(np.float64)
    cloud = np.empty(row.size, POINT)
    if pitch is not None:
        vertical, horizontal = _pair(pitch, "pitch", POSITIVE)
        cloud["x"], cloud["y"], cloud["z"] = horizontal * across, vertical * up, far
    else:
        vertical, horizontal = _pair(field_of_view, "field_of_view", ANGLE)
        elevation, azimuth = vertical / rows * up, horizontal / columns * across
        cloud["x"] = far * np.cos(elevation) * np.sin(azimuth)
        cloud["y"] = far * np.sin(elevation)
        cloud["z"] = far * np.cos(elevation) * np.cos(azimuth)
    cloud["reflectivity"], cloud["uncertainty"] = reflectivity.image[keep], depth.uncertainty[keep]
    cloud["row"], cloud["column"] = row, column
    return cloud


def _pair(value: object, name: str, allowed: Range) -> tuple[float, float]:
    if isinstance(value, tuple | list):
        if len(value) != 2:
            raise InputError(f"{name} has {len(value)} entries; give (vertical, horizontal).")
        return number(value[0], f"{name}[0]", allowed), number(value[1], f"{name}[1]", allowed)
    one = number(value, name, allowed)
    return one, one
