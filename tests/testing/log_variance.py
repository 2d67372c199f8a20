"""A likelihood as a researcher might write it: the noise variance of each pixel, from repeated readings."""

from __future__ import annotations

from typing import Any

import cvxpy as cp
import numpy as np
from scipy.special import gammaln, wrightomega

from recon.likelihoods.contract import Interval, Likelihood


class LogVariance(Likelihood):
    """Half the deviance of sample variances s2 with nu degrees of freedom, x the log of the true variance.

        value(x) = sum over pixels of  nu/2 (exp(d) - 1 - d),     d = log(s2) - x

    nu s2 / exp(x) follows the chi-squared law with nu degrees of freedom; a pixel with nu = 0 has no data.
    """

    convex = True

    def __init__(self, s2: np.ndarray, nu: np.ndarray) -> None:
        self.shape = s2.shape
        self.nu = np.asarray(nu, np.float64)
        self.s2 = np.where(self.nu > 0.0, s2, 1.0)
        self.log_s2 = np.log(self.s2)

    @property
    def has_data(self) -> np.ndarray:
        return self.nu > 0.0

    @property
    def domain(self) -> Interval:
        return Interval(-np.inf, np.inf, low_open=True, high_open=True)

    @property
    def default_bounds(self) -> tuple[float, float]:
        return float(self.log_s2.min()) - 1.0, float(self.log_s2.max()) + 1.0

    @property
    def constant(self) -> float:
        half = 0.5 * self.nu[self.has_data]
        return float(np.sum(half - half * np.log(half) + gammaln(half) + self.log_s2[self.has_data]))

    def estimate(self) -> np.ndarray:
        mean = self.log_s2[self.has_data].mean()
        return np.where(self.has_data, self.log_s2, mean).astype(np.float32)

    def value_map(self, x: np.ndarray) -> np.ndarray:
        d = self.log_s2 - x
        return 0.5 * self.nu * (np.expm1(d) - d)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        return -0.5 * self.nu * np.expm1(self.log_s2 - x)

    def curvature(self, x: np.ndarray) -> np.ndarray:
        return 0.5 * self.nu * np.exp(self.log_s2 - x)

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        return 0.5 * self.nu

    def residuals(self, x: np.ndarray) -> np.ndarray:
        return np.sign(self.log_s2 - x) * np.sqrt(2.0 * self.value_map(x))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> Likelihood:
        nu = np.where(self.has_data, self.nu, 1.0)
        return type(self)(np.exp(x) * np.random.default_rng(seed).chisquare(nu) / nu, self.nu)

    def prox(self, v: np.ndarray, step: float) -> np.ndarray:
        """The root of x - v + a - a s2 exp(-x), a = step nu / 2, is Lambert's W, here by log argument."""
        a = 0.5 * step * self.nu
        with np.errstate(divide="ignore"):
            return v - a + wrightomega(np.log(a * self.s2) + a - v)

    def conjugate_map(self, u: np.ndarray, low: float, high: float) -> np.ndarray:
        """The maximiser is log(s2 / (1 - 2 u / nu)), or the upper end if u is beyond every slope."""
        with np.errstate(divide="ignore", invalid="ignore"):
            room = np.where(self.has_data, 1.0 - 2.0 * u / self.nu, np.where(u > 0.0, -np.inf, np.inf))
            x = np.clip(np.where(room > 0.0, self.log_s2 - np.log(room), high), low, high)
            flat = ~self.has_data & (u == 0.0)
            return np.where(flat, 0.0, np.where(np.isinf(x), np.inf, u * x - self.value_map(x)))

    def expression(self, x: cp.Expression) -> tuple[cp.Expression, list[Any]]:
        d = self.log_s2 - x
        return cp.sum(cp.multiply(0.5 * self.nu, cp.exp(d) - 1.0 - d)), []


def example() -> LogVariance:
    """Return invented data: 6 x 8 pixels of varied degrees of freedom, one row without data."""
    rng = np.random.default_rng(5)
    nu = rng.integers(1, 30, (6, 8)).astype(float)
    nu[2] = 0.0
    truth = rng.uniform(-1.0, 1.5, nu.shape)
    return LogVariance(np.exp(truth), nu).draw(truth, 3)
