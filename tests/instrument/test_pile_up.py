"""First photons: pile-up, range walk and the best flux, against published values and quadrature."""

import numpy as np
import pytest
from scipy import integrate, optimize, stats

from recon.errors import InputError
from recon.instrument import best_on_off_flux, first_photon_walk, pile_up_correction


def test_coates():
    """Coates 1968, J. Phys. E 1:878 (recomputed)."""
    fractions = [0.0951626, 0.1640192, 0.2442329, 0.0900156, 0.0386902]
    found = pile_up_correction(fractions, 1.0)
    np.testing.assert_allclose(found, [0.1, 0.2, 0.4, 0.2, 0.1], atol=1e-6)


def test_coates_of_many_histograms():
    counts = np.array([[[3, 0, 4], [0, 0, 0]]])
    found = pile_up_correction(counts, np.array([[10, 7]]))
    np.testing.assert_allclose(found[0, 0], -np.log([7 / 10, 1, 3 / 7]), rtol=1e-12, atol=1e-15)
    np.testing.assert_array_equal(found[0, 1], 0.0)


def test_a_bin_that_takes_all():
    found = pile_up_correction([2, 3, 0], 5)
    assert found[0] == pytest.approx(-np.log(3 / 5))
    assert np.isinf(found[1])
    assert np.isnan(found[2])


def test_range_walk():
    """Mean shift over rms width (recomputed for the check values)."""
    mean, mode = first_photon_walk([0.05, 0.5, 1, 3, 5])
    np.testing.assert_allclose(mean, [-0.01410, -0.1405, -0.2781, -0.7541, -1.0816], atol=5e-5)
    np.testing.assert_allclose(mode, -np.array([0.05, 0.5, 1, 3, 5]) * stats.norm.pdf(mode), rtol=1e-12)


@pytest.mark.parametrize("s", [1e-6, 0.3, 20.0, 1e4])
def test_range_walk_by_quadrature(s):
    """The mean of the truncated exponential in u = Phi(z), through its quantile."""
    first = stats.truncexpon(b=s, scale=1 / s)
    expected, error = integrate.quad(
        lambda q: stats.norm.ppf(first.ppf(q)), 0, 1, epsabs=1e-9, epsrel=1e-9, limit=500
    )
    assert first_photon_walk(s)[0] == pytest.approx(expected, abs=max(20 * error, 1e-7))


def test_best_flux():
    """Fisher 1922, dilution series (recomputed): x = 1.593624, (e^x - 1)/x^2 = 1.544139."""
    x = best_on_off_flux()
    assert x == pytest.approx(1.593624, abs=5e-7)
    assert np.expm1(x) / x**2 == pytest.approx(1.544139, abs=5e-7)
    found = optimize.minimize_scalar(lambda u: np.expm1(u) / u**2, bounds=(0.5, 4), method="bounded")
    assert x == pytest.approx(found.x, abs=1e-4)


CASES = [
    (pile_up_correction, ([3, 3], 5), "histogram holds 6 detections in 5 periods"),
    (pile_up_correction, ([[1, 1], [3, 3]], 5), r"histogram at \(1,\) holds 6"),
    (pile_up_correction, ([1, -1], 5), r"histogram at \(1,\) is -1"),
    (pile_up_correction, (3, 5), "histogram is one number"),
    (pile_up_correction, ([[1, 1], [1, 1]], [5, 5, 5]), r"periods has shape \(3,\)"),
    (first_photon_walk, ([1.0, 0.0],), r"mean_photons at \(1,\) is 0"),
    (first_photon_walk, (1e31,), r"mean_photons is 1e\+31"),
]


@pytest.mark.parametrize(("function", "arguments", "message"), CASES)
def test_one_sentence(function, arguments, message):
    with pytest.raises(InputError, match=message) as caught:
        function(*arguments)
    assert str(caught.value).endswith(".")
    assert ";" in str(caught.value)
