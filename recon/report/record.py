"""What there is to say about a reconstruction, as plain records: the source of the table and of the JSON."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any

import numpy as np

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.imaging import DepthImage
from recon.imaging.image import SHARES
from recon.report.data_images import detections
from recon.report.words import certificate_in_words

if TYPE_CHECKING:
    from recon.imaging import PhysicalImage
    from recon.problem import Prior

KINDS = {Counts: "counts", TimeTags: "time tags", TimeHistogram: "time histogram", Frames: "frames"}


def acquisition_record(
    acquisition: Counts | TimeTags | TimeHistogram | Frames, note: str = ""
) -> dict[str, Any]:
    """Return kind, shape, numbers of detections and the note of an acquisition; masked pixels left out."""
    counts = detections(acquisition)
    usable = counts if acquisition.mask is None else counts[acquisition.mask]
    record = {
        "kind": KINDS[type(acquisition)],
        "shape": list(acquisition.shape),
        "detections": int(usable.sum(dtype=np.int64)),
        "detections_per_pixel": float(usable.mean(dtype=np.float64)),
        "share_of_pixels_without_detection": float(np.mean(usable == 0)),
        "note": note,
    }
    if isinstance(acquisition, Frames):
        record["frames"] = acquisition.frames
    return record


def image_record(
    image: PhysicalImage, truth: np.ndarray | None = None, conventional: np.ndarray | None = None
) -> dict[str, Any]:
    """Return all that is known of an image but its pixels.

    truth: the image it was drawn from, where that is known; `error` is then the root mean square error
        and the median absolute error over all pixels, and those of the conventional image where it has
        data; `coverage` is the share of pixels whose true value is within the 68 % and the 95 % interval.
    """
    seen = ~image.filled
    diagnostics = image.diagnostics
    record = {
        "unit": image.unit,
        "shape": list(image.image.shape),
        "range": [float(image.image.min()), float(image.image.max())],
        "median_uncertainty": float(np.median(image.uncertainty[seen])) if seen.any() else None,
        "calibrated": bool(image.held_out),
        "filled_pixels": int(np.count_nonzero(image.filled)),
        "priors": [_prior_record(prior) for prior in image.priors],
        "bounds": list(image.bounds),
        "status": {
            "name": image.status.name.lower(),
            "meaning": image.status.meaning,
            "remedy": image.status.remedy,
        },
        "notes": list(image.notes),
        "weight": _choice_record(image),
        "tolerance": image.tolerance,
        "solver": diagnostics.solver,
        "convex": image.problem.likelihood.convex,
        "objective": diagnostics.objective,
        "dual_value": diagnostics.dual_value,
        "relative_gap": diagnostics.relative_gap,
        "iterations": diagnostics.iterations,
        "seconds": diagnostics.seconds,
        "deviance_per_pixel": diagnostics.deviance_per_pixel,
        "pixels_at_bounds": diagnostics.pixels_at_bounds,
        "error": None,
        "coverage": None,
        "trace": {name: list(values) for name, values in vars(diagnostics.trace).items()},
    }
    record["certificate"] = certificate_in_words(record)
    if isinstance(image, DepthImage):
        record |= _depth_record(image)
    if truth is not None:
        record["error"] = _error(image.image, truth)
        record["coverage"] = _coverage(image, np.asarray(truth))
        if conventional is not None:
            record["error"]["conventional"] = _error(conventional, truth)
    return record


def _coverage(image: PhysicalImage, truth: np.ndarray) -> dict[str, Any] | None:
    """Return the shares of pixels whose truth is in their interval, and how many pixels were asked.

    Of depth those where there is a target on the right surface, which its intervals are about.
    """
    asked = np.isfinite(truth)
    if isinstance(image, DepthImage):
        asked = asked & (image.target > 0.5) & (image.wrong_surface < 0.5)
    if not asked.any():
        return None
    within = {}
    for share in SHARES:
        low, high = image.interval(share)
        within[f"{100 * share:.0f}"] = float(np.mean((low <= truth)[asked] & (truth <= high)[asked]))
    return within | {"pixels": int(np.count_nonzero(asked))}


def _choice_record(image: PhysicalImage) -> dict[str, Any] | None:
    """Return how the weight was chosen, with the whole curve; None if no data were held out."""
    choice = image.choice
    if choice is None:
        return None
    return {
        "factor_of_rule": choice.factor,
        "second_order": choice.second_order,
        "folds": choice.folds,
        "at_edge": choice.at_edge,
        "factors": choice.factors.tolist(),
        "score": choice.score.tolist(),
        "standard_error": choice.standard_error.tolist(),
    }


def _depth_record(image: DepthImage) -> dict[str, Any]:
    """Return what a depth image says besides: shares of the pixels, and whether the background fits."""
    background = image.background
    return {
        "without_target": float(np.mean(image.target < 0.5)),
        "wrong_surface": float(np.mean(image.wrong_surface, dtype=np.float64)),
        "signal_tags_per_pixel": float(np.mean(image.signal_tags, dtype=np.float64)),
        "background": {
            "declared": background.declared,
            "found": background.found,
            "standard_error": background.standard_error,
            "fits": background.fits,
            "verdict": background.words,
        },
    }


def name_of(prior: Prior) -> str:
    """Return the name of a prior as the command line spells it: "total-variation" for a TotalVariation."""
    return re.sub(r"(?<=[a-z0-9])(?=[A-Z])", "-", type(prior).__name__).lower()


def _prior_record(prior: Prior) -> dict[str, Any]:
    weighted = getattr(prior, "edge_weights", None) is not None
    return {"name": name_of(prior), "weight": prior.weight, "edge_weights": weighted}


def _error(image: np.ndarray, truth: np.ndarray) -> dict[str, float]:
    difference = np.asarray(image, np.float64) - truth
    difference = difference[np.isfinite(difference)]
    if not difference.size:
        return {"rmse": np.nan, "median_absolute": np.nan}
    return {
        "rmse": float(np.sqrt(np.mean(np.square(difference)))),
        "median_absolute": float(np.median(np.abs(difference))),
    }
