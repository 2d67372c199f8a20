"""Rates and counts of a detector with a dead time, in steady light.

Source: Knoll, *Radiation Detection and Measurement*, chapter 4.
"""

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.errors import InputError
from recon.validation import NONNEGATIVE, first, number, real_values


def non_paralysable_rate(rate: ArrayLike, dead_time: float) -> NDArray[np.float64]:
    """Recorded rate n / (1 + n tau), where what arrives in the dead time tau does not prolong it.

    rate: n, expected events per second without dead time, any shape. dead_time: tau, s.
    Raises InputError.
    """
    n, tau = _rate_and_dead_time(rate, dead_time)
    return n / (1 + n * tau)


def paralysable_rate(rate: ArrayLike, dead_time: float) -> NDArray[np.float64]:
    """Recorded rate n exp(-n tau), where everything that arrives starts the dead time tau anew.

    rate: n, expected events per second without dead time, any shape. dead_time: tau, s.
    Raises InputError.
    """
    n, tau = _rate_and_dead_time(rate, dead_time)
    return n * np.exp(-n * tau)


def true_rate(recorded: ArrayLike, dead_time: float) -> NDArray[np.float64]:
    """Rate m / (1 - m tau) without dead time: the inverse of `non_paralysable_rate`.

    recorded: m, per second, any shape, below 1 / tau. dead_time: tau, s. Raises InputError.
    """
    m, tau = _rate_and_dead_time(recorded, dead_time, "recorded")
    bad = m * tau >= 1
    if bad.any():
        place = first(bad)
        where = f" at {place}" if place else ""
        raise InputError(
            f"recorded{where} is {m[place]:g} per second, which a dead time of {tau:g} s does not allow; "
            f"give less than {1 / tau:g}, or a shorter dead time."
        )
    return m / (1 - m * tau)


def two_source_dead_time(m1: float, m2: float, m12: float, background: float = 0.0) -> float:
    """Dead time in s of a non-paralysable detector, from two sources alone and together (Knoll).

    m1, m2, m12: recorded rates with the one source, the other, and both, per second, background included.
    background: recorded rate without either.

    With X = m1 m2 - b m12, Y = m1 m2 (m12 + b) - b m12 (m1 + m2) and Z = Y (m1 + m2 - m12 - b) / X^2:
    tau = X (1 - sqrt(1 - Z)) / Y. Raises InputError where the rates admit no dead time of 0 or more.
    """
    m1, m2, m12, b = (
        number(value, name, NONNEGATIVE)
        for value, name in ((m1, "m1"), (m2, "m2"), (m12, "m12"), (background, "background"))
    )
    lost = m1 + m2 - m12 - b
    if not (lost >= 0 and b < m1 <= m12 and b < m2 <= m12):
        raise InputError(
            f"m12 is {m12:g} per second, with m1 {m1:g}, m2 {m2:g} and background {b:g}; give m12 at most "
            "m1 + m2 - background and at least each, and background below each, or measure for longer."
        )
    x = m1 * m2 - b * m12
    y = m1 * m2 * (m12 + b) - b * m12 * (m1 + m2)
    root = math.sqrt(max(1 - y * lost / x**2, 0.0))  # below 0 by rounding only, at m12 = m1 or m2
    return lost / (x * (1 + root))  # the same, without the difference of near equals


def count_variance(rate: ArrayLike, dead_time: float, duration: float) -> NDArray[np.float64]:
    """Variance n T / (1 + n tau)^3 of the number recorded in a long time T (Mueller 1973).

    rate: n, expected events per second without dead time, any shape. dead_time: tau, s, non-paralysable.
    duration: T, s, many times 1/n and tau. Raises InputError.
    """
    n, tau = _rate_and_dead_time(rate, dead_time)
    return n * number(duration, "duration", NONNEGATIVE) / (1 + n * tau) ** 3


def _rate_and_dead_time(
    rate: ArrayLike, dead_time: float, name: str = "rate"
) -> tuple[NDArray[np.float64], float]:
    tau = number(dead_time, "dead_time", NONNEGATIVE)
    return real_values(rate, name, NONNEGATIVE).astype(np.float64), tau
