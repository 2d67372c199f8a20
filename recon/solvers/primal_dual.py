"""The primal-dual method of Chambolle and Pock (2011), over-relaxed (Condat 2013), with balanced steps.

    x~ = prox of tau L, within the bounds, at x - tau K' y
    y~ = prox of sigma g* at y + sigma K (2 x~ - x)
    x += 1.9 (x~ - x),   y += 1.9 (y~ - y),          tau sigma_j n |K_j|^2 = 1 for each of n priors

tau sets the balance between the two. Early on it is corrected towards the value at which both blocks
travel equally far in the metric of the method, |dx|^2 / tau = sum |dy_j|^2 / sigma_j, by a
correction that fades, so that the method ends with constant steps and converges.

Measured (camera, 512 x 512, gap 1e-4): 120 iterations for Gaussian and 440 for Poisson total variation
at common weights; within a fifth of the best constant tau on problems whose best tau spans three
decades. Averaged restarts brought nothing more.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace

import numpy as np

from recon.diagnostics import Status, relative_gap
from recon.likelihoods.contract import Likelihood
from recon.problem import Block, Problem
from recon.solvers.contract import State, Unsuitable

RELAXATION = 1.9
WINDOW = 20  # iterations between corrections of the balance
CORRECTION = 0.5  # power of the first correction; 0 keeps the step
FADING = 0.8  # each correction is this much weaker than the one before
ROUNDING = 1e-5  # a gap below this that no longer falls has met single precision
FIRST_STEP = 0.05  # tau times the mean Fisher information, at the start


def primal_dual(
    problem: Problem,
    start: np.ndarray,
    tolerance: float,
    blocks: Sequence[Block] | None = None,
    step: float | None = None,
) -> Iterator[State]:
    """Yield states at which the certificate was measured, ever closer to the minimiser.

    blocks: the priors' states to go on from (advanced in place), for a sequence of similar problems.
    step: tau to start from.
    """
    run = PrimalDual(problem, start, blocks, step)
    iteration, due = 0, WINDOW
    previous: tuple[int, float] | None = None
    best, improved = math.inf, 0
    while True:
        while iteration < due:
            run.advance()
            iteration += 1
        state = run.measure()
        if state.relative_gap < 0.9 * best:
            best, improved = state.relative_gap, iteration
        elif best < ROUNDING and iteration - improved > max(1000, iteration // 2):
            state = replace(state, ended=Status.PRECISION_LIMIT)
        yield state
        due = iteration + _until_next(iteration, state.relative_gap, previous, tolerance)
        previous = (iteration, state.relative_gap)


class PrimalDual:
    """The iterate of a primal-dual solve and its steps."""

    def __init__(
        self,
        problem: Problem,
        start: np.ndarray,
        blocks: Sequence[Block] | None = None,
        step: float | None = None,
        correction: float = CORRECTION,
    ) -> None:
        likelihood = problem.likelihood
        if not likelihood.convex:
            raise Unsuitable(
                f"solver primal-dual needs a convex likelihood and {type(likelihood).__name__} is not;"
                " leave solver out, and majorise-minimise is used."
            )
        for prior in problem.priors:
            if prior.conic_only:
                raise Unsuitable(
                    f'prior {type(prior).__name__} exists only as a cvxpy expression; give solver="conic".'
                )
        self.problem = problem
        self.low, self.high = problem.bounds
        self.step = first_step(likelihood, start) if step is None else step
        self.image = np.clip(start, self.low, self.high).astype(np.float32)
        self.blocks = [prior.block(problem.shape) for prior in problem.priors] if blocks is None else blocks
        self.iteration = 0
        self._adjoint = np.zeros(problem.shape, np.float32)
        self._ahead = np.empty(problem.shape, np.float32)
        self._scratch = np.empty(problem.shape, np.float32)
        self._marked: np.ndarray | None = None
        self._correction = correction
        if blocks is not None:  # K' y of duals that are not zero
            self._certify(self._adjoint)

    def advance(self) -> None:
        """Make one iteration, and correct the balance where it is due."""
        self.problem.likelihood.proximal_step(
            self.image, self._adjoint, self._ahead, self.step, RELAXATION, self.low, self.high
        )
        for index, block in enumerate(self.blocks):
            sigma = 1.0 / (self.step * len(self.blocks) * block.norm_squared)
            block.step(self._ahead, sigma, self.step, RELAXATION, self._adjoint, index == 0)
        self.iteration += 1
        if self._correction > 0.01 and self.iteration % WINDOW == 0 and self.blocks:
            self._balance()

    def _balance(self) -> None:
        from recon.kernels import squared_distance

        if self._marked is not None:
            count = len(self.blocks)
            travelled = squared_distance(self.image, self._marked)
            duals = sum(count * block.norm_squared * block.moved() for block in self.blocks)
            if travelled > 0.0 and duals > 0.0:
                self.step *= (travelled / duals / self.step**2) ** (0.5 * self._correction)
            self._correction *= FADING
        if self._correction > 0.01:
            self._marked = self.image.copy() if self._marked is None else self._marked
            np.copyto(self._marked, self.image)
            for block in self.blocks:
                block.mark()
        else:
            self._marked = None
            for block in self.blocks:
                block.forget()

    def _certify(self, adjoint: np.ndarray) -> tuple[float, float]:
        """Put the clipped image in `_ahead`; return the priors' value and minus their conjugate."""
        np.clip(self.image, self.low, self.high, out=self._ahead)
        value = conjugate = 0.0
        adjoint[...] = 0.0
        for block in self.blocks:
            v, c = block.certify(self._ahead, adjoint, False)
            value += v
            conjugate += c
        return value, conjugate

    def measure(self) -> State:
        """Return the state with its certificate."""
        prior_value, conjugate = self._certify(self._scratch)
        np.negative(self._scratch, out=self._scratch)
        likelihood = self.problem.likelihood
        objective = likelihood.value(self._ahead) + prior_value
        dual_value = -likelihood.conjugate(self._scratch, self.low, self.high) - conjugate
        gap = relative_gap(objective, dual_value, self.image.size)
        return State(self.iteration, self._ahead, objective, dual_value, gap)


def first_step(likelihood: Likelihood, start: np.ndarray) -> float:
    """Return tau to start with, from how sharply the likelihood bends at a flat image."""
    level = float(np.mean(start, dtype=np.float64))
    with np.errstate(divide="ignore", invalid="ignore"):
        information = likelihood.fisher_information(np.full(likelihood.shape, level, np.float32))
    bend = float(np.sum(information)) / max(int(np.count_nonzero(likelihood.has_data)), 1)
    if not (math.isfinite(bend) and bend > 0.0):
        bend = 1.0 / max(float(np.max(np.abs(start))), 1e-3) ** 2
    return FIRST_STEP / bend


def _until_next(iteration: int, gap: float, previous: tuple[int, float] | None, tolerance: float) -> int:
    """Return after how many iterations to measure again: when the gap, falling as lately, is in tolerance."""
    most = min(max(WINDOW, iteration // 2), 25 * WINDOW)
    if previous is None or not 0.0 < gap < previous[1]:
        return min(most, 5 * WINDOW)
    rate = math.log(previous[1] / gap) / (iteration - previous[0])
    return min(max(math.ceil(math.log(gap / tolerance) / rate), 5), most) if gap > tolerance else most
