"""The picture of a fit: the residuals, their histogram against its law, the statistics and the verdict."""

from __future__ import annotations

import os
import textwrap
import warnings
from typing import TYPE_CHECKING, Any

import numpy as np

from recon.files.atomic import replacing
from recon.fit.quantile_residuals import Histogram
from recon.report import words
from recon.report.figure import DPI, LINE, STYLE
from recon.report.fit_record import BESIDE, fit_in_words, fit_record, is_beside, statistic_in_words
from recon.report.panels import ACCENT, ALARM, Panel, draw_panel
from recon.report.tag_histogram import tag_histogram

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from recon.fit import ImageFit
    from recon.imaging import PhysicalImage

CELL = 3.4  # inches, the longer side of the map; the height of the other parts
WIDE, LAW = 4.1, 3.6  # inches: of the table's names and numbers, of the histogram
LEFT, BOTTOM, APART = 0.35, 0.55, 1.45
ROW, FIRST = 0.42, 0.4  # inches, of the table: the height of a statistic, and what is above the first
RANGE = 3.5  # residuals at the ends of the colours
FEW = 400  # lone pixels that are ringed, at most
GOOD = "#2e6b34"


def save_fit_picture(path: str | os.PathLike, fit: ImageFit, image: PhysicalImage, source: str) -> None:
    """Write the picture as a PNG file, all or nothing. Raises InputError or OSError as `replacing` does."""
    import matplotlib

    with matplotlib.rc_context(STYLE), replacing(path) as temporary, warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph", UserWarning)  # a name may hold letters the font has not
        draw_fit(fit, image, source).savefig(
            temporary,
            format="png",
            dpi=DPI,
            metadata={"Title": f"fit of {words.spelled(fit.name)}, {source}", "Software": "fewcount"},
        )


def draw_fit(fit: ImageFit, image: PhysicalImage, source: str) -> Figure:
    """Return the figure; of depth, which has no residuals of pixels, the histogram is that of the tags.

    image: the one that was judged. source: the name of the data.
    """
    from matplotlib.figure import Figure

    rows, columns = fit.residuals.shape
    tall = float(np.clip(rows / columns, 0.5, 1.7))
    width, height = (CELL / tall, CELL) if tall > 1 else (CELL, CELL * tall)
    width = 0.0 if fit.histogram is None else width
    at_law = LEFT + (width + APART if width else 0.3)
    at_table = at_law + LAW + 0.45
    across = at_table + WIDE + LEFT
    record = fit_record(fit)
    head = _head(fit, record, source, across)
    tests = record["statistics"]
    high = max(CELL, FIRST + ROW * len(tests) + 0.1)
    whole = (across, BOTTOM + high + 0.5 + LINE * len(head))
    figure = Figure(figsize=whole)

    def place(x: float, y: float, width: float, height: float) -> Axes:
        return figure.add_axes((x / whole[0], y / whole[1], width / whole[0], height / whole[1]))

    if width:
        axes = place(LEFT, BOTTOM + high - height, width, height)
        label = "residual (standard deviations)"
        draw_panel(axes, Panel("Quantile residuals", fit.residuals, label, "RdBu_r", (-RANGE, RANGE)))
        _ring(axes, fit)
    histogram = fit.histogram or tag_histogram(image)
    if histogram is not None:
        _draw_histogram(place(at_law, BOTTOM + high - CELL, LAW, CELL), histogram, fit.histogram is None)
    _draw_table(place(at_table, BOTTOM, WIDE, high), tests, high)
    for index, (text, style) in enumerate(head):
        y = 1 - (0.25 + LINE * index + (0.08 if index else 0.0)) / whole[1]
        figure.text(LEFT / whole[0], y, text, va="center", parse_math=False, **style)
    return figure


def _ring(axes: Axes, fit: ImageFit) -> None:
    """Ring the lone pixels where they are too many for chance."""
    rows, columns = np.nonzero(fit.lone)
    if any(finding.cause == "hot pixels" for finding in fit.findings) and rows.size <= FEW:
        axes.scatter(columns, rows, s=40, facecolors="none", edgecolors="black", linewidths=0.8)


def _draw_histogram(axes: Axes, histogram: Histogram, of_tags: bool) -> None:
    """Draw how many fell into each class, and how many the law expects."""
    edges, middle = histogram.edges, 0.5 * (histogram.edges[1:] + histogram.edges[:-1])
    axes.stairs(histogram.counts, edges, fill=True, color="#b9cfde", label="observed")
    axes.plot(middle, histogram.expected, color=ACCENT, linewidth=1.5, label="if the model is right")
    axes.set_xlim(edges[0], edges[-1])
    axes.set_ylim(bottom=0.0)
    title = "Tags about the surface" if of_tags else "Their histogram"
    axes.set_title(title, loc="left", fontsize=10)
    axes.set_xlabel("distance (m)" if of_tags else "residual (standard deviations)", fontsize=8)
    axes.set_ylabel("tags" if of_tags else "pixels", fontsize=8)
    axes.tick_params(labelsize=7)
    axes.ticklabel_format(useOffset=False)
    axes.legend(fontsize=7, frameon=False, loc="upper right")
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)


def _draw_table(axes: Axes, tests: list[dict[str, Any]], high: float) -> None:
    """Write the statistics line by line; what denies the model stands out."""
    axes.set_axis_off()
    axes.set(xlim=(0.0, WIDE), ylim=(high, 0.0))
    places = (1.8, 2.6, 3.35, WIDE)  # right ends of the numbers, inches
    head = ("observed", "expected", "st. dev.", "p")
    axes.set_title("Statistics", loc="left", fontsize=10)
    for x, text in zip(places, head, strict=True):
        axes.text(x, 0.12, text, fontsize=7.5, color="#555555", ha="right", va="center")
    for line, record in enumerate(tests):
        name, *numbers = statistic_in_words(record)
        style = {"color": "#888888" if is_beside(record) else "black"}
        if record["denies"]:
            style = {"color": ALARM, "fontweight": "bold"}
        y = FIRST + ROW * line
        axes.text(0.0, y, name, fontsize=8, va="center", **style)
        for x, text in zip(places, numbers, strict=True):
            axes.text(x, y + 0.17, text, fontsize=8, ha="right", va="center", **style)
    if not tests:
        axes.text(0.0, FIRST, "none: too few detections", fontsize=8, va="center")


def _head(fit: ImageFit, record: dict[str, Any], source: str, width: float) -> list[tuple[str, dict]]:
    """Return the lines above the panels and their styles."""
    plain = {"fontsize": 9, "color": "#444444"}
    name = words.spelled(fit.name)
    lines = [
        (f"Does the model fit? {name.capitalize()}", {"fontsize": 16, "fontweight": "bold"}),
        (source, plain),
    ]
    if record["findings"]:
        box = {"facecolor": ALARM, "edgecolor": ALARM, "boxstyle": "square,pad=0.25"}
        style = {"fontsize": 9, "fontweight": "bold", "color": "white", "bbox": box}
        lines.append((fit_in_words(record), style))
        lines += [
            (f"{f['cause']}: {f['sentence']}. To do: {f['remedy']}.", plain) for f in record["findings"]
        ]
    else:
        style = {"fontsize": 9, "color": GOOD if record["enough"] else "#444444"}
        lines.append((fit_in_words(record), style))
    lines += [(f"Not to be told from these data: {what}.", plain) for what in record["unidentified"]]
    if any(is_beside(statistic) for statistic in record["statistics"]):
        lines.append((f"Statistics in {BESIDE}.", plain))
    room = int((width - LEFT) / 0.083)  # inches a character takes
    return [(part, style) for text, style in lines for part in textwrap.wrap(text, room)]
