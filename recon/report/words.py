"""Records in words."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any


def quantity(value: float | None, unit: str) -> str:
    """Return a number to three significant digits with its unit, or a dash where there is none."""
    if value is None:
        return "-"
    return f"{value:.3g}" if unit == "1" else f"{value:.3g} {unit}"


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
