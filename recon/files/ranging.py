"""How acquisitions of single-photon ranging stand in an acquisition file."""

import numpy as np

from recon.acquisition import DeadTime, GaussianPulse, SampledPulse, TimeHistogram, TimeTags
from recon.acquisition.ranging import Ranging, image_shape
from recon.acquisition.time_tags import checked_list
from recon.files.guard import GuardedFile
from recon.files.nexus import NexusWriter
from recon.validation import Range, whole_numbers

DETECTOR = "entry/instrument/detector"
SOURCE = "entry/instrument/source"
PULSE = f"{SOURCE}/pulse_shape"
EVENTS = "entry/events"
DEAD_TIME, ELECTRONICS, RESET = (
    f"{DETECTOR}/{name}" for name in ("dead_time", "electronics_dead_time", "dead_time_reset")
)


def write_time_tags(out: NexusWriter, tags: TimeTags) -> None:
    _write_instrument(out, tags)
    out.dataset(f"{DETECTOR}/shape", np.array(tags.shape, dtype=np.int64))
    out.group(EVENTS, "NXevent_data")
    out.dataset(f"{EVENTS}/event_id", tags.row * np.int32(tags.shape[1]) + tags.column)
    out.dataset(f"{EVENTS}/event_time_offset", tags.time, units="s")
    out.dataset(f"{EVENTS}/event_time_zero", np.zeros(1), units="s")
    out.dataset(f"{EVENTS}/event_index", np.zeros(1, dtype=np.int64))
    if tags.dither is not None:
        out.dataset(f"{EVENTS}/event_time_dither", tags.dither, units="s")


def read_time_tags(file: GuardedFile, settings: dict) -> TimeTags:
    rows, columns = image_shape(file.array(f"{DETECTOR}/shape"))
    pixels = Range(f"whole numbers from 0 to {rows * columns - 1}", 0, rows * columns - 1)
    pixel = checked_list(file.array(f"{EVENTS}/event_id"), "event_id", pixels, whole_numbers)
    row, column = np.divmod(pixel, np.int32(columns))
    time = file.array(f"{EVENTS}/event_time_offset", units="s")
    if file.has(f"{EVENTS}/event_time_dither"):
        settings["dither"] = file.array(f"{EVENTS}/event_time_dither", units="s")
    return TimeTags(row, column, time, shape=(rows, columns), **_read_instrument(file), **settings)


def write_time_histogram(out: NexusWriter, histogram: TimeHistogram) -> None:
    _write_instrument(out, histogram)
    axes = ("row", "column", "time")
    out.data_group("entry/data", "detections", histogram.detections, axes, time=histogram.centres)


def read_time_histogram(file: GuardedFile, settings: dict) -> TimeHistogram:
    detections = file.array("entry/data/detections")
    return TimeHistogram(detections, **_read_instrument(file), **settings)


def _write_instrument(out: NexusWriter, acquisition: Ranging) -> None:
    """The pulse and the dead time."""
    pulse, dead_time = acquisition.pulse, acquisition.dead_time
    if isinstance(pulse, GaussianPulse):
        out.group(PULSE, "NXcollection")
        out.dataset(f"{PULSE}/rms", pulse.rms, units="s")
    else:
        out.data_group(PULSE, "values", pulse.values, ("times",), times=pulse.times)
    if dead_time is not None:
        out.dataset(DEAD_TIME, dead_time.detector, units="s")
        out.dataset(ELECTRONICS, dead_time.electronics, units="s")
        out.dataset(RESET, np.uint8(dead_time.reset_every_period))


def _read_instrument(file: GuardedFile) -> dict[str, object]:
    if file.has(f"{PULSE}/rms"):
        pulse = GaussianPulse(file.array(f"{PULSE}/rms", units="s"))
    else:
        pulse = SampledPulse(file.array(f"{PULSE}/times", units="s"), file.array(f"{PULSE}/values"))
    dead_time = None
    if any(file.has(place) for place in (DEAD_TIME, ELECTRONICS, RESET)):  # one alone is a file cut short
        dead_time = DeadTime(
            file.array(DEAD_TIME, units="s"), file.array(ELECTRONICS, units="s"), file.flag(RESET)
        )
    return {"pulse": pulse, "dead_time": dead_time}
