"""Reading HDF5 files that may be damaged or hostile.

Nothing outside the file is ever followed (soft and external links, virtual datasets, external
storage), no filter but the standard compression is run, no type is read that has to be decoded into
objects, and nothing is read that declares more than the file can hold or the machine can take.
"""

import math
import os
from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np
from numpy.typing import NDArray

from recon.errors import InputError
from recon.files.atomic import checked_path
from recon.validation import Range, memory_limit, whole_numbers

FILTERS = {1: "deflate", 2: "shuffle", 3: "fletcher32"}
DEFLATE_RATIO = 1100  # deflate cannot shrink anything more than 1032 times
ALWAYS_ALLOWED = 100_000_000  # bytes
# What h5py raises on a file it cannot make sense of. Nothing else is hidden.
DAMAGE = (
    ArithmeticError,
    LookupError,
    MemoryError,
    OSError,
    RuntimeError,
    SystemError,
    TypeError,
    ValueError,
)


class GuardedFile:
    """An HDF5 file opened for reading item by item. Every method raises InputError."""

    def __init__(self, file: object, size: int) -> None:
        self._file = file
        self._held = max(ALWAYS_ALLOWED, DEFLATE_RATIO * size)
        self._memory = memory_limit()
        self._declared = self._taken = 0

    def has(self, place: str) -> bool:
        """Whether there is an item at a place such as "entry/data/signal"."""
        with _naming(place):
            return self._object(place, required=False) is not None

    def names(self, place: str) -> list[str]:
        """Names in a group."""
        import h5py

        with _naming(place):
            group = self._object(place)
            if not isinstance(group, h5py.Group):
                raise InputError("is not a group; store the settings as the format asks")
            return list(group)

    def text(self, place: str, attribute: str) -> str:
        """A string attribute."""
        with _naming(f"{place}@{attribute}"):
            return _text(self._object(place), attribute)

    def array(self, place: str, kinds: str = "iuf", units: str | None = None) -> NDArray:
        """A dataset whose numpy kind is one of `kinds`, in `units` where it names its own."""
        with _naming(place):
            dataset = self._dataset(place, kinds)
            if units is not None and "units" in dataset.attrs and (given := _text(dataset, "units")) != units:
                raise InputError(f"is in {given}; store it in {units}")
            values = np.asarray(dataset[()])
            if values.dtype.kind == "b":
                return values.view(np.uint8) != 0  # a stored boolean may be any byte
            return _native(values)

    def rows(self, place: str, at_once: int) -> Iterator[tuple[slice, NDArray]]:
        """A dataset (frames, rows, columns) of numbers by blocks of rows: (slice of the rows, block)."""
        with _naming(place):
            dataset = self._dataset(place, "iuf", rows=at_once)
            if len(dataset.shape) != 3 or 0 in dataset.shape:
                raise InputError(f"has shape {dataset.shape}; store (frames, rows, columns) there")
        rows = dataset.shape[1]
        for begin in range(0, rows, at_once):
            block = slice(begin, min(begin + at_once, rows))
            with _naming(place):
                values = _native(dataset[:, block])
            yield block, values

    def flag(self, place: str) -> bool:
        """A dataset that is 0 or 1."""
        name = place.rsplit("/", 1)[-1]
        return bool(whole_numbers(self.array(place), name, Range("0 or 1", 0, 1)).all())

    def string(self, place: str) -> str:
        """A dataset that is one string of fixed length."""
        with _naming(place):
            dataset = self._dataset(place, "S")
            if dataset.shape != ():
                raise InputError("is a list of strings; store one string there")
            return bytes(dataset[()]).decode()

    def _object(self, place: str, required: bool = True) -> object:
        import h5py

        item = self._file
        for name in place.split("/"):
            link = item.get(name, getlink=True) if isinstance(item, h5py.Group) else None
            if link is None:
                if required:
                    raise InputError("is missing; add it, or check that this is an acquisition file")
                return None
            if type(link) is not h5py.HardLink:
                raise InputError("is a link to another place; store the item itself")
            item = item[name]
        return item

    def _dataset(self, place: str, kinds: str, rows: int | None = None) -> object:
        """A dataset that is safe to read, charged against the memory allowed for the file.

        rows: the entries of the second axis to be read at once; None = all.
        """
        import h5py

        dataset = self._object(place)
        if not isinstance(dataset, h5py.Dataset) or dataset.shape is None:
            raise InputError("is not a dataset; store the values there")
        if dataset.dtype.kind not in kinds:
            wanted = "a string of fixed length" if kinds == "S" else "plain numbers"
            raise InputError(f"holds {dataset.dtype} values; store {wanted} there")
        creation = dataset.id.get_create_plist()
        layout = creation.get_layout()
        if layout == h5py.h5d.VIRTUAL or creation.get_external_count():
            raise InputError("keeps its values outside the file; store them in it")
        for index in range(creation.get_nfilters()):
            if (code := creation.get_filter(index)[0]) not in FILTERS:
                raise InputError(f"is compressed by filter {code}; repack it with gzip")
        logical = math.prod(dataset.shape) * dataset.dtype.itemsize
        taken = logical if rows is None else logical * rows // max(1, *dataset.shape[1:2], rows)
        held = True
        if layout == h5py.h5d.CHUNKED:
            chunk = creation.get_chunk()
            piece = math.prod(chunk) * dataset.dtype.itemsize
            logical, taken = max(logical, piece), max(taken, piece)
            expected = math.prod(-(-n // c) for n, c in zip(dataset.shape, chunk, strict=True))
            held = dataset.id.get_num_chunks() == expected
        elif layout == h5py.h5d.CONTIGUOUS:
            held = dataset.id.get_storage_size() == logical
        self._declared += logical
        self._taken += taken
        if self._declared > self._held or self._taken > self._memory:
            raise InputError(
                f"has shape {dataset.shape}, which is {logical} bytes and more than such a file can hold "
                "or this machine can take; check the shape"
            )
        if not held:
            raise InputError(
                f"has shape {dataset.shape} but not all of its values are stored; write them all"
            )
        return dataset


def _native(values: NDArray) -> NDArray:
    return values.astype(values.dtype.newbyteorder("="), copy=False)


def _text(item: object, attribute: str) -> str:
    if attribute not in item.attrs:
        raise InputError("is missing; add it, or check that this is an acquisition file")
    stored = item.attrs.get_id(attribute)
    # strings of variable length live in a heap, in which a damaged file can send HDF5 round for ever
    if stored.dtype.kind != "S" or stored.shape != ():
        raise InputError("is not a string of fixed length; store one there")
    return bytes(item.attrs[attribute]).decode()


@contextmanager
def _naming(place: str) -> Iterator[None]:
    """Put the place in the file before what is wrong with it."""
    try:
        yield
    except InputError as error:
        raise InputError(f"{place} {error}.") from error
    except DAMAGE as error:
        raise InputError(f"{place} cannot be read, the file is damaged; copy it again.") from error


@contextmanager
def opened(path: str | os.PathLike) -> Iterator[GuardedFile]:
    """Open an HDF5 file for guarded reading; InputErrors of the block get the file's name in front."""
    import h5py

    target = checked_path(path)
    if not target.exists():
        raise InputError(f"{path} does not exist; check the name.")
    if not target.is_file():
        raise InputError(f"{path} is not a file; give the name of an acquisition file.")
    try:
        file = h5py.File(target, "r")
    except PermissionError as error:
        raise InputError(f"{path} may not be read; change its permissions.") from error
    except DAMAGE as error:
        raise InputError(
            f"{path} is not an HDF5 file, or it is truncated or damaged; copy it again."
        ) from error
    try:
        with file:
            yield GuardedFile(file, os.path.getsize(target))
    except InputError as error:
        raise InputError(f"{path}: {error}") from error
