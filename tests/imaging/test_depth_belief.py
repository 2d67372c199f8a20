"""The belief in depth against enumeration of every state of small images, and the evidence against sums."""

import itertools

import numpy as np
import pytest
from scipy import constants, integrate, optimize
from scipy.special import ndtr

from recon.acquisition import DeadTime, GaussianPulse, TimeTags
from recon.imaging import depth_belief as module
from recon.imaging.depth_belief import depth_belief
from recon.imaging.depth_lattice import SPLIT, SPLIT_BITS, depth_lattice, trust
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

SEEDS = range(3)
PERIOD = 40e-9
RANGE = 0.5 * constants.c * PERIOD


def acquire(seed, shape, rms=0.2 * PERIOD, signal=2.0, background=1.0, depth=None, trials=100, **more):
    """The likelihood of tags from random depths; without more said, a pulse so long that bins are few."""
    rng = np.random.default_rng(seed)
    z = rng.uniform(0.0, RANGE, shape) if depth is None else np.broadcast_to(depth, shape)
    reflectivity = rng.uniform(0.5, 1.5, shape)
    tags = time_tags(
        z, reflectivity, trials, PERIOD, GaussianPulse(rms), signal / trials, background / trials, seed=rng,
        **more,
    )  # fmt: skip
    return DetectionTimes(tags, reflectivity)


@pytest.fixture
def unpruned(monkeypatch):
    monkeypatch.setattr(module, "LEAST", 0.0)
    monkeypatch.setattr(module, "MOST", 1 << 20)


def listed(belief, values):
    """The values of all bins, (pixels, bins); zero where a bin is not listed."""
    full = np.zeros((belief.absent.size, belief.lattice.scene[0].size))
    pixel = np.repeat(np.arange(belief.absent.size), np.diff(belief.first))
    full[pixel, belief.place] = values
    return full


def states(likelihood):
    """The evidence of every bin (pixels, bins), and of no target (pixels,)."""
    lattice = depth_lattice(likelihood)
    bins, pixels = lattice.scene[0].size, likelihood.noise.size
    first = np.arange(pixels + 1) * bins
    place = np.tile(np.arange(bins, dtype=np.int32), pixels)
    likely, absent = module._Evidence(likelihood, lattice).on(0, first, place)
    return likely.reshape(pixels, bins).astype(float), absent.astype(float)


def ratio(length, width):
    """Of the geometric law that leaves a bin as often as an exponential law does from anywhere in it."""
    stays = integrate.dblquad(
        lambda b, a: np.exp(-abs(a - b) / length) / (2.0 * length), 0.0, width, 0.0, width
    )[0] / width  # fmt: skip
    return optimize.brentq(lambda r: (1.0 - r) / (1.0 + r) - stays, 0.0, 1.0)


def law(likelihood):
    """The law of the scene (bins,) and that of a neighbour given a pixel, (bins, bins)."""
    lattice = depth_lattice(likelihood)
    scene, core = lattice.scene[0].astype(float), likelihood.pulse.core
    away = np.abs(np.subtract.outer(np.arange(scene.size), np.arange(scene.size)))
    given = module.ANEW * np.tile(scene, (scene.size, 1))
    shares = (1.0 - module.ANEW - module.APART, module.APART)
    for share, length in zip(shares, (module.NEAR * core, module.FAR * core), strict=True):
        r = ratio(length, lattice.width)
        given += share * (1.0 - r) / (1.0 + r) * r**away
    return scene, given


def presence():
    """The law of a target and none (2,), and that of a neighbour given a pixel, (2, 2)."""
    leave, come = module.LEAVE, module.COME
    return np.array([come, leave]) / (leave + come), np.array([[1.0 - leave, leave], [come, 1.0 - come]])


def enumerated(evidence, scene, given, edges, root):
    """The weight of the root's states: the sum over every state of every pixel of a tree.

    edges: (parent, child) pairs, away from the root.
    """
    pixels, size = evidence.shape
    spread = [np.arange(size).reshape([-1 if k == p else 1 for k in range(pixels)]) for p in range(pixels)]
    joint = scene[spread[root]]
    for parent, child in edges:
        joint = joint * given[spread[parent], spread[child]]
    for p in range(pixels):
        joint = joint * evidence[p][spread[p]]
    return joint.sum(axis=tuple(k for k in range(pixels) if k != root))


def two_trees(shape, i, j):
    """The edges of a pixel's row with the columns that hang off it, and of its column with the rows."""
    index = np.arange(shape[0] * shape[1]).reshape(shape)
    of_row, of_column = line(j, list(index[i])), line(i, list(index[:, j]))
    for k in range(shape[1]):
        of_row += line(i, list(index[:, k]))
    for k in range(shape[0]):
        of_column += line(j, list(index[k]))
    return of_row, of_column


def line(root, pixels):
    """The edges of a line of pixels, away from the root (a place in the list)."""
    before = [(pixels[k], pixels[k - 1]) for k in range(root, 0, -1)]
    return before + [(pixels[k], pixels[k + 1]) for k in range(root, len(pixels) - 1)]


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize(
    ("columns", "settings"),
    [(5, {}), (6, {"signal": 0.7}), (3, {"rms": 0.05 * PERIOD, "trials": 9, "dead": 1})],
)
def test_a_row_is_a_chain(monkeypatch, unpruned, seed, columns, settings):
    """Every depth of every pixel, by enumeration of 10^5 and more; then with and without target."""
    monkeypatch.setattr(module, "DAMPING", 1.0)
    settings = dict(settings)
    if settings.pop("dead", 0):
        settings["dead_time"] = DeadTime(0.4 * PERIOD)
    likelihood = acquire(seed, (1, columns), **settings)
    (evidence, absent), (scene, given) = states(likelihood), law(likelihood)
    belief = depth_belief(likelihood)
    assert belief.lattice.levels == 1  # whether there is a target is asked on these bins, too
    found = listed(belief, belief.probability)
    assert np.isfinite(found).all()
    odds = np.empty(columns)
    for root in range(columns):
        chain = line(root, list(range(columns)))
        with_all = enumerated(evidence, scene, given, chain, root)
        np.testing.assert_allclose(found[root], with_all / with_all.sum(), rtol=1e-4, atol=1e-7)
        others = evidence.copy()
        others[root] = 1.0
        without = enumerated(others, scene, given, chain, root)
        odds[root] = with_all.sum() / without.sum() / absent[root]
    two_states = np.column_stack([odds, np.ones(columns)])
    for root in range(columns):
        expected = enumerated(two_states, *presence(), line(root, list(range(columns))), root)
        assert belief.absent[0, root] == pytest.approx(expected[1] / expected.sum(), rel=1e-4)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("shape", [(2, 3), (3, 2)])
def test_a_small_image_is_covered_by_two_trees(monkeypatch, unpruned, seed, shape):
    """Rows with the columns that hang off them, columns with the rows; their geometric mean."""
    monkeypatch.setattr(module, "DAMPING", 1.0)
    likelihood = acquire(seed, shape, rms=0.25 * PERIOD)
    (evidence, _), (scene, given) = states(likelihood), law(likelihood)
    belief = depth_belief(likelihood)
    found = listed(belief, belief.probability)
    for root, (i, j) in enumerate(itertools.product(*map(range, shape))):
        both = [enumerated(evidence, scene, given, edges, root) for edges in two_trees(shape, i, j)]
        expected = np.sqrt(both[0] * both[1])
        np.testing.assert_allclose(found[root], expected / expected.sum(), rtol=1e-4, atol=1e-7)


def test_damping_takes_messages_to_a_power(unpruned):
    """In a row of two a message comes from the neighbour's own tags alone."""
    likelihood = acquire(5, (1, 2))
    (evidence, absent), (scene, given) = states(likelihood), law(likelihood)
    belief = depth_belief(likelihood)
    found = listed(belief, belief.probability)
    odds = np.empty(2)
    for root in range(2):
        others = scene * (given @ evidence[1 - root]) ** module.DAMPING
        expected = others * evidence[root]
        np.testing.assert_allclose(found[root], expected / expected.sum(), rtol=1e-4, atol=1e-7)
        odds[root] = expected.sum() / others.sum() / absent[root]
    prior, given = presence()
    for root in range(2):
        there, not_there = given @ [odds[1 - root], 1.0]
        against = prior[1] / prior[0] / odds[root] * (not_there / there) ** module.DAMPING
        assert belief.absent[0, root] == pytest.approx(against / (1.0 + against), rel=1e-4)


def invented_odds(seed, size):
    """From twenty e-folds for a target to twenty against it."""
    return np.exp(np.random.default_rng(seed).uniform(-20.0, 20.0, size) * [*[0.1] * (size - 2), 1.0, 1.0])


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("shape", [(1, 12), (12, 1), (3, 4), (4, 3)])
def test_absence_by_enumeration_of_two_states(monkeypatch, seed, shape):
    """A line of pixels is a chain; an image is the geometric mean of its two trees."""
    monkeypatch.setattr(module, "DAMPING", 1.0)
    odds = invented_odds(seed, 12)
    found = module._absence(odds.astype(np.float32), shape)
    assert found.shape == shape
    evidence = np.column_stack([odds, np.ones(12)])
    for root, (i, j) in enumerate(itertools.product(*map(range, shape))):
        both = [enumerated(evidence, *presence(), edges, root) for edges in two_trees(shape, i, j)]
        expected = np.sqrt(both[0] * both[1])
        assert found[i, j] == pytest.approx(expected[1] / expected.sum(), rel=2e-4, abs=1e-12)


def test_absence_of_pixels_alone():
    """Bayes' rule; and odds beyond what float32 holds are certain, not NaN."""
    for odds in (1e-30, 1e-3, 1.0, 1e3, 1e12):
        expected = module.LEAVE / (module.LEAVE + module.COME * odds)
        found = module._absence(np.array([odds], np.float32), (1, 1))
        assert found[0, 0] == pytest.approx(expected, rel=1e-4)
    sure = module._absence(np.array([np.inf, 1e-30, np.inf, 1e-30], np.float32), (2, 2))
    np.testing.assert_allclose(sure, [[0.0, 1.0], [0.0, 1.0]], atol=1e-6)


@pytest.mark.parametrize("seed", SEEDS)
def test_probabilities_quantiles_and_masses(seed):
    likelihood = acquire(seed, (9, 11), rms=0.3e-9)
    belief = depth_belief(likelihood)
    full, width = listed(belief, belief.probability), belief.lattice.width
    np.testing.assert_allclose(full.sum(axis=1), 1.0, rtol=1e-5)
    assert full.min() >= 0.0
    assert belief.absent.min() >= 0.0
    assert belief.absent.max() <= 1.0
    edges = width * np.arange(full.shape[1] + 1)
    assert edges[-1] == pytest.approx(RANGE, rel=1e-12)
    share = np.pad(np.cumsum(full, axis=1), ((0, 0), (1, 0)))
    share /= share[:, -1:]
    for wanted in (0.16, 0.5, 0.84):
        places = belief.quantile(wanted).ravel()
        assert places.dtype == np.float32
        reached = [np.interp(z, edges, each) for z, each in zip(places, share, strict=True)]
        np.testing.assert_allclose(reached, wanted, atol=1e-4)
    np.testing.assert_array_equal(belief.depth, belief.quantile(0.5))
    rng = np.random.default_rng(seed)
    near = belief.depth + rng.uniform(-3.0, 3.0, (2, *belief.shape)) * width
    low, high = near.min(axis=0), near.max(axis=0)
    expected = [
        np.interp(b, edges, each) - np.interp(a, edges, each)
        for a, b, each in zip(low.ravel(), high.ravel(), share, strict=True)
    ]
    np.testing.assert_allclose(belief.probability_within(low, high).ravel(), expected, atol=1e-5)
    np.testing.assert_allclose(
        belief.probability_within(np.zeros((9, 11)), np.full((9, 11), RANGE)), 1.0, atol=1e-5
    )


def test_bins_are_listed_in_order_and_few():
    """However many tags: here up to 60 a pixel, most of them background, over three levels of bins."""
    likelihood = acquire(4, (12, 13), rms=0.03e-9, signal=2.0, background=60.0)
    belief = depth_belief(likelihood)
    assert belief.lattice.levels >= 3
    number = np.diff(belief.first)
    assert number.min() >= 1
    assert number.max() <= module.MOST * SPLIT
    assert belief.first[0] == 0
    assert belief.first[-1] == belief.place.size == belief.probability.size
    for lo, hi in itertools.pairwise(belief.first):
        assert np.all(np.diff(belief.place[lo:hi]) > 0)


@pytest.mark.parametrize("seed", SEEDS)
def test_bins_left_out_hardly_matter(monkeypatch, seed):
    row, column = np.mgrid[:14, :18]
    scene = np.where(column < 9, 2.0 + 0.005 * row, 3.5)
    likelihood = acquire(seed, scene.shape, rms=0.27e-9, signal=1.0, depth=scene)
    belief = depth_belief(likelihood)
    monkeypatch.setattr(module, "LEAST", 0.0)
    monkeypatch.setattr(module, "MOST", 1 << 20)
    whole = depth_belief(likelihood)
    assert np.diff(whole.first).min() == whole.lattice.scene[0].size
    moved = 0.5 * np.abs(listed(belief, belief.probability) - listed(whole, whole.probability)).sum(axis=1)
    assert moved.mean() < 0.01
    assert np.abs(belief.absent - whole.absent).max() < 0.02
    assert np.mean(np.abs(belief.depth - whole.depth) > 0.1 * likelihood.pulse.core) < 0.02


def written_out(likelihood, pixel, z, dead=None, gate=None):
    """The exponent of one pixel at depths z: tags over background, and the share of the trials lost."""
    metres, rms = 0.5 * constants.c, 0.5 * constants.c * likelihood.law.rms
    y = likelihood.y[likelihood.start[pixel] : likelihood.start[pixel + 1]]
    noise, weight = likelihood.noise.ravel()[pixel], trust(likelihood).ravel()[pixel]
    late = np.subtract.outer(y, z)
    late = late + RANGE * np.arange(-2, 3)[:, None, None]
    p = np.exp(-0.5 * (late / rms) ** 2).sum(axis=0) / (rms * np.sqrt(2.0 * np.pi))
    exponent = weight * np.log1p(p / noise).sum(axis=0)
    expected = weight * (likelihood.signal * likelihood.trials).ravel()[pixel]
    lost = np.zeros(z.size)

    def covered(begin, length):
        """The share of pulses at z within a stretch of range."""
        turns = RANGE * np.arange(-2, 3)[:, None] + begin - z
        return (ndtr((turns + length) / rms) - ndtr(turns / rms)).sum(axis=0)

    if dead is not None:
        lost += sum(covered(place, metres * dead) for place in y) / likelihood.trials.ravel()[pixel]
    if gate is not None:
        lost += covered(metres * gate[1], metres * (PERIOD - gate[1] + gate[0]))
    return exponent + expected * lost, expected


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("level", [0, 1])
@pytest.mark.parametrize(
    "case",
    [{}, {"depth": 0.02}, {"dead": 15e-9}, {"gate": (5e-9, 26e-9)}, {"signal": 25.0, "background": 9.0}],
)
def test_the_evidence_of_a_pixel_is_the_mean_over_a_bin(monkeypatch, seed, level, case):
    """With tags placed in their bins more finely than usual, what is left is the background's step of 5 %."""
    monkeypatch.setattr(module, "PHASES", 240)
    case = dict(case)
    dead, gate = case.pop("dead", None), case.get("gate")
    if dead is not None:
        case["dead_time"] = DeadTime(dead)
    compare(acquire(seed, (2, 4), rms=1e-9, trials=20 if dead else 100, **case), level, dead, gate)


def test_the_evidence_of_a_long_pulse_with_dead_time(monkeypatch):
    monkeypatch.setattr(module, "PHASES", 240)
    for seed in SEEDS:
        compare(acquire(seed, (2, 4), trials=9, dead_time=DeadTime(15e-9)), 0, 15e-9, None)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_evidence_of_a_long_pulse(monkeypatch, seed):
    monkeypatch.setattr(module, "PHASES", 240)
    compare(acquire(seed, (2, 4)), 0, None, None)


def compare(likelihood, level, dead, gate):
    """Hold the evidence of eight pixels to what is written out."""
    lattice = depth_lattice(likelihood)
    bins, size = lattice.scene[0].size, lattice.scene[level].size
    first, place = np.arange(9) * size, np.tile(np.arange(size, dtype=np.int32), 8)
    likely, absent = module._Evidence(likelihood, lattice).on(level, first, place)
    middle = lattice.width * (np.arange(bins) + 0.5)
    for pixel in range(8):
        exponent, expected = written_out(likelihood, pixel, middle, dead, gate)
        begins = np.arange(0, bins, 1 << SPLIT_BITS * level)
        parts = np.array_split(np.exp(exponent - exponent.max()), begins[1:])
        wanted = np.array([*(part.mean() for part in parts), np.exp(expected - exponent.max())])
        found = np.append(likely[first[pixel] : first[pixel + 1]], absent[pixel]).astype(float)
        tags = likelihood.start[pixel + 1] - likelihood.start[pixel]
        slack = 0.06 * tags + (0.03 * expected if dead or gate else 0.0) + 1e-4
        strong = wanted > 1e-9 * wanted.max()
        off = np.log(found[strong] / found.max()) - np.log(wanted[strong] / wanted.max())
        assert np.isfinite(found).all()
        assert np.abs(off).max() < slack


def test_pixels_that_tell_nothing_keep_the_law_of_the_scene(unpruned):
    """No pixel could have seen a signal: target as likely as anywhere, every depth alike."""
    likelihood = DetectionTimes(nothing(), 0.0)
    belief = depth_belief(likelihood)
    share = module.LEAVE / (module.LEAVE + module.COME)
    np.testing.assert_allclose(belief.absent, share, rtol=0.1)
    np.testing.assert_allclose(belief.depth, 0.5 * RANGE, rtol=1e-3)


def test_bins_left_out_do_not_speak_against_a_target():
    belief = depth_belief(DetectionTimes(nothing(), 0.0))
    share = module.LEAVE / (module.LEAVE + module.COME)
    np.testing.assert_allclose(belief.absent, share, rtol=0.5)


def nothing():
    return TimeTags(
        [0, 0, 2], [0, 0, 0], [9e-9, 10e-9, 10e-9], shape=(3, 1), trials=9, period=PERIOD,
        pulse=GaussianPulse(0.1e-9), background=0.01,
    )  # fmt: skip
