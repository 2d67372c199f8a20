"""Secondary-electron yield: estimators, priors, analog chains, stripes, drift, error without a reference."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np

import priors
import recon
from recon.bundled import bundled
from recon.files import load_truth
from recon.imaging.beam_current import estimate_current
from recon.imaging.electron_yield import electron_yield
from recon.imaging.held_out_error import held_out_error
from recon.imaging.registration import register
from recon.imaging.yield_estimators import conventional_yield, time_resolved_yield, total_dose
from recon.likelihoods import MovingFrames, Poisson, PoissonMarks
from tests.bench.measure import Row, at_least, at_most, seconds

GROUP = "yield"
SEEDS = range(5)
DOSE, FRAMES = 0.125, 128
FISHER = {2.0: 1.968, 3.0: 2.913, 5.0: 4.685}  # check values of the project: ratio of Fisher informations
LAW = recon.acquisition.MarkLaw(gain=1.0, variance=1.0, noise=0.3)


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    yield from estimators()
    yield from coupon()
    yield analog()
    yield from stripes()
    yield from drift()
    yield without_reference()
    yield from speed()


def estimators() -> Iterator[Row]:
    """Mean squared error of the conventional ratio over that of maximum likelihood, no prior."""
    for eta, limit in FISHER.items():
        for frames in (FRAMES, 8 * FRAMES):
            gains, biases = [], []
            for seed in SEEDS:
                drawn = recon.simulate.frames(np.full((128, 128), eta), DOSE, frames, seed=seed)
                resolved = time_resolved_yield(drawn).image
                plain = conventional_yield(drawn).image
                gains.append(np.mean((plain - eta) ** 2) / np.mean((resolved - eta) ** 2))
                biases.append(resolved.mean() / eta - 1.0)
            detail = f"ratio of Fisher informations {limit}, bias {100.0 * np.mean(biases):.2f} %"
            name = f"gain of frames, yield {eta:g}, {frames} frames"
            yield at_least(GROUP, name, float(np.mean(gains)), "x", 0.94 * limit, detail)


def coupon() -> Iterator[Row]:
    """The bundled coupon: the best prior at its best weight against the conventional image."""
    frames, truth = recon.load(bundled("coupon.h5")), load_truth(bundled("coupon.h5"))["electron_yield"]
    plain = float(np.mean((conventional_yield(frames).image - truth) ** 2))
    total = Poisson.from_arrays(
        frames.counts.sum(axis=0), np.asarray(total_dose(frames), np.float32)
    )  # the same prior on the conventional image
    marks = PoissonMarks(frames)

    def family(w: float) -> priors.Sum:
        return priors.WaveletSparsity(w) + priors.TotalVariation(0.3 * w)

    ours, weight = _best(marks, family, truth, (1.0, 1.2, 1.4))
    yield at_least(GROUP, "coupon, conventional over best", plain / ours, "x", 8.0, f"weight {weight}")
    other, at = _best(total, family, truth, (1.6, 2.2, 3.0, 4.0))
    detail = f"mean squared error {ours:.4f} against {other:.4f} at weight {at}"
    yield at_most(GROUP, "coupon, over the prior on the ratio", ours / other, "x", 0.6, detail)
    chosen = electron_yield(frames)
    by_hand, _ = _best(marks, priors.TotalVariation, truth, (1.2, 1.4, 1.6, 1.8))
    loss = float(np.sqrt(np.mean((chosen.image - truth) ** 2) / by_hand))
    detail = f"weight {chosen.priors[0].weight:.2f}"
    yield at_most(GROUP, "coupon, chosen weight over best", loss, "x rms", 1.03, detail)


def _best(
    likelihood: recon.likelihoods.Likelihood,
    family: Callable[[float], priors.Prior | priors.Sum],
    truth: np.ndarray,
    weights: tuple[float, ...],
) -> tuple[float, float]:
    """Return the least mean squared error over the weights, and the weight."""
    found, start = [], None
    for weight in weights:
        start = recon.solve(recon.Problem(likelihood, family(weight)), tolerance=1e-3, start=start).image
        found.append((float(np.mean((start - truth) ** 2)), weight))
    return min(found)


def analog() -> Row:
    """What an analog chain leaves of the gain of counting in frames, yield 3."""
    shares = []
    for seed in SEEDS:
        eta = np.full((64, 64), 3.0)
        read = recon.simulate.frames(eta, DOSE, FRAMES, law=LAW, seed=seed)
        counted = recon.simulate.frames(eta, DOSE, FRAMES, seed=seed)
        errors = [
            np.mean((estimate(drawn).image - 3.0) ** 2)
            for drawn in (read, counted)
            for estimate in (conventional_yield, time_resolved_yield)
        ]
        shares.append((errors[0] / errors[1]) / (errors[2] / errors[3]))
    return at_least(GROUP, "analog over counting gain", float(np.mean(shares)), "x", 0.6, "same estimators")


def scene(size: int = 192) -> np.ndarray:
    """Return an invented coupon: discs, bars, a slope, and a straight edge along the lines."""
    i, j = np.mgrid[:size, :size] / size
    eta = 1.5 + 1.0 * j
    eta[(i > 0.35) & (i < 0.6) & (j > 0.1) & (j < 0.9)] = 3.5
    eta[(i - 0.2) ** 2 + (j - 0.3) ** 2 < 0.01] = 4.5
    eta[(i > 0.7) & (np.floor(24 * j) % 2 == 0)] = 3.0
    eta[(i - 0.8) ** 2 + (j - 0.75) ** 2 < 0.012] = 5.0
    return eta


def stripes() -> Iterator[Row]:
    """Stripes of 10 % rms, the same in every frame, unknown."""
    for size, limit in ((192, 0.015), (512, 0.015)):
        eta, left, errors = scene(size), [], []
        for seed in SEEDS if size < 512 else (0,):
            factors = recon.simulate.flicker(FRAMES, size, 0.1, per_frame=False, seed=100 + seed)
            striped = recon.simulate.frames(eta, DOSE, FRAMES, hidden_current=factors, seed=seed)
            clean = recon.simulate.frames(eta, DOSE, FRAMES, seed=seed)
            found = estimate_current(striped).factors
            ratio = found.mean(axis=0) / np.asarray(factors).mean(axis=0)
            left.append(float(np.std(ratio / ratio.mean())))
            prior = priors.TotalVariation(1.6)
            mended = recon.Frames(striped.counts, striped.dose, current=found)
            images = [electron_yield(frames, prior).image for frames in (mended, clean)]
            errors.append(np.mean((images[0] - eta) ** 2) / np.mean((images[1] - eta) ** 2))
        name = f"stripes of 10 %, {size} columns"
        bound = np.sqrt(1.0 / (FRAMES * DOSE * size))
        detail = f"counted primaries alone leave {bound:.4f}"
        yield at_most(GROUP, f"{name}, left", float(np.median(left)), "rms", limit, detail)
        yield at_most(GROUP, f"{name}, error over clean", float(np.median(errors)), "x", 1.15, "")


def drift() -> Iterator[Row]:
    """A drift of two pixels over the dwell, unknown: the error over that of frames at rest."""
    size = 128
    eta = scene(size)
    path = np.linspace(-1.0, 1.0, FRAMES)[:, None] * np.array([0.8, 0.6])
    ratios, off = [], []
    inner = (slice(4, -4), slice(4, -4))
    for seed in SEEDS:
        moved = recon.simulate.frames(eta, DOSE, FRAMES, stage_drift=path, seed=seed)
        still = recon.simulate.frames(eta, DOSE, FRAMES, seed=seed)
        shifts = register(moved).shifts
        off.append(float(np.sqrt(np.mean((shifts - path + path.mean(axis=0)) ** 2))))
        prior = priors.TotalVariation(1.4)
        found = recon.solve(recon.Problem(MovingFrames(moved, shifts), prior), tolerance=1e-3).image
        rest = electron_yield(still, prior).image
        ratios.append(np.mean((found - eta)[inner] ** 2) / np.mean((rest - eta)[inner] ** 2))
    detail = f"shifts off by {np.median(off):.3f} pixels rms"
    yield at_most(GROUP, "drift of 2 pixels, error over still", float(np.median(ratios)), "x", 1.2, detail)


def without_reference() -> Row:
    """The mean squared error estimated from held-out frames over the true one."""
    eta = scene(192)
    prior = priors.TotalVariation(1.4)
    ratios = []
    for seed in SEEDS:
        frames = recon.simulate.frames(eta, DOSE, FRAMES, seed=seed)
        true: list[float] = []

        def fit(part: recon.Frames, true: list[float] = true) -> np.ndarray:
            image = electron_yield(part, prior).image
            true.append(float(np.mean((image - eta) ** 2)))
            return image

        estimated = held_out_error(frames, fit, seed=seed).error
        ratios.append(estimated / np.mean(true))
    off = abs(float(np.mean(ratios)) - 1.0)
    return at_most(
        GROUP, "error without a reference, off by", off, "", 0.05, f"{np.round(ratios, 3).tolist()}"
    )


def speed() -> Iterator[Row]:
    """512 x 512 pixels, 128 frames of uint8."""
    eta = np.kron(scene(128), np.ones((4, 4)))
    frames = recon.simulate.frames(eta, DOSE, FRAMES, seed=0)
    plain = seconds(lambda: frames.counts.sum(axis=0), 5)
    ours = seconds(lambda: PoissonMarks(frames).estimate(), 5)
    detail = f"{ours:.2f} s against {plain:.3f} s"
    yield at_most(GROUP, "maximum likelihood over a sum", ours / plain, "x", 6.0, detail)
    prior = priors.TotalVariation(1.4)
    took = seconds(lambda: electron_yield(frames, prior), 1)
    yield at_most(GROUP, "with total variation, weight given", took, "s", 3.0, "")
