"""Choosing the weight of a prior from the data."""

from recon.weights.held_out import Choice, Fold, choose
from recon.weights.settle import checked_rule, settle
from recon.weights.thumb import typical_information, weigh

__all__ = ["Choice", "Fold", "checked_rule", "choose", "settle", "typical_information", "weigh"]
