"""Time tags to images in one call, where the data are scarce, wrong, or at an edge."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import constants

import priors
import recon
from recon.acquisition import DeadTime, GaussianPulse, SampledPulse, TimeHistogram, TimeTags
from recon.diagnostics import Status
from recon.errors import InputError
from recon.imaging.background_check import allowed_background
from recon.imaging.depth import depth
from recon.imaging.depth_belief import depth_belief
from recon.imaging.reflectivity import reflectivity
from recon.imaging.task import Effort
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

PERIOD = 100e-9
PULSE = GaussianPulse(0.27e-9)
METRES = 0.5 * constants.c
RANGE = METRES * PERIOD
CORE = METRES * 0.27e-9
TIMES = np.arange(-1.5, 6.0, 0.05) * 1e-9
TAILED = SampledPulse(
    TIMES, np.where(TIMES < 0.0, np.exp(-0.5 * (TIMES / 0.2e-9) ** 2), np.exp(-TIMES / 0.8e-9))
)
SHAPE = (24, 32)


def two_planes():
    scene = np.full(SHAPE, 5.0)
    scene[:, 16:] = 3.5
    return scene


def acquire(
    seed=0, scene=None, signal=2.0, background=2.0, reflectivity=None, trials=1000, pulse=PULSE, **more
):
    scene = two_planes() if scene is None else scene
    reflectivity = np.ones(scene.shape) if reflectivity is None else reflectivity
    return time_tags(
        scene, reflectivity, trials, PERIOD, pulse, signal / trials, background / trials, seed=seed, **more
    )


def images(acquisition, prior=None, max_iterations=300, weight="rule"):
    """The images, held to what is always true of them."""
    result = recon.reconstruct(acquisition, prior, max_iterations=max_iterations, weight=weight)
    for image in (result.depth, result.reflectivity):
        assert image.image.shape == acquisition.shape
        assert np.isfinite(image.image).all()
        assert np.isfinite(image.uncertainty).all()
        assert image.uncertainty.min() >= 0.0
        low, high = image.bounds
        assert image.image.min() >= low - 1e-5
        assert image.image.max() <= high + 1e-5
        gap = image.diagnostics.relative_gap
        assert np.isfinite(gap)
        assert (image.status is Status.CONVERGED) == (gap <= image.tolerance)
        if image.status is Status.ITERATION_LIMIT:
            assert image.diagnostics.iterations >= max_iterations
    low, high = result.depth.bounds
    assert low >= 0.0
    assert high <= acquisition.unambiguous_range * (1.0 + 1e-9)
    for share in (result.depth.target, result.depth.wrong_surface):
        assert share.min() >= -1e-5
        assert share.max() <= 1.0 + 1e-5
    return result


def off(result, scene=None):
    return np.abs(result.depth.image - (two_planes() if scene is None else scene))


@pytest.mark.parametrize("prior", [None, priors.TotalVariation(), priors.GeneralizedVariation()])
def test_two_planes(prior):
    result = images(acquire(1), prior, weight="auto")
    assert off(result).mean() < 0.3 * CORE
    assert result.depth.target.mean() > 0.95
    assert result.reflectivity.image.mean() == pytest.approx(1.0, abs=0.1)
    assert np.mean(np.abs(result.depth.image - two_planes()) < 3.0 * result.depth.uncertainty) > 0.9


def test_empty_pixels_rows_and_a_dead_column():
    dead = np.zeros(SHAPE, bool)
    dead[9:11] = True
    dead[:, 7] = True
    dead[::5, ::5] = True
    tags = acquire(2, dead=dead)
    assert not tags.counts().detections[dead].any()
    result = images(tags)
    assert off(result).mean() < 0.5 * CORE
    assert off(result)[~dead].mean() < 0.5 * CORE
    assert result.depth.filled[dead].all()
    assert result.depth.target[~dead].mean() > 0.9


def test_a_dead_pixel_in_a_bright_scene():
    """It lacks two hundred tags, though it is taken for no brighter than a tenth of the mean."""
    dead = np.zeros(SHAPE, bool)
    dead[11, 9] = True
    result = images(acquire(2, signal=2000.0, dead=dead))
    assert off(result).max() < 0.1 * CORE
    assert result.depth.filled[11, 9]
    assert result.depth.target[11, 9] < 0.01
    assert result.depth.target[~dead].min() > 0.99


def test_a_masked_region():
    """What the masked pixels recorded, another depth with many tags, does not count."""
    mask = np.ones(SHAPE, bool)
    mask[8:13, 4:9] = False
    scene = np.where(mask, two_planes(), 11.0)
    tags = replace(acquire(3, scene, reflectivity=np.where(mask, 1.0, 30.0)), mask=mask)
    result = images(tags)
    assert off(result).mean() < 0.5 * CORE
    assert result.depth.filled[~mask].all()
    assert result.reflectivity.filled[~mask].all()
    assert np.all(result.depth.signal_tags[~mask] == 0.0)
    assert result.reflectivity.image.max() < 2.0


def test_a_hot_pixel_harms_no_neighbour():
    hot = np.zeros(SHAPE)
    hot[11, 9] = 10.0
    plain, spoilt = images(acquire(4)), images(acquire(4, hot=hot))
    around = np.zeros(SHAPE, bool)
    around[9:14, 7:12] = True
    around[11, 9] = False
    assert off(spoilt)[around].mean() < off(plain)[around].mean() + 0.5 * CORE
    others = np.ones(SHAPE, bool)
    others[11, 9] = False
    assert off(spoilt)[others].mean() < off(plain).mean() + 0.3 * CORE


def cut_by_the_gate():
    """A gate that opens at the middle of one plane's return and shuts at that of the other's."""
    scene = np.full(SHAPE, METRES * 33.35e-9)
    scene[:, 16:] = METRES * 40.0e-9
    return scene, acquire(5, scene, signal=6.0, gate=(33.35e-9, 40.0e-9))


def test_a_gate_that_cuts_the_pulse():
    scene, tags = cut_by_the_gate()
    result = images(tags)
    assert off(result, scene).mean() < 0.4 * CORE
    assert 0.7 < result.reflectivity.image.mean() < 1.1
    quick = Effort(max_iterations=300, weight="rule")
    once = depth(tags, reflectivity(tags.counts(), effort=quick).image, effort=quick)
    assert off(result, scene).mean() < 0.7 * np.abs(once.image - scene).mean()


@pytest.mark.xfail(
    strict=True, reason="depth is still 0.27 of a core inwards after two rounds, reflectivity 0.81"
)
def test_a_gate_that_cuts_the_pulse_biases_nothing():
    scene, tags = cut_by_the_gate()
    result = images(tags)
    assert off(result, scene).mean() < 0.2 * CORE
    assert result.reflectivity.image.mean() == pytest.approx(1.0, abs=0.15)


@pytest.mark.parametrize("place", [0.0, 0.02, RANGE - 0.02])
def test_a_return_at_the_edge_of_the_period(place):
    """Half of the pulse is at the other end of the record; depth may come out a period off, and no more."""
    scene = np.full(SHAPE, place)
    tags = acquire(6, scene, signal=4.0)
    assert np.ptp(tags.time) > 0.95 * PERIOD
    error = off(images(tags, priors.TotalVariation()), scene)
    error = np.minimum(error, np.abs(RANGE - error))
    assert np.median(error) < 0.5 * CORE
    assert error.mean() < CORE


@pytest.mark.parametrize("background", [0.5, 3.0])
@pytest.mark.parametrize("seed", [7, 8, 9])
def test_no_target_anywhere_is_dark(background, seed):
    result = images(acquire(seed, reflectivity=np.zeros(SHAPE), background=background))
    assert result.reflectivity.image.mean() < 0.15


@pytest.mark.parametrize("background", [0.5, 3.0])
def test_no_target_anywhere_is_told(background):
    """With every seed: with one of them, at background 3, it is told."""
    for seed in (7, 8, 9):
        result = images(acquire(seed, reflectivity=np.zeros(SHAPE), background=background))
        assert np.median(result.depth.target) < 0.2


def half_empty():
    reflectivity = np.ones(SHAPE)
    reflectivity[:, :16] = 0.0
    return acquire(8, reflectivity=reflectivity)


def test_a_scene_half_of_which_has_no_target():
    result = images(half_empty())
    assert result.depth.target[:, 18:].mean() > 0.95
    assert off(result)[:, 17:].mean() < CORE
    assert result.reflectivity.image[:, :14].mean() < 0.1
    assert result.reflectivity.image[:, 18:].mean() == pytest.approx(1.0, abs=0.15)


def test_the_half_without_target_is_told():
    assert images(half_empty()).depth.target[:, :14].mean() < 0.3


@pytest.mark.parametrize("seed", range(3))
def test_the_belief_tells_where_no_target_is_if_reflectivity_is_known(seed):
    reflectivity = np.ones(SHAPE)
    reflectivity[:, :16] = 0.0
    tags = acquire(seed, reflectivity=reflectivity)
    target = 1.0 - depth_belief(DetectionTimes(tags, 1.0)).absent
    assert target[:, :14].mean() < 0.02
    assert target[:, 18:].mean() > 0.98
    empty = acquire(seed, reflectivity=np.zeros(SHAPE))
    assert depth_belief(DetectionTimes(empty, 1.0)).absent.mean() > 0.98


def test_no_tags_at_all():
    result = images(replace(acquire(), row=np.zeros(0, int), column=np.zeros(0, int), time=np.zeros(0)))
    assert result.depth.filled.all()
    assert result.depth.target.max() < 0.5
    np.testing.assert_allclose(result.reflectivity.image, 0.0, atol=1e-3)


def test_one_tag():
    tags = acquire()
    one = TimeTags(
        [5], [6], [2.0 * 4.0 / constants.c], shape=SHAPE, trials=1000, period=PERIOD, pulse=PULSE,
        gain=tags.gain, background=0.0,
    )  # fmt: skip
    result = images(one)
    assert result.depth.image[5, 6] == pytest.approx(4.0, abs=CORE)


@pytest.mark.parametrize("factor", [0.5, 2.0, 3.0])
def test_a_wrong_background_degrades_gently(factor):
    errors = []
    for seed in range(3):
        tags = acquire(seed)
        wrong = replace(tags, background=factor * tags.background)
        errors.append([off(images(each)).mean() for each in (tags, wrong)])
    right, wrong = np.mean(errors, axis=0)
    assert wrong < 2.0 * right


def test_a_background_too_high_keeps_the_surfaces():
    tags = acquire(1)
    result = images(replace(tags, background=2.0 * tags.background))
    assert off(result).max() < 3.0 * CORE
    assert result.reflectivity.image.mean() == pytest.approx(1.0, abs=0.1)


@pytest.mark.parametrize("factor", [2.0, 3.0])
@pytest.mark.parametrize("seed", range(3))
def test_a_background_too_high_is_told(seed, factor):
    """Two detections in a thousand trials are true; the check speaks of what was declared."""
    tags = acquire(seed)
    surface = images(replace(tags, background=factor * tags.background)).depth
    assert any("times the declared background was taken" in note for note in surface.notes)
    assert surface.background.declared == pytest.approx(0.002 * factor)
    assert surface.background.found == pytest.approx(0.002, abs=4.0 * surface.background.standard_error)
    assert not surface.background.fits


@pytest.mark.parametrize("background", [100.0, 400.0])
def test_much_background_that_is_right_is_left_alone(background):
    for seed in range(10):
        assert allowed_background(acquire(seed, background=background)) > 0.97


@pytest.mark.parametrize("background", [0.5, 2.0])
def test_little_background_that_is_right_is_left_alone(background):
    taken = [allowed_background(acquire(seed, background=background)) for seed in range(40)]
    assert np.mean(np.array(taken) < 0.9) < 0.05


def test_a_pulse_with_a_tail():
    result = images(acquire(9, pulse=TAILED))
    core = METRES * 0.5e-9
    assert off(result).mean() < core
    assert result.reflectivity.image.mean() == pytest.approx(1.0, abs=0.15)


def test_pile_up():
    tags = acquire(10, signal=400.0, background=200.0, trials=200, dead_time=DeadTime(75e-9))
    result = images(tags)
    assert off(result).mean() < 0.3 * CORE
    assert result.reflectivity.image.mean() == pytest.approx(1.0, abs=0.03)


def test_a_histogram_equals_its_tags():
    tags = acquire(11, interval=0.4e-9)
    bins = np.zeros((*SHAPE, 250), int)
    np.add.at(bins, (tags.row, tags.column, (tags.time / 0.4e-9).astype(int)), 1)
    histogram = TimeHistogram(
        bins, trials=1000, period=PERIOD, pulse=PULSE, gain=tags.gain, background=tags.background,
        bin_width=0.4e-9,
    )  # fmt: skip
    one, two = images(tags), images(histogram)
    np.testing.assert_allclose(two.depth.image, one.depth.image, atol=1e-3 * CORE)
    np.testing.assert_allclose(two.reflectivity.image, one.reflectivity.image, rtol=1e-4, atol=1e-5)


def test_refractive_index_time_zero_and_offsets():
    """The same photons, moved as the settings say: the same depth, in a denser medium nearer."""
    rng = np.random.default_rng(12)
    scene = two_planes() / 1.33
    offset = rng.uniform(0.0, 3e-9, SHAPE)
    tags = acquire(12, scene, time_zero=95e-9, offset=offset, refractive_index=1.33)
    assert np.ptp(tags.time) > 0.9 * PERIOD
    assert off(images(tags), scene).mean() < 0.3 * CORE


@pytest.mark.parametrize("shape", [(1, 1), (1, 40), (40, 1)])
def test_lines_and_single_pixels(shape):
    scene = np.full(shape, 4.0)
    result = images(acquire(13, scene, signal=8.0), priors.TotalVariation())
    assert off(result, scene).mean() < CORE


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"prior": 1.0}, "prior is a float; give a prior such as"),
        ({"reflectivity_prior": "tv"}, "reflectivity_prior is a str; give a prior such as"),
        ({"tolerance": 0.0}, "tolerance is 0.0; give a relative gap between 0 and 1"),
        ({"tolerance": np.nan}, "tolerance is nan; give a relative gap between 0 and 1"),
        ({"max_iterations": 0}, "max_iterations is 0; give a whole number of at least 1"),
        ({"acquisition": "tags"}, "acquisition is a str; give recon.Counts, recon.TimeTags"),
    ],
)
def test_bad_input(arguments, message):
    arguments = {"acquisition": acquire(), **arguments}
    with pytest.raises(InputError, match=message) as caught:
        recon.reconstruct(**arguments)
    assert str(caught.value).endswith(".")
    assert "\n" not in str(caught.value)


def test_a_period_too_long_for_the_pulse_is_refused():
    tags = TimeTags([0], [0], [1e-3], shape=(2, 2), trials=9, period=1.0, pulse=PULSE, gain=0.1)
    with pytest.raises(InputError, match="times as long as the pulse; give at most"):
        recon.reconstruct(tags)
