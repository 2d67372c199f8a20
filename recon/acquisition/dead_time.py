"""How long a single-photon detector and its clock are blind after a detection."""

from dataclasses import dataclass

from recon.errors import InputError
from recon.validation import DURATION, Range, flag, number, store

_DEAD = Range("a time in seconds between 0 and 1e9", low=0.0, high=DURATION.high)


@dataclass(frozen=True)
class DeadTime:
    """The time after a recorded detection in which a pixel records nothing.

    detector: s, 0 or more, for which the detector is blind after a detection.
    electronics: s, 0 or more, for which the clock or the readout is blind after a recorded detection.
    reset_every_period: whether the detector is armed again at the start of every period, so that a blind
        time ends with the period; if not, it runs on into the next.

    Modelled: a non-paralysable dead time, which a photon arriving within it does not prolong. The
    electronics' dead time starts at a recorded detection, as the detector's does, so the longer of the
    two counts: `blind`.

    Not modelled: a detection the electronics missed still blinds the detector, so with `electronics`
    above `detector` the true live exposure is slightly shorter; afterpulsing; paralysable detectors; a
    dead time shared between pixels. Raises InputError.
    """

    detector: float
    electronics: float = 0.0
    reset_every_period: bool = False

    def __post_init__(self) -> None:
        store(
            self,
            detector=number(self.detector, "detector", _DEAD),
            electronics=number(self.electronics, "electronics", _DEAD),
            reset_every_period=flag(self.reset_every_period, "reset_every_period"),
        )
        if self.blind < DURATION.low:
            raise InputError(
                f"detector is {self.detector} and electronics {self.electronics}; "
                "give at least one of them 1e-18 s or more, or no dead time at all."
            )

    @property
    def blind(self) -> float:
        """Time in s after a recorded detection in which nothing can be recorded."""
        return max(self.detector, self.electronics)

    @property
    def not_modelled(self) -> str:
        """What the model leaves out for these two times, in a sentence; empty if nothing."""
        if self.electronics <= self.detector:
            return ""
        return (
            f"The dead time of the electronics ({self.electronics:g} s) exceeds that of the detector "
            f"({self.detector:g} s), and detections that the electronics missed still blinded the detector, "
            "so the true live exposure is slightly shorter than the one taken."
        )
