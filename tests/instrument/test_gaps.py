"""The dead time a record shows."""

import numpy as np
import pytest

from recon.acquisition import DeadTime
from recon.errors import InputError
from recon.instrument import exceeds_declared, shortest_gap

TRUE = 50e-9


def record(seed, detections, mean=100e-9, dead_time=TRUE):
    """Moments of a non-paralysable detector in steady light: gaps of the dead time and an exponential."""
    rng = np.random.default_rng(seed)
    return 3.0 + rng.permutation(np.cumsum(dead_time + rng.exponential(mean, detections)))


@pytest.mark.parametrize("seed", range(5))
def test_the_shortest_gap_is_near_the_dead_time(seed):
    """The shortest of N exponentials is exponential with a mean of 1/N of theirs."""
    excess = shortest_gap(record(seed, 2000)) - TRUE
    assert -1e-14 < excess < 10 * 100e-9 / 2000


@pytest.mark.parametrize("seed", range(5))
def test_a_declaration_too_short(seed):
    moments = record(seed, 2000)
    said = exceeds_declared(moments, DeadTime(45e-9))
    assert "declared dead time of 4.5e-08 s" in said
    assert f"{shortest_gap(moments):.4g}" in said
    assert "declared" in exceeds_declared(moments, DeadTime(10e-9, 40e-9))


def test_a_true_declaration_is_seldom_doubted():
    """Chance 1e-3 each: more than 8 of 2000 would have chance 4e-4."""
    doubted = [exceeds_declared(record(seed, 30), DeadTime(TRUE)) for seed in range(2000)]
    assert sum(map(bool, doubted)) <= 8


def test_the_chance_at_its_edge():
    """(1 - N r)^(N - 1) with N = 4 gaps: the shortest may have 0.225 of their sum at 1e-3, no more."""
    edge = (1 - 1e-3 ** (1 / 3)) / 4
    for share, says in ((0.999 * edge, False), (1.001 * edge, True)):
        gaps = np.array([share, (1 - share) / 3, (1 - share) / 3, (1 - share) / 3]) + 1.0
        moments = np.concatenate([[0.0], np.cumsum(gaps)])
        assert bool(exceeds_declared(moments, DeadTime(1.0))) == says


def test_a_declaration_too_long():
    assert exceeds_declared(record(1, 500), DeadTime(60e-9)) == ""


CASES = [
    (shortest_gap, ([1.0],), r"moments has shape \(1,\)"),
    (shortest_gap, ([[1.0, 2.0]],), r"moments has shape \(1, 2\)"),
    (shortest_gap, ([1.0, np.nan],), r"moments at \(1,\) is nan"),
    (exceeds_declared, ([1.0, 2.0], 1e-9), "dead_time is float"),
]


@pytest.mark.parametrize(("function", "arguments", "message"), CASES)
def test_one_sentence(function, arguments, message):
    with pytest.raises(InputError, match=message) as caught:
        function(*arguments)
    assert str(caught.value).endswith(".")
    assert ";" in str(caught.value)
