"""The step that accepts as often as is best, found in the burn-in by dual averaging.

Nesterov 2009, as used for trajectories by Hoffman and Gelman 2014, with their constants.
"""

from __future__ import annotations

import math


class StepSize:
    """log h follows the acceptance while burning in, and ends at a weighted mean of what it was."""

    def __init__(self, first: float, acceptance: float) -> None:
        self.step = first
        self._wanted = acceptance
        self._origin = math.log(2.0 * first)
        self._excess = 0.0
        self._mean = math.log(first)
        self._count = 0

    def update(self, acceptance: float) -> None:
        """Take in the mean acceptance of one round of trajectories."""
        self._count += 1
        rate = 1.0 / (self._count + 10.0)
        self._excess += rate * (self._wanted - acceptance - self._excess)
        logarithm = self._origin - math.sqrt(self._count) / 0.05 * self._excess
        share = self._count**-0.75
        self._mean += share * (logarithm - self._mean)
        self.step = math.exp(logarithm)

    def settle(self) -> None:
        """Keep the mean."""
        self.step = math.exp(self._mean)
