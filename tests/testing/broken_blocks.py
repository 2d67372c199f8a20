"""Priors whose primal-dual state has one fault each, and words of the complaint that it must draw."""

from __future__ import annotations

import numpy as np

from tests.testing.huber_variation import HuberVariation


class ChangedBlock(HuberVariation):
    """The base of priors whose block is at fault: `change` alters a good one."""

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


def broken() -> list[ChangedBlock]:
    """Return an instance of every faulty class above."""
    return [kind(weight=0.7) for kind in ChangedBlock.__subclasses__()]
