"""The Neyman Type A law: probabilities, the primaries behind a count, the Fisher information."""

import math

import mpmath
import numpy as np
import pytest
from scipy.stats import poisson

from recon.likelihoods import neyman
from recon.likelihoods.neyman_information import frame_information, share_of_information

TABLE = neyman.coefficients()


def posterior(y, lam, eta):
    return neyman.posterior(y, neyman.law(lam, eta), TABLE)


def probabilities(last, lam, eta):
    return np.exp([posterior(y, lam, eta)[0] for y in range(last + 1)])


def information(lam, eta):
    return lam / eta * share_of_information(lam, eta, TABLE)


@pytest.mark.parametrize(
    ("lam", "eta", "expected"),
    [
        (2.0, 3.0, [0.14950494, 0.04466048, 0.07366126, 0.08766655, 0.08830195]),
        (0.125, 2.0, [0.89755302, 0.03036765, 0.03088137]),
    ],
)
def test_probabilities_published(lam, eta, expected):
    # Neyman 1939; Johnson, Kemp and Kotz
    np.testing.assert_allclose(probabilities(len(expected) - 1, lam, eta), expected, atol=5e-9)


@pytest.mark.parametrize(("lam", "eta"), [(2.0, 3.0), (0.125, 2.0), (30.0, 0.2), (7.0, 9.0)])
def test_recurrence_and_moments(lam, eta):
    # Johnson, Kemp and Kotz: the recurrence; mean lam eta, variance lam eta (1 + eta)
    last = 400
    p = np.zeros(last + 1)
    p[0] = math.exp(-lam * (1.0 - math.exp(-eta)))
    weights = poisson.pmf(np.arange(last), eta)
    for k in range(last):
        p[k + 1] = lam * eta / (k + 1) * np.dot(weights[: k + 1], p[k::-1])
    ours = probabilities(last, lam, eta)
    np.testing.assert_allclose(ours, p, rtol=1e-11)
    y = np.arange(last + 1)
    mean = np.dot(ours, y)
    assert math.isclose(ours.sum(), 1.0, rel_tol=1e-12)
    assert math.isclose(mean, lam * eta, rel_tol=1e-12)
    assert math.isclose(np.dot(ours, (y - mean) ** 2), lam * eta * (1.0 + eta), rel_tol=1e-11)


def exact(y, lam, eta):
    """Log P(y), E[M|y] and Var[M|y] by a sum over M in 40 digits, outward from its largest term."""
    lam, eta = mpmath.mpf(lam), mpmath.mpf(eta)
    log_a = mpmath.log(lam) - eta
    middle = int(mpmath.e**log_a) if y == 0 else max(1, int(y / mpmath.lambertw(y * mpmath.e**-log_a).real))

    def log_term(m):
        return m * log_a + (y * mpmath.log(m) if y else 0) - mpmath.loggamma(m + 1)

    moments = [mpmath.mpf(0)] * 3
    for step in (1, -1):
        m = middle if step == 1 else middle - 1
        while m >= (1 if y else 0):
            term = mpmath.exp(log_term(m) - log_term(middle))
            moments = [total + term * m**power for power, total in enumerate(moments)]
            if term < mpmath.mpf(10) ** -30:
                break
            m += step
    total, mean, square = moments[0], moments[1] / moments[0], moments[2] / moments[0]
    log_p = -lam + y * mpmath.log(eta) - mpmath.loggamma(y + 1) + log_term(middle) + mpmath.log(total)
    return log_p, mean, square - mean**2


EXTREMES = [
    *((0, lam, eta) for lam in (1e-4, 1e4) for eta in (1e-3, 2.0, 50.0)),
    *((1, lam, eta) for lam in (1e-4, 1e4) for eta in (1e-3, 50.0)),
    (2, 1e-4, 50.0), (3, 1e4, 1e-3), (8, 0.125, 2.0), (40, 1.0, 0.01), (40, 14.5, 2.4), (60, 1e-4, 50.0),
    *((y, lam, eta) for y in (160, 161) for lam, eta in ((80.0, 2.0), (1e-3, 40.0), (1e4, 0.01))),
    (200, 0.6, 0.5), (500, 5.0, 50.0), (1500, 500.0, 3.0), (3000, 1e4, 0.3), (5000, 100.0, 50.0),
    (5000, 1e-4, 50.0), (3000, 1e4, 1e-3), (2500, 50.0, 0.01), (4000, 1.0, 50.0),
]  # fmt: skip


@pytest.mark.parametrize(("y", "lam", "eta"), EXTREMES)
def test_against_forty_digits(y, lam, eta):
    with mpmath.workdps(40):
        log_p, mean, variance = exact(y, lam, eta)
        got = posterior(y, lam, eta)
        assert abs(mpmath.expm1(got[0] - log_p)) < 1e-10
        assert abs(got[1] / mean - 1) < 1e-12
        assert abs(got[2] / variance - 1) < 1e-10


@pytest.mark.parametrize("seed", range(3))
def test_random_against_forty_digits(seed):
    rng = np.random.default_rng(seed)
    with mpmath.workdps(40):
        for _ in range(12):
            lam, eta = 10.0 ** rng.uniform(-4.0, 2.5), 10.0 ** rng.uniform(-3.0, 1.7)
            y = int(rng.poisson(eta * max(rng.poisson(lam), 1)))
            log_p, mean, variance = exact(y, lam, eta)
            got = posterior(y, lam, eta)
            assert abs(mpmath.expm1(got[0] - log_p)) < 1e-12
            assert abs(got[1] / mean - 1) < 1e-13
            assert abs(got[2] / variance - 1) < 1e-11


@pytest.mark.parametrize(("lam", "eta"), [(0.125, 2.0), (15.0, 3.0), (300.0, 0.4), (2.0, 30.0)])
def test_primaries_from_the_next_count(lam, eta):
    # E[M|y] = (y + 1) P(y + 1) / (eta P(y)), E[M|0] = lam exp(-eta)
    for y in (0, 1, 2, 7, 30, 159, 160, 161, 300):
        log_p, mean, _ = posterior(y, lam, eta)
        ratio = math.exp(posterior(y + 1, lam, eta)[0] - log_p)
        assert math.isclose(mean, (y + 1) / eta * ratio, rel_tol=1e-11)
    assert math.isclose(posterior(0, lam, eta)[1], lam * math.exp(-eta), rel_tol=1e-15)


def test_log_probability_is_minus_infinity_without_yield():
    assert posterior(0, 2.0, 0.0)[0] == 0.0
    for y in (1, 160, 161):
        log_p, mean, variance = posterior(y, 2.0, 0.0)
        assert log_p == -math.inf
        assert math.isfinite(mean)
        assert math.isfinite(variance)


def test_not_a_number_ends():
    for y in (0, 1, 160, 161, 5000):
        assert all(math.isnan(number) for number in posterior(y, 2.0, math.nan))


@pytest.mark.parametrize("eta", [0.3, 1.0, 2.0, 5.0])
def test_information_limits(eta):
    # limits of many faint frames and of one long dwell (recomputed from the law)
    assert math.isclose(information(1e-8, eta) / 1e-8, 1.0 / eta - math.exp(-eta), rel_tol=1e-6)
    assert math.isclose(information(1e7, eta) / 1e7, 1.0 / (eta * (1.0 + eta)), rel_tol=1e-6)


def test_information_recomputed_values():
    # recomputed with numpy from the definition
    shares = (0.334302, 0.265414, 0.224287, 0.191348, 0.172885)
    for lam, expected in zip((0.1, 0.5, 1.0, 2.0, 5.0), shares, strict=True):
        assert math.isclose(information(lam, 2.0) / lam, expected, abs_tol=5e-7)
    for lam, expected, digits in ((0.125, 0.24276, 5e-6), (1.0, 0.135818, 5e-7), (16.0, 0.08448, 5e-6)):
        assert math.isclose(information(lam, 3.0) / lam, expected, abs_tol=digits)
    for eta, gain in zip((1.0, 2.0, 3.0, 5.0), (1.264, 2.188, 3.403, 5.798), strict=True):
        faint, bright = information(1e-8, eta) / 1e-8, information(1e7, eta) / 1e7
        assert math.isclose(faint / bright, gain, abs_tol=5e-4)
        assert math.isclose(faint / bright, (1 + eta) * (1 - eta * math.exp(-eta)), rel_tol=2e-6)


@pytest.mark.parametrize(
    ("lam", "eta"), [(0.125, 2.0), (3.0, 0.01), (20.0, 6.0), (0.3, 100.0), (150.0, 0.8), (130.0, 20.0)]
)
def test_information_by_mixture(lam, eta):
    m = np.arange(int(lam + 12.0 * math.sqrt(lam) + 15.0))[:, None]
    y = np.arange(int(m[-1, 0] * eta + 10.0 * math.sqrt(m[-1, 0] * eta) + 10.0))
    joint = poisson.pmf(m, lam) * poisson.pmf(y, m * eta)
    p = joint.sum(axis=0)
    seen = p > 0.0
    score = y[seen] / eta - (m * joint)[:, seen].sum(axis=0) / p[seen]
    assert math.isclose(information(lam, eta), np.dot(p[seen], score**2), rel_tol=1e-9)


@pytest.mark.parametrize("seed", range(3))
def test_information_of_an_image(seed):
    rng = np.random.default_rng(seed)
    eta = np.exp(rng.uniform(np.log(0.01), np.log(20.0), (12, 5)))
    for dose in (np.exp(rng.uniform(np.log(0.05), np.log(30.0), eta.shape)), np.full((1, 5), 0.125)):
        lam = np.broadcast_to(dose, eta.shape)
        expected = np.vectorize(information)(lam, eta)
        np.testing.assert_allclose(frame_information(eta, dose), expected, rtol=2e-7)
    flat = np.full((3, 4), 2.0)
    got = frame_information(flat, np.full((1, 4), 0.5))
    np.testing.assert_allclose(got, information(0.5, 2.0), rtol=1e-13)
    assert np.all(np.isinf(frame_information(np.zeros((2, 2)), np.full((1, 2), 0.5))))
