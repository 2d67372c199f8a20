"""What the priors on first differences share: their settings' checks and their linear map."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from priors import validation
from priors.contract import Prior, require_image
from priors.differences import Differences

if TYPE_CHECKING:
    from priors.difference_block import DifferenceBlock


class DifferencePrior(Prior):
    """A penalty of the difference pair at each pixel; subclasses are frozen dataclasses with these fields."""

    weight: float | None
    spacing: float | tuple[float, float]
    edge_weights: np.ndarray | None
    mask: np.ndarray | None

    _kernel: int

    def __post_init__(self) -> None:
        object.__setattr__(self, "weight", validation.weight(self.weight))
        object.__setattr__(self, "spacing", validation.pixel_spacing(self.spacing))
        object.__setattr__(self, "edge_weights", validation.edge_weights(self.edge_weights))
        object.__setattr__(self, "mask", validation.image_mask(self.mask))

    def check_shape(self, shape: tuple[int, int]) -> None:
        """See `Prior.check_shape`."""
        validation.same_shape("mask", self.mask, shape)
        validation.same_shape("edge_weights", self.edge_weights, shape)

    def differences(self, shape: tuple[int, int]) -> Differences:
        """Return the linear map K for images of `shape`."""
        return Differences(validation.image_shape(shape), self.spacing, self.mask, self.edge_weights)

    def forward(self, x: np.ndarray, v: np.ndarray | None = None) -> np.ndarray:
        """Return the differences, shape (2, rows, columns)."""
        x = require_image(x)
        return self.differences(x.shape).forward(x)

    def adjoint(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """See `Prior.adjoint`."""
        return self.differences(shape).adjoint(y)

    def norm_squared(self, shape: tuple[int, int]) -> float:
        """See `Prior.norm_squared`."""
        return self.differences(shape).norm_squared

    def block(self, shape: tuple[int, int]) -> DifferenceBlock:
        """See `Prior.block`."""
        from priors.difference_block import DifferenceBlock

        return DifferenceBlock(self.differences(shape), self.weight, self._kernel)
