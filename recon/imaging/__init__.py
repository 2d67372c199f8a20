"""One file per kind of image."""

from recon.imaging.compare import Comparison, compare
from recon.imaging.depth import DepthImage
from recon.imaging.exact_interval import exact_interval
from recon.imaging.image import PhysicalImage, Reconstruction
from recon.imaging.point_cloud import point_cloud
from recon.imaging.reconstruct import reconstruct

__all__ = [
    "Comparison", "DepthImage", "PhysicalImage", "Reconstruction", "compare", "exact_interval",
    "point_cloud", "reconstruct",
]  # fmt: skip
