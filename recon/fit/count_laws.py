"""The laws of a pixel's number: moments and tails, in closed form where there is one."""

from __future__ import annotations

from abc import ABC, abstractmethod

import numpy as np
from scipy.special import betainc, gammainc, gammaln

from recon.likelihoods.bernoulli_trials import BernoulliTrials
from recon.likelihoods.contract import Likelihood
from recon.likelihoods.poisson import Poisson
from recon.likelihoods.poisson_marks import PoissonMarks

TERMS = 2000  # numbers of primaries that a tail of Neyman's law is summed over, at most


class CountLaw(ABC):
    """The law of the numbers that a likelihood holds, if an image x is true; arrays are (rows, columns).

    number: what was counted. mean, variance, fourth: its first two cumulants and the fourth.
    has_moments: whether these are those of the number; if not, its tails alone are.
    """

    has_moments = True
    number: np.ndarray
    mean: np.ndarray
    variance: np.ndarray
    fourth: np.ndarray

    @abstractmethod
    def tails(self, where: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Return, for the pixels where, the chances of more light than was seen, and of as much or more."""


class PoissonLaw(CountLaw):
    """Poisson numbers."""

    def __init__(self, likelihood: Poisson, x: np.ndarray) -> None:
        self.number = likelihood._count.astype(np.float64)
        self.mean = np.maximum(likelihood._mean(x), 0.0)
        self.variance = self.fourth = self.mean

    def tails(self, where: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """See `CountLaw.tails`; P(K >= k) is the incomplete gamma function P(k, m)."""
        k, m = self.number[where], self.mean[where]
        return gammainc(k + 1.0, m), np.where(k > 0.0, gammainc(np.maximum(k, 1e-9), m), 1.0)


class BinomialLaw(CountLaw):
    """Detections in a fixed number of trials."""

    def __init__(self, likelihood: BernoulliTrials, x: np.ndarray) -> None:
        self.number, self.trials = likelihood._k, likelihood._n
        self.chance = -np.expm1(-np.maximum(likelihood._mu(x), 0.0))
        product = self.chance * (1.0 - self.chance)
        self.mean = self.trials * self.chance
        self.variance = self.trials * product
        self.fourth = self.variance * (1.0 - 6.0 * product)

    def tails(self, where: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """See `CountLaw.tails`."""
        return _binomial_tails(self.number[where], self.trials[where], self.chance[where])


def _binomial_tails(k: np.ndarray, n: np.ndarray, p: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return P(K > k), P(K >= k); the latter is the incomplete beta function I_p(k, n - k + 1)."""
    more = np.where(k < n, betainc(k + 1.0, np.maximum(n - k, 1e-9), p), 0.0)
    return more, np.where(k > 0.0, betainc(np.maximum(k, 1e-9), n - k + 1.0, p), 1.0)


class WaitingLaw(CountLaw):
    """Trials made until the L-th detection, or a limit: fewer trials are more light.

    The trials' own moments are not used where a limit cuts them; they stand for a record without limit.
    """

    def __init__(self, likelihood: BernoulliTrials, x: np.ndarray) -> None:
        self.detections, self.trials = likelihood._k, likelihood._n
        self.wanted = float(likelihood._stop_after)
        self.chance = -np.expm1(-np.maximum(likelihood._mu(x), 1e-12))
        q = 1.0 - self.chance
        self.number = self.trials
        self.has_moments = likelihood._most_trials is None
        self.mean = self.wanted / self.chance
        self.variance = self.wanted * q / self.chance**2
        self.fourth = self.wanted * q * (1.0 + 4.0 * q + q * q) / self.chance**4

    def tails(self, where: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """See `CountLaw.tails`; P(N <= n) = I_p(L, n - L + 1). Pixels that met the limit are binomial."""
        k, n, p = self.detections[where], self.trials[where], self.chance[where]
        wanted = self.wanted
        most = betainc(wanted, np.maximum(n - wanted + 1.0, 1e-9), p)
        sooner = np.where(n > wanted, betainc(wanted, np.maximum(n - wanted, 1e-9), p), 0.0)
        more, least = _binomial_tails(k, n, p)
        reached = k >= wanted
        return np.where(reached, sooner, more), np.where(reached, most, least)


class NeymanLaw(CountLaw):
    """The electrons of all frames together: the law of Neyman (1939), Type A."""

    def __init__(self, likelihood: PoissonMarks, x: np.ndarray) -> None:
        tally, factors = likelihood._tally, likelihood._factors
        frames = float(tally.frames) if factors is None else factors.sum(axis=0, dtype=np.float64)[:, None]
        self.number = likelihood._electrons.astype(np.float64)
        dose = np.broadcast_to(likelihood._lam * frames, likelihood.shape)
        self.dose, self.eta = dose, np.maximum(np.asarray(x, np.float64), 0.0)
        eta = self.eta
        self.mean = dose * eta
        self.variance = self.mean * (1.0 + eta)
        self.fourth = self.mean * (1.0 + eta * (7.0 + eta * (6.0 + eta)))

    def tails(self, where: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """See `CountLaw.tails`: the Poisson tails of j primaries' electrons, over the law of j."""
        k, dose, eta = self.number[where], self.dose[where], self.eta[where]
        more, least = np.zeros(k.shape), np.zeros(k.shape)
        if not k.size:
            return more, least
        first = max(int(dose.min() - 8.0 * np.sqrt(dose.min())) - 20, 0)
        last = int(dose.max() + 8.0 * np.sqrt(dose.max())) + 20
        stride = max(1, (last - first) // TERMS)  # of so many primaries one in a few is enough
        for j in range(first, last + 1, stride):
            share = stride * np.exp(j * np.log(dose) - dose - gammaln(j + 1.0))
            more += share * gammainc(k + 1.0, j * eta)
            least += share * np.where(k > 0.0, gammainc(np.maximum(k, 1e-9), j * eta), 1.0)
        return np.minimum(more, 1.0), np.minimum(least, 1.0)


def count_law(likelihood: Likelihood, x: np.ndarray) -> CountLaw | None:
    """Return the law of the likelihood's numbers at the image x; None where there is no closed form."""
    if isinstance(likelihood, Poisson):
        return PoissonLaw(likelihood, x)
    if isinstance(likelihood, BernoulliTrials):
        kind = BinomialLaw if likelihood._stop_after is None else WaitingLaw
        return kind(likelihood, x)
    return NeymanLaw(likelihood, x) if type(likelihood) is PoissonMarks else None
