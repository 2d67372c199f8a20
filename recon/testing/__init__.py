"""The conformance suite: does a class keep the contract of a likelihood, or of a prior?

    from recon.testing import check_likelihood, check_prior

    check_likelihood(MyLikelihood(counts))       # on a small image, some 50 pixels
    check_prior(MyPrior(weight=0.5))

Either returns nothing, or raises `ConformanceError` (an AssertionError) with one sentence: which
class, which property, at what point, what it got and what it expected. Fewcount's own classes pass the
same suite. The checks are numerical, random points and draws being seeded: what passes is not proven,
and what fails is wrong.
"""

from recon.testing.errors import ConformanceError
from recon.testing.likelihood import check_likelihood
from recon.testing.prior import check_prior

__all__ = ["ConformanceError", "check_likelihood", "check_prior"]
