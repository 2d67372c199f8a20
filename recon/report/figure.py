"""The picture of an image, with the data, the conventional image, the uncertainty and the truth if known."""

from __future__ import annotations

import os
import textwrap
import warnings
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from recon.files.atomic import replacing
from recon.report import words
from recon.report.data_images import DataImage
from recon.report.panels import ALARM, Panel, draw_course, draw_panel, spread, symmetric

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

    from recon.imaging import PhysicalImage

DPI = 130
CELL = 2.7  # inches, the longer side of a small panel
LEFT, BOTTOM, BESIDE, BETWEEN = 0.6, 0.5, 0.95, 0.42  # inches: margins, and gaps between panels
LINE = 0.21  # inches, the height of a line of text
STYLE = {
    "font.family": "sans-serif", "font.sans-serif": ["DejaVu Sans"], "text.usetex": False,
    "axes.edgecolor": "#666666", "figure.facecolor": "white", "savefig.facecolor": "white",
    "image.origin": "upper",
}  # fmt: skip


@dataclass(frozen=True)
class Look:
    """How values of a kind are shown: the words of the colour bar, and the colour map."""

    label: str
    colours: str


LOOKS = {
    "reflectivity": Look("reflectivity (no unit)", "gray"),
    "depth": Look("depth (m)", "viridis_r"),
    "electron_yield": Look("electrons per primary", "gray"),
}


@dataclass(frozen=True, eq=False)
class Picture:
    """What is shown of an image.

    record, acquisition: see `recon.report.record`; the record of the image and of the data.
    data: see `recon.report.data_images.data_image`.
    conventional: the image of every pixel by itself, NaN where there is no data.
    truth: the image the data were drawn from, or None.
    source: the name of the data.
    """

    name: str
    image: PhysicalImage
    record: Mapping[str, Any]
    acquisition: Mapping[str, Any]
    data: DataImage
    conventional: np.ndarray
    truth: np.ndarray | None
    source: str


def save_picture(path: str | os.PathLike, picture: Picture) -> None:
    """Write the picture as a PNG file, all or nothing. Raises InputError or OSError as `replacing` does."""
    import matplotlib

    with matplotlib.rc_context(STYLE), replacing(path) as temporary, warnings.catch_warnings():
        warnings.filterwarnings("ignore", "Glyph", UserWarning)  # a name may hold letters the font has not
        draw(picture).savefig(
            temporary,
            format="png",
            dpi=DPI,
            metadata={"Title": f"{words.spelled(picture.name)}, {picture.source}", "Software": "fewcount"},
        )


def draw(picture: Picture) -> Figure:
    """Return the figure: the image large at the left, everything to judge it by at the right."""
    from matplotlib.figure import Figure

    rows, columns = picture.image.image.shape
    tall = float(np.clip(rows / columns, 0.5, 1.7))
    width, height = (CELL / tall, CELL) if tall > 1 else (CELL, CELL * tall)
    large_width, large_height = 2 * width + BESIDE, 2 * height + BETWEEN
    right = LEFT + large_width + BESIDE + 0.15
    across = 2 if picture.truth is None else 3
    across_all = right + across * (width + BESIDE)
    head = _head(picture, across_all)
    whole = (across_all, BOTTOM + large_height + 0.55 + LINE * len(head))
    figure = Figure(figsize=whole)

    def place(x: float, y: float, width: float, height: float) -> Axes:
        return figure.add_axes((x / whole[0], y / whole[1], width / whole[0], height / whole[1]))

    draw_panel(place(LEFT, BOTTOM, large_width, large_height), main_panel(picture), main=True)
    for index, panel in enumerate(side_panels(picture)):
        row, column = divmod(index, across)
        x, y = right + column * (width + BESIDE), BOTTOM + (1 - row) * (height + BETWEEN)
        if panel is None:
            axes = place(x + 0.3, y + 0.15, width - 0.15, height - 0.15)
            draw_course(axes, picture.image.diagnostics.trace, picture.image.tolerance)
        else:
            draw_panel(place(x, y, width, height), panel)
    for index, (text, style) in enumerate(head):
        y = 1 - (0.25 + LINE * index + (0.08 if index else 0.0)) / whole[1]
        figure.text(LEFT / whole[0], y, text, va="center", parse_math=False, **style)
    return figure


def main_panel(picture: Picture) -> Panel:
    """Return the panel of the image itself, on the scale of the truth where that is known."""
    look = _look(picture)
    return Panel("Reconstruction", picture.image.image, look.label, look.colours, _limits(picture))


def side_panels(picture: Picture) -> list[Panel | None]:
    """Return the small panels row by row; None stands for the trace of the solve."""
    look, limits, image = _look(picture), _limits(picture), picture.image
    # of depth the neighbours know something, too
    uncertainty = image.uncertainty if _is_depth(image) else np.where(image.filled, np.nan, image.uncertainty)
    unit = "" if image.unit == "1" else f" ({image.unit})"
    values, label, whole = picture.data.values, picture.data.label, picture.data.whole
    data = Panel("Data", values, label, "magma", (0.0, spread(values)[1]), whole)
    alone = Panel("Conventional, pixel by pixel", picture.conventional, look.label, look.colours, limits)
    label = f"standard uncertainty{unit}"
    title = "Uncertainty, calibrated" if image.held_out else "Uncertainty, not calibrated"
    unsure = Panel(title, uncertainty, label, "cividis", spread(uncertainty))
    if picture.truth is None:
        return [data, alone, unsure, None]
    truth = Panel("Truth", picture.truth, look.label, look.colours, limits)
    difference = image.image - np.asarray(picture.truth, np.float32)
    error = Panel("Reconstruction minus truth", difference, f"error{unit}", "RdBu_r", symmetric(difference))
    return [data, alone, truth, unsure, None, error]


def _is_depth(image: PhysicalImage) -> bool:
    return hasattr(image, "wrong_surface")


def _look(picture: Picture) -> Look:
    named = Look(f"{words.spelled(picture.name)} ({picture.image.unit})", "viridis")
    return LOOKS.get(picture.name, named)


def _limits(picture: Picture) -> tuple[float, float]:
    return spread(picture.image.image) if picture.truth is None else spread(picture.truth)


def _head(picture: Picture, width: float) -> list[tuple[str, dict[str, Any]]]:
    """Return the lines above the panels and their styles; nothing is left out, however narrow the figure."""
    record = picture.record
    plain = {"fontsize": 9, "color": "#444444"}
    solved = f"relative gap {record['relative_gap']:.2g} after {record['iterations']} iterations"
    lines = [
        (words.spelled(picture.name).capitalize(), {"fontsize": 16, "fontweight": "bold"}),
        (f"{picture.source}: {words.data_in_words(picture.acquisition)}", plain),
        (f"{words.priors_in_words(record)}; {_filled(picture)}", plain),
    ]
    if record["error"] is not None:
        lines.append((words.error_in_words(record), plain))
    uncertain = f"uncertainty {words.calibration_in_words(record)}"
    if record["coverage"] is not None:
        uncertain += f"; truth within the 68 / 95 % interval: {words.coverage_in_words(record)}"
    lines.append((uncertain, plain))
    if words.is_converged(record):
        status, style = f"converged, {solved}", {"fontsize": 9, "color": "#2e6b34"}
    else:
        status = f"{words.status_in_words(record)} ({solved})"
        box = {"facecolor": ALARM, "edgecolor": ALARM, "boxstyle": "square,pad=0.25"}
        style = {"fontsize": 9, "fontweight": "bold", "color": "white", "bbox": box}
    lines.append((status, style))
    room = int((width - LEFT) / 0.083)  # inches a character takes
    return [(part, style) for text, style in lines for part in textwrap.wrap(text, room)]


def _filled(picture: Picture) -> str:
    share = 100.0 * float(np.mean(picture.image.filled))
    if not share:
        return "data in every pixel"
    if _is_depth(picture.image):
        return f"filled in from the neighbours, without a signal tag of their own: {share:.2g} % of pixels"
    return f"grey: no usable data, filled in by the prior ({share:.2g} % of pixels)"
