"""Total variation denoising against closed forms.

Sources: Rudin, Osher and Fatemi 1992 (the objective); Strong and Chan 2003 (the disc); Davies and Kovac
2001 (the line); from memory, recomputed.
"""

import numpy as np
import pytest

import priors
import recon
from recon.likelihoods import Gaussian


def denoise(image: np.ndarray, prior: priors.Prior, tolerance: float = 1e-4) -> recon.Solution:
    solution = recon.solve(recon.Problem(Gaussian(image, 1.0), prior), tolerance=tolerance)
    assert solution.converged
    return solution


def test_disc_plateau_is_lowered_by_twice_the_weight_over_the_radius() -> None:
    rows, columns = np.mgrid[:256, :256] - 127.5
    inside = rows**2 + columns**2 <= 40.0**2
    image = denoise(inside.astype(float), priors.TotalVariation(5.0)).image
    centre = rows**2 + columns**2 <= 30.0**2
    assert image[centre].mean() == pytest.approx(1.0 - 2.0 * 5.0 / 40.0, rel=0.01)


def test_square_plateau_isotropic() -> None:
    image = np.zeros((256, 256))
    image[88:168, 88:168] = 1.0
    plateau = denoise(image, priors.TotalVariation(5.0)).image[118:138, 118:138].mean()
    assert plateau == pytest.approx(1.0 - 5.0 * (2.0 + np.sqrt(np.pi)) / 80.0, rel=0.01)


def test_square_plateau_anisotropic_is_exact() -> None:
    image = np.zeros((128, 128))
    image[24:104, 24:104] = 1.0
    solution = denoise(image, priors.TotalVariation(5.0, isotropic=False))
    # Far from the border the plateau falls by weight * perimeter / area and the surround does not matter.
    np.testing.assert_allclose(solution.image[44:84, 44:84], 1.0 - 4.0 * 5.0 / 80.0, rtol=0.01)


@pytest.mark.parametrize("transposed", [False, True])
@pytest.mark.parametrize(
    ("weight", "expected", "objective"),
    [
        (1.0, (2, 2, 4.5, 4.5, 1.5, 1.5, 3), 10.5),
        (2.0, (2.5, 2.5, 3.5, 3.5, 7 / 3, 7 / 3, 7 / 3), None),
        (3.142857, (19 / 7,) * 7, None),
    ],
)
def test_line(weight: float, expected: tuple[float, ...], objective: float | None, transposed: bool) -> None:
    signal = np.array([[1.0, 2, 6, 5, 1, 0, 4]])
    image = signal.T if transposed else signal
    solution = denoise(image, priors.TotalVariation(weight), tolerance=1e-6)
    np.testing.assert_allclose(solution.image.ravel(), expected, atol=2e-3)
    if objective is not None:
        assert solution.diagnostics.objective == pytest.approx(objective, rel=1e-5)


def test_spacing_scales_the_differences() -> None:
    rng = np.random.default_rng(2)
    image = rng.random((1, 40))
    plain = denoise(image, priors.TotalVariation(0.1), 1e-5).image
    wide = denoise(image, priors.TotalVariation(0.2, spacing=(1.0, 2.0)), 1e-5).image
    np.testing.assert_allclose(plain, wide, atol=1e-3)


def test_missing_pixels_stop_the_differences() -> None:
    """Two halves with a column that does not exist between them are denoised independently."""
    rng = np.random.default_rng(3)
    image = rng.random((12, 21))
    mask = np.ones(image.shape, bool)
    mask[:, 10] = False
    whole = denoise(image, priors.TotalVariation(0.3, mask=mask), 1e-5).image
    left = denoise(image[:, :10], priors.TotalVariation(0.3), 1e-5).image
    right = denoise(image[:, 11:], priors.TotalVariation(0.3), 1e-5).image
    np.testing.assert_allclose(whole[:, :10], left, atol=2e-3)
    np.testing.assert_allclose(whole[:, 11:], right, atol=2e-3)
    np.testing.assert_allclose(whole[:, 10], image[:, 10], atol=1e-4)
