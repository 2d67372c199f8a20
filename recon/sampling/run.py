"""The one way into the sampler."""

from __future__ import annotations

import math
import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from recon.errors import InputError
from recon.problem import Problem
from recon.sampling.effective import effective_samples, split_r_hat
from recon.sampling.energy import Energy
from recon.sampling.langevin import Chain, trajectory
from recon.sampling.posterior import Posterior
from recon.sampling.record import Record
from recon.sampling.step_size import StepSize
from recon.solvers.run import solve
from recon.validation import POSITIVE, number, real_array

FEWEST = 4  # draws a chain: two in each half
ACCEPTANCE = 0.75
LENGTH = 0.8  # of a trajectory over the widest scale
LONGEST = 100  # steps a trajectory, on average
LONGEST_ROUGH = 8  # where the pull of a prior is itself the outcome of a solve: its errors add up


@dataclass(frozen=True)
class Progress:
    """How far a run is: draws made a chain, of how many, those thrown away first included."""

    made: int
    total: int
    burning_in: bool
    acceptance: float
    step: float
    objective: float


def sample(
    problem: Problem,
    draws: int = 1000,
    burn_in: int | None = None,
    chains: int = 4,
    start: np.ndarray | None = None,
    seed: int = 0,
    step: float | None = None,
    callback: Callable[[Progress], object] | None = None,
) -> Posterior:
    """Draw images from the posterior exp(-objective) within the bounds; see `recon.sampling.langevin`.

        objective(x) = likelihood.value(x) + sum of prior.value(x),    low <= x <= high

    value is half a deviance, hence a negative log-likelihood but for a constant: the posterior is that of the
    data under a prior law proportional to exp(-sum of prior.value). Draws are exact: there is no bias of
    step or smoothing, only the error of a finite number.

    draws: kept draws of each chain, 4 or more.
    burn_in: draws of each chain that are thrown away, while the step is found; None takes half of
        `draws`, and 300 at least.
    chains: 2 or more, from different images between the best image and each pixel's own estimate.
    start: image to use in place of the best image (rows, columns).
    seed: whole number, 0 or more; the same seed gives the same draws.
    step: Langevin step h in units of the image; None finds the one that accepts 75 % of trajectories.
    callback: called with a `Progress` after every round; the run stops if it returns True.

    A trajectory is on average 0.8 times the widest scale of the posterior long and 100 steps at most, each
    drawn from half to one and a half of that (Mackenzie 1989). The widest scale is 1 / sqrt of the lower
    decile of the pixels' Fisher information, or, for the second half of the burn-in, the upper
    percentile of the pixels' spread in the first half if that is more.

    Returns a Posterior, whose `words` say whether to believe it. Raises InputError for arguments that
    cannot be used, for a prior that exists only as a cvxpy expression, and where pixels without data have
    infinite bounds (there may be no posterior).
    """
    _check_problem(problem)
    draws, chains, seed = _whole(draws, "draws", FEWEST), _whole(chains, "chains", 2), _whole(seed, "seed", 0)
    burn_in = max(300, draws // 2) if burn_in is None else _whole(burn_in, "burn_in", 0)
    if burn_in == 0 and step is None:
        raise InputError(
            "burn_in is 0 and step is None; give a burn_in in which to find the step, or a step."
        )
    step = None if step is None else number(step, "step", POSITIVE)
    began = time.perf_counter()
    starts = _starts(problem, start, chains, seed)
    energy = Energy(problem, starts[0])
    streams = np.random.SeedSequence(seed).spawn(chains)
    state = [
        Chain(image, energy.value(image), np.random.default_rng(stream))
        for image, stream in zip(starts, streams, strict=True)
    ]
    run = _Run(energy, state, _widest_scale(problem, starts[0]), step, np.random.default_rng(seed))
    record = Record(chains, draws, starts[0])
    stopped = _burn_in(run, burn_in, draws, callback)
    rates: list[float] = []
    while record.done < draws and not stopped:
        rates.append(run.round())
        record.take([c.image for c in state], [c.energy for c in state])
        stopped = run.tell(callback, burn_in + record.done, burn_in + draws, False, rates[-1])
    return _posterior(problem, record, run, rates, stopped, began, burn_in)


class _Run:
    """Chains that go side by side with one step and one length of trajectory."""

    def __init__(
        self,
        energy: Energy,
        state: list[Chain],
        scale: float,
        step: float | None,
        random: np.random.Generator,
    ) -> None:
        self.energy, self.state, self.scale = energy, state, scale
        self._longest = LONGEST_ROUGH if energy.rough else LONGEST
        self.found = StepSize(0.2 * scale if step is None else step, ACCEPTANCE)
        self.fixed = step is not None
        self._random = random

    @property
    def step(self) -> float:
        return self.found.step

    @property
    def steps(self) -> float:
        return min(max(LENGTH * self.scale / self.step, 1.0), self._longest)

    def round(self) -> float:
        """Advance every chain by one trajectory; return the mean chance of acceptance."""
        steps = max(round(self.steps * self._random.uniform(0.5, 1.5)), 1)
        return float(np.mean([trajectory(chain, self.energy, self.step, steps) for chain in self.state]))

    def tell(
        self, callback: Callable[[Progress], object] | None, made: int, total: int, early: bool, rate: float
    ) -> bool:
        """Report to the callback; return whether it asks to stop."""
        if callback is None:
            return False
        return callback(Progress(made, total, early, rate, self.step, self.state[0].energy)) is True


def _burn_in(run: _Run, burn_in: int, draws: int, callback: Callable[[Progress], object] | None) -> bool:
    """Leave the start behind, and find the step and the length of trajectories; True if asked to stop."""
    first, second, count = 0.0, 0.0, 0
    reference = run.state[0].image
    for made in range(1, burn_in + 1):
        rate = run.round()
        if not run.fixed:
            run.found.update(rate)
        if burn_in // 4 < made <= burn_in // 2:
            for chain in run.state:
                off = chain.image - reference
                first, second, count = first + off, second + off * off, count + 1
        if made == burn_in // 2 and count:
            spread = np.sqrt(np.maximum(second / count - np.square(first / count), 0.0))
            run.scale = max(run.scale, float(np.quantile(spread, 0.99)))
        if run.tell(callback, made, burn_in + draws, True, rate):
            return True
    if not run.fixed and burn_in:
        run.found.settle()
    return False


def _posterior(
    problem: Problem, record: Record, run: _Run, rates: list[float], stopped: bool, began: float, burn_in: int
) -> Posterior:
    mean, deviation = record.moments()
    if record.done == 0:
        mean, deviation = np.full_like(mean, np.nan), np.full_like(mean, np.nan)
    series, objective = record.series()
    if record.done >= FEWEST:
        pixels = _least_effective(series)
        whole, apart = float(effective_samples(objective)[0]), float(split_r_hat(objective)[0])
    else:
        pixels, whole, apart = np.zeros(1), 0.0, math.inf
    return Posterior(
        mean=mean.astype(np.float32),
        standard_deviation=deviation.astype(np.float32),
        images=record.images(),
        effective_samples=float(pixels.min()),
        median_effective_samples=float(np.median(pixels)),
        objective_effective_samples=whole,
        r_hat=max(record.worst_r_hat(), apart),
        acceptance=float(np.mean(rates)) if rates else 0.0,
        step=run.step,
        steps=run.steps,
        smoothing=0.25 * run.step**2,
        draws=record.done,
        burn_in=burn_in,
        chains=len(run.state),
        log_concave=problem.likelihood.convex,
        stopped=stopped,
        seconds=time.perf_counter() - began,
    )


def _least_effective(series: np.ndarray) -> np.ndarray:
    """Return the effective draws for a pixel's mean, spread or tails (5 % on either side), the fewest."""
    low, high = np.quantile(series, (0.05, 0.95), axis=(0, 1))
    asked = (series, np.square(series - series.mean(axis=(0, 1))), series <= low, series >= high)
    return np.min([effective_samples(values) for values in asked], axis=0)


def _check_problem(problem: Problem) -> None:
    if not isinstance(problem, Problem):
        raise InputError(f"problem is a {type(problem).__name__}; give a recon.Problem.")
    for prior in problem.priors:
        if prior.conic_only:
            raise InputError(
                f"prior {type(prior).__name__} exists only as a cvxpy expression, which cannot be drawn from;"
                " write it as a priors.contract.Prior."
            )
    if not np.isfinite(problem.bounds).all() and not problem.likelihood.has_data.all():
        raise InputError(
            f"bounds is {problem.bounds} and some pixels have no data; give finite bounds, within which there"
            " is a posterior."
        )


def _whole(value: int, name: str, least: int) -> int:
    if isinstance(value, bool | np.bool_) or not isinstance(value, int | np.integer) or value < least:
        raise InputError(f"{name} is {value!r}; give a whole number of at least {least}.")
    return int(value)


def _starts(problem: Problem, start: np.ndarray | None, chains: int, seed: int) -> list[np.ndarray]:
    """Return images between the best one and every pixel's own estimate, the first being the best."""
    low, high = problem.bounds
    if start is None:
        best = solve(problem, tolerance=1e-3, max_iterations=3000).image.astype(np.float64)
    else:
        best = real_array(start, "start").astype(np.float64)
        if best.shape != tuple(problem.shape) or not np.isfinite(best).all():
            raise InputError(
                f"start has shape {best.shape}; give finite numbers of shape {tuple(problem.shape)}."
            )
        best = np.clip(best, low, high)
        if not math.isfinite(problem.objective(best.astype(np.float32))):
            raise InputError("start has an infinite objective; give an image that the data allow.")
    rough = np.clip(problem.likelihood.estimate().astype(np.float64), low, high)
    images = [best + share * (rough - best) for share in np.linspace(0.0, 1.0, chains)]
    likely = [math.isfinite(problem.likelihood.value(image.astype(np.float32))) for image in images]
    return [image if good else best.copy() for image, good in zip(images, likely, strict=True)]


def _widest_scale(problem: Problem, image: np.ndarray) -> float:
    """Return 1 / sqrt(lower decile of the Fisher information of pixels with data)."""
    with np.errstate(all="ignore"):
        information = problem.likelihood.fisher_information(image.astype(np.float32))
    known = information[problem.likelihood.has_data & (information > 0.0) & np.isfinite(information)]
    if known.size:
        return float(1.0 / np.sqrt(np.quantile(known, 0.1)))
    return max(float(np.std(image)), 1e-3 * max(float(np.max(np.abs(image))), 1.0))
