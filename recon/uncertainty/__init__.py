"""How good every pixel is."""

from recon.uncertainty.calibrated import OF_95, calibrated_uncertainty
from recon.uncertainty.local import local_uncertainty

__all__ = ["OF_95", "calibrated_uncertainty", "local_uncertainty"]
