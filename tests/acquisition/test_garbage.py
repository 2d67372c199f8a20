"""Whatever they are given, constructors make an acquisition or raise InputError: nothing else, no warning."""

import contextlib

import numpy as np
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from recon.acquisition import Counts, DeadTime, Frames, GaussianPulse, SampledPulse, TimeHistogram, TimeTags
from recon.errors import InputError

fuzz = settings(derandomize=True, deadline=None, database=None, max_examples=250)
fuzz_less = settings(fuzz, max_examples=80)


class Hostile:
    def __array__(self, dtype=None, copy=None):
        raise RuntimeError("no array here")


KINDS = st.one_of(
    hnp.integer_dtypes(endianness="?"),
    hnp.unsigned_integer_dtypes(endianness="?"),
    hnp.floating_dtypes(endianness="?", sizes=(16, 32, 64)),
    hnp.boolean_dtypes(),
    hnp.complex_number_dtypes(),
    hnp.datetime64_dtypes(),
    hnp.unicode_string_dtypes(max_len=3),
    st.just(np.dtype(np.longdouble)),
)
SHAPES = st.one_of(
    st.sampled_from([(), (2,), (2, 3), (4, 2, 3), (0,), (0, 3), (1, 1)]),
    hnp.array_shapes(min_dims=0, max_dims=4, min_side=0, max_side=4),
)
GARBAGE = st.one_of(
    hnp.arrays(KINDS, SHAPES),
    st.floats(),
    st.integers(),
    st.none(),
    st.booleans(),
    st.text(max_size=3),
    st.binary(max_size=3),
    st.complex_numbers(),
    st.recursive(st.one_of(st.integers(-1, 3), st.floats(), st.none()), st.lists, max_leaves=6),
    st.dictionaries(st.integers(), st.integers(), max_size=2),
    st.just(Hostile()),
    st.just(np.ma.masked_all((2, 3))),
)


NUMBERS = st.one_of(st.integers(0, 3), st.floats(0, 2))
ODD = st.sampled_from([-1.0, 0.5, np.nan, np.inf, -np.inf, 5e-324, 1e308])
ALMOST = hnp.arrays(float, st.sampled_from([(2, 3), (4,), (2, 2, 3)]), elements=st.one_of(NUMBERS, ODD))
BAD = st.one_of(GARBAGE, ALMOST, ODD)
SETTING = st.one_of(st.floats(0.5, 2), hnp.arrays(np.float32, (2, 3), elements=st.floats(0.5, 2, width=32)))
TRIALS = st.one_of(st.integers(2, 4), hnp.arrays(int, (2, 3), elements=st.integers(1, 4)))
MASK = st.one_of(st.none(), hnp.arrays(bool, (2, 3)))
REFUSAL = contextlib.suppress(InputError)


def spoiled(**good):
    """Arguments of which up to two are bad, so that every check is reached."""

    def spoil(names):
        return st.fixed_dictionaries({name: BAD if name in names else good[name] for name in good})

    return st.sets(st.sampled_from(sorted(good)), max_size=2).flatmap(spoil)


def integers(shape, high):
    return hnp.arrays(hnp.integer_dtypes(), shape, elements=st.integers(0, high))


@fuzz
@given(
    spoiled(
        detections=integers((2, 3), 3),
        trials=TRIALS,
        gain=SETTING,
        background=SETTING,
        mask=MASK,
        several_per_trial=st.booleans(),
    )
)
def test_counts(arguments):
    with REFUSAL:
        counts = Counts(**arguments)
        assert np.min(counts.exposure) >= 0
        assert np.max(counts.exposure) > 0
        assert counts.detections.min() >= 0


@fuzz
@given(spoiled(counts=integers((2, 2, 3), 9), dose=SETTING, mask=MASK))
def test_frames(arguments):
    with REFUSAL:
        frames = Frames(**arguments)
        assert frames.counts.shape == (frames.frames, *frames.shape)
        assert np.all(np.asarray(frames.dose) > 0)


def check_pulse(pulse):
    t = np.linspace(*pulse.support, 5)
    assert np.isfinite([pulse.density(t), pulse.cumulative(t)]).all()
    assert not np.isnan(pulse.score(t)).any()  # without bound where the density is next to nothing
    assert np.isfinite([pulse.mean, pulse.rms]).all()
    assert pulse.rms > 0


@fuzz
@given(st.one_of(BAD, st.floats(1e-20, 1e12)))
def test_gaussian_pulses(rms):
    with REFUSAL:
        check_pulse(GaussianPulse(rms))


TIMES = st.sets(st.floats(-1, 1), min_size=4, max_size=4).map(sorted)
VALUES = hnp.arrays(float, 4, elements=st.floats(0, 1e308))


@fuzz
@given(spoiled(times=TIMES, values=VALUES))
def test_sampled_pulses(arguments):
    with REFUSAL:
        check_pulse(SampledPulse(**arguments))


@fuzz
@given(
    spoiled(
        row=integers(4, 1),
        column=integers(4, 2),
        time=hnp.arrays(float, 4, elements=st.floats(0, 2, exclude_max=True)),
        shape=st.just((2, 3)),
        trials=TRIALS,
        period=st.just(2.0),
        pulse=st.just(GaussianPulse(1e-2)),
        gain=SETTING,
        background=SETTING,
        mask=MASK,
        time_zero=st.floats(-1, 1),
        offset=SETTING,
        refractive_index=st.floats(1, 2),
        interval=st.one_of(st.none(), st.floats(0.1, 2)),
        dead_time=st.sampled_from([None, DeadTime(0.9), DeadTime(0.0, 0.9, reset_every_period=True)]),
        gate=st.sampled_from([None, (0.0, 2.0), (0.0, 1.5)]),
        dither=st.one_of(st.none(), hnp.arrays(float, 4, elements=st.floats(-3, 3))),
    )
)
def test_time_tags(arguments):
    assume(not isinstance(arguments["shape"], np.ndarray))  # two large sizes are good, and slow
    with REFUSAL:
        tags = TimeTags(**arguments)
        assert tags.start[-1] == tags.time.size == tags.counts().detections.sum()


@fuzz_less
@given(spoiled(detector=st.floats(0, 1), electronics=st.floats(0, 1), reset_every_period=st.booleans()))
def test_dead_times(arguments):
    with REFUSAL:
        dead_time = DeadTime(**arguments)
        assert 0 < dead_time.blind < np.inf
        assert bool(dead_time.not_modelled) == (dead_time.electronics > dead_time.detector)


@fuzz_less
@given(
    spoiled(
        row=integers(4, 1),
        column=integers(4, 2),
        ticks=integers(4, 19),
        tick=st.floats(0.05, 0.1),
        period=st.just(2.0),
        shape=st.just((2, 3)),
        trials=TRIALS,
        pulse=st.just(GaussianPulse(1e-2)),
    )
)
def test_ticks(arguments):
    assume(not isinstance(arguments["shape"], np.ndarray))
    with REFUSAL:
        tags = TimeTags.from_ticks(**arguments)
        assert ((tags.time > 0) & (tags.time < tags.period)).all()


@fuzz_less
@given(
    spoiled(
        detections=integers((2, 3, 4), 3),
        trials=TRIALS,
        period=st.just(2.0),
        pulse=st.just(GaussianPulse(1e-2)),
        bin_width=st.floats(0.1, 0.5),
        first_edge=st.floats(0, 0.2),
        gain=SETTING,
        background=SETTING,
        mask=MASK,
        time_zero=st.floats(-1, 1),
        offset=SETTING,
        refractive_index=st.floats(1, 2),
        dead_time=st.sampled_from([None, DeadTime(0.2)]),
    )
)
def test_time_histograms(arguments):
    with REFUSAL:
        histogram = TimeHistogram(**arguments)
        tags = histogram.tags()
        np.testing.assert_array_equal(tags.counts().detections, histogram.detections.sum(axis=2))
