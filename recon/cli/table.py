"""The summary a person reads on the screen."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from rich.console import Console
from rich.table import Table
from rich.text import Text

from recon.report.words import (
    certificate_in_words,
    coverage_in_words,
    data_in_words,
    is_converged,
    priors_in_words,
    quantity,
    spelled,
    status_in_words,
)

Record = Mapping[str, Any]

CALIBRATED = "Uncertainty: standard, calibrated on held-out data so that 68 % of true values lie within it"
ALONE = "Uncertainty: standard, not calibrated: nothing could be held out"
OF_DEPTH = "; that of depth holds where the surface is the right one"
AGAINST_TRUTH = (
    " Errors: root mean square and median absolute, against the truth; conventional: of each pixel by itself."
)


def print_summary(name: str, acquisition: Record, images: Mapping[str, Record]) -> None:
    """Print what an acquisition holds, and its images side by side."""
    console = Console(highlight=False)
    print_head(console, name, acquisition)
    known = any(record["error"] is not None for record in images.values())
    note = uncertainty_note(images)
    table = Table(caption=note + AGAINST_TRUTH if known else note, caption_justify="left")
    table.add_column("", no_wrap=True)
    for image in images:
        table.add_column(spelled(image), overflow="fold")
    rows = _ROWS + (_DEPTH if "depth" in images else []) + (_ERRORS if known else [])
    for label, cell in rows:
        table.add_row(label, *(cell(record) for record in images.values()))
    console.print(table)
    print_notes(console, images)
    console.print()


def print_head(console: Console, name: str, acquisition: Record) -> None:
    """Print what an acquisition holds, and its note."""
    console.print(Text(name, style="bold"), Text(data_in_words(acquisition)), soft_wrap=True)
    if acquisition["note"]:
        console.print(Text(acquisition["note"], style="dim"), soft_wrap=True)


def print_notes(console: Console, images: Mapping[str, Record]) -> None:
    """Print what a reader should know of each image."""
    for image, record in images.items():
        for note in record["notes"]:
            console.print(Text(f"{spelled(image)}: {note.rstrip('.')}.", style="bold"), soft_wrap=True)


def uncertainty_note(images: Mapping[str, Record]) -> str:
    """Return what the uncertainties of these images are."""
    without = [spelled(name) for name, record in images.items() if not record["calibrated"]]
    note = ALONE if len(without) == len(images) else CALIBRATED
    if 0 < len(without) < len(images):
        note += f" (that of {' and '.join(without)} is not: nothing could be held out)"
    return note + (OF_DEPTH if "depth" in images else "") + "."


def print_line(text: str) -> None:
    """Print a line as it is, however long."""
    Console(highlight=False).print(Text(text), soft_wrap=True)


def status_cell(record: Record) -> Text:
    """Return how the solve ended, in colour."""
    return Text(status_in_words(record), style="green" if is_converged(record) else "bold white on red")


def _error(record: Record, kind: str, of: str | None = None) -> str:
    error = record["error"]
    if error is not None and of is not None:
        error = error.get(of)
    return quantity(None if error is None else error[kind], record["unit"])


def _share(record: Record, name: str) -> str:
    return f"{100.0 * record[name]:.2g} % expected" if name in record else "-"


_ROWS: list[tuple[str, Callable[[Record], Text | str]]] = [
    ("unit", lambda r: "none" if r["unit"] == "1" else r["unit"]),
    ("range", lambda r: f"{r['range'][0]:.3g} to {quantity(r['range'][1], r['unit'])}"),
    ("median uncertainty", lambda r: quantity(r["median_uncertainty"], r["unit"])),
    ("filled in by prior", lambda r: f"{r['filled_pixels']} pixels"),
    ("prior", priors_in_words),
    ("iterations", lambda r: str(r["iterations"])),
    ("relative gap", lambda r: f"{r['relative_gap']:.2g}"),
    ("time", lambda r: f"{r['seconds']:.2f} s"),
    ("status", status_cell),
    ("certificate", certificate_in_words),
]
_DEPTH: list[tuple[str, Callable[[Record], Text | str]]] = [
    ("without target", lambda r: _share(r, "without_target")),
    ("on a wrong surface", lambda r: _share(r, "wrong_surface")),
]
_ERRORS: list[tuple[str, Callable[[Record], Text | str]]] = [
    ("rmse", lambda r: _error(r, "rmse")),
    ("  conventional", lambda r: _error(r, "rmse", "conventional")),
    ("median error", lambda r: _error(r, "median_absolute")),
    ("  conventional", lambda r: _error(r, "median_absolute", "conventional")),
    ("truth within 68 / 95 %", coverage_in_words),
]
