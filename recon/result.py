"""What a solve returns."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.diagnostics import Diagnostics, Status


@dataclass(frozen=True, eq=False)
class Solution:
    """The image (float32, rows x columns), how the solve ended, and how far to trust it."""

    image: np.ndarray
    status: Status
    diagnostics: Diagnostics

    @property
    def converged(self) -> bool:
        """Whether the relative gap came within the tolerance."""
        return self.status is Status.CONVERGED
