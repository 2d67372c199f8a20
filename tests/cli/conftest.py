"""Small acquisition files, and a way to run the command line."""

from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pytest

from recon import simulate
from recon.cli import main
from recon.files import save

SHAPE = (20, 24)


class Ran(NamedTuple):
    """What a command left behind."""

    code: int
    out: str
    err: str


@pytest.fixture
def run(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> Callable[..., Ran]:
    """Run a command in an empty folder."""
    monkeypatch.chdir(tmp_path)

    def call(*words: object) -> Ran:
        code = main([str(word) for word in words])
        said = capsys.readouterr()
        return Ran(code, said.out, said.err)

    return call


def scene() -> np.ndarray:
    """A bright square on a darker ground."""
    image = np.full(SHAPE, 0.3, np.float32)
    image[5:14, 6:18] = 0.9
    return image


@pytest.fixture(scope="session")
def counts_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("counts") / "square.h5"
    truth = scene()
    drawn = simulate.counts(truth, 500, 0.01, 0.001, seed=1)
    save(path, drawn, truth={"reflectivity": truth}, note="Made up.")
    return path


@pytest.fixture(scope="session")
def frames_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("frames") / "coupon.h5"
    eta = 1.0 + 3.0 * scene()
    save(path, simulate.frames(eta, 0.125, 80, seed=1), truth={"electron_yield": eta})
    return path
