"""Convex likelihoods with one fault each in what a solver uses, and words of the complaint it must draw."""

from __future__ import annotations

import numpy as np

from tests.testing.log_variance import LogVariance, example


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


def broken() -> list[LogVariance]:
    """Return an instance of every class above."""
    good = example()
    kinds = [kind for kind in LogVariance.__subclasses__() if kind.__module__ == __name__]
    return [kind(good.s2, good.nu) for kind in kinds]
