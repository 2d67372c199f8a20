"""Drawn frames of a beam that changes and a scene that moves and charges: what they should average."""

import numpy as np
import pytest
from scipy import stats

from recon.acquisition import MarkLaw
from recon.errors import InputError
from recon.simulate import flicker, frames

UNLIKELY = 1e-3
LAM = 0.8


def off(drawn: np.ndarray, mean: np.ndarray, eta: np.ndarray | float) -> float:
    """p value that sums over columns of independent Neyman counts have the means: sum lam eta (1 + eta)."""
    mean, eta = np.broadcast_arrays(mean, eta)
    sigma = np.sqrt(np.sum(mean * (1 + eta), axis=-1))
    z = (drawn.sum(axis=-1, dtype=float) - mean.sum(axis=-1)) / sigma
    return float(stats.chi2.sf(np.sum(z**2), z.size))


@pytest.mark.parametrize("lines", [False, True])
@pytest.mark.parametrize("hidden", [False, True])
def test_a_changing_current(seed, lines, hidden):
    rng = np.random.default_rng(50 + seed)
    current = rng.uniform(0.3, 2.0, (6, 40) if lines else 6)
    argument = {"hidden_current": current} if hidden else {"current": current}
    drawn = frames(np.full((40, 600), 2.0), LAM, 6, **argument, seed=seed)
    factor = (current if lines else np.repeat(current[:, None], 40, axis=1))[..., None]
    assert off(drawn.counts, np.broadcast_to(LAM * 2.0 * factor, drawn.counts.shape), 2.0) > UNLIKELY
    flat = np.full(drawn.counts.shape, LAM * 2.0 * factor.mean())
    assert off(drawn.counts, flat, 2.0) < 1e-6
    if hidden:
        assert drawn.current is None
    else:
        np.testing.assert_array_equal(drawn.current, current)
    assert drawn.dose == LAM


def test_known_and_hidden_currents_multiply(seed):
    known, hidden = np.linspace(0.5, 1.5, 5), flicker(5, 30, 0.4, seed=seed)
    drawn = frames(np.full((30, 900), 1.5), LAM, 5, current=known, hidden_current=hidden, seed=seed)
    mean = LAM * 1.5 * (known[:, None] * hidden)[..., None]
    assert off(drawn.counts, np.broadcast_to(mean, drawn.counts.shape), 1.5) > UNLIKELY
    np.testing.assert_array_equal(drawn.factors, np.repeat(known[:, None], 30, axis=1).astype(np.float32))


@pytest.mark.parametrize("rms", [0.03, 0.5])
def test_flicker(seed, rms):
    """Log-normal of mean 1 and relative rms r: the logarithm is normal with variance log(1 + r^2)."""
    factors = flicker(100, 200, rms, seed=seed)
    assert factors.shape == (100, 200)
    variance = np.log1p(rms**2)
    law = stats.norm(-variance / 2, np.sqrt(variance))
    assert stats.kstest(np.log(factors).ravel(), law.cdf).pvalue > UNLIKELY
    assert factors.mean() == pytest.approx(1.0, abs=4 * rms / np.sqrt(factors.size))
    assert factors.std() == pytest.approx(rms, rel=0.1)


def test_flicker_of_lines_alone(seed):
    factors = flicker(5, 200, 0.2, per_frame=False, seed=seed)
    assert factors.shape == (5, 200)
    assert np.ptp(factors, axis=0).max() == 0
    assert np.unique(factors[0]).size == 200
    assert np.all(flicker(2, 3, 0.0, seed=seed) == 1)


def test_a_drifting_scene(seed):
    """Whole shifts move the content down and right, and its edge pixels fill the gap."""
    eta = np.random.default_rng(seed).uniform(0.5, 4.0, (12, 10))
    number = 400
    drift = np.tile([[0, 0], [2, -3]], (number, 1))
    drawn = frames(eta, LAM, 2 * number, stage_drift=drift, seed=seed).counts
    rows, columns = np.clip(np.arange(12) - 2, 0, 11), np.clip(np.arange(10) + 3, 0, 9)
    moved = eta[np.ix_(rows, columns)]
    for part, truth, chance in [(0, eta, True), (1, moved, True), (1, eta, False)]:
        seen = np.moveaxis(drawn[part::2], 0, -1)
        fits = off(seen, np.broadcast_to(LAM * truth[..., None], seen.shape), truth[..., None])
        assert fits > UNLIKELY if chance else fits < 1e-6


def test_a_drift_of_part_of_a_pixel(seed):
    """A pixel averages over its area a scene that is constant in every pixel of the image."""
    eta = np.random.default_rng(seed).uniform(0.5, 4.0, (20, 25))
    eta[:, 12:] += 6.0
    drawn = frames(eta, LAM, 400, stage_drift=np.tile([0.4, -1.3], (400, 1)), seed=seed).counts
    fine = np.kron(eta, np.ones((10, 10)))  # tenths of a pixel
    moved = np.roll(fine, (4, -13), axis=(0, 1)).reshape(20, 10, 25, 10).mean(axis=(1, 3))
    inner = np.s_[1:, :-2]
    seen, truth = np.moveaxis(drawn, 0, -1)[inner], moved[inner][..., None]
    assert off(seen, np.broadcast_to(LAM * truth, seen.shape), truth) > UNLIKELY


def test_a_drift_makes_no_new_extremes():
    eta = np.zeros((20, 20))
    eta[:, 10:] = 5.0
    drawn = frames(eta, 50.0, 20, stage_drift=np.full((20, 2), 0.5), seed=1).counts.astype(float)
    assert not drawn[:, :, :10].any()
    for columns, mean in [(np.s_[10:11], 2.5), (np.s_[11:], 5.0)]:
        assert off(drawn[:, :, columns], np.full(drawn[:, :, columns].shape, 50 * mean), mean) > UNLIKELY


@pytest.mark.parametrize("charging", [-0.5, 0.8, -1.0])
def test_charging(seed, charging):
    drawn = frames(np.full((60, 200), 2.0), LAM, 9, charging=charging, seed=seed).counts.reshape(9, -1)
    eta = 2.0 * (1 + charging * np.arange(9) / 8)[:, None]
    if charging == -1.0:
        assert not drawn[-1].any()
        drawn, eta = drawn[:-1], eta[:-1]
    assert off(drawn, np.broadcast_to(LAM * eta, drawn.shape), eta) > UNLIKELY


def test_one_frame_does_not_charge():
    eta = np.full((20, 30), 2.0)
    np.testing.assert_array_equal(
        frames(eta, LAM, 1, charging=0.5, seed=3).counts, frames(eta, LAM, 1, seed=3).counts
    )


def test_faults_that_do_nothing_change_no_draw():
    eta = np.random.default_rng(2).uniform(0, 4, (20, 30))
    plain = frames(eta, LAM, 3, seed=4).counts
    settings = {"current": np.ones(3), "hidden_current": np.ones((3, 20)), "stage_drift": np.zeros((3, 2))}
    np.testing.assert_array_equal(frames(eta, LAM, 3, **settings, charging=0.0, seed=4).counts, plain)


def test_types_widen_with_the_frames():
    drawn = frames(np.full((20, 20), 100.0), 1.0, 3, hidden_current=[0.1, 10.0, 0.1], seed=5).counts
    assert drawn.dtype == np.uint16
    assert drawn[1].mean() == pytest.approx(1000, rel=0.1)
    assert drawn[2].mean() < 20


GOOD = {"eta": np.ones((4, 5)), "dose": 0.5, "frames": 3, "seed": 0}
NAN = np.array([[0.0, 0.0], [0.0, np.nan], [0.0, 0.0]])


@pytest.mark.parametrize(
    ("bad", "message"),
    [
        ({"current": np.ones(4)}, "^current has 4 entries for 3 frames"),
        ({"current": [1, 0, 1]}, r"^current at \(1,\) is 0"),
        ({"hidden_current": np.ones((3, 5))}, "^hidden_current has 5 entries a frame for 4 rows"),
        ({"hidden_current": [1.0, np.nan, 1.0]}, r"hidden_current at \(1,\) is nan"),
        ({"stage_drift": np.zeros((2, 2))}, r"stage_drift has shape \(2, 2\); give \(3, 2\)"),
        ({"stage_drift": 1.0}, r"stage_drift has shape \(\)"),
        ({"stage_drift": NAN}, r"stage_drift at \(1, 1\) is nan; give shifts in pixels"),
        ({"charging": -1.5}, r"charging is -1\.5; give the relative change"),
        ({"charging": np.nan}, "charging is nan"),
        ({"charging": [0.1]}, r"charging has shape \(1,\)"),
        ({"dose": 1e5, "hidden_current": [1.0, 1e6, 1.0]}, "eta and dose call for 1e.11 particles"),
        ({"eta": np.full((4, 5), 1e6), "charging": 1e4}, "eta and dose call for"),
        ({"eta": np.full((4, 5), 1e308), "charging": 1e4}, "eta and dose call for inf"),
    ],
)
def test_impossible_faults_are_refused(bad, message):
    with pytest.raises(InputError, match=message):
        frames(**GOOD | bad)
    with pytest.raises(InputError, match=message):
        frames(**GOOD | bad, law=MarkLaw(noise=1.0))


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((0, 4, 0.1), "frames is 0"),
        ((3, 2.5, 0.1), "rows is 2.5"),
        ((3, 4, -0.1), r"rms is -0\.1; give the rms of a factor of mean 1"),
        ((3, 4, np.nan), "rms is nan"),
        ((10**6, 10**6, 0.1), r"frames and rows call for 1e\+12 lines"),
    ],
)
def test_impossible_flicker_is_refused(arguments, message):
    with pytest.raises(InputError, match=message):
        flicker(*arguments, seed=0)


def test_impossible_switches_and_seeds_are_refused():
    with pytest.raises(InputError, match="per_frame is str"):
        flicker(3, 4, 0.1, per_frame="no", seed=0)
    with pytest.raises(InputError, match="seed is None"):
        flicker(3, 4, 0.1, seed=None)
