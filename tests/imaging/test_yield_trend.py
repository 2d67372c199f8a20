"""Changes of yield and current over the dwell, against simulations that have them or not."""

import numpy as np
import pytest

import recon
from recon.errors import InputError
from recon.imaging.yield_trend import yield_trend

FRAMES, DOSE = 48, 0.125
ROW, COLUMN = np.mgrid[:48, :48]
ETA = 1.2 + 1.5 * COLUMN / 48 + 1.5 * ((ROW // 12) % 2)


def trend(seed: int, dose: float = DOSE, frames: int = FRAMES, **faults: object):
    return yield_trend(recon.simulate.frames(ETA, dose, frames, seed=seed, **faults), ETA)


@pytest.mark.parametrize(("dose", "frames"), [(DOSE, FRAMES), (5.0, 6)])
def test_a_steady_dwell_seldom_raises_an_alarm(dose: float, frames: int) -> None:
    found = [trend(seed, dose, frames) for seed in range(200)]
    alarms = np.mean([t.p_value < 0.05 for t in found])
    assert 0.005 <= alarms <= 0.095  # 5 % nominal, four standard errors each way
    assert sum(t.cause != "none" for t in found) <= 8  # 1 % nominal
    for part, error in (("change", "standard_error"), ("yield_change", "yield_error")):
        pulls = [getattr(t, part) / getattr(t, error) for t in found]
        assert abs(np.mean(pulls)) < 0.28
        assert 0.85 < np.std(pulls) < 1.2


@pytest.mark.parametrize("seed", range(6))
def test_charging_is_seen_and_told_from_the_beam(seed: int) -> None:
    found = trend(seed, charging=-0.25)
    true = -0.25 / 0.875  # of the mean over the dwell
    assert found.p_value < 0.01
    assert found.cause == "yield"
    assert abs(found.change - true) < 4.0 * found.standard_error
    assert abs(found.yield_change - true) < 4.0 * found.yield_error + 0.02
    assert "charging" in found.note


@pytest.mark.parametrize("seed", range(6))
def test_a_fading_beam_is_seen_and_told_from_charging(seed: int) -> None:
    found = trend(seed, hidden_current=np.linspace(1.15, 0.85, FRAMES))
    assert found.p_value < 0.01
    assert found.cause == "current"
    assert abs(found.current_change + 0.3) < 4.0 * found.current_error + 0.02


def test_both_at_once() -> None:
    found = trend(0, charging=-0.25, hidden_current=np.linspace(1.15, 0.85, FRAMES))
    assert found.cause == "both"


def test_a_recorded_current_is_no_trend() -> None:
    found = [trend(seed, current=np.linspace(1.5, 0.5, FRAMES)) for seed in range(20)]
    assert sum(t.cause == "none" for t in found) >= 18


def test_jumps_of_the_beam_are_uneven() -> None:
    jumps = 1.0 + 0.2 * (np.arange(FRAMES) % 2)
    found = trend(1, hidden_current=jumps)
    assert found.p_value < 1e-4
    assert found.cause == "uneven"


def test_one_bright_pair_of_frames_does_not_tell_the_cause() -> None:
    found = trend(3, 200.0, 2, hidden_current=np.array([1.05, 0.95]))
    assert found.p_value < 0.01
    assert found.cause == "unknown"


def test_the_image_may_be_left_to_it() -> None:
    drawn = recon.simulate.frames(ETA, DOSE, FRAMES, seed=5, charging=0.3)
    own, given = yield_trend(drawn), yield_trend(drawn, ETA)
    assert own.change == pytest.approx(given.change, abs=0.3 * given.standard_error)
    assert own.standard_error == pytest.approx(given.standard_error, rel=0.05)
    assert own.cause == given.cause == "yield"


def test_masked_pixels_do_not_count() -> None:
    drawn = recon.simulate.frames(ETA, DOSE, FRAMES, seed=6)
    counts, mask = drawn.counts.copy(), np.ones(ETA.shape, bool)
    mask[:10] = False
    counts[:, :10] = np.arange(FRAMES)[:, None, None]
    assert yield_trend(recon.Frames(counts, DOSE, mask), ETA).cause == "none"


def test_what_cannot_be_used_is_refused() -> None:
    with pytest.raises(InputError, match="one frame"):
        yield_trend(recon.Frames(np.ones((1, 8, 8), int), 1.0))
    with pytest.raises(InputError, match="readings"):
        yield_trend(recon.Frames(np.ones((2, 8, 8)), 1.0, law=recon.MarkLaw(noise=0.1)))
    with pytest.raises(InputError, match="no electron"):
        yield_trend(recon.Frames(np.zeros((2, 8, 8), int), 1.0))
    with pytest.raises(InputError, match="result_image"):
        yield_trend(recon.Frames(np.ones((2, 8, 8), int), 1.0), np.ones((8, 9)))
