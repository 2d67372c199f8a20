"""Whether a quarter of the weight, or four times it, predicts held-out data better."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy.special import ndtr

from recon.acquisition import Frames
from recon.fit.statistic import Statistic
from recon.imaging.electron_yield import frame_folds
from recon.imaging.image import PhysicalImage
from recon.likelihoods.poisson_marks import PoissonMarks
from recon.weights.held_out import WeightPath
from recon.weights.settle import FOLDS, SEED, folds_at

APART = 4.0


@dataclass(frozen=True)
class WeightTest:
    """What held-out data say of the weights of an image.

    statistics: the score of a quarter of the weights, and of four times them where that is not better, less
        that of the weights used, over the latter; below zero, the other weight predicts better.
    better: the factor that predicts best of those tried.
    """

    statistics: tuple[Statistic, ...]
    better: float


def weight_test(image: PhysicalImage, acquisition: object, large: float, small: float) -> WeightTest | None:
    """Fit folds with the weights used, a quarter of them and four times them, and score what was held out.

    Scores are `Likelihood.score_map`, folds and standard errors those of `recon.weights.held_out` (Stone
    1974); the weights of a fold follow the information that it holds. None where nothing can be held out.

    large, small: the chance of a false alarm, of weights called too large, and too small.
    """
    likelihood = image.problem.likelihood
    movable = [term for term in image.priors if term.weight > 0.0 and not term.conic_only]
    if len(movable) < len(image.priors) or not movable or not likelihood.can_be_shared_out:
        return None
    if isinstance(acquisition, Frames) and isinstance(likelihood, PoissonMarks):
        pairs = frame_folds(acquisition, FOLDS, SEED)
    elif isinstance(acquisition, Frames):
        return None
    else:
        pairs = likelihood.folds(FOLDS, SEED)
    terms, is_open = image.priors, (True,) * len(image.priors)
    path = WeightPath(folds_at(terms, is_open, likelihood, pairs, image.bounds, image.image), None)
    path.at(1.0)
    lighter = _compared(path, 1.0 / APART, "held-out score of a quarter of the weight", large)
    if lighter.denies:
        return WeightTest((lighter,), min((1.0 / APART, 0.5), key=path.at))
    heavier = _compared(path, APART, "held-out score of four times the weight", small)
    return WeightTest((lighter, heavier), APART if heavier.denies else 1.0)


def _compared(path: WeightPath, factor: float, name: str, threshold: float) -> Statistic:
    base = path.at(1.0)
    path.at(factor)
    apart, error = path.difference(factor, 1.0)
    z = apart / error if error > 0.0 else 0.0
    scale = abs(base) if base and math.isfinite(base) else 1.0
    return Statistic(name, apart / scale, 0.0, error / scale, float(ndtr(z)), threshold)
