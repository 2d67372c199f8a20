"""Wavelet sparsity: exact maps, published thresholds' shrinkage, and one penalty in two forms."""

import numpy as np
import pytest
import pywt

import priors
from priors.array_block import ArrayBlock
from priors.decimated import Decimated
from priors.undecimated import Undecimated

SHAPES = [(1, 6), (7, 9), (8, 8), (5, 12), (33, 20), (64, 48)]


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("wavelet", ["haar", "db2", "sym4", "coif1"])
@pytest.mark.parametrize("invariant", [True, False])
def test_the_adjoint_is_exact(shape: tuple[int, int], wavelet: str, invariant: bool) -> None:
    rng = np.random.default_rng(3)
    prior = priors.WaveletSparsity(1.0, wavelet, translation_invariant=invariant)
    x = rng.standard_normal(shape)
    details = prior.forward(x)
    y = rng.standard_normal(details.shape)
    assert np.sum(details * y) == pytest.approx(np.sum(x * prior.adjoint(y, shape)), rel=1e-12, abs=1e-12)


@pytest.mark.parametrize("wavelet", ["haar", "db2", "sym4"])
def test_away_from_the_border_the_frame_is_tight(wavelet: str) -> None:
    """The squares of the details and of the last low-pass image add up to those of the image."""
    x = np.zeros((160, 160))
    x[72:88, 72:88] = np.random.default_rng(0).standard_normal((16, 16))
    transform = Undecimated(x.shape, wavelet, 3)
    details = transform.forward(x)
    image = transform.extend(x)
    for level in range(3):
        gap, taps = 2**level, transform.low
        for axis in (0, 1):
            n = image.shape[axis] - (taps.size - 1) * gap
            image = sum(f * np.take(image, np.arange(t * gap, t * gap + n), axis) for t, f in enumerate(taps))
    assert np.sum(details**2) + np.sum(image**2) == pytest.approx(np.sum(x**2), rel=1e-9)


@pytest.mark.parametrize("wavelet", ["haar", "db2", "sym4"])
def test_undecimated_details_are_those_of_the_stationary_transform(wavelet: str) -> None:
    """Away from the border, against `pywt.swt2`, normalised alike."""
    x = np.zeros((128, 128))
    x[60:70, 55:75] = np.random.default_rng(1).standard_normal((10, 20))
    ours = Undecimated(x.shape, wavelet, 2).forward(x)
    theirs = pywt.swt2(x, wavelet, 2, trim_approx=True, norm=True)
    for level in range(2):
        mine = sorted(np.sum(details**2) for details in ours[level])
        other = sorted(np.sum(details**2) for details in theirs[2 - level])
        np.testing.assert_allclose(mine, other, rtol=1e-9)


@pytest.mark.parametrize("levels", [1, 2])
def test_orthonormal_coefficients_are_those_of_pywavelets(levels: int) -> None:
    x = np.random.default_rng(2).standard_normal((64, 96))
    transform = Decimated(x.shape, "db3", levels)
    theirs, _ = pywt.coeffs_to_array(pywt.wavedec2(x, "db3", "periodization", levels))
    np.testing.assert_allclose(
        np.sort(np.abs(transform.coefficients(x)), axis=None), np.sort(np.abs(theirs), axis=None), atol=1e-10
    )
    assert np.sum(transform.coefficients(x) ** 2) == pytest.approx(np.sum(x**2), rel=1e-12)


@pytest.mark.parametrize("shape", [(7, 9), (33, 20), (40, 64)])
@pytest.mark.parametrize("invariant", [True, False])
def test_the_norm_bound_is_above_the_norm(shape: tuple[int, int], invariant: bool) -> None:
    prior = priors.WaveletSparsity(1.0, "sym4", translation_invariant=invariant)
    x = np.random.default_rng(9).standard_normal(shape)
    for _ in range(300):
        x /= np.linalg.norm(x)
        x = prior.adjoint(prior.forward(x), shape)
    norm = np.linalg.norm(x)
    assert norm <= prior.norm_squared(shape) <= 4.0 * norm


@pytest.mark.parametrize("shape", [(7, 9), (40, 33)])
@pytest.mark.parametrize("wavelet", ["haar", "sym4"])
def test_the_compiled_block_steps_as_numpy_does(shape: tuple[int, int], wavelet: str) -> None:
    rng = np.random.default_rng(5)
    prior = priors.WaveletSparsity(0.3, wavelet)
    fast, plain = prior.block(shape), ArrayBlock(prior, shape)
    a, b = np.zeros(shape, np.float32), np.zeros(shape, np.float32)
    for step in range(6):
        x = rng.standard_normal(shape).astype(np.float32)
        fast.step(x, 0.5, 0.2, 1.9, a, step % 2 == 0)
        plain.step(x, 0.5, 0.2, 1.9, b, step % 2 == 0)
    np.testing.assert_allclose(a, b, atol=2e-6)
    values = fast.certify(x, a, True), plain.certify(x, b, True)
    np.testing.assert_allclose(values[0], values[1], rtol=1e-6)
    np.testing.assert_allclose(a, b, atol=2e-6)


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_the_orthonormal_prox_is_soft_thresholding(seed: int) -> None:
    """Optimality: x - z = step * (a subgradient), with details of size weight where z's are not zero."""
    x = np.random.default_rng(seed).standard_normal((16, 24))
    prior = priors.WaveletSparsity(0.4, "db2", levels=2, translation_invariant=False)
    z = prior.prox(x, 0.7)
    transform = Decimated(x.shape, "db2", 2)
    pull = transform.coefficients(x - z) / 0.7
    kept = transform.coefficients(z)
    assert np.all(np.abs(pull[transform.is_detail]) <= 0.4 + 1e-9)
    big = transform.is_detail & (np.abs(kept) > 1e-9)
    np.testing.assert_allclose(pull[big], 0.4 * np.sign(kept[big]), atol=1e-9)
    np.testing.assert_allclose(pull[~transform.is_detail], 0.0, atol=1e-9)


def test_a_flat_image_costs_nothing_and_noise_costs_its_weight() -> None:
    for invariant in (True, False):
        one, two = (priors.WaveletSparsity(w, translation_invariant=invariant) for w in (1.0, 2.0))
        assert one.value(np.full((21, 30), 4.0)) == pytest.approx(0.0, abs=1e-5)
        noise = np.random.default_rng(0).standard_normal((21, 30))
        assert two.value(noise) == pytest.approx(2.0 * one.value(noise))


@pytest.mark.parametrize(
    ("settings", "words"),
    [
        ({"wavelet": "nosuch"}, "wavelet is 'nosuch'"),
        ({"wavelet": "bior2.2"}, "orthogonal"),
        ({"wavelet": 3}, "wavelet is 3"),
        ({"levels": 0}, "levels is 0"),
        ({"levels": 1.5}, "levels is 1.5"),
        ({"weight": 0.0}, "weight is 0.0"),
    ],
)
def test_bad_settings(settings: dict, words: str) -> None:
    with pytest.raises(priors.PriorError, match=words):
        priors.WaveletSparsity(**({"weight": 1.0} | settings))


def test_prox_is_refused_where_it_would_not_be_one() -> None:
    for prior, shape in (
        (priors.WaveletSparsity(1.0), (16, 16)),
        (priors.WaveletSparsity(1.0, levels=2, translation_invariant=False), (15, 16)),
    ):
        with pytest.raises(priors.PriorError, match="orthonormal"):
            prior.prox(np.zeros(shape), 1.0)
