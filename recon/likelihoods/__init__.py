"""Half the deviance of an acquisition as a function of an image."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from recon.likelihoods.analog_marks import AnalogMarks
    from recon.likelihoods.bernoulli_trials import BernoulliTrials
    from recon.likelihoods.contract import Interval, Likelihood
    from recon.likelihoods.detection_times import DetectionTimes
    from recon.likelihoods.gaussian import Gaussian
    from recon.likelihoods.moving_frames import MovingFrames
    from recon.likelihoods.poisson import Poisson
    from recon.likelihoods.poisson_marks import PoissonMarks

_HOMES = {
    "AnalogMarks": "analog_marks",
    "BernoulliTrials": "bernoulli_trials",
    "DetectionTimes": "detection_times",
    "Gaussian": "gaussian",
    "Interval": "contract",
    "Likelihood": "contract",
    "MovingFrames": "moving_frames",
    "Poisson": "poisson",
    "PoissonMarks": "poisson_marks",
}

__all__ = [
    "AnalogMarks", "BernoulliTrials", "DetectionTimes", "Gaussian", "Interval", "Likelihood",
    "MovingFrames", "Poisson", "PoissonMarks",
]  # fmt: skip


def __getattr__(name: str) -> Any:
    """Import a likelihood when it is first asked for."""
    if name not in _HOMES:
        raise AttributeError(f"module 'recon.likelihoods' has no attribute {name!r}")
    value = getattr(import_module(f"recon.likelihoods.{_HOMES[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
