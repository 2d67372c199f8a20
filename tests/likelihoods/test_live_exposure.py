"""Dead time and gates in the likelihood of depth, against quadrature and photons walked one by one."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from scipy import constants
from scipy.integrate import quad

from recon.acquisition import DeadTime, GaussianPulse, SampledPulse, TimeTags
from recon.errors import InputError
from recon.likelihoods import DetectionTimes
from recon.testing import check_likelihood

SEEDS = range(3)
PERIOD = 20e-9
RMS = 0.4e-9
GAUSSIAN = GaussianPulse(RMS)
TIMES = np.arange(-1.5, 4.0, 0.05) * 1e-9
TAILED = SampledPulse(
    TIMES, np.where(TIMES < 0.0, np.exp(-0.5 * (TIMES / 0.3e-9) ** 2), np.exp(-TIMES / 0.5e-9))
)
METRES = 0.5 * constants.c  # per second
CASES = {
    "free": {"dead_time": DeadTime(7e-9)},
    "free, over a period": {"dead_time": DeadTime(27e-9)},
    "free, three periods and a bit": {"dead_time": DeadTime(3e-9, 60.5e-9)},
    "reset": {"dead_time": DeadTime(7e-9, reset_every_period=True)},
    "reset, over a period": {"dead_time": DeadTime(1e-6, reset_every_period=True)},
    "gate": {"gate": (4e-9, 15e-9)},
    "gate, free": {"gate": (4e-9, 15e-9), "dead_time": DeadTime(7e-9)},
    "gate, reset": {"gate": (4e-9, 15e-9), "dead_time": DeadTime(9e-9, reset_every_period=True)},
}


def record(echo, signal, background, trials, period, rng, rms=RMS, dead_time=None, gate=None):
    """Tags (s within the period) of one pixel: photons of all periods in their order, one after the other."""
    gate = (0.0, period) if gate is None else gate
    count = rng.poisson(signal * trials)
    turn = rng.integers(trials, size=count) * period
    photons = turn + np.mod(echo + rms * rng.standard_normal(count), period)
    photons = np.append(photons, trials * period * rng.random(rng.poisson(background * trials)))
    tags, blind_to = [], -np.inf
    for t in np.sort(photons):
        start = period * np.floor(t / period)
        if t >= blind_to and gate[0] <= t - start < gate[1]:
            tags.append(min(t - start, np.nextafter(period, 0.0)))
            if dead_time is not None:
                blind_to = t + dead_time.blind
                if dead_time.reset_every_period:
                    blind_to = min(blind_to, start + period)
    return np.array(tags)


def acquire(seed, shape=(2, 2), signal=1.5, background=1.0, trials=6, echo=None, pulse=GAUSSIAN, **settings):
    """Tags of random depths with an offset per pixel, the expected signal, and the depths."""
    rng = np.random.default_rng(seed)
    offset = rng.uniform(-2e-9, 3e-9, shape)
    late = rng.uniform(0.0, PERIOD, shape) if echo is None else np.full(shape, echo)
    strength = signal * rng.uniform(0.5, 1.0, shape)
    tags = [
        record(t, s, background, trials, PERIOD, rng, **settings)
        for t, s in zip(late.ravel(), strength.ravel(), strict=True)
    ]
    pixel = np.repeat(np.arange(late.size), [t.size for t in tags])
    row, column = np.unravel_index(pixel, shape)
    acquisition = TimeTags(
        row, column, np.concatenate(tags), shape=shape, trials=trials, period=PERIOD, pulse=pulse,
        gain=0.5, background=background, offset=offset, **settings,
    )  # fmt: skip
    return acquisition, 2.0 * strength, METRES * np.mod(late - offset, PERIOD)


def times_of(tags, i, j):
    time = tags.time if tags.dither is None else np.mod(tags.time - tags.dither, tags.period)
    return time[(tags.row == i) & (tags.column == j)]


def awake(tags, time, t):
    """E(t): the periods less the windows over t, one by one; t within the period."""
    lost = np.zeros_like(t)
    if tags.dead_time is not None:
        for tag in time:
            end = tag + tags.dead_time.blind
            if tags.dead_time.reset_every_period:
                lost += (t > tag) & (t < end)
            else:
                for turn in range(int(tags.dead_time.blind / tags.period) + 2):
                    lost += (t + turn * tags.period > tag) & (t + turn * tags.period < end)
    exposure = np.maximum(tags.trials - lost, 0.0)  # windows that reach over the last period count too
    return exposure if tags.gate is None else np.where((t > tags.gate[0]) & (t < tags.gate[1]), exposure, 0.0)


def breaks(tags, time):
    """Where E(t) may jump."""
    places = [0.0, tags.period, *time]
    if tags.dead_time is not None:
        places += list(np.mod(time + tags.dead_time.blind, tags.period))
    return np.unique(places if tags.gate is None else [*places, *tags.gate])


def density(tags, late):
    """The pulse's density at a time, all periods summed, 1/s."""
    late = np.mod(late, tags.period)
    return tags.pulse.density(late) + tags.pulse.density(late - tags.period)


def integral(tags, time, function, ends=()):
    """Integral over the period of E(t) function(t), by quadrature from jump to jump."""
    places = np.unique([*breaks(tags, time), *np.linspace(0.0, tags.period, 17), *ends])
    total = 0.0
    for a, b in pairwise(places):
        exposure = awake(tags, time, np.array([0.5 * (a + b)]))[0]
        if b - a > 1e-12 * tags.period:  # places that differ by rounding only
            total += exposure * quad(function, a, b, epsabs=1e-10, epsrel=1e-10)[0]
    return total


def delay(tags, z, i, j):
    return tags.offset[i, j] + z[i, j] / METRES


@pytest.mark.parametrize("name", CASES)
def test_exposure_is_that_of_quadrature(name):
    for seed in SEEDS:
        tags, reflectivity, _ = acquire(seed, **CASES[name])
        likelihood = DetectionTimes(tags, reflectivity)
        edge = METRES * (15e-9 - tags.offset)  # where the gates close, or at the period's end
        rng = np.random.default_rng(seed)
        for z in (edge, -METRES * tags.offset, rng.uniform(-9.0, 9.0, tags.shape)):
            exposure = likelihood.exposure_at(z)
            for i, j in np.ndindex(tags.shape):
                late = delay(tags, z, i, j)
                expected = integral(tags, times_of(tags, i, j), lambda t, a=tags, d=late: density(a, t - d))
                assert exposure[i, j] == pytest.approx(expected, abs=1e-7 * tags.trials)


@pytest.mark.parametrize("dead_time", [DeadTime(7e-9), DeadTime(27e-9)])
def test_windows_of_coarse_tags_cover_in_part(dead_time):
    """The window starts anywhere in the interval: the mean over 1000 exact places."""
    tags, reflectivity, truth = acquire(1, dead_time=dead_time)
    width = PERIOD / 25
    coarse = replace(tags, time=(np.floor(tags.time / width) + 0.5) * width, interval=width)
    z = truth + METRES * 0.5e-9
    places = (np.arange(1000) + 0.5) / 1000 - 0.5
    exact = [
        DetectionTimes(replace(coarse, time=coarse.time + width * place, interval=None), reflectivity)
        for place in places
    ]
    expected = np.mean([likelihood.exposure_at(z) for likelihood in exact], axis=0)
    np.testing.assert_allclose(DetectionTimes(coarse, reflectivity).exposure_at(z), expected, atol=1e-3)


@pytest.mark.parametrize("name", CASES)
def test_what_lies_round_a_return(name):
    for seed in SEEDS:
        tags, reflectivity, truth = acquire(seed, **CASES[name])
        reach = np.random.default_rng(seed).uniform(0.01, 0.6, tags.shape)
        reach[0, 0] = METRES * PERIOD  # all there is
        inside, signal, uniform = DetectionTimes(tags, reflectivity).gated(truth, reach)
        for i, j in np.ndindex(tags.shape):
            time, late, half = times_of(tags, i, j), delay(tags, truth, i, j), reach[i, j] / METRES

            def within(t, late=late, half=half):
                off = t - late
                return np.abs(off - PERIOD * np.round(off / PERIOD)) < half

            ends = np.mod([late - half, late + half], PERIOD)
            assert inside[i, j] == np.sum(within(time))
            by_pulse = integral(tags, time, lambda t, a=tags, d=late: density(a, t - d) * within(t), ends)
            by_time = integral(tags, time, lambda t: within(t) / PERIOD, ends)
            assert signal[i, j] == pytest.approx(by_pulse, abs=1e-7 * tags.trials)
            assert uniform[i, j] == pytest.approx(by_time, abs=1e-7 * tags.trials)


def test_nothing_is_lost_without_dead_time_or_gate():
    tags, reflectivity, truth = acquire(0)
    likelihood = DetectionTimes(tags, reflectivity)
    np.testing.assert_array_equal(likelihood.exposure_at(truth), np.full(tags.shape, 6.0))
    inside, signal, uniform = likelihood.gated(truth, METRES * RMS)
    np.testing.assert_allclose(signal, 6.0 * 0.6826894921, rtol=1e-9)
    np.testing.assert_allclose(uniform, 6.0 * 2.0 * RMS / PERIOD, rtol=1e-9)
    for i, j in np.ndindex(tags.shape):
        off = times_of(tags, i, j) - delay(tags, truth, i, j)
        assert inside[i, j] == np.sum(np.abs(off - PERIOD * np.round(off / PERIOD)) < RMS)


def loss(tags, strength, z, i, j):
    """Integral of E r - sum of log r, on a fine grid of times."""
    time, late = times_of(tags, i, j), delay(tags, z, i, j)

    def rate(t):
        return strength[i, j] * density(tags, t - late) + tags.background / PERIOD

    fine = (np.arange(100_000) + 0.5) * PERIOD / 100_000
    expected = np.sum(awake(tags, time, fine) * rate(fine)) * PERIOD / fine.size
    return expected - np.sum(np.log(rate(time)))


@pytest.mark.parametrize("name", CASES)
def test_value_and_constant_give_the_log_likelihood(name):
    for seed in SEEDS:
        tags, reflectivity, truth = acquire(seed, **CASES[name])
        likelihood = DetectionTimes(tags, reflectivity)
        used = likelihood.has_data
        for z in (truth, np.random.default_rng(seed).uniform(-9.0, 9.0, tags.shape)):
            expected = [loss(tags, tags.gain * reflectivity, z, i, j) for i, j in np.argwhere(used)]
            total = likelihood.value(z) + likelihood.constant
            assert total == pytest.approx(np.sum(expected), abs=5e-3)


@pytest.mark.parametrize("pulse", [GAUSSIAN, TAILED])
@pytest.mark.parametrize("name", CASES)
def test_the_estimate_is_the_best_of_all_depths(name, pulse):
    """With the signal outside the gate too, and little background, where losses outweigh tags."""
    for seed in SEEDS:
        for signal, background in ((1.5, 1.0), (0.2, 2.0), (4.0, 0.05)):
            settings = {"signal": signal, "background": background, "trials": 20, "pulse": pulse}
            tags, reflectivity, _ = acquire(seed, **settings, **CASES[name])
            likelihood = DetectionTimes(tags, reflectivity)
            best = likelihood.estimate()[likelihood.has_data]
            assert likelihood.value(likelihood.estimate()) == pytest.approx(0.0, abs=1e-6 * tags.time.size)
            assert np.all((best >= 0.0) & (best <= METRES * PERIOD))
            for z in np.linspace(0.0, METRES * PERIOD, 1001):
                assert likelihood.value_map(np.full(tags.shape, z)).min() >= -1e-9


@pytest.mark.parametrize("name", CASES)
def test_derivatives_are_those_of_differences(name):
    tags, reflectivity, truth = acquire(1, **CASES[name])
    likelihood = DetectionTimes(tags, reflectivity)
    width, step = METRES * RMS, 1e-3 * METRES * RMS
    for off in (-1.0, -0.3, 0.0, 0.5, 1.7):
        z = truth + off * width
        values = [likelihood.value_map(z + k * step) for k in (-2, -1, 0, 1, 2)]
        slope = (values[0] - 8.0 * values[1] + 8.0 * values[3] - values[4]) / (12.0 * step)
        bend = (-values[0] + 16.0 * values[1] - 30.0 * values[2] + 16.0 * values[3] - values[4]) / (
            12.0 * step**2
        )
        np.testing.assert_allclose(likelihood.gradient(z), slope, rtol=1e-6, atol=1e-6 / width)
        np.testing.assert_allclose(likelihood.curvature(z), bend, rtol=1e-5, atol=1e-4 / width**2)


@pytest.mark.parametrize("pulse", [GAUSSIAN, TAILED])
@pytest.mark.parametrize("name", CASES)
def test_the_parabola_touches_and_lies_above(name, pulse):
    tags, reflectivity, truth = acquire(2, signal=5.0, pulse=pulse, **CASES[name])
    likelihood = DetectionTimes(tags, reflectivity)
    for off in (-0.4, 0.0, 0.2, 1.0):
        z = truth + off
        above = likelihood.majorise(z)
        np.testing.assert_allclose(above.gradient(z), likelihood.gradient(z), rtol=1e-4, atol=1e-3)
        value, slope, bend = likelihood.value_map(z), likelihood.gradient(z), above.curvature(z)
        for move in np.append(np.linspace(-3.0, 3.0, 301), np.linspace(-0.1, 0.1, 101)):
            parabola = value + slope * move + 0.5 * bend * move**2
            assert np.all(likelihood.value_map(z + move) <= parabola + 1e-6 * (1.0 + np.abs(parabola)))


@pytest.mark.parametrize("name", CASES)
def test_majorising_and_minimising_never_rises_and_ends_stationary(name):
    for seed in SEEDS:
        tags, reflectivity, truth = acquire(seed, signal=3.0, trials=30, **CASES[name])
        likelihood = DetectionTimes(tags, reflectivity)
        z = truth + METRES * RMS * np.random.default_rng(seed).standard_normal(tags.shape)
        before = likelihood.value_map(z)
        for _ in range(300):
            z = likelihood.majorise(z).estimate().astype(np.float64)
            after = likelihood.value_map(z)
            assert np.all(after <= before + 1e-5 * (1.0 + before))
            before = after
        informed = likelihood.fisher_information(z) * (METRES * RMS) ** 2 > 1.0
        score = likelihood.gradient(z) / np.sqrt(likelihood.fisher_information(z) + 1e-9)
        assert np.all(np.abs(score[informed]) < 0.05)


@pytest.mark.parametrize("name", CASES)
def test_information_is_that_of_quadrature(name):
    tags, reflectivity, truth = acquire(3, **CASES[name])
    likelihood = DetectionTimes(tags, reflectivity)
    information = likelihood.fisher_information(truth)
    for i, j in np.argwhere(likelihood.has_data):
        late, strength = delay(tags, truth, i, j), tags.gain * reflectivity[i, j]

        def score(t, late=late, strength=strength):
            off = t - late
            off -= PERIOD * np.round(off / PERIOD)
            p = strength * tags.pulse.density(off)
            return (p * off / RMS**2 / METRES) ** 2 / (p + tags.background / PERIOD)

        expected = integral(tags, times_of(tags, i, j), score)
        assert information[i, j] == pytest.approx(expected, rel=5e-3, abs=1e-3 / (METRES * RMS) ** 2)


@pytest.mark.parametrize("name", CASES)
def test_the_contract_is_kept(name):
    """The return well inside the gate: what never reaches the detector tells nothing."""
    settings = {"shape": (6, 8), "signal": 1.0, "background": 0.3, "trials": 40, "echo": 9e-9}
    tags, reflectivity, _ = acquire(4, **settings, **CASES[name])
    mask = np.ones(tags.shape, bool)
    mask[2, 3:5] = False
    check_likelihood(DetectionTimes(replace(tags, mask=mask), reflectivity), seed=list(CASES).index(name))


def test_the_contract_is_kept_by_a_fine_clock_and_a_tailed_pulse():
    settings = {"shape": (6, 8), "signal": 1.0, "background": 0.3, "trials": 40, "echo": 9e-9}
    tags, reflectivity, _ = acquire(5, **settings, dead_time=DeadTime(7e-9))
    check_likelihood(DetectionTimes(replace(tags, pulse=TAILED), reflectivity))
    interval = 0.1e-9
    centres = (np.floor(tags.time / interval) + 0.5) * interval
    check_likelihood(DetectionTimes(replace(tags, time=centres, interval=interval), reflectivity))


def piled_up(seed, rms=1e-9):
    """64 pixels of 500 periods of 100 ns, dead time 75 ns, 2 signal photons at 40 ns and 1 other."""
    rng = np.random.default_rng(seed)
    dead_time = DeadTime(75e-9)
    tags = [record(40e-9, 2.0, 1.0, 500, 100e-9, rng, rms, dead_time) for _ in range(64)]
    pixel = np.repeat(np.arange(64), [t.size for t in tags])
    return TimeTags(
        pixel // 8, pixel % 8, np.concatenate(tags), shape=(8, 8), trials=500, period=100e-9,
        pulse=GaussianPulse(rms), background=1.0, dead_time=dead_time,
    )  # fmt: skip


@pytest.mark.parametrize("seed", SEEDS)
def test_depth_of_a_piled_up_pixel_does_not_walk(seed):
    tags = piled_up(seed)
    likelihood = DetectionTimes(tags, 2.0)
    estimate = likelihood.estimate().astype(np.float64)
    error = estimate / METRES - 40e-9
    bound = 1.0 / np.sqrt(likelihood.fisher_information(np.full((8, 8), METRES * 40e-9))) / METRES
    assert abs(np.mean(error)) < 4.0 * np.mean(bound) / 8.0
    assert np.sqrt(np.mean((error / bound) ** 2)) == pytest.approx(1.0, abs=0.35)
    ignoring = DetectionTimes(replace(tags, dead_time=None), 2.0).estimate().astype(np.float64)
    assert np.mean(ignoring) / METRES < 39.6e-9


@pytest.mark.parametrize("seed", SEEDS)
def test_the_count_round_a_return_over_its_live_exposure_is_the_signal(seed):
    tags = piled_up(seed)
    inside, signal, uniform = DetectionTimes(tags, 2.0).gated(np.full((8, 8), METRES * 40e-9), METRES * 4e-9)
    found = (inside.sum() - 1.0 * uniform.sum()) / signal.sum()
    assert found == pytest.approx(2.0, abs=4.0 * np.sqrt(inside.sum()) / signal.sum())
    assert inside.sum() < 0.6 * 2.0 * 500 * 64


@pytest.mark.parametrize("name", ["free", "reset", "gate, free"])
def test_a_dither_is_taken_off(name):
    tags, reflectivity, z = acquire(6, **CASES[name])
    dither = np.random.default_rng(6).uniform(0.0, 3e-9, tags.time.size)
    moved = replace(tags, time=np.mod(tags.time + dither, PERIOD), dither=dither)
    one, other = DetectionTimes(tags, reflectivity), DetectionTimes(moved, reflectivity)
    np.testing.assert_allclose(other.value_map(z), one.value_map(z), rtol=1e-8, atol=1e-8)
    np.testing.assert_allclose(other.exposure_at(z), one.exposure_at(z), rtol=1e-8)


def test_pixels_without_tags_and_masked_ones():
    """They tell nothing, but what would have been seen of a pulse there is known."""
    tags = TimeTags(
        [0, 0], [0, 2], [9e-9, 9e-9], shape=(1, 4), trials=np.array([[5, 6, 7, 0]]), period=PERIOD,
        pulse=GAUSSIAN, gate=(4e-9, 15e-9), dead_time=DeadTime(3e-9), background=0.1,
        mask=np.array([[True, True, False, True]]),
    )  # fmt: skip
    likelihood = DetectionTimes(tags, 1.0)
    np.testing.assert_array_equal(likelihood.has_data, [[True, False, False, False]])
    z = np.full((1, 4), METRES * 12e-9)
    for each in (likelihood.value_map, likelihood.gradient, likelihood.curvature, likelihood.residuals):
        np.testing.assert_array_equal(each(z)[0, 1:], 0.0)
    np.testing.assert_allclose(likelihood.exposure_at(z), [[4.5, 6.0, 6.5, 0.0]], rtol=1e-9)
    np.testing.assert_allclose(likelihood.exposure_at(z + METRES * 6e-9), 0.0, atol=1e-9)


@pytest.mark.parametrize("settings", [{}, *CASES.values()])
def test_no_tag_at_all(settings):
    nothing = np.zeros(0)
    tags = TimeTags(
        nothing, nothing, nothing, shape=(2, 2), trials=5, period=PERIOD, pulse=GAUSSIAN, **settings
    )
    likelihood = DetectionTimes(tags, 1.0)
    z = np.full((2, 2), METRES * 9e-9)
    np.testing.assert_allclose(likelihood.estimate(), 0.5 * METRES * PERIOD, rtol=1e-6)
    for name in ("value_map", "gradient", "curvature", "fisher_information", "residuals", "signal_tags"):
        np.testing.assert_array_equal(getattr(likelihood, name)(z), np.zeros((2, 2)))
    assert likelihood.constant == 0.0
    np.testing.assert_allclose(likelihood.exposure_at(z), 5.0, rtol=1e-9)
    inside, signal, _ = likelihood.gated(z, METRES * RMS)
    np.testing.assert_array_equal(inside, 0)
    np.testing.assert_allclose(signal, 5.0 * 0.6826894921, rtol=1e-9)
    check_likelihood(likelihood)


@pytest.mark.parametrize("reach", [0.0, -1.0, np.nan])
def test_bad_reach(reach):
    tags, reflectivity, z = acquire(0)
    with pytest.raises(InputError, match="reach is"):
        DetectionTimes(tags, reflectivity).gated(z, reach)
