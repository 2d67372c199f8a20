"""Reading a stack of frames a few rows at a time."""

import os
from collections.abc import Iterator

from numpy.typing import NDArray

from recon.acquisition.frames import checked_counts
from recon.errors import InputError
from recon.files.frames import COUNTS, read_law
from recon.files.guard import opened
from recon.files.hdf5 import kind_of
from recon.validation import LARGEST_COUNT, Range, whole_numbers

_ROWS = Range("a whole number of rows, 1 or more", 1, LARGEST_COUNT)


def frame_blocks(path: str | os.PathLike, rows_at_once: int) -> Iterator[tuple[slice, NDArray]]:
    """Yield the frames of an acquisition file by blocks of rows, the whole stack never in memory.

    Each item is the slice of the rows and the array (frames, rows, columns) of their counts or readings,
    checked and of the type that `Frames` would give the block by itself; the last block may be lower.

    Raises InputError, when the first block is asked for, if the file is missing, damaged or no file of
    frames, or if `rows_at_once` is not a whole number, 1 or more; at a block, if its values are not
    counts or readings. A frame without a finite number is refused too: `load` and `save` leave it out.
    """
    at_once = whole_numbers(rows_at_once, "rows_at_once", _ROWS)
    if at_once.ndim:
        raise InputError(f"rows_at_once has shape {at_once.shape}; give {_ROWS.words}.")
    with opened(path) as file:
        if (kind := kind_of(file)) != "frames":
            raise InputError(f"entry@acquisition is {kind}; give a file of frames.")
        law = read_law(file)
        for rows, values in file.rows(COUNTS, int(at_once)):
            yield rows, checked_counts(values, law, f"counts of rows {rows.start} to {rows.stop - 1}")
