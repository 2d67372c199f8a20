"""A small reconstruction to report on."""

from dataclasses import replace

import numpy as np
import pytest

import recon
from recon import simulate
from recon.acquisition import Counts
from recon.imaging import PhysicalImage, Reconstruction


@pytest.fixture(scope="session")
def truth() -> np.ndarray:
    image = np.full((16, 20), 0.2, np.float32)
    image[4:12, 5:15] = 0.8
    return image


@pytest.fixture(scope="session")
def counts(truth: np.ndarray) -> Counts:
    """Drawn from the truth, with the first row masked."""
    drawn = simulate.counts(truth, 300, 0.01, 0.002, seed=4)
    mask = np.ones(truth.shape, bool)
    mask[0] = False
    return replace(drawn, mask=mask)


@pytest.fixture(scope="session")
def result(counts: Counts) -> Reconstruction:
    return recon.reconstruct(counts)


@pytest.fixture(scope="session")
def image(result: Reconstruction) -> PhysicalImage:
    return result.reflectivity
