"""Where the bundled acquisitions are."""

from pathlib import Path

from recon.errors import InputError

NAMES = ("bench.h5", "coupon.h5")
# beside this module once installed; in data/ next to the package in a source tree
PLACES = (Path(__file__).parent / "data", Path(__file__).parents[1] / "data")


def bundled(name: str) -> Path:
    """Return the path of a bundled acquisition, one of NAMES. Raises InputError if it is not there."""
    for place in PLACES:
        if (place / name).is_file():
            return place / name
    raise InputError(f"{name} is not among the installed files; install fewcount again.")
