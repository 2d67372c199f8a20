"""The primal-dual state of a prior against the steps that the contract spells out."""

from __future__ import annotations

from typing import Any

import numpy as np

from recon.testing.errors import require, require_at_most, require_close

SINGLE = 2e-5
"""What float32 arithmetic may lose, relative to the numbers that go into a step."""


class Reference:
    """The steps of `priors.contract.Block`, in float64 and by the prior's own numpy methods."""

    def __init__(self, prior: Any, shape: tuple[int, int]) -> None:
        self.prior, self.shape = prior, shape
        auxiliary = prior.auxiliary_shape(shape)
        self.v = None if auxiliary is None else np.zeros(auxiliary)
        self.y = np.zeros_like(prior.forward(np.zeros(shape), self.v))
        self.size = 0.0

    def step(self, extrapolated: np.ndarray, sigma: float, tau: float, relaxation: float) -> np.ndarray:
        """Return K' y after a step."""
        ahead = None
        if self.v is not None:
            moved = self.v - tau * self.prior.auxiliary_adjoint(self.y, self.shape)
            ahead = 2.0 * moved - self.v
            self.v = self.v + relaxation * (moved - self.v)
        argument = self.y + sigma * self.prior.forward(extrapolated, ahead)
        self.size = max(self.size, float(np.max(np.abs(argument))))
        self.y = self.y + relaxation * (self.prior.dual_prox(argument, sigma) - self.y)
        return self.prior.adjoint(self.y, self.shape)


def check_block(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check step, mark, moved and forget over some steps of several lengths, and certify after them."""
    for size, block, reference in check_steps(prior, shape, rng):
        _check_certificate(prior, block, reference, shape, size, rng)


def check_steps(
    prior: Any, shape: tuple[int, int], rng: np.random.Generator
) -> list[tuple[float, Any, Reference]]:
    """Check the steps; return for every length the size of its images, the block, and the reference."""
    walked = []
    norm = float(np.sqrt(prior.norm_squared(shape)))
    for size, ratio in ((0.1, 1.0), (1.0, 0.1), (10.0, 1.0), (100.0, 10.0)):
        block, reference = prior.block(shape), Reference(prior, shape)
        for _ in range(4):
            extrapolated = (size * rng.standard_normal(shape)).astype(np.float32)
            relaxation = float(rng.uniform(1.0, 1.9))
            start = reference.y
            block.mark()
            settings = (ratio / norm, 1.0 / (ratio * norm), relaxation)
            _check_step(prior, block, reference, extrapolated, settings, rng)
            allowed = 10.0 * SINGLE * (1.0 + relaxation) * reference.size * np.sqrt(start.size)
            distance = float(np.linalg.norm(reference.y - start))
            claim = "the root of moved is not the distance of the duals from mark"
            require_close(prior, claim, np.sqrt(block.moved()), distance, allowed)
            block.forget()
        walked.append((size, block, reference))
    return walked


def _check_step(
    prior: Any,
    block: Any,
    reference: Reference,
    extrapolated: np.ndarray,
    settings: tuple[float, float, float],
    rng: np.random.Generator,
) -> None:
    before = extrapolated.copy()
    fresh = bool(rng.random() < 0.5)
    adjoint = rng.standard_normal(extrapolated.shape).astype(np.float32)
    held = 0.0 if fresh else adjoint.astype(np.float64)
    block.step(extrapolated, *settings, adjoint, fresh)
    expected = held + reference.step(extrapolated.astype(np.float64), *settings)
    claim = "step of block overwrites its image"
    require(np.array_equal(extrapolated, before), prior, claim, "other numbers", "the same")
    allowed = SINGLE * (1.0 + np.sqrt(block.norm_squared)) * reference.size + SINGLE * np.max(np.abs(held))
    claim = f"step of block (fresh = {fresh}) gives another K' y than the contract's step"
    require_close(prior, claim, adjoint, expected, allowed)


def _check_certificate(
    prior: Any,
    block: Any,
    reference: Reference,
    shape: tuple[int, int],
    size: float,
    rng: np.random.Generator,
) -> None:
    """Check that certify gives the penalty of K (image, v), and a lower bound of the value of any image."""
    image = (size * rng.standard_normal(shape)).astype(np.float32)
    held = rng.standard_normal(shape).astype(np.float32)
    fresh, added = np.full(shape, np.nan, np.float32), held.copy()
    penalty, conjugate = block.certify(image, fresh, True)
    again = block.certify(image, added, False)
    claim = "certify of block does not give the same again"
    require((penalty, conjugate) == again, prior, claim, again, (penalty, conjugate))
    scale = float(np.max(np.abs(fresh))) + float(np.max(np.abs(held)))
    claim = "certify of block writes and adds different K' y"
    require_close(prior, claim, added, held.astype(np.float64) + fresh, SINGLE * scale)
    expected = prior.penalty(prior.forward(image.astype(np.float64), reference.v))
    claim = "certify of block gives another penalty than that of K (image, v)"
    require_close(prior, claim, penalty, expected, 1e-4 * (1.0 + abs(expected)))
    along = fresh.astype(np.float64)  # where the bound is high
    check_bound(prior, fresh, conjugate, along / (float(np.linalg.norm(along)) or 1.0))


def check_bound(prior: Any, adjoint: np.ndarray, conjugate: float, image: np.ndarray) -> None:
    """Check value(image) >= <K' y, image> - g*(y) for the certified dual y."""
    product = adjoint.astype(np.float64) * image
    value = prior.value(image)
    slack = SINGLE * (float(np.sum(np.abs(product))) + abs(value) + abs(conjugate))
    claim = "certify of block gives a bound <K' y, x> - conjugate that lies above the value of an image x"
    require_at_most(prior, claim, float(np.sum(product)) - conjugate, value, slack)
