"""What to say of a misfit, and of what the data cannot tell."""

from __future__ import annotations

from collections.abc import Iterator

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.fit.statistic import Finding, Statistic
from recon.fit.tails import Brightest
from recon.imaging.background_check import BackgroundCheck
from recon.imaging.image import PhysicalImage
from recon.imaging.yield_trend import YieldTrend

NO_MISFIT = "no misfit that the data can show"
NOTHING = "too few detections: nothing can be said of the fit"
CAUSES = (
    "not converged", "pile-up", "overdispersion", "hot pixels", "weight too large", "weight too small",
    "background", "pulse too narrow", "pulse too wide", "drift",
)  # fmt: skip


def not_converged(image: PhysicalImage) -> Finding:
    """The image is not the answer to its problem."""
    gap = image.diagnostics.relative_gap
    return Finding(
        "not converged",
        f"NOT CONVERGED: {image.status.meaning}; the relative gap is {gap:.2g},"
        f" {image.tolerance:.2g} was wanted, and what is said below is of this image",
        image.status.remedy,
    )


def pile_up(index: Statistic, several: bool) -> Finding:
    """Numbers scatter too little."""
    short = 1.0 - index.observed / index.expected
    sentence = (
        f"detections scatter less than their law says: variance over its expectation {index.observed:.3f},"
        f" {index.expected:.3f} +- {index.standard_deviation:.3f} expected"
    )
    if several:
        share = 100.0 * short
        sentence += f"; it is so where a trial detects once at most and about {share:.0f} % of them do"
        return Finding("pile-up", sentence, "give the trials, and several_per_trial=False; or the dead time")
    return Finding("pile-up", sentence, "look for a dead time longer than a trial")


def overdispersion(index: Statistic) -> Finding:
    """Numbers scatter too much, and neighbours not together."""
    more = 100.0 * (index.observed / index.expected - 1.0)
    return Finding(
        "overdispersion",
        f"detections scatter by {more:.1f} % more than their law and smoothing explain: variance over its"
        f" expectation {index.observed:.3f}, {index.expected:.3f} +- {index.standard_deviation:.3f} expected",
        "look for afterpulses, a source that fluctuates, or a gain that differs from pixel to pixel; texture"
        " of single pixels, which the prior smooths away, scatters alike",
    )


def hot_pixels(lone: Statistic, brightest: Brightest | None) -> Finding:
    """Lone pixels are too bright."""
    most = ""
    if brightest is not None:
        most = (
            f"; the least likely, row {brightest.row}, column {brightest.column}, holds"
            f" {brightest.number:.4g} where {brightest.mean:.2g} are expected"
        )
    return Finding(
        "hot pixels",
        f"{lone.observed:.0f} pixels are brighter than their law allows while their neighbours are not,"
        f" {lone.expected:.1f} +- {lone.standard_deviation:.1f} expected{most}",
        "mask the pixels of `lone`, or give their dark counts in a background map, and ask again",
    )


def wrong_weight(test: Statistic, factor: float) -> Finding:
    """Another weight predicts better."""
    cause = "weight too large" if factor < 1.0 else "weight too small"
    by = f"{-test.z:.1f} standard errors"
    effect = "structure is smoothed away" if factor < 1.0 else "noise is left"
    return Finding(
        cause,
        f"{factor:g} times the weight predicts held-out data better ({by}): {effect}",
        f'multiply the weights by about {factor:g}, or leave them out with weight="auto"',
    )


def at_the_edge(image: PhysicalImage) -> Finding:
    """The weight chosen is the last one tried."""
    factors, chosen = image.choice.factors, image.choice.factor
    cause = "weight too large" if chosen <= factors[0] else "weight too small"
    return Finding(
        cause,
        f"the best weight is the last one that was tried, {chosen:.3g} times the rule of thumb; the best may"
        " lie beyond",
        "set the weight of the prior",
    )


def background(check: BackgroundCheck) -> Finding:
    """Tags away from the surface are not what was declared."""
    return Finding("background", check.words, f"declare a background of {check.found:.3g} detections a trial")


def pulse_width(width: Statistic) -> Finding:
    """Tags lie about the surface in another way than the pulse says."""
    ratio = width.observed / width.expected
    cause = "pulse too narrow" if ratio > 1.0 else "pulse too wide"
    return Finding(
        cause,
        f"tags scatter about the surface by {width.observed:.3g} m, {width.expected:.3g} +-"
        f" {width.standard_deviation:.1g} m expected of the pulse that is declared",
        "measure the pulse, with the jitter of the detector and the interval of the clock, on a flat target",
    )


def drift(trend: YieldTrend) -> Finding:
    """Frames change over the dwell."""
    remedy = "record the current (Frames(current=...)), or give unknown_current=True"
    if trend.cause == "yield":
        remedy = "look for charging and contamination, and use the frames before it"
    said = trend.note.rstrip(".")
    if trend.cause == "none":  # `YieldTrend` asks for more before it speaks of causes
        size = f"{100.0 * trend.change:+.1f} % (standard error {100.0 * trend.standard_error:.1f} %)"
        said = f"the electrons of a frame change by {size} over the dwell"
    return Finding("drift", said, remedy)


def unidentified(
    acquisition: Counts | TimeTags | TimeHistogram | Frames,
    name: str,
    weighed: bool,
    overdispersion: float | None = None,
) -> Iterator[str]:
    """Yield what these data cannot tell, whatever the tests say.

    weighed: whether the weight was tested. overdispersion: the least that could be told, a share of the law's
    variance.
    """
    if isinstance(acquisition, Frames):
        if acquisition.frames == 1:
            yield "dose against yield: one frame tells their product, and hardly their ratio"
        else:
            yield (
                "dose against yield, in part: their product is certain, their ratio is known only from how"
                " electrons bunch in frames"
            )
        yield "the efficiency of the detector against the yield: only detected electrons are counted"
    elif isinstance(acquisition, Counts):
        yield "a constant background against the image itself: numbers alone tell their sum"
        yield "gain against reflectivity: numbers alone tell their product"
    elif name == "depth":
        yield "time_zero against depth: a common delay of all tags moves every surface alike"
        yield "a wide pulse against a surface that is rough or steep within a pixel: both spread the tags"
    else:
        yield "gain against reflectivity: tags tell their product"
        yield "background that arrives with the pulse, such as scattered light, against reflectivity"
    if name != "depth":
        said = "overdispersion against texture finer than a pixel: both make lone pixels differ"
        if overdispersion is not None:
            said += f"; here, of less than {100.0 * overdispersion:.0f} % of the law's variance"
        yield said
    if not weighed:
        yield "the weight of the prior: no data were held out to test it"
