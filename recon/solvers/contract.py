"""What a solver is: a generator of states.

    def my_solver(problem, start, tolerance):
        ...
        yield State(...)          # as often as it is worth measuring; the last state counts

`recon.solve` consumes the states: it owns stopping, limits and the check for values that are not
finite. A solver raises `Unsuitable` before its first state if it cannot take the problem.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np

from recon.diagnostics import Status
from recon.errors import InputError
from recon.problem import Problem


@dataclass(frozen=True, eq=False)
class State:
    """Where a solver is.

    image is within the bounds and may be overwritten after the next state is asked for. `ended` is set
    by a solver that can do no more, whatever the gap.
    """

    iteration: int
    image: np.ndarray
    objective: float
    dual_value: float
    relative_gap: float
    ended: Status | None = None


Solver = Callable[[Problem, np.ndarray, float], Iterator[State]]


class Unsuitable(InputError):
    """The solver cannot take this problem; the message names one that can."""
