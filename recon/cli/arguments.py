"""The words a person may type after `fewcount`."""

from __future__ import annotations

import argparse
from typing import NoReturn

from recon.errors import InputError

EXIT_CODES = """\
exit codes:
  0  done, and every image within the tolerance
  1  the job failed: an image is not converged (it is written and marked), or a file could not be written
  2  bad usage or bad input: one sentence on standard error, and nothing written
"""

ABOUT = """\
From a handful of detections a pixel to images in physical units, each with its uncertainty and a
certificate of how closely it was solved for.
"""
EXAMPLES = """\
examples:
  fewcount demo
  fewcount reconstruct bench.h5 --prior generalized-variation --out results
  fewcount simulate frames yield.npy --dose 0.125 --frames 160 --seed 1 --out coupon.h5
  fewcount reconstruct coupon.h5 --json --quiet > summary.json
  fewcount compare coupon.h5 --prior total-variation --prior smoothness

"""

DEMO = """\
Turn both bundled acquisitions of invented scenes, a ranging bench and a beam-microscopy coupon, into
images, and compare them with the truth they were drawn from.
"""

RECONSTRUCT = """\
Turn an acquisition file into images. Counts give reflectivity, time tags give reflectivity and depth,
frames give the electron yield. For every image there is a picture (.png), the numbers and their standard
uncertainty (float32 OME-TIFF), and for all of them diagnostics.json.
"""
RECONSTRUCT_EXAMPLES = """\
examples:
  fewcount reconstruct bench.h5
  fewcount reconstruct bench.h5 --prior total-variation --weight 20 --out smoother
  fewcount reconstruct coupon.h5 --tolerance 1e-5 --json
  fewcount reconstruct coupon.h5 --fit

"""

COMPARE = """\
Reconstruct an acquisition file under several priors, each with the weight that predicts held-out data best,
and say which of them predicts those data best, and whether the difference is more than chance. Written are
the images with their uncertainty (float32 OME-TIFF), all of them in comparison.png, and comparison.json. For
time tags it is the prior of the depth image that is compared.
"""
COMPARE_EXAMPLES = """\
examples:
  fewcount compare coupon.h5 --prior total-variation --prior generalized-variation
  fewcount compare bench.h5 --prior total-variation --prior smoothness --out compared --json

"""

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


class Parser(argparse.ArgumentParser):
    """A parser whose complaints are errors like any other bad input."""

    def __init__(self, **settings: object) -> None:
        super().__init__(allow_abbrev=False, formatter_class=argparse.RawDescriptionHelpFormatter, **settings)

    def error(self, message: str) -> NoReturn:
        raise InputError(f"{message}; see {self.prog} --help.")


class Version(argparse.Action):
    """Look the version up only when it is asked for."""

    def __call__(self, parser: argparse.ArgumentParser, *_: object) -> NoReturn:
        from recon.cli.version import version

        print(f"{parser.prog} {version()}")
        parser.exit()


def parser() -> Parser:
    """Return the parser; what it parses names the `module` whose run() does the work."""
    top = Parser(prog="fewcount", description=ABOUT, epilog=EXAMPLES + EXIT_CODES, parents=[_common(False)])
    top.add_argument("--version", action=Version, nargs=0, help="print the version and exit")
    commands = top.add_subparsers(title="commands", dest="command", metavar="COMMAND", required=True)
    common = _common(argparse.SUPPRESS)  # so that a command does not undo what stands before it
    _demo(commands, common)
    _reconstruct(commands, common)
    _compare(commands, common)
    _simulate(commands, common)
    return top


def _common(default: object) -> argparse.ArgumentParser:
    """Return the options that may stand before or after the command."""
    common = argparse.ArgumentParser(add_help=False)
    common.add_argument(
        "--quiet",
        action="store_true",
        default=default,
        help="no progress and no table; errors still go to standard error",
    )
    common.add_argument(
        "--json",
        action="store_true",
        default=default,
        help="the summary as JSON, and nothing else, on standard output",
    )
    return common


def _demo(commands: argparse._SubParsersAction, common: argparse.ArgumentParser) -> None:
    command = commands.add_parser(
        "demo",
        parents=[common],
        description=DEMO,
        epilog=EXIT_CODES,
        help="both bundled acquisitions, start to finish, to a folder",
    )
    command.add_argument(
        "--out", metavar="DIR", default="fewcount-out/demo", help="folder to write to (default: %(default)s)"
    )
    command.set_defaults(module="recon.cli.demo")


def _reconstruct(commands: argparse._SubParsersAction, common: argparse.ArgumentParser) -> None:
    command = commands.add_parser(
        "reconstruct",
        parents=[common],
        description=RECONSTRUCT,
        epilog=RECONSTRUCT_EXAMPLES + EXIT_CODES,
        help="an acquisition file to images, uncertainty and diagnostics",
    )
    command.add_argument("file", metavar="FILE", help="acquisition file (HDF5)")
    command.add_argument(
        "--prior",
        metavar="NAME",
        help="prior of the image (of the depth image, for time tags): total-variation, generalized-variation,"
        " wavelet-sparsity or smoothness",
    )
    command.add_argument(
        "--weight",
        metavar="W",
        type=_weight,
        default="auto",
        help="weight of that prior, above 0; larger is smoother; or how to choose it: auto (what predicts"
        " held-out data best, the default), rule (of thumb), discrepancy (residuals as large as noise)"
        " or risk (least unbiased estimate of the squared error)",
    )
    command.add_argument(
        "--unknown-current",
        action="store_true",
        help="estimate the dose of every line from the frames (drift and stripes of the current)",
    )
    command.add_argument(
        "--moving",
        action="store_true",
        help="register the frames and fit each where it was (a stage that drifts)",
    )
    command.add_argument(
        "--fit",
        action="store_true",
        help="say whether model and images fit the data, what does not and why (about twenty more solves)",
    )
    _add_limits(command)
    command.add_argument(
        "--out",
        metavar="DIR",
        help="folder to write to (default: fewcount-out/ and FILE's name)",
    )
    command.set_defaults(module="recon.cli.reconstruct")


def _compare(commands: argparse._SubParsersAction, common: argparse.ArgumentParser) -> None:
    command = commands.add_parser(
        "compare",
        parents=[common],
        description=COMPARE,
        epilog=COMPARE_EXAMPLES + EXIT_CODES,
        help="an acquisition file under several priors, judged by held-out data",
    )
    command.add_argument("file", metavar="FILE", help="acquisition file (HDF5)")
    command.add_argument(
        "--prior",
        metavar="NAME",
        action="append",
        default=[],
        help="a prior to compare; give it two times or more: total-variation, generalized-variation,"
        " wavelet-sparsity or smoothness",
    )
    _add_limits(command)
    command.add_argument(
        "--out",
        metavar="DIR",
        help="folder to write to (default: fewcount-out/ and FILE's name with -compared)",
    )
    command.set_defaults(module="recon.cli.compare")


def _add_limits(command: argparse.ArgumentParser) -> None:
    command.add_argument(
        "--tolerance",
        metavar="T",
        type=_real,
        help="relative gap of objective and dual value to stop at, in (0, 1) (default: 5e-4, depth 1e-2)",
    )
    command.add_argument(
        "--max-iterations",
        metavar="N",
        type=_whole,
        default=30_000,
        help="iterations after which to stop in any case (default: %(default)d)",
    )


def _simulate(commands: argparse._SubParsersAction, common: argparse.ArgumentParser) -> None:
    command = commands.add_parser(
        "simulate",
        description=SIMULATE,
        epilog=SIMULATE_EXAMPLES + EXIT_CODES,
        help="an acquisition from known images",
    )
    kinds = command.add_subparsers(title="kinds of acquisition", dest="kind", metavar="KIND", required=True)
    _simulate_counts(_kind(kinds, common, "counts", "detections of every pixel in a number of trials"))
    _simulate_tags(_kind(kinds, common, "tags", "time tags: where and when each detection came"))
    _simulate_frames(_kind(kinds, common, "frames", "electrons of every pixel, frame by frame"))


def _kind(
    kinds: argparse._SubParsersAction, common: argparse.ArgumentParser, name: str, words: str
) -> argparse.ArgumentParser:
    command = kinds.add_parser(
        name, parents=[common], help=words, description=f"Draw {words}.", epilog=EXIT_CODES
    )
    command.set_defaults(module="recon.cli.simulate")
    command.add_argument("--seed", metavar="N", type=_whole, required=True, help="seed, 0 or more")
    command.add_argument("--out", metavar="FILE", required=True, help="acquisition file (HDF5) to write")
    return command


def _simulate_counts(command: argparse.ArgumentParser) -> None:
    command.add_argument("image", metavar="IMAGE", help="reflectivity, 0 or more")
    command.add_argument("--trials", metavar="N", type=_real, help="trials of every pixel")
    _add_rates(command)
    command.add_argument(
        "--stop-after",
        metavar="L",
        type=_whole,
        help="a pixel stops at its L-th detection; --trials is then the most it makes, no limit if left out",
    )
    command.add_argument("--several-per-trial", action="store_true", help="a trial may detect more than once")


def _simulate_tags(command: argparse.ArgumentParser) -> None:
    command.add_argument("depth", metavar="DEPTH", help="range in m")
    command.add_argument("reflectivity", metavar="REFLECTIVITY", help="reflectivity, 0 or more")
    command.add_argument("--trials", metavar="N", type=_real, required=True, help="pulses per pixel")
    command.add_argument("--period", metavar="S", type=_real, required=True, help="time between pulses in s")
    command.add_argument(
        "--pulse-rms", metavar="S", type=_real, required=True, help="rms width of the Gaussian pulse in s"
    )
    _add_rates(command)
    command.add_argument(
        "--time-zero",
        metavar="S",
        type=_real,
        default=0.0,
        help="time in s at which a return from range 0 arrives (default: %(default)g)",
    )
    command.add_argument(
        "--refractive-index",
        metavar="N",
        type=_real,
        default=1.0,
        help="of the medium in front of the instrument (default: %(default)g)",
    )
    command.add_argument(
        "--interval", metavar="S", type=_real, help="step of the clock in s (default: exact times)"
    )
    command.add_argument(
        "--dither", metavar="S", type=_real, help="known delays before the clock, from 0 to this many s"
    )
    command.add_argument(
        "--jitter",
        metavar="S",
        type=_real,
        default=0.0,
        help="rms in s of a timing error that is not in the pulse declared (default: %(default)g)",
    )
    command.add_argument(
        "--gate", metavar=("START", "STOP"), nargs=2, type=_real, help="when the detector records, s"
    )
    command.add_argument(
        "--dead-time", metavar="S", type=_real, help="how long the detector is blind after a detection, in s"
    )
    command.add_argument(
        "--electronics-dead-time",
        metavar="S",
        type=_real,
        help="how long the electronics record nothing after a recorded detection, in s",
    )
    command.add_argument(
        "--reset-every-period", action="store_true", help="blindness ends with the period at the latest"
    )


def _simulate_frames(command: argparse.ArgumentParser) -> None:
    command.add_argument("image", metavar="YIELD", help="electrons per primary particle, 0 or more")
    command.add_argument(
        "--dose", metavar="D", type=_real, required=True, help="primary particles per pixel and frame"
    )
    command.add_argument("--frames", metavar="N", type=_whole, required=True, help="number of frames")


def _add_rates(command: argparse.ArgumentParser) -> None:
    command.add_argument(
        "--gain",
        metavar="G",
        type=_real,
        default=1.0,
        help="signal detections per trial at reflectivity 1 (default: %(default)g)",
    )
    command.add_argument(
        "--background",
        metavar="B",
        type=_real,
        default=0.0,
        help="other detections per trial (default: %(default)g)",
    )


def _real(text: str) -> float:
    try:
        return float(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a number") from None


def _weight(text: str) -> float | str:
    """Return a number, or a name as it is; `recon.reconstruct` knows which there are."""
    try:
        return float(text)
    except ValueError:
        return text


def _whole(text: str) -> int:
    try:
        return int(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a whole number") from None
