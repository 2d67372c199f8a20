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


class ProxStep(LogVariance):
    complaint = "(v - prox(v)) / step is not the gradient there"

    def prox(self, v, step):
        return super().prox(v, 1.01 * step)


class StepLength(LogVariance):
    complaint = "than the clipped prox does"

    def proximal_step(self, x, adjoint, extrapolated, step, relaxation, low, high):
        super().proximal_step(x, adjoint, extrapolated, 1.01 * step, relaxation, low, high)


class StepRelaxation(LogVariance):
    complaint = "proximal_step leaves another x"

    def proximal_step(self, x, adjoint, extrapolated, step, relaxation, low, high):
        super().proximal_step(x, adjoint, extrapolated, step, 1.0, low, high)


class StepWithoutClip(LogVariance):
    complaint = "proximal_step leaves x above its upper bound"

    def proximal_step(self, x, adjoint, extrapolated, step, relaxation, low, high):
        super().proximal_step(x, adjoint, extrapolated, step, relaxation, -np.inf, np.inf)


class StepWithoutExtrapolation(LogVariance):
    complaint = "proximal_step leaves another extrapolated image"

    def proximal_step(self, x, adjoint, extrapolated, step, relaxation, low, high):
        super().proximal_step(x, adjoint, extrapolated, step, relaxation, low, high)
        extrapolated[...] = x


class ConjugateFactor(LogVariance):
    complaint = "is not u x - value_map(x) at its maximiser"

    def conjugate_map(self, u, low, high):
        return 1.0001 * super().conjugate_map(u, low, high)


class ConjugateIgnoresBox(LogVariance):
    complaint = "is not u x - value_map(x) at its maximiser"

    def conjugate_map(self, u, low, high):
        return super().conjugate_map(u, low - 1.0, high + 1.0)


class ConjugateAtTheWrongEnd(LogVariance):
    complaint = "is below u x - value_map(x) of an x in the box"

    def conjugate_map(self, u, low, high):
        lowest = u * low - self.value_map(np.full(u.shape, low)) if np.isfinite(low) else np.inf
        return np.where(u > 0.5 * self.nu, lowest, super().conjugate_map(u, low, high))


class ConjugateBeyondEverySlope(LogVariance):
    complaint = "is not the largest u x - value_map(x) in the box"

    def conjugate_map(self, u, low, high):
        return super().conjugate_map(np.minimum(u, 0.5 * self.nu), low, high)


class ConjugateIsAMean(LogVariance):
    complaint = "is not the sum of conjugate_map"

    def conjugate(self, u, low, high):
        return float(np.mean(self.conjugate_map(u, low, high)))


class ExpressionFactor(LogVariance):
    complaint = "expression has another value than value"

    def expression(self, x):
        total, constraints = super().expression(x)
        return 1.001 * total, constraints


class ExpressionNotConvex(LogVariance):
    complaint = "expression is not one convex number"

    def expression(self, x):
        total, constraints = super().expression(x)
        return -total, constraints


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


def broken() -> list[LogVariance]:
    """Return an instance of every class above."""
    good = example()
    return [kind(good.s2, good.nu) for kind in LogVariance.__subclasses__()]
