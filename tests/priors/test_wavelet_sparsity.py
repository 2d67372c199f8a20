"""Wavelet sparsity: exact maps, weights and shrinkage against PyWavelets, scipy and cvxpy."""

import cvxpy as cp
import numpy as np
import pytest
import pywt
from scipy.sparse.linalg import LinearOperator, eigsh

import priors
from priors.array_block import ArrayBlock
from priors.undecimated import Undecimated
from recon.testing import check_prior
from recon.testing.blocks import check_steps

SHAPES = [(1, 1), (1, 6), (17, 1), (2, 3), (7, 9), (8, 8), (33, 20), (61, 48)]
WAVELETS = ["haar", "db2", "sym4", "coif1", "db10"]


def central(shape: tuple[int, int], seed: int = 0) -> np.ndarray:
    """Return an image of noise in the middle of zeros: no border, hence no mirroring, has a say."""
    x = np.zeros(shape)
    middle = tuple(slice(n // 2 - 8, n // 2 + 8) for n in shape)
    x[middle] = np.random.default_rng(seed).standard_normal((16, 16))
    return x


def weighted(levels: list[tuple[np.ndarray, ...]], fading: float) -> float:
    """Return the penalty of PyWavelets' details, finest level first."""
    sums = [np.abs(h).sum() + np.abs(v).sum() + 2.0 * np.abs(d).sum() for h, v, d in levels]
    return sum(fading**j * total for j, total in enumerate(sums))


@pytest.mark.parametrize("seed", [0, 1, 2])
@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("wavelet", WAVELETS)
@pytest.mark.parametrize("invariant", [True, False])
def test_the_adjoint_is_exact(shape: tuple[int, int], wavelet: str, invariant: bool, seed: int) -> None:
    rng = np.random.default_rng(seed)
    prior = priors.WaveletSparsity(1.0, wavelet, translation_invariant=invariant)
    x = rng.standard_normal(shape)
    details = prior.forward(x)
    y = rng.standard_normal(details.shape)
    allowed = 1e-13 * np.linalg.norm(x) * np.linalg.norm(y)
    assert abs(np.sum(details * y) - np.sum(x * prior.adjoint(y, shape))) <= 10.0 * allowed


@pytest.mark.parametrize("wavelet", WAVELETS[:4])
def test_away_from_the_border_the_frame_is_tight(wavelet: str) -> None:
    """Details of levels 1, 2, ... and the low-pass image make up the image; at last the low-pass dies out."""
    x = central((700, 700))
    energies = [np.sum(Undecimated(x.shape, wavelet, j).forward(x) ** 2) for j in (1, 3, 5)]
    total = np.sum((x - x.mean()) ** 2)
    assert energies[0] < energies[1] < energies[2] <= np.sum(x**2) * (1.0 + 1e-12)
    assert energies[2] == pytest.approx(total, rel=0.02)


@pytest.mark.parametrize("wavelet", WAVELETS[:4])
def test_details_are_those_of_the_stationary_transform(wavelet: str) -> None:
    x = central((128, 128), 1)
    ours = Undecimated(x.shape, wavelet, 2).forward(x)
    theirs = pywt.swt2(x, wavelet, 2, trim_approx=True, norm=True)
    for level in range(2):
        horizontal, vertical, diagonal = theirs[2 - level]
        for mine, other in zip(ours[level], (vertical, horizontal, diagonal), strict=True):
            # PyWavelets' places are shifted; the values are the same.
            np.testing.assert_allclose(np.sort(mine, axis=None), np.sort(other, axis=None), atol=1e-12)


@pytest.mark.parametrize("wavelet", WAVELETS[:4])
def test_value_is_the_weighted_sum_of_stationary_details(wavelet: str) -> None:
    x = central((256, 256), 2)
    theirs = pywt.swt2(x, wavelet, 3, trim_approx=True, norm=True)
    value = priors.WaveletSparsity(0.7, wavelet, levels=3).value(x)
    assert value == pytest.approx(0.7 * weighted(theirs[:0:-1], 2.0**-2.5), rel=1e-12)


@pytest.mark.parametrize("wavelet", WAVELETS)
def test_value_is_the_weighted_sum_of_orthonormal_details(wavelet: str) -> None:
    x = np.random.default_rng(3).standard_normal((128, 96))
    theirs = pywt.wavedec2(x, wavelet, "periodization", 2)
    prior = priors.WaveletSparsity(0.7, wavelet, levels=2, translation_invariant=False)
    assert prior.value(x) == pytest.approx(0.7 * weighted(theirs[:0:-1], 0.5), rel=1e-12)
    low = np.sum(theirs[0] ** 2)
    assert np.sum(prior.forward(x) ** 2) == pytest.approx(np.sum(x**2) - low, rel=1e-9)


@pytest.mark.parametrize("wavelet", ["haar", "db2"])
def test_half_a_level_is_the_average_over_all_shifts(wavelet: str) -> None:
    """Coifman and Donoho 1995: what the docstring says of a fading of 2^-1."""
    x = central((64, 64), 4)
    sums = []
    for shift in np.ndindex(4, 4):
        moved = pywt.wavedec2(np.roll(x, shift, (0, 1)), wavelet, "periodization", 2)
        sums.append(sum(np.abs(details).sum() for level in moved[1:] for details in level))
    ours = np.abs(Undecimated(x.shape, wavelet, 2).forward(x)).sum(axis=(1, 2, 3))
    assert np.mean(sums) == pytest.approx(ours[0] / 2.0 + ours[1] / 4.0, rel=1e-12)


@pytest.mark.parametrize("invariant", [True, False])
@pytest.mark.parametrize("wavelet", WAVELETS[:4])
@pytest.mark.parametrize("shape", [(7, 9), (33, 20)])
def test_the_norm_bound_holds_and_is_close(shape: tuple[int, int], wavelet: str, invariant: bool) -> None:
    prior = priors.WaveletSparsity(1.0, wavelet, translation_invariant=invariant)
    n = shape[0] * shape[1]
    product = LinearOperator(
        (n, n), lambda x: prior.adjoint(prior.forward(x.reshape(shape)), shape).ravel(), dtype=float
    )
    start = np.random.default_rng(0).standard_normal(n)
    norm = eigsh(product, k=1, v0=start, return_eigenvectors=False)[0]
    assert norm <= prior.norm_squared(shape) * (1.0 + 1e-9)
    assert prior.norm_squared(shape) <= (1.06 if invariant else 4.0) * norm


def test_the_norm_of_a_large_image_is_that_of_its_border() -> None:
    bounds = [priors.WaveletSparsity(1.0, "db2").norm_squared((n, n)) for n in (200, 2000)]
    assert bounds[1] == pytest.approx(bounds[0], rel=0.01)


@pytest.mark.parametrize("wavelet", WAVELETS[:4])
@pytest.mark.parametrize("shape", SHAPES[1:])
def test_the_compiled_block_steps_as_numpy_does(shape: tuple[int, int], wavelet: str) -> None:
    prior = priors.WaveletSparsity(0.3, wavelet)
    check_steps(prior, shape, np.random.default_rng(5))
    fast, plain = prior.block(shape), ArrayBlock(prior, shape)
    a, b = np.zeros(shape, np.float32), np.zeros(shape, np.float32)
    x = np.random.default_rng(6).standard_normal(shape).astype(np.float32)
    for block, adjoint in ((fast, a), (plain, b)):
        block.step(x, 0.5, 0.2, 1.9, adjoint, True)
    values = fast.certify(x, a, True), plain.certify(x, b, True)
    np.testing.assert_allclose(values[0], values[1], rtol=1e-6, atol=1e-6)
    np.testing.assert_allclose(a, b, atol=2e-6)


@pytest.mark.parametrize(
    "settings",
    [{}, {"wavelet": "haar", "levels": 2}, {"translation_invariant": False}],
    ids=["default", "haar", "orthonormal"],
)
@pytest.mark.parametrize("shape", [(7, 9), (8, 8)])
def test_it_keeps_the_contract(settings: dict, shape: tuple[int, int]) -> None:
    check_prior(priors.WaveletSparsity(0.7, **settings), shape=shape)


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_the_orthonormal_prox_is_the_minimiser(seed: int) -> None:
    x = np.random.default_rng(seed).standard_normal((8, 12))
    prior = priors.WaveletSparsity(0.4, "db2", levels=2, translation_invariant=False)
    z = cp.Variable(x.shape)
    penalty, constraints = prior.expression(z, x.shape)
    cp.Problem(cp.Minimize(penalty + cp.sum_squares(z - x) / (2.0 * 0.7)), constraints).solve(cp.CLARABEL)
    np.testing.assert_allclose(prior.prox(x, 0.7), z.value, atol=1e-5)


@pytest.mark.parametrize("invariant", [True, False])
def test_a_flat_image_costs_nothing_and_duals_stay_in_their_box(invariant: bool) -> None:
    prior = priors.WaveletSparsity(1.0, translation_invariant=invariant)
    assert prior.value(np.full((21, 30), 4.0)) == pytest.approx(0.0, abs=1e-6)
    y = 10.0 * np.random.default_rng(7).standard_normal(prior.forward(np.zeros((21, 30))).shape)
    assert prior.conjugate(y) == np.inf
    assert prior.conjugate(prior.dual_prox(y, 0.3)) == 0.0


def test_expressions_of_large_images_are_refused() -> None:
    with pytest.raises(priors.PriorError, match="primal-dual"):
        priors.WaveletSparsity(1.0).expression(cp.Variable((65, 64)), (65, 64))


@pytest.mark.parametrize(
    ("settings", "words"),
    [
        ({"wavelet": "nosuch"}, "wavelet is 'nosuch'; give an orthogonal one, such as haar"),
        ({"wavelet": "bior2.2"}, "orthogonal"),
        ({"wavelet": 3}, "wavelet is 3"),
        ({"levels": 0}, "levels is 0"),
        ({"levels": 1.5}, "levels is 1.5"),
        ({"levels": True}, "levels is True"),
        ({"weight": 0.0}, "weight is 0.0"),
        ({"weight": -1.0}, "weight is -1.0"),
        ({"weight": np.nan}, "weight is nan"),
    ],
)
def test_bad_settings(settings: dict, words: str) -> None:
    with pytest.raises(priors.PriorError, match=words):
        priors.WaveletSparsity(**({"weight": 1.0} | settings))


@pytest.mark.parametrize("invariant", [True, False])
def test_more_levels_than_an_image_can_have(invariant: bool) -> None:
    prior = priors.WaveletSparsity(1.0, levels=9, translation_invariant=invariant)
    with pytest.raises(priors.PriorError, match=r"levels is 9, too many for images of shape \(20, 30\)"):
        prior.check_shape((20, 30))


def test_prox_is_refused_where_it_would_not_be_one() -> None:
    for prior, shape in (
        (priors.WaveletSparsity(1.0), (16, 16)),
        (priors.WaveletSparsity(1.0, levels=2, translation_invariant=False), (15, 16)),
    ):
        with pytest.raises(priors.PriorError, match="orthonormal"):
            prior.prox(np.zeros(shape), 1.0)
