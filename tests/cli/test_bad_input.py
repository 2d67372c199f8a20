"""Bad usage and bad input: one sentence, exit code 2, nothing written."""

from pathlib import Path

import h5py
import numpy as np
import pytest


def _broken(good: Path, folder: Path, what: str) -> Path:
    path = folder / f"{what}.h5"
    path.write_bytes(good.read_bytes())
    if what == "truncated":
        path.write_bytes(good.read_bytes()[: path.stat().st_size // 2])
    elif what == "text":
        path.write_text("not an acquisition")
    elif what == "empty":
        path.write_bytes(b"")
    elif what == "negative":
        with h5py.File(path, "r+") as file:
            file["entry/data/detections"][2, 3] = -1
    elif what == "above-trials":
        with h5py.File(path, "r+") as file:
            file["entry/data/detections"][2, 3] = 501
    elif what == "nan-gain":
        with h5py.File(path, "r+") as file:
            file["entry/instrument/detector/gain"][()] = np.nan
    elif what == "folder":
        path.unlink()
        path.mkdir()
    return path


def _refused(run, tmp_path, *words: object) -> str:
    """Run, and return the one sentence."""
    before = sorted(tmp_path.rglob("*"))
    ran = run(*words)
    assert ran.code == 2
    assert ran.out == ""
    assert ran.err.startswith("fewcount: ")
    assert ran.err.count("\n") == 1
    assert ran.err.endswith(".\n")
    assert sorted(tmp_path.rglob("*")) == before
    return ran.err


@pytest.mark.parametrize(
    ("what", "said"),
    [
        ("truncated", "truncated.h5 is not an HDF5 file, or it is truncated"),
        ("text", "text.h5 is not an HDF5 file"),
        ("empty", "empty.h5 is not an HDF5 file"),
        ("negative", "detections at (2, 3) is -1"),
        ("above-trials", "detections at (2, 3) is 501"),
        ("nan-gain", "gain is nan"),
        ("folder", "folder.h5 is not a file"),
    ],
)
def test_files_that_cannot_be_used(run, counts_file, tmp_path, what, said):
    path = _broken(counts_file, tmp_path, what)
    assert said in _refused(run, tmp_path, "reconstruct", path, "--out", "results")


def test_a_file_that_is_not_there(run, tmp_path):
    assert "absent.h5 does not exist" in _refused(run, tmp_path, "reconstruct", "absent.h5")


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("--prior", "entropy"), "--prior is 'entropy'; give one of total-variation, generalized-variation"),
        (("--prior", ""), "--prior is ''"),
        (("--weight", "-1"), "weight is -1.0"),
        (("--weight", "0"), "weight is 0.0"),
        (("--weight", "nan"), "weight is nan"),
        (("--weight", "inf"), "weight is inf"),
        (("--weight", "much"), "weight is 'much'; give one of auto, rule, discrepancy, risk"),
        (("--weight",), "expected one argument"),
        (("--tolerance", "2"), "tolerance is 2.0"),
        (("--tolerance", "0"), "tolerance is 0.0"),
        (("--tolerance", "nan"), "tolerance is nan"),
        (("--max-iterations", "0"), "max_iterations is 0"),
        (("--max-iterations", "1.5"), "'1.5' is not a whole number"),
        (("--prio", "smoothness"), "unrecognized arguments: --prio"),
        (("--out", "\0"), "--out"),
        (("another.h5",), "unrecognized arguments: another.h5"),
    ],
)
def test_options_that_cannot_be_used(run, counts_file, tmp_path, words, said):
    assert said in _refused(run, tmp_path, "reconstruct", counts_file, *words)


@pytest.mark.parametrize(
    "words", ["", "nothing", "reconstruct", "simulate", "simulate spectra", "demo --seed 1"]
)
def test_commands_that_are_not_there(run, tmp_path, words):
    assert "--help" in _refused(run, tmp_path, *words.split())


@pytest.mark.parametrize("command", ["demo", "reconstruct"])
@pytest.mark.parametrize("out", ["taken", "taken/below"])
def test_a_folder_that_cannot_be_made_is_found_out_first(
    run, counts_file, tmp_path, monkeypatch, command, out
):
    monkeypatch.setattr("recon.cli.job.reconstruct", lambda *_, **__: pytest.fail("the work began"))
    (tmp_path / "taken").write_text("a file")
    words = [command] if command == "demo" else [command, counts_file]
    assert "--out" in _refused(run, tmp_path, *words, "--out", tmp_path / out)


def test_a_folder_that_may_not_be_written_to(run, counts_file, tmp_path, monkeypatch):
    (tmp_path / "sealed").mkdir()
    monkeypatch.setattr("os.access", lambda path, mode: Path(path).name != "sealed")
    said = _refused(run, tmp_path, "reconstruct", counts_file, "--out", tmp_path / "sealed")
    assert "sealed is not a folder that can be written to" in said


def test_a_folder_that_was_there_stays(run, counts_file, tmp_path):
    (tmp_path / "mine").mkdir()
    _refused(run, tmp_path, "reconstruct", counts_file, "--tolerance", "2", "--out", "mine/new")
    assert (tmp_path / "mine").is_dir()
