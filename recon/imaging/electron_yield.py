"""Secondary-electron yield from frames."""

from __future__ import annotations

from recon.acquisition import Frames
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort, image_of
from recon.likelihoods.poisson_marks import PoissonMarks
from recon.problem import Prior, Sum


def electron_yield(
    frames: Frames, prior: Prior | Sum | None = None, effort: Effort | None = None
) -> PhysicalImage:
    """Return the yield image: mean detected electrons per primary particle.

    Uses how the electrons fall on the frames, not their total alone: a frame with several electrons
    holds fewer primaries than its count suggests.
    """
    return image_of("electron_yield", PoissonMarks(frames), prior, "1", effort or Effort())
