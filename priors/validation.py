"""Checks of prior settings: one sentence that says what is wrong, where, and what to do about it."""

from __future__ import annotations

import numpy as np


class PriorError(ValueError):
    """A setting of a prior, or an image given to it, cannot be used."""


def positive(name: str, value: object) -> float:
    """Return `value` as a float, or raise PriorError unless it is a finite number above zero."""
    try:
        number = float(value)  # type: ignore[arg-type]
    except (TypeError, ValueError):
        raise PriorError(f"{name} is {value!r}; give a single number above zero.") from None
    if not (np.isfinite(number) and number > 0.0):
        raise PriorError(f"{name} is {value!r}; give a finite number above zero.")
    return number


def weight(value: object) -> float | None:
    """Return the weight as a float, or None where it is still to be chosen; else raise PriorError."""
    return None if value is None else positive("weight", value)


def pixel_spacing(spacing: object) -> tuple[float, float]:
    """Return (row, column) spacing from a number or a pair, or raise PriorError."""
    try:
        pair = np.broadcast_to(np.asarray(spacing, dtype=np.float64), (2,))
    except (TypeError, ValueError):
        raise PriorError(f"spacing is {spacing!r}; give one number or a (row, column) pair.") from None
    return positive("spacing (row)", pair[0]), positive("spacing (column)", pair[1])


def image_shape(shape: object) -> tuple[int, int]:
    """Return `shape` as (rows, columns), or raise PriorError."""
    try:
        rows, columns = (int(n) for n in shape)  # type: ignore[union-attr]
    except (TypeError, ValueError):
        raise PriorError(f"shape is {shape!r}; priors act on images of shape (rows, columns).") from None
    if rows < 1 or columns < 1:
        raise PriorError(f"shape is {shape!r}; an image needs at least one row and one column.")
    return rows, columns


def image_mask(mask: object) -> np.ndarray | None:
    """Return a read-only boolean map (True where the pixel exists), or None."""
    if mask is None:
        return None
    array = np.array(mask)
    if array.dtype != bool or array.ndim != 2:
        raise PriorError(
            f"mask has shape {array.shape} and type {array.dtype}; give a (rows, columns) map of booleans,"
            " True where the pixel exists."
        )
    array.flags.writeable = False
    return array


def same_shape(name: str, array: np.ndarray | None, shape: tuple[int, int]) -> None:
    """Raise PriorError unless the last two dimensions of `array` are the image's."""
    if array is not None and array.shape[-2:] != tuple(shape):
        raise PriorError(f"{name} has shape {array.shape} but the image has {tuple(shape)}; make them equal.")


def edge_weights(values: object, above_zero: bool = False) -> np.ndarray | None:
    """Return read-only float32 edge weights of shape (rows, columns) or (2, rows, columns), or None."""
    if values is None:
        return None
    shapes = "numbers of shape (rows, columns), or (2, rows, columns) for the row and column directions"
    try:
        array = np.array(values, dtype=np.float32)
    except (TypeError, ValueError):
        raise PriorError(f"edge_weights is not an array of numbers; give {shapes}.") from None
    if array.ndim not in (2, 3) or array.size == 0 or (array.ndim == 3 and array.shape[0] != 2):
        raise PriorError(f"edge_weights has shape {array.shape}; give {shapes}.")
    bad = ~(np.isfinite(array) & ((array > 0.0) if above_zero else (array >= 0.0)))
    if bad.any():
        place = tuple(int(i) for i in np.argwhere(bad)[0])
        wanted = "above zero" if above_zero else "of zero or more"
        raise PriorError(f"edge_weights at {place} is {array[place]}; give finite numbers {wanted}.")
    array.flags.writeable = False
    return array
