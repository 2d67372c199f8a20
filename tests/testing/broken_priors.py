"""Priors with one fault each, and words of the complaint that it must draw."""

from __future__ import annotations

import numpy as np

from priors import GeneralizedVariation
from priors.contract import Prior
from tests.testing.huber_variation import HuberVariation


class AdjointBorderElement(HuberVariation):
    complaint = "adjoint is not the exact transpose of forward at pixel (6, 3)"

    def adjoint(self, y, shape):
        x = super().adjoint(y, shape)
        x[-1, 3] = 0.0
        return x


class AffineMap(HuberVariation):
    complaint = "forward is not linear"

    def forward(self, x, v=None):
        return super().forward(x) + 1e-3


class NormTooSmall(HuberVariation):
    complaint = "norm_squared is below the squared norm of K"

    def norm_squared(self, shape):
        return 7.5


class NormTooLarge(HuberVariation):
    complaint = "norm_squared is more than 4 times the squared norm of K"

    def norm_squared(self, shape):
        return 64.0


class ValueDiffers(HuberVariation):
    complaint = "value(x) is not penalty(forward(x))"

    def value(self, x):
        return 1.001 * super().value(x)


class DualProxIgnoresStep(HuberVariation):
    complaint = "is not <p, q>"

    def dual_prox(self, y, sigma):
        return super().dual_prox(y, 1.0)


class ConjugateFactor(HuberVariation):
    complaint = "is not <p, q>"

    def conjugate(self, y):
        return 1.01 * super().conjugate(y)


class ConjugateWithoutDomain(HuberVariation):
    complaint = "penalty(p) + conjugate(y) >= <p, y> fails"

    def conjugate(self, y):
        return self.rounding / (2.0 * self.weight) * float(np.sum(np.square(y)))


class PenaltyFactor(HuberVariation):
    complaint = "is not <p, q>"

    def penalty(self, p):
        return 0.5 * super().penalty(p)


class FeasibleOutside(HuberVariation):
    complaint = "conjugate is not finite at feasible(y)"

    def feasible(self, y, shape):
        return y


class LargerWeightIsLess(HuberVariation):
    complaint = "a larger weight gives a smaller value"

    @property
    def _inverse(self):
        return HuberVariation(1.0 / self.weight, self.rounding)

    def penalty(self, p):
        return self._inverse.penalty(p)

    def dual_prox(self, y, sigma):
        return self._inverse.dual_prox(y, sigma)

    def conjugate(self, y):
        return self._inverse.conjugate(y)


class WeightSquared(LargerWeightIsLess):
    complaint = "twice the weight does not give twice the value"

    @property
    def _inverse(self):
        return HuberVariation(self.weight**2, self.rounding)


class ExpressionFactor(HuberVariation):
    complaint = "expression has another value than value"

    def expression(self, x, shape):
        total, constraints = super().expression(x, shape)
        return 1.001 * total, constraints


class ExpressionExcludesImages(HuberVariation):
    complaint = "constraints of expression exclude an image"

    def expression(self, x, shape):
        total, constraints = super().expression(x, shape)
        return total, [*constraints, x >= 0.0]


class ConicNotConvex(HuberVariation):
    complaint = "value is not convex"
    conic_only = True

    def value(self, x):
        return self.weight * float(np.sum(np.sqrt(np.abs(super().forward(x)))))


class AuxiliaryAdjointSign(GeneralizedVariation):
    complaint = "auxiliary_adjoint is not the exact transpose of forward"

    def auxiliary_adjoint(self, y, shape):
        return -super().auxiliary_adjoint(y, shape)


class ValueAtAnAuxiliaryImage(GeneralizedVariation):
    complaint = "value(x) is above penalty(forward(x, v))"

    def value(self, x):
        return self.penalty(self.forward(x, np.ones((2, *x.shape))))


class ValueNotMinimised(GeneralizedVariation):
    complaint = "expression has another value than value"

    def value(self, x):
        return self.penalty(self.forward(x))


class FeasibleOffBalance(GeneralizedVariation):
    complaint = "auxiliary_adjoint is not zero at feasible(y)"

    def feasible(self, y, shape):
        return self.dual_prox(y, 1.0)


def broken() -> list[Prior]:
    """Return an instance of every class above."""
    families = (HuberVariation, LargerWeightIsLess, GeneralizedVariation)
    kinds = [kind for family in families for kind in family.__subclasses__()]
    return [kind(weight=0.7) for kind in kinds if kind.__module__ == __name__]
