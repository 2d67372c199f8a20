"""The command line as a process, and what it does when it is stopped or fails."""

import errno
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]


def fewcount(*words: object, cwd: Path = ROOT) -> subprocess.CompletedProcess:
    command = [sys.executable, "-m", "recon.cli", *map(str, words)]
    return subprocess.run(
        command, capture_output=True, text=True, cwd=cwd, timeout=120, check=False,
        env={"PYTHONPATH": str(ROOT), "NUMBA_NUM_THREADS": "1"},
    )  # fmt: skip


def test_help_tells_of_commands_and_exit_codes():
    ran = fewcount("--help")
    assert (ran.returncode, ran.stderr) == (0, "")
    for words in ("demo", "reconstruct", "simulate", "exit codes:", "examples:", "--quiet", "--json"):
        assert words in ran.stdout


@pytest.mark.parametrize("words", ["--help", "reconstruct --help", "simulate counts --help", "nonsense"])
def test_help_loads_nothing_heavy(words):
    code = (
        f"import sys; from recon.cli import main; main({words.split()!r});"
        "heavy = {'numpy', 'scipy', 'numba', 'h5py', 'rich', 'matplotlib', 'tifffile', 'cvxpy', 'priors'};"
        "sys.exit(', '.join(heavy & set(sys.modules)) or 0)"
    )
    ran = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, timeout=60, check=False
    )
    assert ran.returncode == 0, ran.stderr


def test_version():
    ran = fewcount("--version")
    assert (ran.returncode, ran.stderr) == (0, "")
    assert ran.stdout.startswith("fewcount ")


def test_bad_input_leaves_one_line_and_no_traceback(tmp_path):
    ran = fewcount("reconstruct", "absent.h5", cwd=tmp_path)
    assert ran.returncode == 2
    assert ran.stdout == ""
    assert ran.stderr == "fewcount: absent.h5 does not exist; check the name.\n"
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("raised", "code", "said"),
    [
        (KeyboardInterrupt(), 130, "fewcount: stopped from the keyboard"),
        (MemoryError(), 1, "fewcount: there is not enough memory"),
        (OSError(errno.ENOSPC, "No space left on device", "results/x.tif"), 1,
         "fewcount: cannot write results/x.tif: No space left on device"),
        (OSError("Unable to flush\nfile"), 1, "fewcount: cannot write: Unable to flush file"),
    ],
)  # fmt: skip
def test_a_job_that_fails_says_so_in_one_line(run, counts_file, tmp_path, monkeypatch, raised, code, said):
    def fail(*_, **__):
        raise raised

    monkeypatch.setattr("recon.cli.job.write_tiff", fail)
    ran = run("reconstruct", counts_file, "--out", "results/deep")
    assert ran.code == code
    assert ran.out == ""
    assert ran.err.startswith(said)
    assert ran.err.count("\n") == 1
    assert list(tmp_path.iterdir()) == []


def test_a_fault_of_our_own_is_not_hidden(run, counts_file, monkeypatch):
    monkeypatch.setattr("recon.cli.job.reconstruct", lambda *_, **__: [].index(1))
    with pytest.raises(ValueError, match="not in list"):
        run("reconstruct", counts_file)
