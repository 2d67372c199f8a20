"""Draws the frames of a scanned beam, primary by primary."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import Frames, MarkLaw
from recon.acquisition.frames import line_factors
from recon.acquisition.mark_law import checked_law
from recon.simulate.beam_faults import MovingScene
from recon.simulate.inputs import affordable, generator, image_of, positive_whole, product
from recon.validation import POSITIVE, number_or_map

MOST_PIXELS = 2e9  # more would not fit the memory of an ordinary computer
MOST_PARTICLES = 1e9  # in a pixel of a frame, so that its count fits four bytes


def frames(
    eta: ArrayLike,
    dose: ArrayLike,
    frames: int,
    *,
    law: MarkLaw | None = None,
    current: ArrayLike | None = None,
    hidden_current: ArrayLike | None = None,
    stage_drift: ArrayLike | None = None,
    charging: float = 0.0,
    seed: int | np.random.Generator,
) -> Frames:
    """Draw the electron counts of every frame, or their readings.

    In each frame a pixel is hit by a Poisson number of primaries, `dose` expected, and each primary
    releases a Poisson number of detected electrons, `eta` expected. With a law every electron adds a
    Gaussian reading of its own and the readout its noise; readings above the ceiling are the ceiling.

    Parameters
    ----------
    eta : yield, electrons per primary, image (rows, columns), zero or more.
    dose : primaries per pixel per frame, above zero, scalar or map (rows, columns).
    frames : number of frames.
    law : what electrons read; None = their number.
    current : factors of the dose, (frames,) or (frames, rows), recorded in the acquisition.
    hidden_current : the same, but not recorded: what a monitor of the beam missed. `flicker` draws some.
    stage_drift : (frames, 2) shifts of the scene in pixels (row, column), not recorded: frame f sees at
        pixel (i, j) eta at (i - stage_drift[f, 0], j - stage_drift[f, 1]), interpolated bilinearly, as a
        beam does that averages over a pixel's area; beyond the border stands the nearest pixel.
    charging : relative change of the yield from the first frame to the last, in equal steps, -1 or
        more, not recorded.
    seed : whole number, or a numpy Generator to go on drawing from.

    Counts have the smallest unsigned type that holds them, readings are float32. Raises InputError if an
    argument is not as described.
    """
    eta = image_of(eta, "eta")
    dose = number_or_map(dose, "dose", eta.shape, POSITIVE)
    frames = positive_whole(frames, "frames")
    law = checked_law(law)
    rng = generator(seed)
    affordable("eta and frames", frames * eta.size, "pixels in all frames", MOST_PIXELS)
    scene = MovingScene(eta, frames, stage_drift, charging)
    beam = _beam(frames, eta.shape[0], current=current, hidden_current=hidden_current)
    primaries = product(eta.shape, dose, 1.0 if beam is None else beam.max())
    particles = max(primaries.max(), product(eta.shape, primaries, scene.most).max())
    affordable("eta and dose", particles, "particles in a pixel of a frame", MOST_PARTICLES)
    # Frames are drawn one by one into the smallest type, widened when a frame needs it.
    stack = np.empty((frames, *eta.shape), np.uint8 if law is None else np.float32)
    for f in range(frames):
        expected = dose if beam is None else dose * beam[f][:, None]
        electrons = _electrons(scene.frame(f), expected, rng)
        if law is None:
            stack = stack.astype(
                np.promote_types(stack.dtype, np.min_scalar_type(electrons.max())), copy=False
            )
        stack[f] = electrons if law is None else _readings(electrons, law, rng)
    return Frames(stack, dose, law=law, current=current)


def _beam(frames: int, rows: int, **factors: ArrayLike | None) -> NDArray | None:
    """The product of the factors that are given, (frames, rows), or None."""
    given = [line_factors(value, name, frames, rows) for name, value in factors.items() if value is not None]
    if not given:
        return None
    return product((frames, rows), *(f if f.ndim == 2 else f[:, None] for f in given))


def _electrons(eta: NDArray, dose: float | NDArray, rng: np.random.Generator) -> NDArray[np.integer]:
    """Draw the electrons of one frame.

    The electrons of M primaries, each a Poisson number of mean eta, are a Poisson number of mean M eta.
    """
    return rng.poisson(rng.poisson(dose, eta.shape) * eta)


def _readings(electrons: NDArray, law: MarkLaw, rng: np.random.Generator) -> NDArray[np.float64]:
    """Draw the readings of one frame: N Gaussians add up to one of N times the mean and variance."""
    gains = rng.normal(law.gain * electrons, np.sqrt(law.variance * electrons))
    return np.minimum(gains + rng.normal(law.offset, law.noise, electrons.shape), law.ceiling)
