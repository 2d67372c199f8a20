"""Acquisition files and the safe writing of files in general."""

from recon.files.atomic import replacing
from recon.files.frame_blocks import frame_blocks
from recon.files.hdf5 import load, load_note, load_truth, save

__all__ = ["frame_blocks", "load", "load_note", "load_truth", "replacing", "save"]
