"""One file per kind of image."""

from recon.imaging.image import PhysicalImage, Reconstruction
from recon.imaging.reconstruct import reconstruct

__all__ = ["PhysicalImage", "Reconstruction", "reconstruct"]
