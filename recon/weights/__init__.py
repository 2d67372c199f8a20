"""Choosing the weight of a prior from the data."""

from recon.weights.held_out import Choice, Fold, at_factor, choose
from recon.weights.settle import HeldOutFit, Settled, checked_rule, held_out_fits, settle
from recon.weights.thumb import for_part, typical_information, weigh

__all__ = [
    "Choice", "Fold", "HeldOutFit", "Settled", "at_factor", "checked_rule", "choose", "for_part",
    "held_out_fits", "settle", "typical_information", "weigh",
]  # fmt: skip
