"""The same data under several priors, scored on data that were held out."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtri

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.errors import InputError
from recon.imaging.blocks import sum_with_error
from recon.imaging.image import PhysicalImage
from recon.imaging.reconstruct import reconstruct
from recon.problem import Prior, Sum
from recon.solvers import State
from recon.uncertainty.freedom import Freedom, degrees_of_freedom
from recon.weights import held_out_scores

CHANCE = 0.05  # that a difference is called one where there is none, over all priors

NO_DIFFERENCE = "no difference that the data can show"


@dataclass(frozen=True, eq=False)
class Candidate:
    """One prior and what became of it.

    prior: as it was given. image: the image, with the weight used, its status and its diagnostics.
    difference, standard_error: held-out score less that of the best prior (lower is better), and the
        standard error of that, from the same held-out data pixel by pixel. Scores are those of
        `Likelihood.score_map`, summed over pixels and folds: squared errors but for a constant, in the
        unit of the image squared, or nats where there is no unbiased estimate.
    as_good: whether the data cannot tell it from the best.
    freedom: effective degrees of freedom.
    seconds: wall-clock time of the whole reconstruction, its weight and uncertainty included.
    """

    prior: Prior | Sum
    image: PhysicalImage
    difference: float
    standard_error: float
    as_good: bool
    freedom: Freedom
    seconds: float


@dataclass(frozen=True, eq=False)
class Comparison:
    """Priors in the order given; `best` is the place of the one with the best held-out score.

    kind: "reflectivity", "depth" or "electron_yield", the image that was compared.
    folds: into how many parts the data were shared out.
    verdict: in a sentence.
    """

    kind: str
    candidates: tuple[Candidate, ...]
    best: int
    folds: int
    verdict: str


def compare(
    acquisition: Counts | TimeTags | TimeHistogram | Frames,
    priors: Sequence[Prior | Sum],
    *,
    tolerance: float | None = None,
    max_iterations: int = 30_000,
    callback: Callable[[str, State], object] | None = None,
    on_weight: Callable[[str, float], object] | None = None,
    on_prior: Callable[[int], object] | None = None,
) -> Comparison:
    """Reconstruct under each prior, and compare how well the fits to a part of the data predict the rest.

    Open weights are chosen for each prior from the same folds (`recon.reconstruct`), and the same held-out
    data score them, so that differences are paired: the noise of the held-out data falls out of them. The
    standard error comes from blocks of 8 x 8 pixels; a difference counts if it is larger than chance would
    make the largest of them in one comparison of twenty (Bonferroni).

    For time tags it is the prior of depth that is compared.

    priors: two or more. tolerance, max_iterations, callback, on_weight: see `recon.reconstruct`. on_prior:
        called with the place of each prior as its turn comes.

    Raises InputError.
    """
    priors = list(priors) if isinstance(priors, Sequence) else [priors]
    if len(priors) < 2:
        raise InputError(f"priors holds {len(priors)}; give two or more to compare.")
    images, seconds = [], []
    for index, prior in enumerate(priors):
        if on_prior is not None:
            on_prior(index)
        began = time.perf_counter()
        result = reconstruct(
            acquisition,
            prior,
            tolerance=tolerance,
            max_iterations=max_iterations,
            callback=callback,
            on_weight=on_weight,
        )
        seconds.append(time.perf_counter() - began)
        kind, image = list(result.images.items())[-1]
        if not image.held_out:
            raise InputError(
                f"acquisition holds too few detections to hold any out, or prior {spelled(prior)} cannot be"
                " fitted to parts of them; give more detections, or other priors."
            )
        images.append(image)
    scores = held_out_scores([image.held_out for image in images])
    best = int(np.argmin([score.sum() for score in scores]))
    limit = float(ndtri(1.0 - 0.5 * CHANCE / (len(priors) - 1)))
    candidates = []
    for index, (prior, image) in enumerate(zip(priors, images, strict=True)):
        difference, error = sum_with_error(scores[index] - scores[best])
        freedom = degrees_of_freedom(image.problem, image.image, 0.05 * image.tolerance)
        as_good = difference <= limit * error
        candidates.append(Candidate(prior, image, difference, error, as_good, freedom, seconds[index]))
    verdict = _verdict(candidates, best)
    return Comparison(kind, tuple(candidates), best, len(images[0].held_out), verdict)


def _verdict(candidates: Sequence[Candidate], best: int) -> str:
    names = [spelled(candidate.prior) for candidate in candidates]
    alike = [name for name, candidate in zip(names, candidates, strict=True) if candidate.as_good]
    worse = [name for name, candidate in zip(names, candidates, strict=True) if not candidate.as_good]
    late = [name for name, c in zip(names, candidates, strict=True) if c.image.status.name != "CONVERGED"]
    said = f"{names[best]} predicts held-out data best"
    if not worse:
        said = f"{NO_DIFFERENCE} between {_listed(alike)}"
    elif len(alike) > 1:
        ending = "s" if len(worse) == 1 else ""
        said = f"{NO_DIFFERENCE} between {_listed(alike)}; {_listed(worse)} predict{ending} worse"
    return said + (f"; NOT CONVERGED: {_listed(late)}" if late else "")


def spelled(prior: Prior | Sum) -> str:
    """Return the class of a prior, of a sum all of them."""
    return " + ".join(type(term).__name__ for term in prior.terms())


def _listed(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
