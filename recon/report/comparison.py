"""Priors side by side: the record of a comparison, and its picture."""

from __future__ import annotations

import os
import textwrap
import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from recon.files.atomic import replacing
from recon.report import words
from recon.report.figure import DPI, LINE, LOOKS, STYLE, Look
from recon.report.panels import ALARM, Panel, draw_panel, spread
from recon.report.record import image_record, name_of

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from recon.imaging import Comparison
    from recon.imaging.compare import Candidate

CELL = 2.7  # inches, the longer side of a panel
LEAST = 2.35  # inches, the width of what is written under a panel
LABELS, BETWEEN, RIGHT = 1.5, 0.2, 1.15  # inches: of the names of the lines, between panels, for the bar
UNDER = 0.2  # inches, the height of a line under a panel


def comparison_record(comparison: Comparison, truth: np.ndarray | None = None) -> dict[str, Any]:
    """Return all that is known of a comparison but its images; priors by their names, in the order given.

    The record of each prior is that of its image (`image_record`), and what the comparison says besides.
    truth: the image the data were drawn from, where that is known.
    """
    names = [prior_name(candidate) for candidate in comparison.candidates]
    return {
        "image": comparison.kind,
        "verdict": verdict(comparison),
        "best": names[comparison.best],
        "folds": comparison.folds,
        "priors": {
            name: _candidate_record(candidate, truth)
            for name, candidate in zip(names, comparison.candidates, strict=True)
        },
    }


def _candidate_record(candidate: Candidate, truth: np.ndarray | None) -> dict[str, Any]:
    return {
        "difference": candidate.difference,
        "difference_standard_error": candidate.standard_error,
        "as_good": bool(candidate.as_good),
        "degrees_of_freedom": candidate.freedom.number,
        "degrees_of_freedom_standard_error": candidate.freedom.standard_error,
        "seconds_in_all": candidate.seconds,
    } | image_record(candidate.image, truth)


def prior_name(candidate: Candidate) -> str:
    """Return the name of the prior as the command line spells it, of a sum all of them."""
    return "+".join(name_of(term) for term in candidate.prior.terms())


def verdict(comparison: Comparison) -> str:
    """Return the verdict, priors spelled as words."""
    said = comparison.verdict
    for candidate in comparison.candidates:
        for term in candidate.prior.terms():
            said = said.replace(type(term).__name__, words.spelled(name_of(term)))
    return said


def lines_of(record: Mapping[str, Any], best: bool) -> dict[str, str]:
    """Return what is to be said of a prior, by the name of the line.

    record: of the prior, from a `comparison_record`. best: whether it has the best score.
    """
    lines = {
        "weight": " + ".join(words.number(prior["weight"], 3) for prior in record["priors"]),
        "held-out score": score_in_words(record, best),
        "degrees of freedom": (
            f"{record['degrees_of_freedom']:.0f} \u00b1 {record['degrees_of_freedom_standard_error']:.0f}"
        ),
        "time": f"{record['seconds_in_all']:.2f} s",
        "relative gap": f"{record['relative_gap']:.2g}",
    }
    if record["error"] is not None:
        lines["rmse"] = words.quantity(record["error"]["rmse"], record["unit"])
    return lines


def score_in_words(record: Mapping[str, Any], best: bool) -> str:
    """Return by how much the held-out score of a prior is above the best."""
    if best:
        return "best"
    error = words.number(record["difference_standard_error"], 2)
    said = f"+{words.number(record['difference'], 3)} \u00b1 {error}"
    return said if record["as_good"] else f"{said}, worse"


@dataclass(frozen=True, eq=False)
class ComparisonPicture:
    """What is shown of a comparison.

    record: its `comparison_record`. acquisition: the record of the data. truth: or None. source: the name of
    the data.
    """

    comparison: Comparison
    record: Mapping[str, Any]
    acquisition: Mapping[str, Any]
    truth: np.ndarray | None
    source: str


def save_comparison(path: str | os.PathLike, picture: ComparisonPicture) -> None:
    """Write the picture as a PNG file, all or nothing. Raises InputError or OSError as `replacing` does."""
    import matplotlib

    with matplotlib.rc_context(STYLE), replacing(path) as temporary, warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph", UserWarning)  # a name may hold letters the font has not
        draw_comparison(picture).savefig(
            temporary,
            format="png",
            dpi=DPI,
            metadata={
                "Title": f"{words.spelled(picture.comparison.kind)} under several priors, {picture.source}",
                "Software": "fewcount",
            },
        )


def draw_comparison(picture: ComparisonPicture) -> Figure:
    """Return the figure: the images in a row on one scale, what is to be said of each below it."""
    from matplotlib.figure import Figure

    panels = panels_of(picture)
    rows, columns = panels[0].values.shape
    tall = float(np.clip(rows / columns, 0.5, 1.7))
    width, height = (CELL / tall, CELL) if tall > 1 else (CELL, CELL * tall)
    step = max(width, LEAST) + BETWEEN
    across = LABELS + len(panels) * step - step + width + RIGHT
    records = list(picture.record["priors"].items())
    written = [lines_of(record, name == picture.record["best"]) for name, record in records]
    bottom = 0.3 + UNDER * len(written[0])
    head = _head(picture, across)
    whole = (across, bottom + height + 0.55 + LINE * len(head))
    figure = Figure(figsize=whole)

    def put(x: float, y: float, text: str, **style: object) -> None:
        figure.text(x / whole[0], y / whole[1], text, va="center", parse_math=False, **style)

    for index, label in enumerate(written[0]):
        put(0.3, bottom - 0.2 - UNDER * index, label, fontsize=8, color="#555555")
    for column, panel in enumerate(panels):
        x = LABELS + column * step
        axes = figure.add_axes((x / whole[0], bottom / whole[1], width / whole[0], height / whole[1]))
        draw_panel(axes, panel, bar=column == len(panels) - 1)
        if column < len(records):
            name, record = records[column]
            best = name == picture.record["best"]
            for index, text in enumerate(written[column].values()):
                style = {"fontweight": "bold"} if text == "best" else {}
                put(x, bottom - 0.2 - UNDER * index, text, fontsize=8, **style)
            if best:
                axes.set_title(panel.title, loc="left", fontsize=10, fontweight="bold")
            if not words.is_converged(record):
                _alarm(axes)
    for index, (text, style) in enumerate(head):
        put(0.3, whole[1] - (0.25 + LINE * index + (0.08 if index else 0.0)), text, **style)
    return figure


def panels_of(picture: ComparisonPicture) -> Sequence[Panel]:
    """Return the images as panels on one scale, and the truth last where it is known."""
    kind, candidates = picture.comparison.kind, picture.comparison.candidates
    unit = candidates[0].image.unit
    look = LOOKS.get(kind, Look(f"{words.spelled(kind)} ({unit})", "viridis"))
    named = [
        (words.spelled(name), candidate.image.image)
        for name, candidate in zip(picture.record["priors"], candidates, strict=True)
    ]
    if picture.truth is None:
        limits = spread(np.array([values for _, values in named]))
    else:
        limits = spread(picture.truth)
        named.append(("truth", picture.truth))
    return [
        Panel(name[0].upper() + name[1:], values, look.label, look.colours, limits) for name, values in named
    ]


def _alarm(axes: Axes) -> None:
    box = {"facecolor": ALARM, "edgecolor": ALARM, "boxstyle": "square,pad=0.35"}
    style = {"fontsize": 11, "fontweight": "bold", "color": "white", "bbox": box, "ha": "center"}
    axes.text(0.5, 0.5, "NOT CONVERGED", transform=axes.transAxes, va="center", **style)


def _head(picture: ComparisonPicture, width: float) -> list[tuple[str, dict[str, Any]]]:
    """Return the lines above the panels and their styles."""
    plain = {"fontsize": 9, "color": "#444444"}
    kind = words.spelled(picture.comparison.kind)
    said, *late = picture.record["verdict"].split("; NOT CONVERGED")
    bold = {"fontsize": 10, "fontweight": "bold"}
    box = {"facecolor": ALARM, "edgecolor": ALARM, "boxstyle": "square,pad=0.25"}
    lines = [
        (f"{kind.capitalize()} under several priors", {"fontsize": 16, "fontweight": "bold"}),
        (f"{picture.source}: {words.data_in_words(picture.acquisition)}", plain),
        (f"{said[0].upper()}{said[1:]}.", bold),
        *((f"NOT CONVERGED{names}.", bold | {"color": "white", "bbox": box}) for names in late),
        (f"{words.HELD_OUT_SCORE}.", plain),
    ]
    room = int((width - 0.3) / 0.086)  # inches a character takes
    return [(part, style) for text, style in lines for part in textwrap.wrap(text, room)]
