"""Writing groups and datasets of an HDF5 file the NeXus way."""

import os

import numpy as np
from numpy.typing import ArrayLike, NDArray

CHUNK_BYTES = 1 << 20
LARGEST_COMPACT = 60_000  # bytes; HDF5 allows 64 kB less its own


class NexusWriter:
    """A new HDF5 file with one entry.

    Of the HDF5 versions those are used whose structures carry checksums, and data in chunks get one
    each; scalars live inside the structures if they are small enough.
    """

    def __init__(self, path: str | os.PathLike) -> None:
        import h5py

        self._file = h5py.File(path, "x", libver=("v110", "v110"))
        self._attributes(self._file, NX_class="NXroot", default="entry")

    def __enter__(self) -> "NexusWriter":
        return self

    def __exit__(self, *_: object) -> None:
        self._file.close()

    def group(self, place: str, nx_class: str, **attributes: str | tuple[str, ...]) -> None:
        """Make a group, unless it is there already."""
        if place not in self._file:
            self._attributes(self._file.create_group(place), NX_class=nx_class, **attributes)

    def dataset(
        self,
        place: str,
        values: ArrayLike,
        units: str | None = None,
        together: tuple[int, ...] | None = None,
    ) -> None:
        """Store an array, compressed, or a scalar.

        together: the axes of an array from the one kept whole in a chunk first to the one split first;
            None = from the last to the first.
        """
        values = np.asarray(values)
        stored = self._array(place, values, together) if values.ndim else self._scalar(place, values)
        if units is not None:
            self._attributes(stored, units=units)

    def data_group(
        self,
        place: str,
        signal: str,
        values: NDArray,
        axes: tuple[str, ...],
        together: tuple[int, ...] | None = None,
        **scales: NDArray,
    ) -> None:
        """Store an NXdata group: the signal and one scale an axis, in s where given, else the index."""
        self.group(place, "NXdata", signal=signal, axes=axes)
        self.dataset(f"{place}/{signal}", values, together=together)
        for axis, size in zip(axes, values.shape, strict=True):
            given = axis in scales
            scale = scales[axis] if given else np.arange(size, dtype=np.int32)
            self.dataset(f"{place}/{axis}", scale, units="s" if given else None)

    def _array(self, place: str, values: NDArray, together: tuple[int, ...] | None) -> object:
        chunk, items = [1] * values.ndim, CHUNK_BYTES // values.dtype.itemsize
        for axis in together or reversed(range(values.ndim)):
            chunk[axis] = max(1, min(values.shape[axis], items))
            items //= chunk[axis]
        return self._file.create_dataset(
            place,
            data=values,
            chunks=tuple(chunk),
            maxshape=None if values.size else (None,) * values.ndim,  # else no chunk is allowed
            compression="gzip",
            shuffle=True,
            fletcher32=True,
        )

    def _scalar(self, place: str, value: NDArray) -> object:
        import h5py

        parent, name = place.rsplit("/", 1)
        creation = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
        if value.nbytes < LARGEST_COMPACT:
            creation.set_layout(h5py.h5d.COMPACT)
        creation.set_obj_track_times(False)
        space = h5py.h5s.create(h5py.h5s.SCALAR)
        kind = h5py.h5t.py_create(value.dtype, logical=True)
        if value.dtype.kind == "S":
            kind.set_cset(h5py.h5t.CSET_UTF8)
        dataset = h5py.h5d.create(self._file[parent].id, name.encode(), kind, space, creation)
        dataset.write(h5py.h5s.ALL, h5py.h5s.ALL, value, kind)
        return h5py.Dataset(dataset)

    @staticmethod
    def _attributes(item: object, **attributes: str | tuple[str, ...]) -> None:
        for name, value in attributes.items():
            item.attrs[name] = np.bytes_(value) if isinstance(value, str) else np.array(value, dtype="S")
