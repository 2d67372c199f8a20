"""Damaged files: found out, or harmless; never a crash, another exception or a warning."""

import h5py
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from recon.errors import InputError
from recon.files import load, load_note, load_truth, save

fuzz = settings(derandomize=True, deadline=None, database=None, max_examples=110)
DAMAGE = st.lists(st.tuples(st.floats(0, 1, exclude_max=True), st.integers(1, 255)), min_size=1, max_size=6)


@pytest.fixture(scope="module", params=["counts", "clocked", "histogram", "frames", "readings"])
def saved(request, tmp_path_factory):
    """An acquisition, its file, and room for a damaged copy."""
    acquisition = request.getfixturevalue(request.param)
    path = tmp_path_factory.mktemp(request.param) / "a.h5"
    save(path, acquisition, truth={"image": np.ones((6, 5), bool)}, note="n")
    return acquisition, path, path.with_name("damaged.h5")


@pytest.fixture(scope="module")
def unprotected(saved):
    """The same in the oldest structures of HDF5, which carry no checksums."""
    acquisition, path, damaged = saved
    old = path.with_name("old.h5")
    with h5py.File(path) as source, h5py.File(old, "w", libver="earliest") as target:

        def copy(name, item):
            if isinstance(item, h5py.Group):
                made = target.create_group(name)
            else:
                made = target.create_dataset(name, data=item[()], chunks=True if item.shape else None)
            for key, value in item.attrs.items():
                made.attrs[key] = value

        source.visititems(copy)
    return acquisition, old, damaged


def read_all(path):
    """The acquisition if it can be read; reading truth and note must fail as cleanly."""
    results, said = [], []
    for read in (load, load_truth, load_note):
        try:
            results.append(read(path))
        except InputError as error:
            said.append(str(error))
            results.append(None)
    assert all(sentence.startswith(str(path)) and "\n" not in sentence for sentence in said)
    return results[0]


def flip(content, damage):
    content = bytearray(content)
    for place, bits in damage:
        content[int(place * len(content))] ^= bits
    return content


@fuzz
@given(damage=DAMAGE)
def test_flipped_bytes_are_found_out_or_harmless(saved, identical, damage):
    acquisition, path, damaged = saved
    damaged.write_bytes(flip(path.read_bytes(), damage))
    read = read_all(damaged)
    assert read is None or identical(read, acquisition)


@fuzz
@given(damage=DAMAGE)
def test_flipped_bytes_without_checksums_never_break_the_reader(unprotected, damage):
    acquisition, path, damaged = unprotected
    damaged.write_bytes(flip(path.read_bytes(), damage))
    read = read_all(damaged)
    assert read is None or isinstance(read, type(acquisition))


@fuzz
@given(share=st.floats(0, 1, exclude_max=True), tail=st.binary(max_size=64))
def test_truncated_files_are_found_out(saved, share, tail):
    _, path, damaged = saved
    content = path.read_bytes()
    damaged.write_bytes((content[: int(share * len(content))] + tail)[: len(content) - 1])
    assert read_all(damaged) is None


def test_the_undamaged_files_are_read(saved, unprotected, identical):
    for acquisition, path, _ in (saved, unprotected):
        assert identical(read_all(path), acquisition)
