"""Progress bars: how far the relative gap has come down towards the tolerance, on a log scale."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from rich.console import Console
from rich.progress import BarColumn, Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

from recon.imaging import depth, task
from recon.report.words import spelled

if TYPE_CHECKING:
    from recon.solvers import State


class SolveProgress:
    """A bar on standard error for every image; usable as the callback of `recon.reconstruct`.

    Nothing is shown where standard error is not a terminal.
    """

    def __init__(self, tolerance: float | None = None, hidden: bool = False) -> None:
        console = Console(stderr=True)
        self._tolerance = tolerance
        self._first: dict[str, float] = {}
        self._tasks: dict[str, int] = {}
        self._bars = Progress(
            SpinnerColumn(),
            TextColumn("{task.description:<16}"),
            BarColumn(),
            TextColumn("{task.fields[gap]}"),
            TimeElapsedColumn(),
            console=console,
            transient=True,
            disable=hidden or not console.is_terminal,
        )
        self._now: int | None = None
        self.of = ""  # what the images that follow belong to

    def __enter__(self) -> SolveProgress:
        self._bars.start()
        return self

    def __exit__(self, *_: object) -> None:
        self._bars.stop()

    def step(self, words: str) -> None:
        """Say what is going on, for work that cannot be measured."""
        self._finish()
        self._now = self._bars.add_task(words, total=None, gap="")

    def of_weight(self, name: str, factor: float) -> None:
        """Show the weight that is tried for an image."""
        self.step(f"{self._title(name)}: weight {factor:.3g} x the rule of thumb")

    def of_fit(self, name: str, share: float) -> None:
        """Show which share of the simulations of an image's fit is done."""
        key = f"fit of {name}"
        if self._now is None or self._tasks.get(key) != self._now:
            self._finish()
            self._tasks[key] = self._now = self._bars.add_task(f"{spelled(name)}: fit", total=1.0, gap="")
        self._bars.update(self._tasks[key], completed=share)

    def __call__(self, name: str, state: State) -> None:
        """Show a state of the solve of an image."""
        if self._now is None or self._tasks.get(name) != self._now:  # an image may be solved for again
            self._finish()
            self._first[name] = state.relative_gap
            self._tasks[name] = self._now = self._bars.add_task(self._title(name), total=1.0, gap="")
        tolerance = self._tolerance or (depth.TOLERANCE if name == "depth" else task.TOLERANCE)
        self._bars.update(
            self._tasks[name],
            completed=share_done(self._first[name], state.relative_gap, tolerance),
            gap=f"gap {state.relative_gap:.1e} of {tolerance:.0e}, iteration {state.iteration}",
        )

    def _title(self, name: str) -> str:
        return ": ".join(filter(None, (self.of, spelled(name))))

    def _finish(self) -> None:
        if self._now is not None:
            self._bars.remove_task(self._now)
            self._now = None


def share_done(first: float, gap: float, tolerance: float) -> float:
    """Return which share of the way from the first gap to the tolerance is done, by its logarithm, 0 to 1."""
    if gap <= tolerance:
        return 1.0
    if not (math.isfinite(first) and math.isfinite(gap) and first > gap):
        return 0.0
    return math.log(first / gap) / math.log(first / tolerance)
