"""Images as TIFF files."""

from __future__ import annotations

import logging
import os
import warnings
from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np

from recon.errors import InputError
from recon.files.atomic import replacing
from recon.validation import memory_limit


def write_tiff(path: str | os.PathLike, image: np.ndarray, name: str, unit: str) -> None:
    """Write an image (rows, columns) as a float32 OME-TIFF, all or nothing.

    name: what the values are, such as "depth"; unit: their unit, "1" for none. Both stand in the
        description and in the name of the channel, since OME-TIFF has no place for the unit of a value.

    Raises InputError for a path that cannot name a file, OSError if it cannot be written.
    """
    import tifffile

    described = {
        "axes": "YX",
        "Name": name,
        "Description": f"{name}; unit of the values: {unit}",
        "Channel": {"Name": f"{name} ({unit})"},
    }
    with replacing(path) as temporary:
        tifffile.imwrite(
            temporary, np.asarray(image, np.float32), ome=True, metadata=described, photometric="minisblack"
        )


def read_tiff(path: str | os.PathLike) -> np.ndarray:
    """Return the first image of a TIFF file.

    Raises InputError for a file that is not a TIFF, is damaged, is packed in a way that needs further
    libraries, or declares more than the machine can take.
    """
    import tifffile

    try:
        with _silent(), tifffile.TiffFile(path) as file:
            first = file.series[0]
            if first.nbytes > memory_limit():
                raise InputError(
                    f"{path} declares {first.nbytes} bytes, more than this machine can take; crop it."
                )
            return first.asarray()
    except InputError:
        raise
    except Exception as error:  # a damaged file may break the library anywhere
        raise InputError(
            f"{path} cannot be read as a TIFF of numbers; copy it again, or store it uncompressed."
        ) from error


@contextmanager
def _silent() -> Iterator[None]:
    """Keep the library from writing to standard error what the exception says as well."""
    logger = logging.getLogger("tifffile")
    before, logger.disabled = logger.disabled, True
    try:
        with warnings.catch_warnings(action="ignore"):
            yield
    finally:
        logger.disabled = before
