"""One panel of a figure: an image with its colour bar, or the trace of a solve."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.axis import Axis
    from matplotlib.image import AxesImage

    from recon.diagnostics import Trace

NO_DATA = "#c9c4d4"
ACCENT = "#1f5f8b"
ALARM = "#b3261e"
STRIP = 0.25  # rows over columns, or the reverse, below which pixels are not drawn square
MOST_ACROSS = {False: 400, True: 900}  # values drawn along the longer side of a small and the main panel
MOST_SAMPLES = 1 << 20
EXTEND = {(False, False): "neither", (True, False): "min", (False, True): "max", (True, True): "both"}


@dataclass(frozen=True, eq=False)
class Panel:
    """An image to show.

    values: (rows, columns), NaN where there is nothing to show.
    label: of the colour bar, with the unit.
    colours: name of a matplotlib colour map.
    limits: values at the ends of the colours.
    whole: whether the values are whole numbers.
    """

    title: str
    values: np.ndarray
    label: str
    colours: str
    limits: tuple[float, float]
    whole: bool = False


def spread(image: np.ndarray, share: float = 0.005) -> tuple[float, float]:
    """Return limits that leave out this share of the finite values at each end; never equal."""
    values = _sample(image)
    if not values.size:
        return 0.0, 1.0
    low, high = (float(end) for end in np.quantile(values, [share, 1.0 - share]))
    size = max(abs(low), abs(high)) or 1.0
    return (low, high) if high - low > 1e-3 * size else (low - 0.05 * size, high + 0.05 * size)


def symmetric(image: np.ndarray) -> tuple[float, float]:
    """Return limits about zero that leave out the largest twentieth."""
    high = spread(np.abs(image), share=0.05)[1]
    return -high, high


def draw_panel(axes: Axes, panel: Panel, main: bool = False, bar: bool = True) -> None:
    """Draw an image with a colour bar of its height; pixels are square unless the image is a mere strip."""
    import matplotlib

    low, high = panel.limits
    rows, columns = panel.values.shape
    square = STRIP < rows / columns < 1 / STRIP
    colours = matplotlib.colormaps[panel.colours].with_extremes(bad=NO_DATA)
    block = max(1, math.ceil(max(rows, columns) / MOST_ACROSS[main]))
    values = reduced(panel.values, block)
    shown = axes.imshow(
        np.ma.masked_invalid(values),
        cmap=colours,
        vmin=low,
        vmax=high,
        aspect="equal" if square else "auto",
        interpolation_stage="data",
        # between pixels, one without a value would take its neighbours with it
        interpolation="auto" if np.isfinite(values).all() else "nearest",
        extent=(-0.5, block * values.shape[1] - 0.5, block * values.shape[0] - 0.5, -0.5),
    )
    axes.set(xlim=(-0.5, columns - 0.5), ylim=(rows - 0.5, -0.5), anchor="W")
    style = {"fontsize": 13, "fontweight": "bold"} if main else {"fontsize": 10}
    axes.set_title(panel.title, loc="left", **style)
    if bar:
        _draw_bar(axes, panel, shown, _width(axes, rows / columns if square else None), main)
    if main:
        axes.tick_params(labelsize=8, length=3, color="#888888", labelcolor="#555555")
        axes.set_xlabel("column", fontsize=8, color="#555555")
        axes.set_ylabel("row", fontsize=8, color="#555555")
        _whole_ticks(axes.xaxis, axes.yaxis)
    else:
        axes.set_xticks([])
        axes.set_yticks([])
    for spine in axes.spines.values():
        spine.set_linewidth(0.5)


def _draw_bar(axes: Axes, panel: Panel, shown: AxesImage, width: float, main: bool) -> None:
    """Draw the colour bar beside an image that is so many inches wide."""
    low, high = panel.limits
    finite = _sample(panel.values)
    below, above = bool(np.any(finite < low)), bool(np.any(finite > high))
    bar = axes.figure.colorbar(
        shown,
        cax=axes.inset_axes((1 + 0.06 / width, 0.0, (0.17 if main else 0.12) / width, 1.0)),
        extend=EXTEND[below, above],
        extendfrac=0.03,
    )
    bar.set_label(panel.label, fontsize=10 if main else 8)
    bar.ax.tick_params(labelsize=9 if main else 7)
    bar.ax.ticklabel_format(useOffset=False)
    bar.outline.set_linewidth(0.5)
    if panel.whole:
        _whole_ticks(bar.ax.yaxis)


def draw_course(axes: Axes, trace: Trace, tolerance: float) -> None:
    """Draw the relative gap by iteration, and the tolerance."""
    good = np.isfinite(trace.relative_gap) & (trace.relative_gap > 0)
    style = {"color": ACCENT, "linewidth": 1.4, "marker": "o", "markersize": 2.5}
    axes.semilogy(trace.iteration[good], trace.relative_gap[good], **style)
    axes.axhline(tolerance, color="#777777", linewidth=0.9, linestyle="--")
    axes.annotate(
        f"tolerance {tolerance:g}",
        (0.03, tolerance),
        xycoords=("axes fraction", "data"),
        fontsize=7,
        color="#555555",
        va="top",
        xytext=(0, -2),
        textcoords="offset points",
    )
    axes.margins(y=0.12)
    axes.set_title("Relative gap while solving", loc="left", fontsize=10)
    axes.set_xlabel("iteration", fontsize=8)
    axes.tick_params(labelsize=7)
    axes.minorticks_off()
    _whole_ticks(axes.xaxis)
    axes.grid(color="#e3e3e3", linewidth=0.5)
    axes.set_axisbelow(True)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)


def _width(axes: Axes, tall: float | None) -> float:
    """Return the width in inches of an image of this height over width in its axes; None fills them."""
    box = axes.get_position()
    width, height = box.width * axes.figure.get_figwidth(), box.height * axes.figure.get_figheight()
    return width if tall is None else min(width, height / tall)


def _whole_ticks(*lines: Axis) -> None:
    for line in lines:
        line.get_major_locator().set_params(integer=True, min_n_ticks=1)


def reduced(image: np.ndarray, block: int) -> np.ndarray:
    """Return the means of the finite values in square blocks of pixels, smaller at the far ends (float32)."""
    if block == 1:
        return np.asarray(image, np.float32)
    good = np.isfinite(image)
    sums, numbers = np.where(good, image, 0.0).astype(np.float64), good.astype(np.float64)
    for axis in (0, 1):
        starts = np.arange(0, image.shape[axis], block)
        sums, numbers = np.add.reduceat(sums, starts, axis), np.add.reduceat(numbers, starts, axis)
    with np.errstate(invalid="ignore"):
        return (sums / numbers).astype(np.float32)


def _sample(image: np.ndarray) -> np.ndarray:
    """Return the finite values, of every n-th pixel where there are very many."""
    flat = np.ravel(image)[:: -(-np.size(image) // MOST_SAMPLES)]
    return flat[np.isfinite(flat)]
