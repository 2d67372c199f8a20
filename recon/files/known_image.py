"""Reading the images a simulation starts from."""

from __future__ import annotations

import os
import warnings
from pathlib import Path

import numpy as np

from recon.errors import InputError
from recon.files.hdf5 import load_truth
from recon.files.tiff import read_tiff
from recon.validation import memory_limit


def load_known_image(path: str | os.PathLike, name: str) -> np.ndarray:
    """Return the array in a .npy file, the first image of a TIFF, or the truth `name` of an acquisition file.

    Raises InputError if the file cannot be read or holds no such truth; the values are not checked.
    """
    path = Path(path)
    suffix = path.suffix.lower()
    if suffix not in _READERS:
        raise InputError(f"{path} is none of {', '.join(_READERS)}; give an image in one of these.")
    if not path.is_file():
        raise InputError(f"{path} is not a file; check the name.")
    return _READERS[suffix](path, name)


def _read_npy(path: Path, name: str) -> np.ndarray:
    try:
        # mapping the file first refuses one that declares more than it holds
        with warnings.catch_warnings(action="ignore"):
            mapped = np.lib.format.open_memmap(path, mode="r")
    except Exception as error:  # a damaged header may break its parser anywhere
        raise InputError(f"{path} is not a .npy file of numbers, or is damaged; save it again.") from error
    if mapped.nbytes > memory_limit():
        raise InputError(f"{path} holds {mapped.nbytes} bytes, more than this machine can take; crop it.")
    return np.array(mapped)


def _read_tiff(path: Path, name: str) -> np.ndarray:
    return read_tiff(path)


def _read_truth(path: Path, name: str) -> np.ndarray:
    truth = load_truth(path)
    if name not in truth:
        held = ", ".join(truth) if truth else "none"
        raise InputError(f"{path} has no truth {name} (it has {held}); give a file that has it.")
    return truth[name]


_READERS = {
    ".npy": _read_npy, ".tif": _read_tiff, ".tiff": _read_tiff, ".h5": _read_truth, ".hdf5": _read_truth,
}  # fmt: skip
