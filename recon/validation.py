"""Checks shared by everything that takes numbers from outside.

An argument is converted, checked and copied once. The check is a minimum and a maximum, which cost no
temporary array and let a NaN through to fail the comparison; only when it fails is the first
offending entry looked for.
"""

import os
import sys
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.errors import InputError

LARGEST = sys.float_info.max
SMALLEST = float(np.nextafter(0.0, 1.0))
LARGEST_COUNT = 2**53  # beyond it a float no longer tells neighbouring whole numbers apart
BLOCK = 1 << 20  # entries looked at together where a check needs a temporary


@dataclass(frozen=True)
class Range:
    """The closed interval an argument must lie in, and the words that tell a reader what to give."""

    words: str
    low: float = -LARGEST
    high: float = LARGEST

    def holds(self, low: float, high: float) -> bool:
        return self.low <= low and high <= self.high

    def outside(self, values: NDArray) -> NDArray:
        """Boolean array of the entries outside; NaN is outside."""
        # float64 scalars: a Python float would be rounded to the type of a float32 array
        return ~((values >= np.float64(self.low)) & (values <= np.float64(self.high)))


FINITE = Range("a finite number")
POSITIVE = Range("a finite number above 0", low=SMALLEST)
NONNEGATIVE = Range("a finite number, 0 or more", low=0.0)
COUNT = Range("whole numbers between 0 and 2**53", low=0, high=LARGEST_COUNT)
# Bounds on times keep every square and quotient of them finite, from an attosecond to three decades.
DURATION = Range("a time in seconds between 1e-18 and 1e9", low=1e-18, high=1e9)
INSTANT = Range("a time in seconds between -1e9 and 1e9", low=-1e9, high=1e9)


def memory_limit() -> int:
    """Half the machine's memory in bytes: a loaded array and the copy an acquisition keeps both fit."""
    try:
        return os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE") // 2
    except (AttributeError, OSError, ValueError):  # not every system can tell
        return 1 << 33


def store(instance: object, **values: object) -> None:
    """Set fields of a frozen dataclass while it is being made."""
    for name, value in values.items():
        object.__setattr__(instance, name, value)


def frozen(values: NDArray) -> NDArray:
    values.setflags(write=False)
    return values


def first(bad: NDArray) -> tuple[int, ...]:
    """Index of the first True entry of a boolean array that has one."""
    return tuple(int(i) for i in np.unravel_index(int(np.argmax(bad)), bad.shape))


def refuse(name: str, values: NDArray, bad: NDArray, words: str) -> None:
    """Raise InputError for the first True entry of `bad`."""
    place = first(bad)
    where = f" at {place}" if place else ""
    raise InputError(f"{name}{where} is {values[place]}; give {words}.")


def real_array(value: ArrayLike, name: str) -> NDArray:
    """The value as a non-empty array of real numbers (not booleans), not yet copied."""
    if isinstance(value, np.ma.MaskedArray):
        raise InputError(f"{name} is a masked array; give its plain numbers, and the usable pixels as mask.")
    try:
        values = np.asarray(value)
    except Exception as error:  # an object may raise anything while it is turned into an array
        raise InputError(f"{name} is not an array of numbers; give numbers in equal rows.") from error
    if values.dtype.kind not in "iuf":
        raise InputError(f"{name} holds {values.dtype.name} values; give integers or real numbers.")
    if values.size == 0:
        raise InputError(f"{name} is empty, with shape {values.shape}; give at least one entry.")
    return values


def number(value: ArrayLike, name: str, allowed: Range = FINITE) -> float:
    """The value as one Python float inside `allowed`."""
    values = real_array(value, name)
    if values.ndim:
        raise InputError(f"{name} has shape {values.shape}; give one number.")
    with np.errstate(all="ignore"):
        result = float(values)
    if not allowed.holds(result, result):
        raise InputError(f"{name} is {result}; give {allowed.words}.")
    return result


def real_values(value: ArrayLike, name: str, allowed: Range = FINITE) -> NDArray:
    """A read-only copy inside `allowed`: float32 where that is exact for the type given, else float64."""
    values = real_array(value, name)
    dtype = np.result_type(values.dtype, np.float32)
    with np.errstate(all="ignore"):
        values = np.array(values, dtype=min(dtype, np.dtype(np.float64)), order="C", copy=True)
        if not allowed.holds(float(values.min()), float(values.max())):
            refuse(name, values, allowed.outside(values), allowed.words)
    return frozen(values)


def number_or_map(value: ArrayLike, name: str, shape: tuple[int, int], allowed: Range) -> float | NDArray:
    """One Python float, or a read-only float map of the given (rows, columns)."""
    values = real_array(value, name)
    if values.ndim == 0:
        return number(values, name, allowed)
    if values.shape != shape:
        raise InputError(f"{name} has shape {values.shape}; give one number or a map of shape {shape}.")
    return real_values(values, name, replace(allowed, words=f"{allowed.words}, in masked pixels too"))


def whole_numbers(
    value: ArrayLike, name: str, allowed: Range = COUNT, keep_small: bool = False
) -> NDArray[np.integer]:
    """A read-only copy as integers: int32 where they fit, else int64.

    With `keep_small`, integer types of up to four bytes stay as they are and anything else takes the
    smallest unsigned type that holds it. `allowed` must lie within 0 and `LARGEST_COUNT`.
    """
    values = real_array(value, name)
    with np.errstate(all="ignore"):
        high = values.max()
        if not allowed.holds(values.min(), high):
            refuse(name, values, allowed.outside(values), allowed.words)
        if not keep_small:
            dtype = np.dtype(np.int32 if high <= np.iinfo(np.int32).max else np.int64)
        elif values.dtype.kind in "iu" and values.dtype.itemsize <= 4:
            dtype = values.dtype.newbyteorder("=")
        else:
            dtype = np.min_scalar_type(int(high))
        whole = np.array(values, dtype=dtype, order="C", copy=True)
        if values.dtype.kind == "f" and not np.array_equal(whole, values):
            refuse(name, values, whole != values, allowed.words)
    return frozen(whole)


def check_whole(values: float | NDArray, name: str, remedy: str) -> None:
    """Raise InputError for the first entry of a float or a contiguous float array that has a fraction."""
    values = np.asarray(values)
    flat = values.reshape(-1)
    for begin in range(0, flat.size, BLOCK):
        block = flat[begin : begin + BLOCK]
        if not np.array_equal(np.trunc(block), block):
            refuse(name, values, np.trunc(values) != values, remedy)


def usable_pixels(mask: ArrayLike | None, shape: tuple[int, int]) -> NDArray[np.bool_] | None:
    """A read-only copy of a mask (True = usable pixel), or None."""
    if mask is None:
        return None
    try:
        values = np.asarray(mask)
    except Exception as error:  # as in real_array
        raise InputError(f"mask is not an array; give a boolean map of shape {shape}.") from error
    if values.dtype.kind != "b" or values.shape != shape:
        raise InputError(
            f"mask has shape {values.shape} and type {values.dtype.name}; "
            f"give a boolean map of shape {shape}, True where a pixel is usable."
        )
    if not values.any():
        raise InputError("mask is False everywhere; leave at least one pixel usable.")
    return frozen(np.array(values, order="C", copy=True))


def flag(value: bool, name: str) -> bool:
    """The value as a Python bool."""
    if not isinstance(value, bool | np.bool_):
        raise InputError(f"{name} is {type(value).__name__}; give True or False.")
    return bool(value)
