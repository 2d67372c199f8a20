"""Acquisition files: HDF5 in NeXus layout.

    entry                     NXentry; attributes acquisition ("counts", "time_tags", "time_histogram",
                              "frames") and acquisition_version ("1")
      data                    NXdata: detections (row, column), or for a time histogram (row, column, time)
                              with time at the centre of each bin, or counts (frame, row, column)
      events                  NXevent_data, for time tags in place of data: event_id = row * columns + column
                              and event_time_offset, since the start of the period; event_time_dither, if
                              any, is the delay added. Tags do not say which period they belong to, so one
                              event_time_zero stands for all
      instrument/detector     NXdetector: the settings, and pixel_mask (0 = usable); dead_time (of the
                              detector), electronics_dead_time and dead_time_reset (0 or 1), all or none;
                              for frames current, if any, and mark_law with gain, variance, offset, noise
                              and ceiling if the counts are readings
      instrument/source       NXsource: period, and pulse_shape with rms, or with times and values
      truth                   NXcollection: the images a simulation started from
      note                    NXnote

A setting is a scalar or a map with a `units` attribute ("1" = none). Strings have a fixed length. The
file carries the checksums HDF5 offers, so that damage is found rather than read as data.
"""

import os
from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.errors import InputError
from recon.files.atomic import replacing
from recon.files.frames import read_frames, write_frames
from recon.files.guard import GuardedFile, opened
from recon.files.nexus import NexusWriter
from recon.files.ranging import (
    DETECTOR,
    SOURCE,
    read_time_histogram,
    read_time_tags,
    write_time_histogram,
    write_time_tags,
)

Acquisition = Counts | TimeTags | TimeHistogram | Frames

VERSION = "1"
KINDS = {Counts: "counts", TimeTags: "time_tags", TimeHistogram: "time_histogram", Frames: "frames"}
RATES = {"trials": (DETECTOR, "1"), "gain": (DETECTOR, "1"), "background": (DETECTOR, "1")}
RANGING = RATES | {
    "period": (SOURCE, "s"),
    "time_zero": (DETECTOR, "s"),
    "offset": (DETECTOR, "s"),
    "refractive_index": (DETECTOR, "1"),
}
SETTINGS = {  # by kind: name, group and units of what is stored as it stands
    "counts": RATES,
    "time_tags": RANGING | {"interval": (DETECTOR, "s"), "gate": (DETECTOR, "s")},
    "time_histogram": RANGING | {"bin_width": (DETECTOR, "s"), "first_edge": (DETECTOR, "s")},
    "frames": {"dose": (DETECTOR, "1"), "current": (DETECTOR, "1")},
}
OPTIONAL = ("interval", "gate", "current")


def save(
    path: str | os.PathLike,
    acquisition: Acquisition,
    truth: Mapping[str, ArrayLike] | None = None,
    note: str | None = None,
) -> None:
    """Write an acquisition file, all or nothing.

    truth: arrays of numbers or booleans by name, such as the images a simulation started from.
    note: text for whoever opens the file.

    Reading gives back the same acquisition, bit for bit. Raises InputError for anything else, and for a
    path that cannot be written.
    """
    kind = KINDS.get(type(acquisition))
    if kind is None:
        raise InputError(
            f"acquisition is {type(acquisition).__name__}; give Counts, TimeTags, a TimeHistogram or Frames."
        )
    truth = _checked_truth(truth)
    note = _checked_note(note)
    with replacing(path) as temporary, NexusWriter(temporary) as out:
        plotted = "events" if kind == "time_tags" else "data"
        out.group("entry", "NXentry", default=plotted, acquisition=kind, acquisition_version=VERSION)
        out.group("entry/instrument", "NXinstrument")
        out.group(DETECTOR, "NXdetector")
        for name, (group, units) in SETTINGS[kind].items():
            if group == SOURCE:
                out.group(SOURCE, "NXsource")
            if (value := getattr(acquisition, name)) is not None:
                out.dataset(f"{group}/{name}", value, units=units)
        if acquisition.mask is not None:
            out.dataset(f"{DETECTOR}/pixel_mask", (~acquisition.mask).astype(np.int8))
        _WRITERS[kind](out, acquisition)
        if truth:
            out.group("entry/truth", "NXcollection")
            for name, values in truth.items():
                out.dataset(f"entry/truth/{name}", values)
        if note:
            out.group("entry/note", "NXnote")
            out.dataset("entry/note/type", np.bytes_(b"text/plain"))
            out.dataset("entry/note/data", np.bytes_(note))


def load(path: str | os.PathLike) -> Acquisition:
    """Read an acquisition file.

    Raises InputError if the file is missing, unreadable, damaged, incomplete or of another kind, if it
    declares more than it can hold, points outside itself, or describes an impossible acquisition.
    """
    with opened(path) as file:
        kind = kind_of(file)
        settings = {
            name: file.array(f"{group}/{name}", units=units)
            for name, (group, units) in SETTINGS[kind].items()
            if name not in OPTIONAL or file.has(f"{group}/{name}")
        }
        if file.has(f"{DETECTOR}/pixel_mask"):
            settings["mask"] = np.asarray(file.array(f"{DETECTOR}/pixel_mask", kinds="iu") == 0)
        return _READERS[kind](file, settings)


def kind_of(file: GuardedFile) -> str:
    """The kind of the acquisition in a file, a key of SETTINGS. Raises InputError if it is another."""
    version = file.text("entry", "acquisition_version")
    if version != VERSION:
        raise InputError(f"entry@acquisition_version is {version}; give a file of version {VERSION}.")
    kind = file.text("entry", "acquisition")
    if kind not in SETTINGS:
        raise InputError(f"entry@acquisition is {kind}; give one of {', '.join(SETTINGS)}.")
    return kind


def load_truth(path: str | os.PathLike) -> dict[str, NDArray]:
    """The truth saved with an acquisition, arrays by name; empty if there is none. Raises InputError."""
    with opened(path) as file:
        if not file.has("entry/truth"):
            return {}
        return {name: file.array(f"entry/truth/{name}", "biuf") for name in file.names("entry/truth")}


def load_note(path: str | os.PathLike) -> str:
    """The note saved with an acquisition; empty if there is none. Raises InputError."""
    with opened(path) as file:
        return file.string("entry/note/data") if file.has("entry/note") else ""


def _write_counts(out: NexusWriter, counts: Counts) -> None:
    out.dataset(f"{DETECTOR}/several_per_trial", np.uint8(counts.several_per_trial))
    out.data_group("entry/data", "detections", counts.detections, ("row", "column"))


def _read_counts(file: GuardedFile, settings: dict) -> Counts:
    several_per_trial = file.flag(f"{DETECTOR}/several_per_trial")
    return Counts(file.array("entry/data/detections"), several_per_trial=several_per_trial, **settings)


_WRITERS = {
    "counts": _write_counts,
    "time_tags": write_time_tags,
    "time_histogram": write_time_histogram,
    "frames": write_frames,
}
_READERS = {
    "counts": _read_counts,
    "time_tags": read_time_tags,
    "time_histogram": read_time_histogram,
    "frames": read_frames,
}


def _checked_truth(truth: Mapping[str, ArrayLike] | None) -> dict[str, NDArray]:
    if truth is None:
        return {}
    if not isinstance(truth, Mapping):
        raise InputError(f"truth is {type(truth).__name__}; give arrays by name.")
    checked = {}
    for name, value in truth.items():
        if not isinstance(name, str) or not name.isidentifier():
            raise InputError(f"truth has the name {name!r}; give names of letters, digits and underscores.")
        try:
            values = np.asarray(value)
        except Exception as error:  # an object may raise anything while it is turned into an array
            raise InputError(
                f"truth {name} is not an array of numbers; give numbers in equal rows."
            ) from error
        if values.dtype.kind not in "biuf" or values.size == 0:
            raise InputError(
                f"truth {name} has shape {values.shape} and type {values.dtype.name}; give numbers."
            )
        checked[name] = values
    return checked


def _checked_note(note: str | None) -> bytes:
    if not isinstance(note, str | None):
        raise InputError(f"note is {type(note).__name__}; give text.")
    try:
        text = (note or "").encode()
    except UnicodeEncodeError as error:
        raise InputError(
            f"note at {error.start} is half a character; give text that UTF-8 can hold."
        ) from error
    if b"\0" in text:
        raise InputError(f"note at {text.index(bytes(1))} is a zero byte; give plain text.")
    return text
