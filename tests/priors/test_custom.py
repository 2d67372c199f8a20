"""A prior written as a cvxpy expression."""

import cvxpy as cp
import numpy as np
import pytest

import priors
from recon.testing import check_prior


def test_it_keeps_the_contract() -> None:
    check_prior(priors.Custom(lambda x: cp.norm1(x[1:] - x[:-1]), 0.7), shape=(5, 6))


def test_value_is_weight_times_the_expression() -> None:
    x = np.arange(12.0).reshape(3, 4)
    assert priors.Custom(lambda x: cp.sum_squares(x), 2.0).value(x) == pytest.approx(2.0 * np.sum(x**2))


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: priors.Custom(3), "expression is a int"),
        (lambda: priors.Custom(lambda x: x, -1.0), "weight is -1.0"),
        (lambda: priors.Custom(lambda x: x).value(np.zeros((2, 2))), "one cvxpy scalar"),
        (lambda: priors.Custom(lambda x: 4.0).value(np.zeros((2, 2))), "one cvxpy scalar"),
        (lambda: priors.Custom(lambda x: -cp.norm1(x)).expression(cp.Variable((2, 2)), (2, 2)), "convex"),
        (lambda: priors.Custom(lambda x: cp.norm1(x)).block((2, 2)), "conic"),
    ],
)
def test_bad_input(make, words: str) -> None:
    with pytest.raises(priors.PriorError, match=words):
        make()
