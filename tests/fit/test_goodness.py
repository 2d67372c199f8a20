"""Models that fit pass, models that do not are told, each by its cause."""

from dataclasses import replace

import numpy as np
import pytest

import priors
import recon
from recon.errors import InputError
from recon.fit import goodness
from recon.fit.words import NO_MISFIT, NOTHING

SIZE = 80
i, j = np.mgrid[:SIZE, :SIZE] / SIZE
SCENE = 0.5 + 1.0 * (j > 0.4) + 1.0 * ((i - 0.5) ** 2 + (j - 0.6) ** 2 < 0.04) + 0.7 * (i > 0.8)
SCENE /= SCENE.mean()
SEEDS = range(2)
PULSE = recon.GaussianPulse(3e-10)


def several(detections):
    return recon.Counts(detections, 1, several_per_trial=True)


def causes(result):
    return [f.cause for f in goodness(result).findings]


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("level", [1.0, 10.0])
def test_right_counts(seed, level):
    found = goodness(recon.reconstruct(several(np.random.default_rng(seed).poisson(level * SCENE))))
    assert found.fits
    fit = found.images["reflectivity"]
    assert fit.verdict == NO_MISFIT
    assert fit.histogram.counts.sum() == SCENE.size
    assert abs(fit["deviance"].z) < 4.0
    assert 0.0 <= fit["residuals of neighbours in a row"].p_value <= 1.0


@pytest.mark.parametrize(("stop_after", "trials"), [(None, 3), (2, None), (2, 9)])
def test_right_trials(stop_after, trials):
    drawn = recon.simulate.counts(0.36 * SCENE, trials, stop_after=stop_after, seed=1)
    assert causes(recon.reconstruct(drawn)) == []


@pytest.mark.parametrize("seed", SEEDS)
def test_pile_up(seed):
    """Three in ten trials detect, and no trial detects twice: the variance is 0.7 of the mean."""
    drawn = np.random.default_rng(seed).binomial(3, 1.0 - np.exp(-0.357 * SCENE))
    found = goodness(recon.reconstruct(several(drawn)))
    assert [f.cause for f in found.findings] == ["pile-up"]
    assert found.images["reflectivity"]["dispersion"].observed == pytest.approx(0.7, abs=0.06)
    assert "several_per_trial=False" in found.verdict


@pytest.mark.parametrize("seed", range(3))
def test_a_hot_pixel_that_the_image_follows(seed):
    """Held-out parts of it say the same, so that the chosen weight lets the image follow."""
    rng = np.random.default_rng(seed)
    scene = np.full((24, 32), 2.0)
    scene[6:16, 8:22] = 5.0
    counts = rng.poisson(scene)
    assert goodness(recon.reconstruct(several(counts))).fits
    counts[3, 3] = counts[12, 25] = 30
    result = recon.reconstruct(several(counts))
    assert result.reflectivity.image[3, 3] > 8.0
    found = goodness(result)
    assert [f.cause for f in found.findings] == ["hot pixels"]
    assert found.images["reflectivity"].lone[3, 3]
    assert "row 3, column 3" in found.verdict or "row 12, column 25" in found.verdict


@pytest.mark.parametrize("seed", SEEDS)
def test_hot_pixels(seed):
    rng = np.random.default_rng(seed)
    hot = rng.random(SCENE.shape) < 0.01
    found = goodness(recon.reconstruct(several(rng.poisson(SCENE) + 8 * hot)))
    assert [f.cause for f in found.findings] == ["hot pixels"]
    lone = found.images["reflectivity"].lone
    assert np.mean(hot[lone]) > 0.6


@pytest.mark.parametrize("seed", SEEDS)
def test_overdispersion(seed):
    """Gamma rates: the variance is 1.2 of the mean."""
    drawn = np.random.default_rng(seed).poisson(np.random.default_rng(seed + 9).gamma(50.0 * SCENE, 0.2))
    assert causes(recon.reconstruct(several(drawn))) == ["overdispersion"]


def test_weights():
    counts = several(np.random.default_rng(0).poisson(SCENE))
    weight = recon.reconstruct(counts).reflectivity.priors[0].weight
    for factor, expected in ((1.0, []), (4.0, ["weight too large"]), (0.15, ["weight too small"])):
        assert causes(recon.reconstruct(counts, priors.TotalVariation(factor * weight))) == expected


def tags(seed, **declared):
    row, column = np.mgrid[:48, :48]
    depth = 4.0 + 0.004 * column + 1.0 * (row >= 24)
    drawn = recon.simulate.time_tags(depth, np.ones((48, 48)), 1000, 1e-7, PULSE, 2e-3, 1e-3, seed=seed)
    return replace(drawn, **declared)


@pytest.mark.parametrize(
    ("declared", "expected"),
    [
        ({}, []),
        ({"background": 2e-3}, ["background"]),
        ({"background": 0.5e-3}, ["background"]),
        ({"pulse": recon.GaussianPulse(1.5e-10)}, ["pulse too narrow"]),
        ({"pulse": recon.GaussianPulse(6e-10)}, ["pulse too wide"]),
    ],
)
def test_time_tags(declared, expected):
    found = goodness(recon.reconstruct(tags(0, **declared), weight="rule", tolerance=5e-2))
    assert [f.cause for f in found.images["depth"].findings] == expected
    assert any("time_zero" in what for what in found.images["depth"].unidentified)


@pytest.mark.parametrize(("change", "expected"), [(0.0, []), (0.2, ["drift"])])
def test_frames(change, expected):
    """A current that grows by 20 % over the dwell."""
    current = 1.0 + change * np.linspace(-0.5, 0.5, 16)
    drawn = recon.simulate.frames(2.0 * SCENE[:48, :48], 0.5, 16, hidden_current=current, seed=3)
    found = goodness(recon.reconstruct(drawn, weight="rule"))
    assert [f.cause for f in found.findings if "weight" not in f.cause] == expected
    assert any("dose against yield" in what for what in found.images["electron_yield"].unidentified)


def test_readings():
    law = recon.acquisition.MarkLaw(gain=1.0, variance=0.2, noise=0.2)
    drawn = recon.simulate.frames(2.0 * SCENE[:16, :16], 0.5, 4, law=law, seed=3)
    found = causes(recon.reconstruct(drawn, weight="rule"))
    assert [cause for cause in found if "weight" not in cause] == []


def test_what_the_data_cannot_tell():
    said = goodness(recon.reconstruct(several(np.random.default_rng(0).poisson(SCENE)))).verdict
    for words in ("background against the image", "gain against reflectivity", "texture finer than a pixel"):
        assert words in said


def test_an_image_that_did_not_converge():
    counts = several(np.random.default_rng(0).poisson(SCENE))
    found = goodness(recon.reconstruct(counts, max_iterations=1, weight="rule"))
    assert found.findings[0].cause == "not converged"
    assert "NOT CONVERGED" in found.verdict


@pytest.mark.parametrize("detections", [0, 1])
def test_next_to_nothing(detections):
    counts = np.zeros((16, 16), int)
    counts[4, 5] = detections
    for acquisition in (
        several(counts),
        recon.Counts(counts, 10),
        recon.Frames(np.stack([counts, 0 * counts]), 0.5),
        recon.TimeTags(
            [4] * detections, [5] * detections, [2e-8] * detections, shape=(16, 16), trials=10, period=1e-7,
            pulse=PULSE, gain=0.1, background=0.01,
        ),
    ):  # fmt: skip
        found = goodness(recon.reconstruct(acquisition, weight="rule", tolerance=5e-2))
        assert {f.cause for f in found.findings} <= {"not converged"}
        for fit in found.images.values():
            assert not fit.enough
            assert NOTHING in fit.verdict


@pytest.mark.parametrize("bad", [None, 3, np.zeros((4, 4))])
def test_bad_input(bad):
    with pytest.raises(InputError, match="result is a"):
        goodness(bad)


def test_progress_and_seeds():
    result = recon.reconstruct(several(np.random.default_rng(0).poisson(SCENE[:32, :32])))
    told = []
    one = goodness(result, callback=lambda name, share: told.append((name, share)))
    assert told[-1] == ("reflectivity", 1.0)
    again, other = goodness(result), goodness(result, seed=1)
    assert one.images["reflectivity"].statistics == again.images["reflectivity"].statistics
    assert one.images["reflectivity"].statistics != other.images["reflectivity"].statistics


@pytest.mark.parametrize("seed", SEEDS)
def test_overdispersion_that_texture_hides_is_said(seed):
    """A photograph at ten counts a pixel, right: not denied, and said that 5 % could not be told."""
    from skimage import data

    photograph = data.camera().astype(float)[:256, :256].reshape(128, 2, 128, 2).mean(axis=(1, 3))
    counts = np.random.default_rng(seed).poisson(10.0 * photograph / photograph.mean())
    found = goodness(recon.reconstruct(several(counts)))
    assert found.fits
    fit = found.images["reflectivity"]
    assert fit.least_overdispersion > 0.07
    assert f"of less than {100 * fit.least_overdispersion:.0f} % of the law's variance" in found.verdict
    flat = goodness(recon.reconstruct(several(np.random.default_rng(seed).poisson(10.0 * SCENE))))
    assert flat.images["reflectivity"].least_overdispersion < 0.06
