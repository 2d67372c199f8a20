"""At most one detection a trial: a fixed number of trials, or waiting for the L-th detection."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import bdtr, bdtrc, betaln, xlog1py, xlogy

from recon.acquisition.counts import Counts
from recon.errors import InputError
from recon.kernels import as_rows
from recon.likelihoods.contract import LEAST_SHARED, Interval, Likelihood
from recon.likelihoods.inputs import drawing_image, pixelwise_bound

if TYPE_CHECKING:
    import cvxpy as cp

_SMALLEST = 1e-300
FAINT = 1e-2  # expected detections a trial
_MOST_SHARED = 10**8  # trials; numpy's hypergeometric law takes few more


class BernoulliTrials(Likelihood):
    """Half the deviance of k detections in n trials of at most one detection each.

    With mu = gain x + background, a trial detects with probability p = 1 - exp(-mu), and

        value(x) = sum over pixels of  (n - k) mu - k log(1 - exp(-mu)) + k log(k/n) + (n - k) log((n-k)/n).

    The same function of x serves every rule of stopping that looks only at the past: a fixed number of
    trials (binomial), waiting for the first detection (geometric) or for the L-th (negative
    binomial, Haldane 1945). The rules differ in the constant, in what is expected, and in how data is drawn.

    counts: the acquisition; trials are the trials that were made. Pixels masked or without trials
        contribute zero.
    stop_after: None for a fixed number of trials, or L, the number of detections after which a pixel stopped.
    most_trials: with stop_after, the number of trials after which a pixel stopped in any case; None = none.

    Raises InputError if detections exceed trials, or do not agree with the stopping rule.
    """

    def __init__(self, counts: Counts, stop_after: int | None = None, most_trials: int | None = None) -> None:
        self.shape = counts.shape
        exposure = np.broadcast_to(np.asarray(counts.exposure), counts.shape)
        self._has_data = exposure > 0.0
        self._k = np.where(self._has_data, counts.detections, 0).astype(np.float64)
        self._n = exposure.astype(np.float64)
        self._stop_after = stop_after
        self._most_trials = most_trials
        self._check(counts)
        self._settle(counts.gain, counts.background)

    def _check(self, counts: Counts) -> None:
        if counts.several_per_trial:
            self._refuse(
                self._k > self._n,
                "detections",
                self._k,
                "BernoulliTrials allows one detection a trial; use likelihoods.Poisson",
            )
            self._refuse(
                self._n % 1.0 != 0.0,
                "trials",
                self._n,
                "BernoulliTrials counts whole trials; use likelihoods.Poisson for an exposure",
            )
        if self._stop_after is None:
            if self._most_trials is not None:
                raise InputError("most_trials is given without stop_after; give both, or neither.")
            return
        for name, limit in (("stop_after", self._stop_after), ("most_trials", self._most_trials)):
            if limit is not None and (isinstance(limit, bool) or int(limit) != limit or limit < 1):
                raise InputError(f"{name} is {limit!r}; give a whole number of at least 1.")
        reached = self._k == self._stop_after
        if self._most_trials is not None:
            self._refuse(
                self._n > self._most_trials, "trials", self._n, f"most_trials is {self._most_trials}"
            )
            reached |= (self._n == self._most_trials) & (self._k < self._stop_after)
        self._refuse(
            self._has_data & ~reached,
            "detections",
            self._k,
            f"waiting for detection {self._stop_after} ends with it (or at most_trials); mask the pixel,"
            " or leave stop_after out",
        )

    @staticmethod
    def _refuse(bad: np.ndarray, name: str, values: np.ndarray, remedy: str) -> None:
        if bad.any():
            place = tuple(int(i) for i in np.argwhere(bad)[0])
            raise InputError(f"{name} at {place} is {values[place]:g}; {remedy}.")

    def _settle(self, gain: Any, background: Any) -> None:
        self._count = self._k.astype(np.float32)
        self._idle = (self._n - self._k).astype(np.float32)
        self._gain = as_rows(gain, self.shape)
        self._background = as_rows(background, self.shape)

    @property
    def has_data(self) -> np.ndarray:
        """See `Likelihood.has_data`."""
        return self._has_data

    @property
    def domain(self) -> Interval:
        """x > -background / gain."""
        return Interval(-float(np.min(self._background / self._gain)), np.inf, low_open=True)

    @property
    def default_bounds(self) -> tuple[float, float]:
        """Zero, and a value that no pixel's own estimate comes near."""
        return 0.0, pixelwise_bound(self.estimate())

    @property
    def constant(self) -> float:
        """See `Likelihood.constant`; the number of orders in which the detections can fall included."""
        k, n = self._k[self._has_data], self._n[self._has_data]
        saturated = -np.sum(xlogy(k, k / n) + xlog1py(n - k, -k / n))
        if self._stop_after is not None:
            ended = k == self._stop_after  # the last trial is a detection: orders of the others
            k, n = np.where(ended, k - 1.0, k), np.where(ended, n - 1.0, n)
        return float(saturated + np.sum(np.log(n + 1.0) + betaln(n - k + 1.0, k + 1.0)))

    def estimate(self) -> np.ndarray:
        """Return max((-log(1 - k/n) - background) / gain, 0); the mean of the others without data.

        Where every trial detected, k - 1/2 stands for k: the estimate would be infinite.
        """
        n = np.maximum(self._n, 1.0)
        detecting = np.minimum(self._k, self._n - 0.5) / n
        mu = -np.log1p(-np.maximum(detecting, 0.0))
        image = np.maximum((mu - self._background) / self._gain, 0.0).astype(np.float32)
        if not self._has_data.all():
            image[~self._has_data] = image[self._has_data].mean()
        return image

    def _mu(self, x: np.ndarray) -> np.ndarray:
        return self._gain.astype(np.float64) * np.asarray(x, np.float64) + self._background

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`."""
        k, n, mu = self._k, self._n, self._mu(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            detecting = np.where(k > 0.0, k * np.log(-np.expm1(-mu) * n / k), 0.0)
            return (n - k) * mu - detecting + np.where(n > 0.0, xlog1py(n - k, -k / n), 0.0)

    def value(self, x: np.ndarray) -> float:
        """See `Likelihood.value`."""
        from recon.likelihoods import bernoulli_kernels as kernels

        return kernels.value(np.asarray(x), self._count, self._idle, self._gain, self._background)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """Return gain (n - k - k / (exp(mu) - 1))."""
        with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
            detecting = np.where(self._k > 0.0, self._k / np.expm1(self._mu(x)), 0.0)
        return self._gain * (self._n - self._k - detecting)

    def curvature(self, x: np.ndarray) -> np.ndarray:
        """Return gain^2 k exp(mu) / (exp(mu) - 1)^2."""
        return self._weighted(self._k, self._curvature_of_one(x))

    @staticmethod
    def _weighted(detections: np.ndarray, curvature: np.ndarray) -> np.ndarray:
        """Return the product, zero where there is no detection however sharp its curvature would be."""
        with np.errstate(invalid="ignore"):
            return np.where(detections > 0.0, detections * curvature, 0.0)

    def _curvature_of_one(self, x: np.ndarray) -> np.ndarray:
        half = np.maximum(self._mu(x), _SMALLEST) / 2.0
        with np.errstate(divide="ignore", over="ignore"):
            return self._gain.astype(np.float64) ** 2 / (4.0 * np.sinh(half) ** 2)

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """Return the expected number of detections times the curvature that each brings."""
        p = -np.expm1(-np.maximum(self._mu(x), _SMALLEST))
        if self._stop_after is None:
            expected = self._n * p
        elif self._most_trials is None:
            expected = np.where(self._has_data, float(self._stop_after), 0.0)
        else:
            wanted, limit = self._stop_after, self._most_trials
            trials = limit * bdtr(wanted - 1, limit, p) + wanted / p * bdtrc(wanted, limit + 1, p)
            expected = np.where(self._has_data, trials * p, 0.0)
        return self._weighted(expected, self._curvature_of_one(x))

    def residuals(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`."""
        sign = np.sign(self._k + self._n * np.expm1(-self._mu(x)))
        return sign * np.sqrt(2.0 * np.maximum(self.value_map(x), 0.0))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> BernoulliTrials:
        """Return the same likelihood on data drawn at x under the same stopping rule."""
        rng = np.random.default_rng(seed)
        p = -np.expm1(-np.maximum(self._mu(drawing_image(x, self.shape)), _SMALLEST))
        other = object.__new__(type(self))
        other.__dict__.update(self.__dict__)
        if self._stop_after is None:
            other._k = rng.binomial(self._n.astype(np.int64), p).astype(np.float64)
        else:
            wanted = self._stop_after
            n = (rng.negative_binomial(wanted, p) + wanted).astype(np.float64)
            k = np.full(self.shape, float(wanted))
            if self._most_trials is not None:
                late = n > self._most_trials
                # Given that the wanted number was not reached, the detections are binomial below it.
                from scipy.stats import binom  # it takes long to import

                u = rng.random(self.shape) * bdtr(wanted - 1, self._most_trials, p)
                k[late] = binom.ppf(u[late], self._most_trials, p[late])
                n[late] = self._most_trials
            other._k, other._n = np.where(self._has_data, k, 0.0), np.where(self._has_data, n, 0.0)
        other._settle(self._gain, self._background)
        return other

    def folds(self, number: int, seed: int) -> list[tuple[Likelihood, Likelihood]]:
        """Return pairs that share out the trials: those of a pixel fall into `number` even parts.

        Given how many trials and detections a pixel has, the detections of a part are hypergeometric. A
        record that ends with a detection cannot be shared out: whole pixels are hidden then.
        """
        if self._stop_after is not None or self._n.max() > _MOST_SHARED:
            fold = np.random.default_rng(seed).integers(number, size=self.shape)
            return [(self._of(fold != f), self._of(fold == f)) for f in range(number)]
        rng = np.random.default_rng(seed)
        n, k = self._n.astype(np.int64), self._k.astype(np.int64)
        offset = rng.integers(number, size=self.shape)
        pairs, trials, left = [], n, k
        for f in range(number):
            part = (n * (f + 1) + offset) // number - (n * f + offset) // number
            found = rng.hypergeometric(left, trials - left, part)
            trials, left = trials - part, left - found
            pairs.append((self._with(k - found, n - part), self._with(found, part)))
        return pairs

    @property
    def can_be_shared_out(self) -> bool:
        """See `Likelihood.can_be_shared_out`."""
        return float(self._count.sum(dtype=np.float64)) >= LEAST_SHARED

    @property
    def scores_add_up(self) -> bool:
        """See `Likelihood.scores_add_up`."""
        return self._stop_after is None

    def score_map(self, x: np.ndarray) -> np.ndarray:
        """Return the squared distance between k/n and its expectation, over that of gain, 0 without data.

        With a rule that stops at a detection k/n is not unbiased: then it is `value_map`.
        """
        if self._stop_after is not None:
            return self.value_map(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            distance = (-np.expm1(-self._mu(x)) - self._k / self._n) / self._gain
        return np.where(self._has_data, distance * distance, 0.0)

    def _of(self, shown: np.ndarray) -> BernoulliTrials:
        """Return the same likelihood of some pixels only."""
        return self._with(np.where(shown, self._k, 0.0), np.where(shown, self._n, 0.0))

    def _with(self, k: np.ndarray, n: np.ndarray) -> BernoulliTrials:
        """Return the same likelihood on other numbers of detections and trials."""
        other = object.__new__(type(self))
        other.__dict__.update(self.__dict__)
        other._k, other._n, other._has_data = k.astype(np.float64), n.astype(np.float64), n > 0
        other._settle(self._gain, self._background)
        return other

    def prox(self, v: np.ndarray, step: float) -> np.ndarray:
        """Return the prox by Newton steps on h(mu) = 1 / (exp(mu) - 1) modelled by c / mu + e, in float64."""
        gain = self._gain.astype(np.float64)
        s = step * gain * gain
        linear = gain * np.asarray(v, np.float64) + self._background - s * (self._n - self._k)
        mu = np.full(self.shape, 1e-3)
        for _ in range(100):
            with np.errstate(over="ignore"):
                h = 1.0 / np.expm1(mu)
            slope = (h * mu) * (1.0 + h)
            half = 0.5 * (linear + s * self._k * (h - slope))
            root = half + np.sqrt(half * half + s * self._k * slope * mu)
            # Where half is far below zero the sum above cancels; the other form of the root does not.
            with np.errstate(divide="ignore", invalid="ignore"):
                product = s * self._k * slope * mu
                root = np.where(half < 0.0, product / (np.sqrt(half * half + product) - half), root)
            new = np.maximum(root, _SMALLEST)
            settled = np.all(np.abs(new - mu) <= 1e-15 + 1e-14 * mu)
            mu = new
            if settled:
                break
        mu = np.where((self._k == 0.0) & (linear <= 0.0), 0.0, mu)
        mu = np.where(self._has_data, mu, linear)
        return (mu - self._background) / gain

    def conjugate_map(self, u: np.ndarray, low: float, high: float) -> np.ndarray:
        """See `Likelihood.conjugate_map`."""
        u = np.asarray(u, np.float64)
        slack = self._n - self._k - u / self._gain
        with np.errstate(divide="ignore", invalid="ignore"):
            stationary = np.clip((np.log1p(self._k / slack) - self._background) / self._gain, low, high)
            x = np.where(slack > 0.0, stationary, np.where((slack < 0.0) | (self._k > 0.0), high, low))
            return np.where(np.isinf(x), np.where(u == 0.0, 0.0, np.inf), u * x - self.value_map(x))

    def conjugate(self, u: np.ndarray, low: float, high: float) -> float:
        """See `Likelihood.conjugate`."""
        from recon.likelihoods import bernoulli_kernels as kernels

        return kernels.conjugate(
            np.asarray(u), self._count, self._idle, self._gain, self._background, float(low), float(high)
        )

    def proximal_step(
        self,
        x: np.ndarray,
        adjoint: np.ndarray,
        extrapolated: np.ndarray,
        step: float,
        relaxation: float,
        low: float,
        high: float,
    ) -> None:
        """See `Likelihood.proximal_step`."""
        from recon.likelihoods import bernoulli_kernels as kernels

        kernels.proximal_step(
            x,
            adjoint,
            extrapolated,
            self._count,
            self._idle,
            self._gain,
            self._background,
            np.float32(step),
            np.float32(relaxation),
            np.float32(low),
            np.float32(high),
        )

    def expression(self, x: cp.Expression) -> tuple[cp.Expression, list[Any]]:
        """See `Likelihood.expression`: -log(1 - exp(-mu)) = s becomes exp(-s) + exp(-mu) <= 1.

        Where every pixel is faint a cone's tolerance would swallow mu, and -log(mu) + mu / 2 stands for
        it; the error is at most k mu^2 / 24.
        """
        import cvxpy as cp

        gain = np.broadcast_to(self._gain, self.shape).astype(np.float64)
        background = np.broadcast_to(self._background, self.shape).astype(np.float64)
        mu = cp.multiply(gain, x) + background
        with np.errstate(divide="ignore", invalid="ignore"):
            saturated = xlogy(self._k, self._k / self._n) + xlog1py(self._n - self._k, -self._k / self._n)
        total = cp.sum(cp.multiply(self._n - self._k, mu)) + float(np.nansum(saturated))
        seen = np.nonzero(self._k > 0.0)
        if not seen[0].size:
            return total, []
        if float(np.max(self._mu(self.estimate())[self._has_data])) < FAINT:
            return total + self._k[seen] @ (0.5 * mu[seen] - cp.log(mu[seen])), []
        s = cp.Variable(seen[0].size)
        return total + self._k[seen] @ s, [cp.exp(-s) + cp.exp(-mu[seen]) <= 1.0]
