"""The histogram that a detector with a dead time is expected to record."""

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import DeadTime
from recon.errors import InputError
from recon.instrument.exposure import blind_bins, cover
from recon.validation import NONNEGATIVE, real_values

BRIGHTEST = 0.1  # detections expected in a bin; brighter ones are cut finer
MOST_BINS = 100_000


def forecast(rate: ArrayLike, bin_width: float, dead_time: DeadTime) -> NDArray[np.float64]:
    """Expected recorded detections per bin and period.

    rate: (bins,), expected detections per bin and period were there no dead time; the bins cover the
        whole period, and within one the rate is uniform. bin_width: s. dead_time: DeadTime, taken as its
        `blind`.

    Free-running, the bins of successive detections are a Markov chain. Its stationary law c, scaled to
    detections per period (renewal theory; Cox 1962), solves

        c_b = rate_b * (1 - sum over b' of c_b' * cover of b by the dead window of a detection in b')

    with the covers of `live_exposure`, which gives the rate back exactly. With `reset_every_period` the
    same holds without the windows of earlier periods. Where a bin expects more than 0.1, all are cut so
    finely that none does, and `live_exposure` is then as near as its docstring says; the relative error
    is below 1e-3 in a bin. With a reset and a blind time of a period or more,
    c_b = exp(-sum over b' < b of rate_b') (1 - exp(-rate_b)), without error: `pile_up_correction` gives
    that rate back.

    Raises InputError, also where the bins, cut, would be more than 1e5.
    """
    rate = real_values(rate, "rate", NONNEGATIVE).astype(np.float64)
    if rate.ndim != 1:
        raise InputError(f"rate has shape {rate.shape}; give the bins of a period, (bins,).")
    blind = blind_bins(bin_width, dead_time)
    reset = dead_time.reset_every_period
    if reset and blind >= rate.size:
        return np.exp(rate - np.cumsum(rate)) * -np.expm1(-rate)
    cuts = max(1, math.ceil(rate.max() / BRIGHTEST))
    if rate.size * cuts > MOST_BINS:
        raise InputError(
            f"rate at {int(rate.argmax())} is {rate.max():g} in one of {rate.size} bins; "
            f"give at most {BRIGHTEST * max(1, MOST_BINS // rate.size):g}, and at most {MOST_BINS} bins."
        )
    fine = np.repeat(rate / cuts, cuts)
    live = _live_share(fine, blind * cuts, reset)
    return (fine * live).reshape(rate.size, cuts).sum(axis=1)


def _live_share(rate: NDArray[np.float64], blind: float, reset: bool) -> NDArray[np.float64]:
    """Share of the periods in which the detector is live, bin by bin.

    Row b > 0 of the system: live_b - live_(b-1) + sum over j of (cover_j - cover_(j-1)) c_(b-j) = 0.
    Row 0: live_0 + what covers bin 0 = 1. Without the windows of earlier periods it is triangular, and its
    solution the forward recursion through one period. Those windows are a correction that fades from
    period to period; GMRES on the recursion needs some ten passes.
    """
    from scipy.sparse.linalg import LinearOperator, gmres

    bins = rate.size
    turns, rest = (0.0, min(blind, float(bins))) if reset else divmod(blind, bins)
    share = cover(rest)
    change = np.diff(share, prepend=0.0, append=0.0)
    steps = [(int(back), change[back]) for back in np.flatnonzero(change)]
    recursion = _recursion(rate, steps)
    start = recursion(np.eye(1, bins)[0])
    if reset:
        return start
    over_first = turns + np.bincount(-np.arange(1, share.size) % bins, weights=share[1:], minlength=bins)

    def without_earlier_windows(live: NDArray[np.float64]) -> NDArray[np.float64]:
        c = rate * live
        earlier = np.zeros(bins)
        for back, by in steps:
            earlier[1 : min(back, bins)] += by * c[np.arange(1, min(back, bins)) - back]
        earlier[0] = over_first @ c
        return live + recursion(earlier)

    system = LinearOperator((bins, bins), matvec=without_earlier_windows, dtype=np.float64)
    return gmres(system, start, rtol=1e-13, atol=0.0, restart=200, maxiter=5)[0]


def _recursion(
    rate: NDArray[np.float64], steps: list[tuple[int, float]]
) -> Callable[[NDArray[np.float64]], NDArray[np.float64]]:
    """Solves the triangular part of the system."""
    from scipy.sparse import coo_array
    from scipy.sparse.linalg import splu

    row = np.arange(rate.size)
    entries = [(row, row, np.ones(row.size)), (row[1:], row[:-1], -np.ones(row.size - 1))]
    for back, by in steps:
        later = row[back:]
        entries.append((later, later - back, by * rate[later - back]))
    to, of, value = (np.concatenate([entry[i] for entry in entries]) for i in range(3))
    matrix = coo_array((value, (to, of)), shape=(row.size, row.size)).tocsc()
    return splu(matrix, permc_spec="NATURAL", diag_pivot_thresh=0.0).solve
