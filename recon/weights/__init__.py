"""Choosing the weight of a prior from the data."""

from recon.weights.held_out import Choice, Fold, choose
from recon.weights.settle import HeldOutFit, Settled, checked_rule, held_out_fits, settle
from recon.weights.thumb import typical_information, weigh

__all__ = [
    "Choice", "Fold", "HeldOutFit", "Settled", "checked_rule", "choose", "held_out_fits", "settle",
    "typical_information", "weigh",
]  # fmt: skip
