"""What a test says: a number, what was expected of it, and how likely that much is by chance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.stats import norm, t


@dataclass(frozen=True)
class Statistic:
    """One number that the data give, beside what the model expects of it.

    observed, expected: in the same unit. standard_deviation: of observed, if the model is right, with that of
        expected, which simulations give.
    p_value: the chance of as much or more, if the model is right.
    threshold: p_value below which the statistic denies the model; 0 where it is told for information only.
    """

    name: str
    observed: float
    expected: float
    standard_deviation: float
    p_value: float
    threshold: float = 0.0

    @property
    def denies(self) -> bool:
        """Whether the statistic denies the model."""
        return self.p_value < self.threshold

    @property
    def z(self) -> float:
        """Standard deviations by which the observed value is above the expected one."""
        if self.standard_deviation > 0.0:
            return (self.observed - self.expected) / self.standard_deviation
        return 0.0


@dataclass(frozen=True)
class Finding:
    """What does not fit.

    cause: its name, of `recon.fit.words.CAUSES`. sentence: with the numbers. remedy: what to do.
    """

    cause: str
    sentence: str
    remedy: str


def normal_statistic(
    name: str, observed: float, expected: float, deviation: float, side: int = 0, threshold: float = 0.0
) -> Statistic:
    """Return a statistic that is normal under the model.

    side: 1 = too much denies, -1 = too little, 0 = either.
    """
    z = (observed - expected) / deviation if deviation > 0.0 else 0.0
    p = 2.0 * norm.sf(abs(z)) if side == 0 else norm.sf(side * z)
    return Statistic(name, float(observed), float(expected), float(deviation), float(p), threshold)


def simulated_statistic(
    name: str, observed: float, drawn: np.ndarray, side: int = 0, threshold: float = 0.0
) -> Statistic:
    """Return a statistic whose mean and spread come from simulations, by Student's law (1908).

    drawn: (simulations,), two or more. The standard deviation covers that of the mean.
    """
    number = len(drawn)
    deviation = float(np.std(drawn, ddof=1)) * np.sqrt(1.0 + 1.0 / number)
    expected = float(np.mean(drawn))
    z = (observed - expected) / deviation if deviation > 0.0 else 0.0
    p = 2.0 * t.sf(abs(z), number - 1) if side == 0 else t.sf(side * z, number - 1)
    return Statistic(name, float(observed), expected, float(deviation), float(p), threshold)
