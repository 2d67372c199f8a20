"""Small acquisitions of every kind, and a bit-for-bit comparison of two of them."""

import dataclasses

import numpy as np
import pytest

from recon.acquisition import (
    Counts,
    DeadTime,
    Frames,
    GaussianPulse,
    MarkLaw,
    SampledPulse,
    TimeHistogram,
    TimeTags,
)

SHAPE = (6, 5)


def _mask():
    mask = np.ones(SHAPE, bool)
    mask[2, 1] = False
    return mask


def _tags(seed, **settings):
    rng = np.random.default_rng(seed)
    tags = (rng.integers(0, 6, 90), rng.integers(0, 5, 90), rng.random(90) * 1e-7)
    return TimeTags(
        *tags, **{"shape": SHAPE, "trials": 700, "period": 1e-7, "pulse": GaussianPulse(0.3e-9)} | settings
    )


def _counts_plain(rng):
    return Counts(rng.integers(0, 5, SHAPE), 10, gain=1 / 3, background=0.1)


def _counts_maps(rng):
    trials = rng.random(SHAPE) * 9
    gain = rng.random(SHAPE).astype(np.float32) + 0.1
    return Counts(
        rng.integers(0, 2**40, SHAPE), trials, gain, rng.random(SHAPE), _mask(), several_per_trial=True
    )


def _tags_plain(rng):
    return _tags(rng)


def _tags_maps(rng):
    times = np.sort(rng.random(20)) * 1e-9
    return _tags(
        rng,
        pulse=SampledPulse(times, rng.random(20)),
        trials=rng.integers(1, 9, SHAPE),
        gain=rng.random(SHAPE) + 0.1,
        background=rng.random(SHAPE),
        mask=_mask(),
        time_zero=-1e-9 / 3,
        offset=rng.normal(size=SHAPE) * 1e-9,
        refractive_index=1.33,
        interval=1e-9 / 3,
    )


def _tags_clocked(rng):
    row, column = rng.integers(0, 6, 90), rng.integers(0, 5, 90)
    return TimeTags.from_ticks(
        row,
        column,
        rng.integers(300, 600, 90),
        tick=1e-10,
        shape=SHAPE,
        trials=700,
        period=1e-7,
        pulse=GaussianPulse(0.3e-9),
        dead_time=DeadTime(20e-9 / 3, 80e-9),
        gate=(1e-8 / 3, 7e-8),
        dither=rng.random(90) * 1e-8,
    )


def _tags_none(rng):
    nothing = {"shape": SHAPE, "trials": 700, "period": 1e-7, "pulse": GaussianPulse(0.3e-9)}
    return TimeTags([], [], [], dither=[], dead_time=DeadTime(0, 1e-9, reset_every_period=True), **nothing)


def _histogram(rng, **settings):
    cube = rng.poisson(0.2, (*SHAPE, 40)).astype(np.uint16)
    return TimeHistogram(cube, trials=700, period=1e-7, bin_width=1e-9 / 3, **settings)


def _histogram_plain(rng):
    return _histogram(rng, pulse=GaussianPulse(0.3e-9))


def _histogram_maps(rng):
    return _histogram(
        rng,
        pulse=SampledPulse(np.sort(rng.random(20)) * 1e-9, rng.random(20)),
        first_edge=1e-8 / 3,
        gain=rng.random(SHAPE) + 0.1,
        background=rng.random(SHAPE).astype(np.float32),
        mask=_mask(),
        time_zero=-1e-9 / 3,
        offset=rng.normal(size=SHAPE) * 1e-9,
        refractive_index=1.33,
        dead_time=DeadTime(20e-9 / 3, reset_every_period=True),
    )


def _frames_plain(rng):
    return Frames(rng.integers(0, 5, (4, *SHAPE), dtype=np.uint8), 0.1)


def _frames_maps(rng):
    return Frames(rng.integers(0, 500, (4, *SHAPE), dtype=np.int16), rng.random(SHAPE) + 0.1, _mask())


def _frames_readings(rng):
    law = MarkLaw(gain=10 / 3, variance=0.1, offset=-1 / 3, noise=0.7, ceiling=12.1)
    stack = rng.normal(3.0, 6.0, (4, *SHAPE))
    return Frames(stack, 0.1, _mask(), law=law, current=rng.random((4, 6)) + 0.5)


def _frames_of_a_current(rng):
    return Frames(rng.integers(0, 5, (4, *SHAPE), dtype=np.uint8), 0.1, current=[1, 2, 3, 4])


def _frames_less_two(rng):
    stack = rng.normal(3.0, 6.0, (6, *SHAPE))
    stack[[0, 3]] = np.nan
    with pytest.warns(UserWarning, match="frames 0, 3 of 6"):
        return Frames(stack, 0.1, law=MarkLaw(noise=1.0), current=np.arange(1, 7) / 3)


MAKERS = [
    _counts_plain, _counts_maps, _tags_plain, _tags_maps, _tags_clocked, _tags_none, _histogram_plain,
    _histogram_maps, _frames_plain, _frames_maps, _frames_readings, _frames_of_a_current, _frames_less_two,
]  # fmt: skip


@pytest.fixture(params=MAKERS, ids=[maker.__name__[1:] for maker in MAKERS])
def acquisition(request):
    """One acquisition after another: every kind, plain and with all its settings."""
    return request.param(np.random.default_rng(4))


@pytest.fixture(scope="session")
def counts():
    return _counts_maps(np.random.default_rng(5))


@pytest.fixture(scope="session")
def tags():
    return _tags_maps(np.random.default_rng(6))


@pytest.fixture(scope="session")
def clocked():
    return _tags_clocked(np.random.default_rng(8))


@pytest.fixture(scope="session")
def nothing():
    return _tags_none(np.random.default_rng(8))


@pytest.fixture(scope="session")
def histogram():
    return _histogram_maps(np.random.default_rng(9))


@pytest.fixture(scope="session")
def frames():
    return _frames_maps(np.random.default_rng(7))


@pytest.fixture(scope="session")
def readings():
    return _frames_readings(np.random.default_rng(7))


def _identical(a, b):
    if dataclasses.is_dataclass(a):
        return type(a) is type(b) and all(
            _identical(getattr(a, field.name), getattr(b, field.name)) for field in dataclasses.fields(a)
        )
    if isinstance(a, np.ndarray):
        return isinstance(b, np.ndarray) and (a.dtype, a.shape, a.tobytes()) == (
            b.dtype,
            b.shape,
            b.tobytes(),
        )
    return type(a) is type(b) and a == b


@pytest.fixture(scope="session")
def identical():
    """Whether two acquisitions agree in every bit of every field."""
    return _identical
