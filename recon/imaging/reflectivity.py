"""Reflectivity from counts, or from the number of tags."""

from __future__ import annotations

from recon.acquisition import Counts
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort, image_of
from recon.likelihoods.bernoulli_trials import BernoulliTrials
from recon.likelihoods.contract import Likelihood
from recon.likelihoods.poisson import Poisson
from recon.problem import Prior, Sum


def counting_likelihood(counts: Counts) -> Likelihood:
    """Return the law of the counts: Poisson where one trial can detect several times, else Bernoulli trials.

    The rule of stopping does not matter to the image; see `BernoulliTrials`.
    """
    return Poisson(counts) if counts.several_per_trial else BernoulliTrials(counts)


def reflectivity(
    counts: Counts, prior: Prior | Sum | None = None, effort: Effort | None = None
) -> PhysicalImage:
    """Return the reflectivity image (a ratio): detections per trial less background, over the gain."""
    return image_of("reflectivity", counting_likelihood(counts), prior, "1", effort or Effort())
