"""Tests of a drawn sample against a law."""

from collections.abc import Callable

import numpy as np
import pytest
from scipy import stats


def _chance(sample: np.ndarray, law: np.ndarray) -> float:
    """p value of the chi-squared test of whole numbers against P(0), P(1), ... and the tail beyond."""
    seen = np.bincount(np.ravel(sample), minlength=law.size)
    seen = np.append(seen[: law.size], seen[law.size :].sum())
    expected = sample.size * np.append(law, max(1.0 - law.sum(), 0.0))
    common = expected >= 5
    seen = np.append(seen[common], seen[~common].sum())
    expected = np.append(expected[common], expected[~common].sum())
    if expected[-1] < 5:  # too few to judge alone
        seen, expected = np.append(seen[:-2], seen[-2:].sum()), np.append(expected[:-2], expected[-2:].sum())
    return float(stats.chisquare(seen, expected * seen.sum() / expected.sum()).pvalue)


@pytest.fixture(scope="session")
def chance() -> Callable[[np.ndarray, np.ndarray], float]:
    return _chance


@pytest.fixture(params=[1, 2, 3])
def seed(request: pytest.FixtureRequest) -> int:
    return request.param
