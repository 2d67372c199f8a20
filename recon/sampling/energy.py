"""The energy U(x) = likelihood.value(x) + sum of prior.value(x), and the smoothed pull that draws follow.

The pull is the gradient of Moreau envelopes. The likelihood's is (x - prox(x)) / s where it is convex (finite
even where the gradient is not, as at zero counts of background), its gradient where it is not. A prior's is
K' y with y the prox of g* / r at K x / r, one step of its block from duals that are zero.

A prior that is a minimum over an auxiliary image gives K' y after a fixed number of primal-dual steps
towards the best auxiliary image, from one fixed state. So the pull is always a function of x alone, which
is all that the Metropolis test needs of it.
"""

from __future__ import annotations

import copy
import math

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.problem import Block, Prior, Problem

INNER = 100  # steps towards the pull of a prior with an auxiliary image
SETTLED = 0.02  # nats to which the value of such a prior is found
LONGEST = 4000  # steps spent on such a value


class PlainPull:
    """A prior without an auxiliary image."""

    def __init__(self, prior: Prior, shape: tuple[int, int]) -> None:
        self._prior = prior
        self._block = prior.block(shape)
        self._scratch = np.empty(shape, np.float32)
        self.norm_squared = self._block.norm_squared

    def add(self, image: np.ndarray, smoothing: float, pull: np.ndarray) -> None:
        """Add the gradient of the envelope: g smoothed over `smoothing` in units of K x squared."""
        block = duplicate(self._block, self._prior)
        block.step(image, 1.0 / smoothing, smoothing, 1.0, self._scratch, True)
        pull += self._scratch

    def value(self, image: np.ndarray) -> float:
        """Return the penalty."""
        return self._block.certify(image, self._scratch, True)[0]


class MinimisedPull:
    """A prior that is a minimum over an auxiliary image; its block starts from a fixed state."""

    def __init__(self, prior: Prior, start: np.ndarray) -> None:
        self._prior = prior
        self._block = prior.block(start.shape)
        self._scratch = np.empty(start.shape, np.float32)
        self.norm_squared = self._block.norm_squared
        # Differences travel by about 1 / weight while their duals travel by the weight.
        self._tau = 1.0 / (float(prior.weight) ** 2 * math.sqrt(self.norm_squared))
        self._sigma = 1.0 / (self._tau * self.norm_squared)
        self._minimise(self._block, start.astype(np.float32))

    def add(self, image: np.ndarray, smoothing: float, pull: np.ndarray) -> None:
        """Add K' y after a fixed number of steps towards the best auxiliary image."""
        block = duplicate(self._block, self._prior)
        for _ in range(INNER):
            block.step(image, self._sigma, self._tau, 1.9, self._scratch, True)
        pull += self._scratch

    def value(self, image: np.ndarray) -> float:
        """Return the penalty, minimised over the auxiliary image to within a fiftieth of a nat."""
        return self._minimise(duplicate(self._block, self._prior), image)

    def _minimise(self, block: Block, image: np.ndarray) -> float:
        best, bound = math.inf, -math.inf
        for step in range(1, LONGEST + 1):
            block.step(image, self._sigma, self._tau, 1.9, self._scratch, True)
            if step % 50 == 0:
                value, conjugate = block.certify(image, self._scratch, True)
                reached = float(np.sum(image * self._scratch, dtype=np.float64)) - conjugate
                best, bound = min(best, value), max(bound, reached)
                if best - bound <= SETTLED:
                    break
        return best


class Energy:
    """U and its smoothed pull, on images of one problem."""

    def __init__(self, problem: Problem, start: np.ndarray) -> None:
        self.likelihood: Likelihood = problem.likelihood
        self.low, self.high = problem.bounds
        self._pulls = [
            PlainPull(prior, problem.shape)
            if prior.auxiliary_shape(problem.shape) is None
            else MinimisedPull(prior, start)
            for prior in problem.priors
        ]

        self.rough = any(isinstance(pull, MinimisedPull) for pull in self._pulls)

    def value(self, x: np.ndarray) -> float:
        """Return U(x); inf or NaN where the image is impossible."""
        image = x.astype(np.float32)
        with np.errstate(all="ignore"):
            return self.likelihood.value(image) + sum(pull.value(image) for pull in self._pulls)

    def pull(self, x: np.ndarray, step: float, smoothing: float) -> np.ndarray:
        """Return the gradient of the envelopes (float64).

        step: the Langevin step h; the likelihood is smoothed by h^2 / 4, each prior by
            `smoothing` times the squared norm of its K and the number of priors.
        """
        if self.likelihood.convex:
            width = 0.25 * step * step
            pull = (x - self.likelihood.prox(x, width)) / width
        else:
            pull = np.array(self.likelihood.gradient(x), np.float64)
        image = x.astype(np.float32)
        for prior in self._pulls:
            prior.add(image, smoothing * len(self._pulls) * prior.norm_squared, pull)
        return pull


def duplicate(block: Block, prior: Prior) -> Block:
    """Return a copy of a prior's state that shares the prior."""
    return copy.deepcopy(block, {id(prior): prior})
