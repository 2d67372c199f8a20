"""The uncertainty of each pixel against the true error, on scenes that it was not measured on."""

from functools import cache

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter

import priors
import recon
from recon.uncertainty import bootstrap

SIZE, SEEDS = 96, 3


def discs():
    i, j = np.mgrid[:SIZE, :SIZE] / SIZE
    image = np.full((SIZE, SIZE), 0.3)
    for row, column, radius, value in ((0.3, 0.3, 0.18, 1.0), (0.7, 0.6, 0.22, 0.7), (0.25, 0.75, 0.1, 1.4)):
        image[(i - row) ** 2 + (j - column) ** 2 < radius**2] = value
    return image


def slope():
    i, j = np.mgrid[:SIZE, :SIZE] / SIZE
    return 0.2 + 0.8 * j + 0.3 * np.sin(5.0 * i) ** 2


def texture():
    rough = gaussian_filter(np.random.default_rng(11).standard_normal((SIZE, SIZE)), 2.0, mode="wrap")
    return 0.8 + 0.3 * rough / rough.std() * (1.0 - 0.3 * rough / np.abs(rough).max())


SCENES = {"discs": discs, "slope": slope, "texture": lambda: np.maximum(texture(), 0.05)}
LEVELS = (2.0, 12.0)


@cache
def coverage(scene: str, level: float) -> tuple[float, float]:
    """Shares of pixels within the two intervals, over seeds."""
    truth, held = SCENES[scene](), []
    for seed in range(SEEDS):
        counts = recon.simulate.counts(truth, 1, level, several_per_trial=True, seed=seed)
        image = recon.reconstruct(counts).reflectivity
        ends = (image.interval(0.68), image.interval(0.95))
        held.append([np.mean((low <= truth) & (truth <= high)) for low, high in ends])
    return tuple(np.mean(held, axis=0))


@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize("scene", SCENES)
def test_the_truth_is_held_about_as_often_as_said(scene: str, level: float) -> None:
    narrow, wide = coverage(scene, level)
    assert narrow == pytest.approx(0.68, abs=0.15)
    assert wide == pytest.approx(0.95, abs=0.15)


def test_on_average_over_scenes_and_levels() -> None:
    found = np.mean([coverage(scene, level) for scene in SCENES for level in LEVELS], axis=0)
    np.testing.assert_allclose(found, (0.68, 0.95), atol=0.07)


@pytest.mark.parametrize("scene", ["discs", "texture"])
def test_what_too_large_a_weight_took_away_is_in_it(scene: str) -> None:
    """A bootstrap does not see it."""
    truth = SCENES[scene]()
    counts = recon.simulate.counts(truth, 1, 6.0, several_per_trial=True, seed=7)
    chosen = recon.reconstruct(counts).reflectivity
    prior = priors.TotalVariation(4.0 * chosen.priors[0].weight)
    image = recon.reconstruct(counts, prior).reflectivity
    assert image.choice is None
    assert len(image.held_out) > 1
    error = np.abs(image.image - truth)
    spread = bootstrap(image.problem, image.image, 6).standard_deviation
    assert np.mean(image.uncertainty) > 1.5 * np.mean(spread)
    assert np.mean(error <= spread) < 0.5
    assert np.mean(error <= image.uncertainty) > 0.5
    low, high = image.interval(0.95)
    assert np.mean((low <= truth) & (truth <= high)) > 0.85


def test_larger_where_errors_are() -> None:
    """Over a tenth of the pixels where it is largest and a half where it is least."""
    truth = discs()
    counts = recon.simulate.counts(truth, 1, 6.0, several_per_trial=True, seed=9)
    image = recon.reconstruct(counts).reflectivity
    square, u = (image.image - truth) ** 2, image.uncertainty
    ends = np.quantile(u, (0.5, 0.9))
    assert square[u >= ends[1]].mean() > 3.0 * square[u <= ends[0]].mean()


def test_trials_and_frames() -> None:
    truth = discs()
    trials = recon.simulate.counts(truth, 40, 0.1, seed=2)
    frames = recon.simulate.frames(truth + 1.0, 0.5, 12, seed=2)
    for acquisition, scene in ((trials, truth), (frames, truth + 1.0)):
        (image,) = recon.reconstruct(acquisition).images.values()
        narrow, wide = (np.mean(np.abs(image.image - scene) <= k * image.uncertainty) for k in (1.0, 2.5))
        assert 0.5 < narrow < 0.92
        assert wide > 0.83


def test_pixels_without_data_are_less_sure() -> None:
    truth, mask = discs(), np.ones((SIZE, SIZE), bool)
    mask[40:56, 20:50] = False
    drawn = recon.simulate.counts(truth, 1, 6.0, several_per_trial=True, seed=3)
    counts = recon.Counts(drawn.detections, 1, 6.0, mask=mask, several_per_trial=True)
    image = recon.reconstruct(counts).reflectivity
    assert np.all(np.isfinite(image.uncertainty))
    assert np.all(image.uncertainty > 0.0)
    assert np.all(image.uncertainty[~mask] >= np.float32(0.999) * image.image.std())
    assert np.mean(image.uncertainty[~mask]) > 2.0 * np.mean(image.uncertainty[mask])
    low, high = image.interval(0.95)
    assert np.mean(((low <= truth) & (truth <= high))[~mask]) > 0.8


def empties():
    """Acquisitions with nothing, one detection, or nothing in most pixels."""
    one, few = np.zeros((24, 24), int), np.zeros((24, 24), int)
    one[3, 4] = 1
    few[::4, ::4] = 1
    for name, found in (("none", np.zeros((24, 24), int)), ("one", one), ("few", few)):
        yield f"counts, {name}", recon.Counts(found, 5, several_per_trial=True)
        yield f"trials, {name}", recon.Counts(found, 5)
        yield f"frames, {name}", recon.Frames(np.repeat(found[None], 8, axis=0), 0.5)
        yield f"two frames, {name}", recon.Frames(np.repeat(found[None], 2, axis=0), 0.5)
    held = np.zeros((24, 24), bool)
    held[:2, :2] = True
    yield "counts, four pixels", recon.Counts(np.full((24, 24), 20), 5, mask=held, several_per_trial=True)


EMPTY = dict(empties())


@pytest.mark.parametrize("prior", [None, priors.TotalVariation(3.0)], ids=["chosen", "given"])
@pytest.mark.parametrize("name", EMPTY)
def test_next_to_no_data_gives_finite_numbers(name: str, prior) -> None:
    """Warnings are errors here."""
    (image,) = recon.reconstruct(EMPTY[name], prior).images.values()
    assert np.all(np.isfinite(image.image))
    assert np.all(np.isfinite(image.uncertainty))
    assert np.all(image.uncertainty > 0.0)
    low, high = image.interval(0.95)
    assert np.all(low <= high)


def test_intervals_stay_within_the_bounds() -> None:
    counts = recon.simulate.counts(np.full((32, 32), 0.05), 1, 4.0, several_per_trial=True, seed=0)
    image = recon.reconstruct(counts).reflectivity
    low, high = image.interval(0.95)
    assert low.min() >= image.bounds[0]
    assert high.max() <= image.bounds[1]
    narrow = image.interval(0.68)
    assert np.all((low <= narrow[0]) & (narrow[1] <= high))
    with pytest.raises(recon.InputError, match=r"share is 0\.9; give 0\.68 or 0\.95"):
        image.interval(0.9)
