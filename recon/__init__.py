"""From a handful of detections a pixel to images in physical units, with a certificate.

    acquisition = recon.load("bench.h5")
    result = recon.reconstruct(acquisition)
    result.depth.image, result.depth.uncertainty, result.diagnostics

Names are imported when they are first asked for, so that `import recon` costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from recon import instrument, likelihoods, sampling, simulate, testing, uncertainty
    from recon.acquisition import (
        Counts,
        DeadTime,
        Frames,
        GaussianPulse,
        MarkLaw,
        SampledPulse,
        TimeHistogram,
        TimeTags,
    )
    from recon.diagnostics import Diagnostics, Status
    from recon.errors import InputError
    from recon.files import load, save
    from recon.fit import goodness
    from recon.imaging import compare, reconstruct
    from recon.problem import Problem
    from recon.result import Solution
    from recon.solvers import solve

_HOMES = {
    "Counts": "acquisition",
    "DeadTime": "acquisition",
    "Diagnostics": "diagnostics",
    "Frames": "acquisition",
    "GaussianPulse": "acquisition",
    "InputError": "errors",
    "MarkLaw": "acquisition",
    "Problem": "problem",
    "SampledPulse": "acquisition",
    "Solution": "result",
    "Status": "diagnostics",
    "TimeHistogram": "acquisition",
    "TimeTags": "acquisition",
    "compare": "imaging",
    "goodness": "fit",
    "load": "files",
    "reconstruct": "imaging",
    "save": "files",
    "solve": "solvers",
}
_MODULES = ("instrument", "likelihoods", "sampling", "simulate", "testing", "uncertainty")

__all__ = [
    "Counts", "DeadTime", "Diagnostics", "Frames", "GaussianPulse", "InputError", "MarkLaw", "Problem",
    "SampledPulse", "Solution", "Status", "TimeHistogram", "TimeTags", "compare", "goodness", "instrument",
    "likelihoods", "load", "reconstruct", "sampling", "save", "simulate", "solve", "testing", "uncertainty",
]  # fmt: skip


def __getattr__(name: str) -> Any:
    if name in _MODULES:
        return import_module(f"recon.{name}")
    if name not in _HOMES:
        raise AttributeError(f"module 'recon' has no attribute {name!r}")
    value = getattr(import_module(f"recon.{_HOMES[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
