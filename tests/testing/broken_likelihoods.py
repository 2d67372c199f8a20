"""Likelihoods with one fault each, and words of the complaint that it must draw."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Interval
from tests.testing.log_variance import LogVariance, example


class GradientFactor(LogVariance):
    complaint = "gradient is not the derivative of value_map"

    def gradient(self, x):
        return 1.0001 * super().gradient(x)


class CurvatureSign(LogVariance):
    complaint = "curvature is not the derivative of gradient"

    def curvature(self, x):
        return -super().curvature(x)


class NotZeroAtPerfectFit(LogVariance):
    complaint = "value_map is not zero at a perfect fit"

    def value_map(self, x):
        return super().value_map(x) + 0.01 * self.has_data


class NegativeValue(LogVariance):
    complaint = "value_map is negative"

    def value_map(self, x):
        return super().value_map(x) - 0.5 * self.has_data


class ValueIsAMean(LogVariance):
    complaint = "value is not the sum of value_map"

    def value(self, x):
        return float(np.mean(self.value_map(x)))


class EstimateOff(LogVariance):
    complaint = "estimate fits worse than another image"

    def estimate(self):
        return super().estimate() + np.float32(0.7)


class MissingPixelsCount(LogVariance):
    complaint = "fisher_information is not zero where there is no data"

    def fisher_information(self, x):
        return 0.5 * np.maximum(self.nu, 1.0)


class ResidualSign(LogVariance):
    complaint = "residuals have the wrong sign"

    def residuals(self, x):
        return -super().residuals(x)


class ResidualSize(LogVariance):
    complaint = "the square of residuals is not twice value_map"

    def residuals(self, x):
        return super().residuals(x) / np.sqrt(2.0)


class FisherFactor(LogVariance):
    complaint = "another variance than fisher_information"

    def fisher_information(self, x):
        return self.nu


class BiasedDraw(LogVariance):
    complaint = "has another mean"

    def draw(self, x, seed):
        return super().draw(x + 0.1, seed)


class OverdispersedDraw(LogVariance):
    complaint = "another variance than fisher_information"

    def draw(self, x, seed):
        rng = np.random.default_rng(seed)
        level = rng.gamma(10.0, 0.1, x.shape)  # of mean one, so that the score's mean stays zero
        return super().draw(x + np.log(level), rng)


class DrawForgetsSeed(LogVariance):
    complaint = "draws of two seeds agree"

    def draw(self, x, seed):
        return super().draw(x, 1)


class DrawWithoutSeed(LogVariance):
    complaint = "draws of one seed differ"

    def draw(self, x, seed):
        return super().draw(x, None)


class WrongDomain(LogVariance):
    complaint = "default_bounds leave the domain"

    @property
    def domain(self):
        return Interval(0.0, 1.0)


class SinglePrecision(LogVariance):
    complaint = "curvature has the wrong type or shape"

    def curvature(self, x):
        return super().curvature(x).astype(np.float32)


class Variance(LogVariance):
    """The same data with x the variance itself: not convex where x is more than twice the data."""

    complaint = "value_map is declared convex and lies above its chord"

    @property
    def domain(self):
        return Interval(0.0, np.inf, low_open=True, high_open=True)

    @property
    def default_bounds(self):
        return 0.0, 2.0 * float(self.s2.max())

    def estimate(self):
        return np.exp(super().estimate())

    def value_map(self, x):
        return super().value_map(np.log(x))

    def gradient(self, x):
        return 0.5 * self.nu * (x - self.s2) / x**2

    def curvature(self, x):
        return 0.5 * self.nu * (2.0 * self.s2 - x) / x**3

    def fisher_information(self, x):
        return 0.5 * self.nu / x**2

    def residuals(self, x):
        return LogVariance(self.s2, self.nu).residuals(np.log(x))

    def draw(self, x, seed):
        return super().draw(np.log(x), seed)


class ClosedEnd(Variance):
    complaint = "value_map is not finite at a closed end of the domain"

    @property
    def domain(self):
        return Interval(0.0, np.inf, high_open=True)


def broken() -> list[LogVariance]:
    """Return an instance of every class above."""
    good = example()
    kinds = [kind for kind in LogVariance.__subclasses__() if kind.__module__ == __name__]
    return [kind(good.s2, good.nu) for kind in (*kinds, ClosedEnd)]
