"""Draws from the posterior of an image: means, intervals and regions with what the data leave open."""

from recon.sampling.effective import effective_samples, split_r_hat
from recon.sampling.posterior import Posterior, Region
from recon.sampling.run import Progress, sample

__all__ = ["Posterior", "Progress", "Region", "effective_samples", "sample", "split_r_hat"]
