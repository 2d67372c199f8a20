"""Convex priors of images: weight times a penalty; a larger weight always means a smoother image."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from priors.contract import Block, Prior, Sum
    from priors.custom import Custom
    from priors.generalized_variation import GeneralizedVariation
    from priors.smoothness import Smoothness
    from priors.total_variation import TotalVariation
    from priors.validation import PriorError
    from priors.wavelet_sparsity import WaveletSparsity

_HOMES = {
    "Block": "contract",
    "Custom": "custom",
    "GeneralizedVariation": "generalized_variation",
    "Prior": "contract",
    "PriorError": "validation",
    "Smoothness": "smoothness",
    "Sum": "contract",
    "TotalVariation": "total_variation",
    "WaveletSparsity": "wavelet_sparsity",
}

__all__ = [
    "Block", "Custom", "GeneralizedVariation", "Prior", "PriorError", "Smoothness", "Sum",
    "TotalVariation", "WaveletSparsity",
]  # fmt: skip


def __getattr__(name: str) -> Any:
    """Import a prior when it is first asked for: most programs need one of them."""
    if name not in _HOMES:
        raise AttributeError(f"module 'priors' has no attribute {name!r}")
    value = getattr(import_module(f"priors.{_HOMES[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
