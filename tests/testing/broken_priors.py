"""Priors with one fault each, and words of the complaint that it must draw."""

from __future__ import annotations

import numpy as np

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


class ChangedBlock(HuberVariation):
    """The base of priors whose block is at fault: `change` alters a good one."""

    complaint = ""

    def block(self, shape):
        block = super().block(shape)
        self.change(block)
        return block

    def change(self, block):
        raise NotImplementedError


class BlockWithoutRelaxation(ChangedBlock):
    complaint = "gives another K' y than the contract's step"

    def change(self, block):
        step = block.step
        block.step = lambda image, sigma, tau, relaxation, adjoint, fresh: step(
            image, sigma, tau, 1.0, adjoint, fresh
        )


class BlockNeverAdds(ChangedBlock):
    complaint = "(fresh = False) gives another K' y than the contract's step"

    def change(self, block):
        step = block.step
        block.step = lambda image, sigma, tau, relaxation, adjoint, fresh: step(
            image, sigma, tau, relaxation, adjoint, True
        )


class BlockMovedSquared(ChangedBlock):
    complaint = "moved is not the distance of the duals from mark"

    def change(self, block):
        moved = block.moved
        block.moved = lambda: moved() ** 2


class CertifyOutsideDomain(ChangedBlock):
    complaint = "lies above the value of an image"

    def change(self, block):
        certify = block.certify

        def doubled(image, adjoint, fresh):
            held = 0.0 if fresh else adjoint.copy()
            penalty, conjugate = certify(image, adjoint, True)
            adjoint[...] = held + 2.0 * adjoint
            return penalty, conjugate

        block.certify = doubled


class CertifyOptimistic(ChangedBlock):
    complaint = "certify of block gives another penalty"

    def change(self, block):
        certify = block.certify

        def optimistic(image, adjoint, fresh):
            penalty, conjugate = certify(image, adjoint, fresh)
            return 0.99 * penalty, conjugate

        block.certify = optimistic


class CertifyNothing(ChangedBlock):
    complaint = "the certificate of a denoising problem does not close"

    def change(self, block):
        certify = block.certify

        def trivial(image, adjoint, fresh):
            held = np.zeros_like(adjoint) if fresh else adjoint.copy()
            penalty, _ = certify(image, adjoint, True)
            adjoint[...] = held
            return penalty, 0.0

        block.certify = trivial


def broken() -> list[HuberVariation]:
    """Return an instance of every class above that has a complaint."""
    kinds = [*HuberVariation.__subclasses__(), *LargerWeightIsLess.__subclasses__(), *ChangedBlock.__subclasses__()]
    return [kind(weight=0.7) for kind in kinds if kind.complaint]
