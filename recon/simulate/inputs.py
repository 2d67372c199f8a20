"""Checks of what only a simulation takes: images, seeds, and draws that are too large."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.errors import InputError
from recon.validation import NONNEGATIVE, POSITIVE, Range, number, real_values


def image_of(value: ArrayLike, name: str, allowed: Range = NONNEGATIVE) -> NDArray[np.float64]:
    """The value as a float64 image (rows, columns) inside `allowed`."""
    image = real_values(value, name, allowed)
    if image.ndim != 2:
        raise InputError(f"{name} has shape {image.shape}; give an image (rows, columns).")
    return image.astype(np.float64)


def positive_whole(value: ArrayLike, name: str) -> int:
    """The value as a whole number of one or more."""
    result = number(value, name, POSITIVE)
    if result != int(result):
        raise InputError(f"{name} is {result}; give a whole number of one or more.")
    return int(result)


def boolean_map(value: ArrayLike, name: str, shape: tuple[int, int]) -> NDArray[np.bool_]:
    """The value as a boolean map (rows, columns)."""
    values = np.asarray(value)
    if values.dtype.kind != "b" or values.shape != shape:
        raise InputError(
            f"{name} has shape {values.shape} and type {values.dtype.name}; "
            f"give a boolean map of shape {shape}."
        )
    return values


def generator(seed: int | np.random.Generator) -> np.random.Generator:
    """The random generator that `seed` names, or `seed` itself if it is one."""
    if isinstance(seed, np.random.Generator):
        return seed
    if isinstance(seed, bool) or not isinstance(seed, int | np.integer) or seed < 0:
        raise InputError(f"seed is {seed!r}; give a whole number, 0 or more, or a numpy Generator.")
    return np.random.default_rng(int(seed))


def product(shape: tuple[int, int], *factors: float | NDArray) -> NDArray[np.float64]:
    """The product of numbers and maps as a float64 map; `affordable` refuses an overflow (inf or NaN)."""
    result = np.ones(shape)
    with np.errstate(over="ignore", invalid="ignore", under="ignore"):
        for factor in factors:
            result *= factor
    return result


def affordable(arguments: str, expected: float, what: str, most: float) -> None:
    """Refuse a draw that expects more than `most`, or NaN."""
    if not expected <= most:
        raise InputError(f"{arguments} call for {expected:.3g} {what}; lower them to at most {most:.0e}.")
