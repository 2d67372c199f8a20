"""Does the model fit the data?"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from recon.acquisition import Frames
from recon.diagnostics import Status
from recon.errors import InputError
from recon.fit import words
from recon.fit.count_laws import WaitingLaw, count_law
from recon.fit.drift import drift_statistic, trend_of
from recon.fit.numbers import OVER, judged_numbers
from recon.fit.quantile_residuals import Histogram, histogram, quantile_residuals
from recon.fit.statistic import Finding, Statistic
from recon.fit.tags import background_statistic, share_statistic, width_statistic
from recon.fit.tails import lone_pixels
from recon.fit.weight import weight_test
from recon.imaging.depth import DepthImage
from recon.imaging.image import PhysicalImage, Reconstruction
from recon.likelihoods.contract import LEAST_SHARED

# The chance of a false alarm that each test may cause; together, with those of `recon.fit.numbers`, below 5 %
# for every acquisition (Bonferroni).
LARGE, SMALL = 0.005, 0.003
WIDTH, BACKGROUND = 0.003, 0.002
DRIFT, OVER_OF_FRAMES = 0.02, 0.01


@dataclass(frozen=True, eq=False)
class ImageFit:
    """How well one image and its model explain the data.

    name: of the image. residuals: float64 (rows, columns), see `quantile_residuals`; NaN without data, and
        everywhere for depth, whose tests are those of tags. histogram: of them; None for depth.
    lone: boolean map of lone bright pixels.
    statistics: every number that was looked at. findings: what does not fit; often none.
    unidentified: sentences on what these data cannot tell, whatever the tests say.
    enough: whether there are data enough to say anything.
    least_overdispersion: the least that could be told, a share of the law's variance; None where not asked.
    """

    name: str
    residuals: np.ndarray
    histogram: Histogram | None
    lone: np.ndarray
    statistics: tuple[Statistic, ...]
    findings: tuple[Finding, ...]
    unidentified: tuple[str, ...]
    enough: bool
    least_overdispersion: float | None = None

    @property
    def verdict(self) -> str:
        """What there is to say, in sentences."""
        said = [f"{f.cause}: {f.sentence}; remedy: {f.remedy}" for f in self.findings]
        if not self.enough:
            said.append(words.NOTHING)
        return ". ".join(said) or words.NO_MISFIT

    def __getitem__(self, name: str) -> Statistic:
        """Return the statistic of that name. Raises KeyError."""
        for one in self.statistics:
            if one.name == name:
                return one
        raise KeyError(name)


@dataclass(frozen=True, eq=False)
class Goodness:
    """How well a reconstruction explains its data; images: an `ImageFit` for each image, by name."""

    images: Mapping[str, ImageFit]

    @property
    def findings(self) -> tuple[Finding, ...]:
        """What does not fit, in any image."""
        return tuple(f for fit in self.images.values() for f in fit.findings)

    @property
    def fits(self) -> bool:
        """Whether nothing was found."""
        return not self.findings

    @property
    def verdict(self) -> str:
        """What there is to say, image by image, and what the data cannot tell."""
        lines = []
        for name, fit in self.images.items():
            lines.append(f"{name}: {fit.verdict}.")
            lines.extend(f"{name}, not to be told from these data: {what}." for what in fit.unidentified)
        return "\n".join(lines)


def goodness(
    result: Reconstruction, *, seed: int = 0, callback: Callable[[str, float], object] | None = None
) -> Goodness:
    """Return whether the images and their models explain the data, with the causes of what does not fit.

    Tests of numbers (reflectivity and yield), each against data drawn from the image and fitted again:
        dispersion (`recon.fit.dispersion`): too little = pile-up, too much = overdispersion. The latter is
            asked at twice the weights, where less of the noise is fitted, and the expectation grows by what
            draws say of structure lost in smoothing (`recon.fit.refits`): in a scene of fine texture
            little can be told, and from how much on is said;
        lone bright pixels, their number and the least likely one (`recon.fit.tails`) = hot pixels;
        held-out scores at a quarter of the weights and at four times them (`recon.fit.weight`), unless
            held-out data chose them.
    Of time tags (depth): their spread about the surface = the pulse, their number away from it = the
    background. Of frames: their change over the dwell = drift.

    The deviance and the autocorrelation of residuals are told beside, and deny nothing: an image at its best
    weight has lost some structure, too. The chances of a false alarm of all tests of an acquisition add up
    to less than 5 % (Bonferroni). Differences too small to matter are let pass: 2 % of dispersion too
    little, 1 % too much, three lone pixels in a thousand, 15 % of the pulse's width, 1 % of drift.

    result: what `recon.reconstruct` returned. seed: of the draws. callback: called with the name of the image
    and the share of its simulations that is done. Takes about twenty-five solves of each image.

    Raises InputError.
    """
    if not isinstance(result, Reconstruction):
        raise InputError(f"result is a {type(result).__name__}; give what recon.reconstruct returned.")
    found: dict[str, ImageFit] = {}
    for name, image in result.images.items():

        def told(share: float, name: str = name) -> object:
            return None if callback is None else callback(name, share)

        fit = _depth_fit if isinstance(image, DepthImage) else _number_fit
        found[name] = fit(name, image, result.acquisition, seed, told)
    return Goodness(found)


def _number_fit(
    name: str, image: PhysicalImage, acquisition: object, seed: int, told: Callable[[float], object]
) -> ImageFit:
    likelihood = image.problem.likelihood
    lone = lone_pixels(likelihood, image.image)
    findings = [] if image.status is Status.CONVERGED else [words.not_converged(image)]
    enough, least = _enough(image), None
    residuals = quantile_residuals(likelihood, image.image, seed)
    statistics: list[Statistic] = []
    weighed = image.choice is not None and image.choice.folds > 0
    if enough:
        if weighed and image.choice.at_edge:
            findings.append(words.at_the_edge(image))
        if image.choice is None or (not weighed and image.choice.factors.size):  # not by held-out data
            test = weight_test(image, acquisition, LARGE, SMALL)
            weighed = test is not None
            if test is not None:
                statistics += test.statistics
                findings += [words.wrong_weight(one, test.better) for one in test.statistics if one.denies]
        chance = OVER_OF_FRAMES if isinstance(acquisition, Frames) else OVER
        told_of, causes, least = judged_numbers(image, lone, seed, told, findings, chance)
        statistics += told_of
        findings += causes
        if isinstance(acquisition, Frames):
            known = getattr(likelihood, "_factors", None)
            frames = acquisition
            if known is not None and frames.current is None:
                frames = Frames(frames.counts, frames.dose, frames.mask, current=known)
            trend = trend_of(frames, image.image)
            if trend is not None:
                statistics.append(drift_statistic(trend, DRIFT))
                findings += [words.drift(trend)] if statistics[-1].denies else []
    return ImageFit(
        name, residuals, histogram(residuals), lone, tuple(statistics), tuple(findings),
        tuple(words.unidentified(acquisition, name, weighed, least)), enough, least,
    )  # fmt: skip


def _enough(image: PhysicalImage) -> bool:
    """Whether there are detections enough to ask anything of."""
    likelihood = image.problem.likelihood
    law = count_law(likelihood, image.image)
    if law is None or isinstance(law, WaitingLaw):
        return int(np.count_nonzero(likelihood.has_data)) >= LEAST_SHARED
    return float(law.number[likelihood.has_data].sum()) >= LEAST_SHARED


def _depth_fit(
    name: str, image: DepthImage, acquisition: object, seed: int, told: Callable[[float], object]
) -> ImageFit:
    findings = [] if image.status is Status.CONVERGED else [words.not_converged(image)]
    statistics: list[Statistic] = []
    likelihood = image.problem.likelihood
    enough = likelihood.y.size >= LEAST_SHARED
    weighed = image.choice is not None and image.choice.folds > 0
    if enough:
        if weighed and image.choice.at_edge:
            findings.append(words.at_the_edge(image))
        away = background_statistic(image, BACKGROUND)
        width = width_statistic(image, seed, WIDTH, told)
        statistics = [one for one in (away, width) if one is not None]
        if likelihood.has_data.any():
            statistics.append(share_statistic(image, seed))
        if away is not None and away.denies:
            findings.append(words.background(image.background))
        if width is not None and width.denies:
            findings.append(words.pulse_width(width))
    nothing = np.full(image.image.shape, np.nan)
    return ImageFit(
        name, nothing, None, np.zeros(nothing.shape, bool), tuple(statistics), tuple(findings),
        tuple(words.unidentified(acquisition, name, weighed)), enough and bool(statistics),
    )  # fmt: skip
