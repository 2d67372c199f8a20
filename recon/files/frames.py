"""How frames stand in an acquisition file."""

from dataclasses import fields

import numpy as np

from recon.acquisition import Frames, MarkLaw
from recon.files.guard import GuardedFile
from recon.files.nexus import NexusWriter
from recon.files.ranging import DETECTOR
from recon.validation import store, whole_numbers

COUNTS = "entry/data/counts"
LAW = f"{DETECTOR}/mark_law"
DROPPED = f"{DETECTOR}/dropped_frames"


def write_frames(out: NexusWriter, frames: Frames) -> None:
    # All frames of a few rows stand together, so that rows can be read without the rest.
    out.data_group("entry/data", "counts", frames.counts, ("frame", "row", "column"), together=(2, 0, 1))
    if frames.law is not None:
        out.group(LAW, "NXcollection")
        for field in fields(MarkLaw):
            out.dataset(f"{LAW}/{field.name}", getattr(frames.law, field.name), units="1")
    if frames.dropped:
        out.dataset(DROPPED, np.array(frames.dropped, np.int64))


def read_frames(file: GuardedFile, settings: dict) -> Frames:
    frames = Frames(file.array(COUNTS), law=read_law(file), **settings)
    if file.has(DROPPED):
        dropped = whole_numbers(file.array(DROPPED), "dropped_frames")
        store(frames, dropped=tuple(int(f) for f in dropped.flat))
    return frames


def read_law(file: GuardedFile) -> MarkLaw | None:
    """The law of the readings, or None if the file holds counts."""
    if not file.has(LAW):
        return None
    names = (field.name for field in fields(MarkLaw))
    return MarkLaw(**{name: file.array(f"{LAW}/{name}", units="1") for name in names})
