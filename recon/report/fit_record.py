"""Whether the model fits, as plain records and in words."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from recon.fit.words import NO_MISFIT, NOTHING
from recon.report.words import number

if TYPE_CHECKING:
    from recon.fit import ImageFit, Statistic

BESIDE = "grey: told beside and denying nothing, since the best image, too, has lost some structure"


def fit_record(fit: ImageFit) -> dict[str, Any]:
    """Return all that is known of a fit but its maps."""
    histogram = fit.histogram
    return {
        "verdict": fit.verdict,
        "enough": fit.enough,
        "findings": [vars(finding).copy() for finding in fit.findings],
        "unidentified": list(fit.unidentified),
        "least_overdispersion": fit.least_overdispersion,
        "statistics": [_statistic_record(statistic) for statistic in fit.statistics],
        "lone_pixels": int(fit.lone.sum()),
        "histogram": None if histogram is None else {k: v.tolist() for k, v in vars(histogram).items()},
    }


def _statistic_record(statistic: Statistic) -> dict[str, Any]:
    return {
        "name": statistic.name,
        "observed": statistic.observed,
        "expected": statistic.expected,
        "standard_deviation": statistic.standard_deviation,
        "p": statistic.p_value,
        "threshold": statistic.threshold,
        "denies": bool(statistic.denies),
    }


def is_beside(record: Mapping[str, Any]) -> bool:
    """Whether a statistic record is told for information only, whatever its p."""
    return record["threshold"] == 0.0


def fit_in_words(record: Mapping[str, Any]) -> str:
    """Return the verdict of a fit record in a phrase, its findings by name."""
    said = [f"does not fit: {', '.join(finding['cause'] for finding in record['findings'])}"]
    said = said if record["findings"] else []
    if not record["enough"]:
        said.append(NOTHING)
    return "; ".join(said) or NO_MISFIT


def statistic_in_words(record: Mapping[str, Any]) -> tuple[str, str, str, str, str]:
    """Return name, observed, expected, standard deviation and p of a statistic record."""
    p = "< 0.0001" if record["p"] < 1e-4 else f"{record['p']:.2g}"
    observed, expected = (number(record[key], 4) for key in ("observed", "expected"))
    return record["name"], observed, expected, number(record["standard_deviation"], 2), p
