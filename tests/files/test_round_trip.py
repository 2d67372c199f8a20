"""What is saved comes back bit for bit."""

import numpy as np
import pytest

from recon.acquisition import Frames
from recon.errors import InputError
from recon.files import guard, load, load_note, load_truth, save


def test_acquisitions_come_back_identical(acquisition, identical, tmp_path):
    path = tmp_path / "a.h5"
    save(path, acquisition)
    assert identical(load(path), acquisition)
    assert load_truth(path) == {}
    assert load_note(path) == ""


def test_saving_twice_gives_the_same_bytes(acquisition, tmp_path):
    for name in ("a.h5", "b.h5"):
        save(tmp_path / name, acquisition)
    assert (tmp_path / "a.h5").read_bytes() == (tmp_path / "b.h5").read_bytes()


@pytest.mark.parametrize("dtype", [bool, np.uint8, np.int64, np.float16, np.float32, np.float64, ">f4"])
def test_truth_comes_back_identical(frames, tmp_path, dtype):
    rng = np.random.default_rng(1)
    truth = {"depth": rng.normal(size=(6, 5)).astype(dtype), "level": np.array(3).astype(dtype)}
    save(tmp_path / "a.h5", frames, truth=truth)
    read = load_truth(tmp_path / "a.h5")
    assert read.keys() == truth.keys()
    for name, values in truth.items():
        native = values.astype(values.dtype.newbyteorder("="))
        assert read[name].dtype.isnative
        assert read[name].dtype == native.dtype
        assert read[name].tobytes() == native.tobytes()


@pytest.mark.parametrize("note", ["invented", "two\nlines ", "µm, 电子", "long " * 40_000])
def test_notes_come_back(frames, tmp_path, note):
    save(tmp_path / "a.h5", frames, note=note)
    assert load_note(tmp_path / "a.h5") == note


def test_special_floats_survive(frames, tmp_path):
    special = np.array([-0.0, np.inf, -np.inf, 5e-324, np.nan])
    special[4:].view(np.uint64)[0] |= 0xABC  # a NaN with a payload
    save(tmp_path / "a.h5", frames, truth={"special": special})
    assert load_truth(tmp_path / "a.h5")["special"].tobytes() == special.tobytes()


def test_dark_images_are_not_taken_for_bombs(tmp_path, monkeypatch):
    monkeypatch.setattr(guard, "ALWAYS_ALLOWED", 0)
    path, stack = tmp_path / "a.h5", np.zeros((20, 1000, 1000), np.uint8)
    save(path, Frames(stack, 0.1))
    assert path.stat().st_size < stack.nbytes / 400
    assert load(path).counts.shape == stack.shape


@pytest.mark.parametrize("thing", [None, 3, np.zeros((2, 2)), {"detections": [[1]]}, object()])
def test_other_things_are_refused(thing, tmp_path):
    with pytest.raises(
        InputError, match=r"acquisition is .*; give Counts, TimeTags, a TimeHistogram or Frames"
    ):
        save(tmp_path / "a.h5", thing)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("extra", "message"),
    [
        ({"truth": np.zeros(3)}, "truth is ndarray; give arrays by name"),
        ({"truth": {"a/b": np.zeros(3)}}, "truth has the name 'a/b'"),
        ({"truth": {"..": np.zeros(3)}}, r"truth has the name '\.\.'"),
        ({"truth": {3: np.zeros(3)}}, "truth has the name 3"),
        ({"truth": {"a": None}}, "truth a has shape .*type object"),
        ({"truth": {"a": "text"}}, "truth a has shape .*type str"),
        ({"truth": {"a": []}}, "truth a has shape"),
        ({"truth": {"a": [[1], [2, 3]]}}, "truth a is not an array"),
        ({"note": b"bytes"}, "note is bytes; give text"),
        ({"note": "a\0b"}, "note at 1 is a zero byte"),
        ({"note": "a\ud800"}, "note at 1 is half a character"),
    ],
)
def test_impossible_extras_are_refused(frames, extra, message, tmp_path):
    with pytest.raises(InputError, match=message):
        save(tmp_path / "a.h5", frames, **extra)
    assert list(tmp_path.iterdir()) == []


def test_a_failing_save_leaves_the_old_file(frames, tmp_path, monkeypatch):
    path = tmp_path / "a.h5"
    save(path, frames, note="old")

    def full(*_args, **_settings):
        raise OSError("no space left")

    monkeypatch.setattr("recon.files.nexus.NexusWriter.data_group", full)
    with pytest.raises(OSError, match="no space left"):
        save(path, frames, note="new")
    assert load_note(path) == "old"
    assert list(tmp_path.iterdir()) == [path]
