"""Dead time: which of the two counts, and how many detections it leaves room for."""

import numpy as np
import pytest

import recon
from recon.acquisition import DeadTime, GaussianPulse, TimeHistogram, TimeTags
from recon.errors import InputError

PERIOD, PICOSECONDS = 1e-7, 100_000  # the same
SETTINGS = {"period": PERIOD, "pulse": GaussianPulse(1e-9)}


def test_the_longer_of_the_two_counts():
    assert recon.DeadTime is DeadTime
    assert DeadTime(50e-9).blind == 50e-9
    assert DeadTime(50e-9, 80e-9).blind == 80e-9
    assert DeadTime(0, electronics=80e-9).blind == 80e-9
    assert DeadTime(50e-9, 80e-9, reset_every_period=True) == DeadTime(50e-9, 80e-9, True)
    assert DeadTime(50e-9, 80e-9) != DeadTime(50e-9, 80e-9, True)


def test_what_is_left_out_is_said_where_it_matters():
    assert DeadTime(50e-9).not_modelled == ""
    assert DeadTime(50e-9, 50e-9).not_modelled == ""
    sentence = DeadTime(50e-9, 80e-9).not_modelled
    assert "8e-08 s" in sentence
    assert "5e-08 s" in sentence
    assert sentence.endswith(".")
    assert sentence.count(". ") == 0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((-1e-9,), r"detector is -1e-09; give a time in seconds between 0 and 1e9"),
        ((np.nan,), "detector is nan"),
        ((np.inf,), "detector is inf"),
        ((1e-9, -1e-9), "electronics is -1e-09; give a time"),
        (([1e-9, 2e-9],), r"detector has shape \(2,\)"),
        ((0.0,), r"detector is 0\.0 and electronics 0\.0; give at least one"),
        ((1e-300, 5e-324), "give at least one of them 1e-18 s or more"),
        ((1e-9, 0.0, 1), "reset_every_period is int; give True or False"),
    ],
)
def test_impossible_dead_times_are_named(arguments, message):
    with pytest.raises(InputError, match=message):
        DeadTime(*arguments)


def most_recorded(periods, blind, reset):
    """Detections of a pixel under so much light that it records whenever it is not blind; whole ps."""
    number, ready = 0, 0
    end = periods * PICOSECONDS
    while ready <= end if not reset else ready < end:
        number += 1
        next_period = (ready // PICOSECONDS + 1) * PICOSECONDS
        ready = min(ready + blind, next_period) if reset else ready + blind
    return number


@pytest.mark.parametrize("kind", ["tags", "histogram"])
@pytest.mark.parametrize("reset", [False, True])
@pytest.mark.parametrize("blind", [7_000, 25_000, 30_000, 100_000, 130_000, 1_000_000])
@pytest.mark.parametrize("trials", [1, 10, 37])
def test_as_many_detections_as_saturation_gives_and_no_more(kind, reset, blind, trials):
    most = most_recorded(trials, blind, reset)
    dead_time = DeadTime(blind * 1e-12, reset_every_period=reset)

    def make(number, mask=None):
        if kind == "tags":
            where = np.ones(number, int)
            return TimeTags(
                0 * where,
                where,
                1e-9 * where,
                shape=(2, 3),
                trials=trials,
                dead_time=dead_time,
                mask=mask,
                **SETTINGS,
            )
        detections = np.zeros((2, 3, 10), int)
        detections[0, 1, 4] = number
        return TimeHistogram(
            detections, trials=trials, bin_width=PERIOD / 10, dead_time=dead_time, mask=mask, **SETTINGS
        )

    assert make(most).counts().detections[0, 1] == most
    one_more = rf"detections at \(0, 1\) is {most + 1}, above the {most} that dead_time .* allows.*; correct"
    with pytest.raises(InputError, match=one_more):
        make(most + 1)
    elsewhere = np.ones((2, 3), bool)
    elsewhere[0, 1] = False
    assert make(most + 1, elsewhere).counts().detections[0, 1] == most + 1


def test_the_limit_goes_by_the_trials_of_the_pixel():
    trials = np.array([[4.0, 1.0]])
    tags = ([0] * 6, [0, 0, 0, 0, 0, 1], np.full(6, 1e-9))
    dead_time = DeadTime(PERIOD)
    assert (
        TimeTags(*tags, shape=(1, 2), trials=trials, dead_time=dead_time, **SETTINGS).dead_time is dead_time
    )
    with pytest.raises(InputError, match=r"detections at \(0, 0\) is 5, above the 2 that"):
        TimeTags(*tags, shape=(1, 2), trials=trials[:, ::-1], dead_time=dead_time, **SETTINGS)


def test_part_of_a_period_may_hold_as_many_as_a_whole_one():
    dead_time = DeadTime(60e-9, reset_every_period=True)
    TimeTags([0, 0], [0, 0], [0, 61e-9], shape=(1, 1), trials=0.7, dead_time=dead_time, **SETTINGS)
    with pytest.raises(InputError, match="is 3, above the 2 that"):
        TimeTags([0] * 3, [0] * 3, [0] * 3, shape=(1, 1), trials=0.7, dead_time=dead_time, **SETTINGS)


@pytest.mark.parametrize("value", [50e-9, "50 ns", DeadTime])
def test_other_things_are_no_dead_time(value):
    with pytest.raises(InputError, match=r"dead_time is \w+; give a DeadTime or None"):
        TimeTags([0], [0], [0], shape=(1, 1), trials=9, dead_time=value, **SETTINGS)


def test_counts_keep_the_trials():
    settings = {"shape": (1, 1), "trials": 9, "background": 0.5, **SETTINGS}
    counts = TimeTags([0], [0], [0], dead_time=DeadTime(50e-9), **settings).counts()
    assert (counts.trials, counts.background, counts.several_per_trial) == (9, 0.5, True)


@pytest.mark.parametrize("reset", [False, True])
def test_more_trials_than_numbers_reach_allow_any_number_of_detections(reset):
    dead_time = recon.DeadTime(0.9, reset_every_period=reset)
    tags = recon.TimeTags(
        [0, 0], [0, 0], [0.0, 0.0], shape=(1, 1), trials=1.7e308, period=2.0,
        pulse=recon.GaussianPulse(0.01), dead_time=dead_time,
    )  # fmt: skip
    assert tags.counts().detections.sum() == 2
