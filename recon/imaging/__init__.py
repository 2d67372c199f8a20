"""One file per kind of image."""

from recon.imaging.depth import DepthImage
from recon.imaging.image import PhysicalImage, Reconstruction
from recon.imaging.point_cloud import point_cloud
from recon.imaging.reconstruct import reconstruct

__all__ = ["DepthImage", "PhysicalImage", "Reconstruction", "point_cloud", "reconstruct"]
