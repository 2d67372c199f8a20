"""Whether the tags away from the surface are as many as the declared background says."""

import dataclasses

import numpy as np
import pytest

import recon
from recon.imaging.background_check import allowed_background

DEPTH = np.full((48, 64), 4.0)


def tags(background: float, seed: int) -> recon.TimeTags:
    return recon.simulate.time_tags(
        DEPTH, np.ones_like(DEPTH), 1000, 1e-7, recon.GaussianPulse(3e-10), 2e-3, background / 1000, seed=seed
    )


@pytest.mark.parametrize("seed", range(3))
def test_a_right_background_fits(seed: int) -> None:
    check = recon.reconstruct(tags(1.0, seed), weight="rule").depth.background
    assert check.fits
    assert check.words == ""
    assert check.found == pytest.approx(1e-3, rel=0.1)


@pytest.mark.parametrize("factor", [0.4, 2.0])
@pytest.mark.parametrize("seed", range(2))
def test_a_wrong_background_is_told(factor: float, seed: int) -> None:
    drawn = tags(1.0, seed)
    wrong = dataclasses.replace(drawn, background=drawn.background * factor)
    surface = recon.reconstruct(wrong, weight="rule").depth
    assert not surface.background.fits
    assert surface.background.declared == pytest.approx(factor * 1e-3, rel=0.01)
    assert surface.background.found == pytest.approx(1e-3, rel=0.15)
    assert any("background" in note for note in surface.notes)


@pytest.mark.parametrize("background", [0.3, 1.0, 5.0])
def test_what_tags_allow(background: float) -> None:
    factors = [allowed_background(tags(background, seed)) for seed in range(10)]
    assert min(factors) > 0.95
    for seed in range(5):
        drawn = tags(background, seed)
        wrong = dataclasses.replace(drawn, background=3.0 * drawn.background)
        assert 0.3 < allowed_background(wrong) < 0.5
