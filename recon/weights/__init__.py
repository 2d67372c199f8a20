"""Choosing the weight of a prior from the data."""

from recon.weights.held_out import Choice, Fold, HeldOutFit, at_factor, choose, held_out_scores
from recon.weights.settle import Settled, checked_rule, held_out_fits, settle
from recon.weights.thumb import for_part, typical_information, weigh

__all__ = [
    "Choice", "Fold", "HeldOutFit", "Settled", "at_factor", "checked_rule", "choose", "for_part",
    "held_out_fits", "held_out_scores", "settle", "typical_information", "weigh",
]  # fmt: skip
