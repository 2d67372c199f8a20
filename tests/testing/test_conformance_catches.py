"""The conformance suite passes classes that keep their contract, and names the fault of those that do not."""

import re

import pytest

from recon.testing import ConformanceError, check_likelihood, check_prior
from tests.testing import broken_blocks, broken_likelihoods, broken_majorisers, broken_priors, broken_proximal
from tests.testing.huber_variation import HuberVariation
from tests.testing.log_variance import LogVariance, example

SEEDS = [0, 1, 2]


def _kind(subject):
    return type(subject).__name__


def _assert_one_sentence(message, subject):
    assert re.fullmatch(rf"{_kind(subject)}: .+; got .+, expected .+\.", message)


@pytest.mark.parametrize("seed", SEEDS)
def test_a_users_likelihood_passes(seed):
    check_likelihood(example(), seed=seed)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize(("weight", "rounding"), [(0.7, 0.1), (50.0, 2.0), (0.02, 1e-3)])
def test_a_users_prior_passes(weight, rounding, seed):
    check_prior(HuberVariation(weight, rounding), seed=seed)


@pytest.mark.parametrize("shape", [(1, 9), (9, 1), (2, 2), (12, 5)])
def test_a_prior_is_checked_on_any_shape(shape):
    check_prior(HuberVariation(0.7), shape=shape)


@pytest.mark.parametrize("likelihood", [*broken_likelihoods.broken(), *broken_proximal.broken()], ids=_kind)
def test_a_wrong_likelihood_is_caught(likelihood):
    with pytest.raises(ConformanceError, match=re.escape(likelihood.complaint)) as caught:
        check_likelihood(likelihood)
    _assert_one_sentence(str(caught.value), likelihood)


def test_a_likelihood_that_is_not_convex_passes():
    check_likelihood(broken_majorisers.Marks(broken_majorisers.frames()))


@pytest.mark.parametrize("likelihood", broken_majorisers.broken(), ids=_kind)
def test_a_wrong_majoriser_is_caught(likelihood):
    with pytest.raises(ConformanceError, match=re.escape(likelihood.complaint)):
        check_likelihood(likelihood)


@pytest.mark.parametrize("prior", [*broken_priors.broken(), *broken_blocks.broken()], ids=_kind)
def test_a_wrong_prior_is_caught(prior):
    with pytest.raises(ConformanceError, match=re.escape(prior.complaint)) as caught:
        check_prior(prior)
    _assert_one_sentence(str(caught.value), prior)


def test_every_term_of_a_sum_is_checked():
    check_prior(HuberVariation(0.7) + HuberVariation(2.0))
    with pytest.raises(ConformanceError, match="NormTooSmall"):
        check_prior(HuberVariation(0.7) + broken_priors.NormTooSmall(0.7))


def test_a_prior_that_is_conic_only_is_asked_for_no_steps():
    class Conic(HuberVariation):
        conic_only = True

        def value(self, x):
            return HuberVariation(self.weight, self.rounding).value(x)

        def forward(self, x, v=None):
            raise NotImplementedError

    check_prior(Conic(0.7))


def test_an_object_of_the_wrong_kind_is_named():
    with pytest.raises(ConformanceError, match="HuberVariation: is not a likelihood"):
        check_likelihood(HuberVariation(0.7))
    with pytest.raises(ConformanceError, match="LogVariance: is not a prior"):
        check_prior(example())


def test_a_likelihood_without_expression_is_let_off():
    class NoExpression(LogVariance):
        def expression(self, x):
            raise NotImplementedError

    good = example()
    check_likelihood(NoExpression(good.s2, good.nu))
