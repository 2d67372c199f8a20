"""What a person reads on the screen about a comparison."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from rich.console import Console
from rich.table import Table
from rich.text import Text

from recon.cli.table import print_head, print_line, print_notes, status_cell, uncertainty_note
from recon.report.comparison import lines_of
from recon.report.words import HELD_OUT_SCORE, coverage_in_words, quantity, spelled


def print_comparison(name: str, record: Mapping[str, Any], folder: Path) -> None:
    """Print what an acquisition holds, the priors side by side, the verdict and where everything is."""
    console = Console(highlight=False)
    print_head(console, name, record["acquisitions"][name])
    priors = record["priors"]
    columns = {prior: _cells(one, prior == record["best"]) for prior, one in priors.items()}
    note = uncertainty_note({record["image"]: priors[record["best"]]})
    table = Table(caption=f"{HELD_OUT_SCORE}. {note}", caption_justify="left")
    table.add_column(spelled(record["image"]), no_wrap=True)
    for prior in priors:
        table.add_column(spelled(prior), overflow="fold")
    for line in next(iter(columns.values())):
        table.add_row(line, *(cells[line] for cells in columns.values()))
    console.print(table)
    print_notes(console, priors)
    console.print(
        Text(f"{record['verdict'][0].upper()}{record['verdict'][1:]}.", style="bold"), soft_wrap=True
    )
    print_line(f"Images, comparison.png and comparison.json are in {folder}")


def _cells(record: Mapping[str, Any], best: bool) -> dict[str, Text | str]:
    cells: dict[str, Text | str] = dict(lines_of(record, best))
    cells["median uncertainty"] = quantity(record["median_uncertainty"], record["unit"])
    if record["error"] is not None:
        cells["truth within 68 / 95 %"] = coverage_in_words(record)
    cells["status"] = status_cell(record)
    return cells
