"""Records in words."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

HELD_OUT_SCORE = (
    "Held-out score: above that of the best prior, and its standard error; squared errors on data that were"
    " held out, sum over pixels and folds, lower is better"
)


def quantity(value: float | None, unit: str) -> str:
    """Return a number to three significant digits with its unit, or a dash where there is none."""
    if value is None:
        return "-"
    return f"{value:.3g}" if unit == "1" else f"{value:.3g} {unit}"


def number(value: float, digits: int) -> str:
    """Return a number to so many digits, but all of those before the point up to ten million."""
    return f"{value:.0f}" if 10.0**digits <= abs(value) < 1e7 else f"{value:.{digits}g}"


def spelled(name: str) -> str:
    """Return a name as words: "electron yield" for electron_yield."""
    return name.replace("_", " ").replace("-", " ")


def priors_in_words(record: Mapping[str, Any]) -> str:
    """Return the priors of an image record and their weights."""
    return " + ".join(_prior_in_words(prior) for prior in record["priors"]) or "none"


def _prior_in_words(prior: Mapping[str, Any]) -> str:
    edges = " with edge weights" if prior["edge_weights"] else ""
    return f"{spelled(prior['name'])}{edges}, weight {prior['weight']:.3g}"


def is_converged(record: Mapping[str, Any]) -> bool:
    """Whether the image of this record is within the tolerance."""
    return record["status"]["name"] == "converged"


def status_in_words(record: Mapping[str, Any]) -> str:
    """Return how the solve ended: "converged", or in capitals that it did not, with meaning and remedy."""
    status = record["status"]
    if is_converged(record):
        return f"converged: {status['meaning']}"
    return f"NOT CONVERGED: {status['meaning']}. To do: {status['remedy']}."


def certificate_in_words(record: Mapping[str, Any]) -> str:
    """Return what the dual value of an image record says of all other images, in a sentence.

    Where the likelihood is not convex it is about the convex majorant at the image, and no more.
    """
    objective, gap = record["objective"], record["objective"] - record["dual_value"]
    if not math.isfinite(gap) or gap >= abs(objective):
        return "nothing says how far an objective can be below this image's: the dual value is no use yet"
    if gap <= 0.0:
        below = "an objective below"
    elif record["relative_gap"] < 0.99 * gap / abs(objective):  # the floor of `relative_gap`
        below = f"an objective more than {_rounded_up(gap)} below"
    else:
        below = f"an objective more than {_rounded_up(100.0 * gap / abs(objective))} % below"
    times, iterations = len(record["trace"]["iteration"]), record["iterations"]
    looked = f"measured {times} times in {iterations} iterations"
    if record["convex"]:
        return f"no image within the bounds has {below} this one's ({looked})"
    return (
        f"in the convex majorant at this image, no image within the bounds has {below} this one's ({looked});"
        " the likelihood is not convex, and another image may still be better"
    )


def _rounded_up(value: float) -> str:
    """Return a number above zero to two digits, never less than it is."""
    digits = 1 - math.floor(math.log10(value))
    return f"{math.ceil(value * 10.0**digits) / 10.0**digits:.2g}"


def coverage_in_words(record: Mapping[str, Any]) -> str:
    """Return how often the truth is within the intervals of an image record, where it is known."""
    coverage = record["coverage"]
    if coverage is None:
        return "-"
    return f"{100 * coverage['68']:.1f} / {100 * coverage['95']:.1f} % of pixels"


def calibration_in_words(record: Mapping[str, Any]) -> str:
    """Return where the uncertainty of an image record comes from."""
    return "calibrated on held-out data" if record["calibrated"] else "not calibrated: nothing was held out"


def data_in_words(record: Mapping[str, Any]) -> str:
    """Return what an acquisition record holds in one phrase."""
    rows, columns = record["shape"]
    frames = f"{record['frames']} frames of " if "frames" in record else ""
    empty = f"{100 * record['share_of_pixels_without_detection']:.0f} % of pixels have none"
    return (
        f"{record['kind']}, {frames}{rows} x {columns} pixels, {record['detections']} detections,"
        f" {record['detections_per_pixel']:.3g} a pixel ({empty})"
    )


def error_in_words(record: Mapping[str, Any]) -> str:
    """Return the errors of an image record whose truth is known, beside those of the conventional image."""
    error, unit = record["error"], record["unit"]
    rmse, median = (quantity(error[kind], unit) for kind in ("rmse", "median_absolute"))
    text = f"against the truth: rmse {rmse}, median absolute error {median}"
    if "conventional" not in error:
        return text
    alone = error["conventional"]
    rmse, median = (quantity(alone[kind], unit) for kind in ("rmse", "median_absolute"))
    return f"{text} (conventional, pixel by pixel: {rmse}, {median})"
