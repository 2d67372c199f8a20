"""fewcount simulate"""

from __future__ import annotations

import sys
from argparse import Namespace
from collections.abc import Mapping

import numpy as np

from recon import DeadTime, GaussianPulse, InputError, simulate
from recon.files import save
from recon.files.json_text import json_text
from recon.files.known_image import load_known_image
from recon.report import words
from recon.report.data_images import Acquisition
from recon.report.record import acquisition_record

NOTE = "Simulated by fewcount from known images; no instrument recorded it."


def run(options: Namespace) -> int:
    """Draw an acquisition and write it with its truth; return the exit code."""
    acquisition, truth = _DRAWS[options.kind](options)
    save(options.out, acquisition, truth=truth, note=NOTE)
    record = acquisition_record(acquisition, NOTE)
    if options.json:
        sys.stdout.write(json_text({"file": options.out, "acquisition": record}))
    elif not options.quiet:
        from recon.cli.table import print_line

        print_line(f"{options.out}: {words.data_in_words(record)}")
    return 0


Drawn = tuple[Acquisition, Mapping[str, np.ndarray]]


def _counts(options: Namespace) -> Drawn:
    image = load_known_image(options.image, "reflectivity")
    drawn = simulate.counts(
        image,
        options.trials,
        options.gain,
        options.background,
        stop_after=options.stop_after,
        several_per_trial=options.several_per_trial,
        seed=options.seed,
    )
    return drawn, {"reflectivity": image}


def _tags(options: Namespace) -> Drawn:
    depth = load_known_image(options.depth, "depth")
    reflectivity = load_known_image(options.reflectivity, "reflectivity")
    drawn = simulate.time_tags(
        depth,
        reflectivity,
        options.trials,
        options.period,
        GaussianPulse(options.pulse_rms),
        options.gain,
        options.background,
        time_zero=options.time_zero,
        refractive_index=options.refractive_index,
        interval=options.interval,
        dither=options.dither,
        jitter=options.jitter,
        gate=None if options.gate is None else tuple(options.gate),
        dead_time=_dead_time(options),
        seed=options.seed,
    )
    return drawn, {"depth": depth, "reflectivity": reflectivity}


def _dead_time(options: Namespace) -> DeadTime | None:
    if options.dead_time is None and options.electronics_dead_time is None:
        if options.reset_every_period:
            raise InputError("--reset-every-period is about a dead time; give --dead-time, too.")
        return None
    detector, electronics = options.dead_time or 0.0, options.electronics_dead_time or 0.0
    return DeadTime(detector, electronics, options.reset_every_period)


def _frames(options: Namespace) -> Drawn:
    eta = load_known_image(options.image, "electron_yield")
    return simulate.frames(eta, options.dose, options.frames, seed=options.seed), {"electron_yield": eta}


_DRAWS = {"counts": _counts, "tags": _tags, "frames": _frames}
