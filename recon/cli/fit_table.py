"""What a person reads on the screen about the fit of the model."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from rich.console import Console
from rich.table import Table
from rich.text import Text

from recon.report.fit_record import BESIDE, fit_in_words, is_beside, statistic_in_words
from recon.report.words import spelled


def print_fits(images: Mapping[str, Mapping[str, Any]]) -> None:
    """Print whether the model fits, image by image; the records hold `fit`."""
    console = Console(highlight=False)
    for name, image in images.items():
        _print_fit(console, spelled(name), image["fit"])


def _print_fit(console: Console, name: str, fit: Mapping[str, Any]) -> None:
    style = "bold white on red" if fit["findings"] else "green" if fit["enough"] else "bold"
    console.print(
        Text(f"Fit of {name}: ", style="bold") + Text(fit_in_words(fit), style=style), soft_wrap=True
    )
    for finding in fit["findings"]:
        console.print(
            Text(f"  {finding['cause']}: {finding['sentence']}. To do: {finding['remedy']}."), soft_wrap=True
        )
    for what in fit["unidentified"]:
        console.print(Text(f"  Not to be told from these data: {what}.", style="dim"), soft_wrap=True)
    if fit["statistics"]:
        beside = any(is_beside(statistic) for statistic in fit["statistics"])
        table = Table(caption=f"{BESIDE[0].upper()}{BESIDE[1:]}." if beside else None, caption_justify="left")
        table.add_column("", overflow="fold")
        for heading in ("observed", "expected", "standard deviation", "p"):
            table.add_column(heading, justify="right")
        for statistic in fit["statistics"]:
            style = "bold red" if statistic["denies"] else "bright_black" if is_beside(statistic) else None
            table.add_row(*statistic_in_words(statistic), style=style)
        console.print(table)
    console.print()
