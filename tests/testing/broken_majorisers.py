"""Likelihoods that are not convex, with one fault each in the convex likelihood above them."""

from __future__ import annotations

import numpy as np

from recon import simulate
from recon.likelihoods import Gaussian, PoissonMarks


class Marks(PoissonMarks):
    """Nothing wrong: draws are of the subclass."""

    def draw(self, x, seed):
        other = super().draw(x, seed)
        other.__class__ = type(self)
        return other


class TouchesElsewhere(Marks):
    complaint = "the gradient of majorise(x) is not that of the likelihood"

    def majorise(self, x):
        return super().majorise(1.01 * x)


class LiesBelow(Marks):
    complaint = "lies below value_map at another image"

    def majorise(self, x):
        precision = 0.1 * self.fisher_information(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            target = np.where(precision > 0.0, x - self.gradient(x) / precision, 0.0)
        return Gaussian.from_arrays(target, precision)


class NotConvexEither(Marks):
    complaint = "majorise returns a likelihood that is not convex"

    def majorise(self, x):
        return self


class FaultyAbove(Marks):
    """The convex likelihood is checked too: here its gradient is wrong away from where it touches."""

    complaint = "Poisson: gradient is not the derivative of value_map"

    def majorise(self, x):
        above = super().majorise(x)
        gradient = above.gradient
        above.gradient = lambda z: gradient(z) + 0.01 * (np.asarray(z, np.float64) - x) * self.has_data
        return above


def frames():
    """Return invented frames: 5 x 6 pixels, 30 frames."""
    rng = np.random.default_rng(6)
    return simulate.frames(rng.uniform(1.0, 4.0, (5, 6)), 0.3, 30, seed=rng)


def broken() -> list[Marks]:
    """Return an instance of every faulty class above."""
    return [kind(frames()) for kind in Marks.__subclasses__()]
