"""Progress towards the tolerance."""

import io
import math

import numpy as np
import pytest
from rich.console import Console

from recon.cli import progress
from recon.solvers import State


@pytest.mark.parametrize(
    ("first", "gap", "share"),
    [
        (1.0, 1.0, 0.0),
        (1.0, 1e-2, 0.5),
        (1e-1, 1e-3, 2 / 3),
        (1.0, 1e-4, 1.0),
        (1.0, 0.0, 1.0),
        (1e-6, 1e-6, 1.0),
    ],
)
def test_equal_factors_of_the_gap_are_equal_lengths_of_the_bar(first, gap, share):
    assert progress.share_done(first, gap, 1e-4) == pytest.approx(share)


@pytest.mark.parametrize(("first", "gap"), [(math.inf, 1.0), (1.0, math.inf), (1.0, math.nan), (1.0, 2.0)])
def test_nothing_is_done_where_the_gap_has_not_come_down(first, gap):
    assert progress.share_done(first, gap, 1e-4) == 0.0


def test_a_terminal_shows_image_gap_and_iteration(monkeypatch):
    screen = io.StringIO()
    terminal = Console(file=screen, force_terminal=True, width=120)
    monkeypatch.setattr(progress, "Console", lambda **_: terminal)
    with progress.SolveProgress(1e-4) as shown:
        shown.step("starting")
        shown("electron_yield", State(40, np.zeros((2, 2)), 1.0, 0.9, 1e-2))
    for words in ("electron yield", "gap 1.0e-02 of 1e-04", "iteration 40"):
        assert words in screen.getvalue()


def test_an_image_may_be_solved_for_again() -> None:
    with progress.SolveProgress(1e-4) as shown:
        for name in ("depth", "reflectivity", "depth", "depth"):
            shown(name, State(10, np.zeros((2, 2)), 1.0, 0.5, 0.5))
            shown(name, State(20, np.zeros((2, 2)), 1.0, 0.9, 0.1))


def test_the_weight_that_is_tried_is_shown(monkeypatch):
    terminal = Console(file=io.StringIO(), force_terminal=True, width=100)
    monkeypatch.setattr(progress, "Console", lambda **_: terminal)
    with progress.SolveProgress(1e-4) as shown:
        shown.of = "smoothness"
        shown.of_weight("reflectivity", 1.6)
        shown._bars.refresh()
        assert "smoothness: reflectivity: weight 1.6 x the rule of thumb" in terminal.file.getvalue()
