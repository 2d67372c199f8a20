"""The words a person may type after `fewcount simulate`."""

from __future__ import annotations

import argparse

from recon.cli.values import real, whole

SIMULATE = """\
Draw an acquisition from known images, detection by detection, and write it with the truth to a file that
`fewcount reconstruct` reads. An image is a .npy file, a TIFF file, or an acquisition file with the truth.
All quantities are in SI units.
"""
SIMULATE_EXAMPLES = """\
examples:
  fewcount simulate counts scene.npy --trials 1000 --gain 0.002 --background 0.001 --seed 1 --out counts.h5
  fewcount simulate tags depth.tif reflectivity.tif --trials 1000 --period 100e-9 --pulse-rms 0.27e-9
      --gain 0.001 --background 0.0005 --seed 1 --out bench.h5
  fewcount simulate frames yield.npy --dose 0.125 --frames 160 --seed 1 --out coupon.h5

"""


def add_simulate(commands: argparse._SubParsersAction, common: argparse.ArgumentParser, codes: str) -> None:
    """Add the command; codes: what the exit codes mean."""
    command = commands.add_parser(
        "simulate",
        description=SIMULATE,
        epilog=SIMULATE_EXAMPLES + codes,
        help="an acquisition from known images",
    )
    kinds = command.add_subparsers(title="kinds of acquisition", dest="kind", metavar="KIND", required=True)
    _simulate_counts(_kind(kinds, common, codes, "counts", "detections of every pixel in a number of trials"))
    _simulate_tags(_kind(kinds, common, codes, "tags", "time tags: where and when each detection came"))
    _simulate_frames(_kind(kinds, common, codes, "frames", "electrons of every pixel, frame by frame"))


def _kind(
    kinds: argparse._SubParsersAction, common: argparse.ArgumentParser, codes: str, name: str, words: str
) -> argparse.ArgumentParser:
    command = kinds.add_parser(name, parents=[common], help=words, description=f"Draw {words}.", epilog=codes)
    command.set_defaults(module="recon.cli.simulate")
    command.add_argument("--seed", metavar="N", type=whole, required=True, help="seed, 0 or more")
    command.add_argument("--out", metavar="FILE", required=True, help="acquisition file (HDF5) to write")
    return command


def _simulate_counts(command: argparse.ArgumentParser) -> None:
    command.add_argument("image", metavar="IMAGE", help="reflectivity, 0 or more")
    command.add_argument("--trials", metavar="N", type=real, help="trials of every pixel")
    _add_rates(command)
    command.add_argument(
        "--stop-after",
        metavar="L",
        type=whole,
        help="a pixel stops at its L-th detection; --trials is then the most it makes, no limit if left out",
    )
    command.add_argument("--several-per-trial", action="store_true", help="a trial may detect more than once")


def _simulate_tags(command: argparse.ArgumentParser) -> None:
    command.add_argument("depth", metavar="DEPTH", help="range in m")
    command.add_argument("reflectivity", metavar="REFLECTIVITY", help="reflectivity, 0 or more")
    command.add_argument("--trials", metavar="N", type=real, required=True, help="pulses per pixel")
    command.add_argument("--period", metavar="S", type=real, required=True, help="time between pulses in s")
    command.add_argument(
        "--pulse-rms", metavar="S", type=real, required=True, help="rms width of the Gaussian pulse in s"
    )
    _add_rates(command)
    command.add_argument(
        "--time-zero",
        metavar="S",
        type=real,
        default=0.0,
        help="time in s at which a return from range 0 arrives (default: %(default)g)",
    )
    command.add_argument(
        "--refractive-index",
        metavar="N",
        type=real,
        default=1.0,
        help="of the medium in front of the instrument (default: %(default)g)",
    )
    command.add_argument(
        "--interval", metavar="S", type=real, help="step of the clock in s (default: exact times)"
    )
    command.add_argument(
        "--dither", metavar="S", type=real, help="known delays before the clock, from 0 to this many s"
    )
    command.add_argument(
        "--jitter",
        metavar="S",
        type=real,
        default=0.0,
        help="rms in s of a timing error that is not in the pulse declared (default: %(default)g)",
    )
    command.add_argument(
        "--gate", metavar=("START", "STOP"), nargs=2, type=real, help="when the detector records, s"
    )
    command.add_argument(
        "--dead-time", metavar="S", type=real, help="how long the detector is blind after a detection, in s"
    )
    command.add_argument(
        "--electronics-dead-time",
        metavar="S",
        type=real,
        help="how long the electronics record nothing after a recorded detection, in s",
    )
    command.add_argument(
        "--reset-every-period", action="store_true", help="blindness ends with the period at the latest"
    )


def _simulate_frames(command: argparse.ArgumentParser) -> None:
    command.add_argument("image", metavar="YIELD", help="electrons per primary particle, 0 or more")
    command.add_argument(
        "--dose", metavar="D", type=real, required=True, help="primary particles per pixel and frame"
    )
    command.add_argument("--frames", metavar="N", type=whole, required=True, help="number of frames")


def _add_rates(command: argparse.ArgumentParser) -> None:
    command.add_argument(
        "--gain",
        metavar="G",
        type=real,
        default=1.0,
        help="signal detections per trial at reflectivity 1 (default: %(default)g)",
    )
    command.add_argument(
        "--background",
        metavar="B",
        type=real,
        default=0.0,
        help="other detections per trial (default: %(default)g)",
    )
