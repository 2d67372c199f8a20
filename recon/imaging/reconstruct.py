"""From an acquisition to its images, in one call."""

from __future__ import annotations

from collections.abc import Callable

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.errors import InputError
from recon.imaging.image import Reconstruction
from recon.imaging.task import Effort
from recon.problem import Prior, Sum
from recon.solvers import State
from recon.weights import checked_rule


def reconstruct(
    acquisition: Counts | TimeTags | TimeHistogram | Frames,
    prior: Prior | Sum | None = None,
    *,
    reflectivity_prior: Prior | Sum | None = None,
    tolerance: float | None = None,
    max_iterations: int = 30_000,
    callback: Callable[[str, State], object] | None = None,
    on_weight: Callable[[str, float], object] | None = None,
    weight: str = "auto",
    unknown_current: bool = False,
    moving: bool = False,
) -> Reconstruction:
    """Return the images that the acquisition allows, each with its uncertainty and its certificate.

    Counts give `.reflectivity`; TimeTags and a TimeHistogram give `.reflectivity` and `.depth`; Frames give
    `.electron_yield`.

    prior: the prior of the image (of the depth image, where there is one), for example
        priors.GeneralizedVariation(). Total variation if left out, for depth generalized variation. A weight
        that is left out is chosen from the data, see weight.
    reflectivity_prior: the prior of the reflectivity image beside a depth image; total variation if left out.
    tolerance: see `recon.solve`; 5e-4 if left out, for depth 1e-2.
    max_iterations: see `recon.solve`.
    weight: how weights that the priors leave open are set: "auto" = the one that predicts held-out data best
        (`recon.weights`), "rule" = a rule of thumb for the data, "discrepancy" = residuals as large as noise,
        "risk" = least unbiased estimate of the squared error, for Poisson counts and Gaussian readings
        (`recon.weights.whole_data`). For depth the last two are as "auto".
    unknown_current, moving: for Frames, whether to estimate the dose of every line from the frames, and
        whether to register frames that moved; see `recon.imaging.electron_yield`.
    callback: called with the name of the image and the state, as solving goes on; True stops that image.
    on_weight: called with the name of the image and each factor of the rule of thumb that is tried.

    Raises InputError for an argument that cannot be used.
    """
    for name, given in (("prior", prior), ("reflectivity_prior", reflectivity_prior)):
        if not (given is None or isinstance(given, Prior | Sum)):
            raise InputError(
                f"{name} is a {type(given).__name__}; give a prior such as priors.TotalVariation(),"
                " or leave it out."
            )
    if reflectivity_prior is not None and not isinstance(acquisition, TimeTags | TimeHistogram):
        raise InputError("reflectivity_prior is for TimeTags and TimeHistogram; for others give prior.")
    if (unknown_current or moving) and not isinstance(acquisition, Frames):
        name = "unknown_current" if unknown_current else "moving"
        raise InputError(f"{name} is for Frames; leave it out for a {type(acquisition).__name__}.")
    effort = Effort(tolerance, max_iterations, callback, on_weight, checked_rule(weight))
    if isinstance(acquisition, Counts):
        from recon.imaging.reflectivity import reflectivity

        return Reconstruction(acquisition, reflectivity=reflectivity(acquisition, prior, effort))
    if isinstance(acquisition, Frames):
        from recon.imaging.electron_yield import electron_yield

        return Reconstruction(
            acquisition,
            electron_yield=electron_yield(
                acquisition, prior, effort, unknown_current=unknown_current, moving=moving
            ),
        )
    if isinstance(acquisition, TimeTags | TimeHistogram):
        from recon.imaging.ranging import ranging

        tags = acquisition.tags() if isinstance(acquisition, TimeHistogram) else acquisition
        brightness, surface = ranging(tags, prior, reflectivity_prior, effort)
        return Reconstruction(acquisition, reflectivity=brightness, depth=surface)
    raise InputError(
        f"acquisition is a {type(acquisition).__name__}; give recon.Counts, recon.TimeTags,"
        " recon.TimeHistogram or recon.Frames."
    )
