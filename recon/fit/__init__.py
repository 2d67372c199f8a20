"""Does the model fit the data? `goodness` says, and what of it the data cannot tell."""

from recon.fit.goodness import Goodness, ImageFit, goodness
from recon.fit.quantile_residuals import Histogram, quantile_residuals
from recon.fit.statistic import Finding, Statistic

__all__ = ["Finding", "Goodness", "Histogram", "ImageFit", "Statistic", "goodness", "quantile_residuals"]
