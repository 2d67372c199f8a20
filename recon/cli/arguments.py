"""The words a person may type after `fewcount`."""

from __future__ import annotations

import argparse
from typing import NoReturn

from recon.cli.simulate_arguments import add_simulate
from recon.cli.values import real, weight, whole
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
    add_simulate(commands, common, EXIT_CODES)
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
        type=weight,
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
        type=real,
        help="relative gap of objective and dual value to stop at, in (0, 1) (default: 5e-4, depth 1e-2)",
    )
    command.add_argument(
        "--max-iterations",
        metavar="N",
        type=whole,
        default=30_000,
        help="iterations after which to stop in any case (default: %(default)d)",
    )
