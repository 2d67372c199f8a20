"""How good every pixel is."""

from recon.uncertainty.bootstrap import Bootstrap, bootstrap
from recon.uncertainty.calibrated import OF_95, calibrated_uncertainty
from recon.uncertainty.exact import clopper_pearson, garwood
from recon.uncertainty.local import local_uncertainty
from recon.uncertainty.region import RegionAverage, region_average

__all__ = [
    "OF_95", "Bootstrap", "RegionAverage", "bootstrap", "calibrated_uncertainty", "clopper_pearson",
    "garwood", "local_uncertainty", "region_average",
]  # fmt: skip
