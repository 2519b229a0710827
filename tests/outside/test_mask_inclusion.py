"""How often each point is taken, against the density that was asked for."""

from collections.abc import Callable

import numpy as np
import pytest
from scipy.stats import chi2, f, kstest

from skipline.masks import (
    Grid,
    VariableDensityLines,
    VariableDensityPoints,
    adaptive_law,
    fixed_size_draw,
    pivotal_draw,
)

DRAWS = 5000
LINES = (VariableDensityLines, Grid((96,), 8), 3)
POINTS = (VariableDensityPoints, Grid((20, 16), 4), 4)


def p_value(counts: np.ndarray, draws: int, probabilities: np.ndarray) -> float:
    """Chi-square test that points were taken with these probabilities, in draws of fixed size.

    Source, from memory: Hajek, Ann. Math. Stat. 35 (1964) 1491. In a design of fixed size and high entropy
    the number of
    times that a point is taken has the variance p (1 - p) a draw, smaller than the p of Pearson's test, and
    the covariances are c_i [i = j] - c_i c_j / sum c, with c - c^2 / sum c = p (1 - p). Then
    sum (counts - draws p)^2 / (draws c) has the chi-square distribution, with one degree of freedom less
    than there are points. Points of less than 5 expected hits or misses are pooled; covariances of this form
    keep it.
    """
    undecided = (probabilities > 0) & (probabilities < 1)
    assert (counts[~undecided] == draws * probabilities[~undecided]).all()
    p, excess = probabilities[undecided], (counts - draws * probabilities)[undecided]
    c = p * (1 - p)
    for _ in range(100):
        c = p * (1 - p) + c**2 / c.sum()
    rare = draws * np.minimum(p, 1 - p) < 5
    terms = list(excess[~rare] ** 2 / (draws * c[~rare]))
    if rare.any():
        terms.append(excess[rare].sum() ** 2 / (draws * c[rare].sum()))
    return float(chi2.sf(sum(terms), len(terms) - 1))


def count(draws: int, draw: Callable[[], np.ndarray]) -> np.ndarray:
    return np.sum([draw() for _ in range(draws)], axis=0, dtype=int)


def sequential_draw(probabilities: np.ndarray, rng: np.random.Generator) -> np.ndarray:
    """One point after another, each in proportion to the density of those that are left."""
    taken = probabilities == 1
    undecided = np.flatnonzero((probabilities > 0) & ~taken)
    weights = probabilities.ravel()[undecided]
    size = round(weights.sum())
    taken.reshape(-1)[rng.choice(undecided, size, replace=False, p=weights / weights.sum())] = True
    return taken


def hotelling(draws: np.ndarray, probabilities: np.ndarray) -> float:
    """Chi-square test that the mean of draws is the probabilities, whatever the covariances are.

    Source, from memory: Hotelling, Ann. Math. Stat. 2 (1931) 360: T^2 = n d' S^-1 d for the mean deviation d
    and the
    sample covariance S, and (n - k) / (k (n - 1)) T^2 has the F distribution. S has no inverse, as the size
    of the sample is fixed; what is constant must be right exactly, and the test is on the rest.
    """
    n = len(draws)
    deviation = (draws - probabilities).reshape(n, -1)
    rare = n * np.minimum(probabilities, 1 - probabilities).ravel() < 5
    deviation = np.column_stack([deviation[:, ~rare], deviation[:, rare].sum(axis=1)])
    mean, (variances, directions) = deviation.mean(axis=0), np.linalg.eigh(np.cov(deviation.T))
    varying = variances > 1e-9
    along = directions.T @ mean
    assert np.allclose(along[~varying], 0, atol=1e-6)
    k = int(varying.sum())
    t2 = n * float(np.sum(along[varying] ** 2 / variances[varying]))
    return float(f.sf((n - k) / (k * (n - 1)) * t2, k, n - k))


@pytest.fixture(scope="module")
def laws(tmp_path_factory: pytest.TempPathFactory) -> Callable[[Grid], dict[str, dict]]:
    """The options of every law, for a grid; those of a file are of its shape."""
    folder = tmp_path_factory.mktemp("laws")

    def options(grid: Grid) -> dict[str, dict]:
        rng = np.random.default_rng(19)
        # a smooth random object, for the adaptive law
        x, y = np.ix_(np.linspace(-1, 1, grid.shape[0]), np.linspace(-1, 1, (*grid.shape, 24)[1]))
        images = [np.exp(-((x - a) ** 2 + (y - b) ** 2) * 8) * (x < c) for a, b, c in rng.random((3, 3)) / 2]
        of_files = {
            "file": rng.random(grid.shape) ** 2,
            "adaptive": adaptive_law(images, range(grid.axes)) ** 0.25,
        }
        for name, law in of_files.items():
            np.save(folder / f"{name}{grid.axes}.npy", law)
        return {
            **{f"power {p}": {"law": "power", "power": p} for p in (0, 1, 2, 4)},
            **{f"gaussian {w}": {"law": "gaussian", "width": w} for w in (0.2, 0.5)},
            "uniform": {"law": "uniform"},
            **{name: {"law": str(folder / f"{name}{grid.axes}.npy")} for name in of_files},
        }

    return options


EVERY = [
    "power 0",
    "power 1",
    "power 2",
    "power 4",
    "gaussian 0.2",
    "gaussian 0.5",
    "uniform",
    "file",
    "adaptive",
]
UNEQUAL = [name for name in EVERY if name not in ("power 0", "uniform")]
DESIGNS = pytest.mark.parametrize("design", [LINES, POINTS], ids=["lines", "points"])


@pytest.mark.parametrize("law", EVERY)
@DESIGNS
def test_inclusion_frequencies_are_the_density(design, law: str, laws) -> None:
    pattern_class, grid, acceleration = design
    pattern = pattern_class(**laws(grid)[law])
    rng = np.random.default_rng(20)
    density = pattern.density(grid, acceleration)
    assert density.sum() == pytest.approx(grid.samples(acceleration), abs=1e-9)
    counts = count(DRAWS, lambda: pivotal_draw(density, rng))
    assert p_value(counts, DRAWS, density) > 1e-3
    # the pattern draws with this density
    one = pattern.draw(grid, acceleration, np.random.default_rng(5))
    assert np.array_equal(one, pivotal_draw(density, np.random.default_rng(5)))


CONSTRAINED = {
    "plain": {},
    "shutter and partial Fourier": {"shutter": True, "partial_fourier": 0.75},
    "conjugates skipped": {"skip_conjugates": True},
    "all": {"shutter": True, "partial_fourier": 0.8, "skip_conjugates": True, "train_length": 5},
}


@pytest.mark.parametrize("law", ["power 2", "file"])
@pytest.mark.parametrize("constraints", CONSTRAINED)
@pytest.mark.parametrize("spread", [False, True], ids=["", "spread"])
@DESIGNS
def test_inclusion_frequencies_with_constraints_and_spread(
    design, spread: bool, constraints: str, law: str, laws
) -> None:
    pattern_class, grid, acceleration = design
    grid = Grid(grid.shape, grid.calibration, **CONSTRAINED[constraints])
    pattern = pattern_class(**laws(grid)[law], spread=spread)
    density = pattern.density(grid, acceleration)
    assert density.sum() == pytest.approx(grid.samples(acceleration), abs=1e-9)
    assert (density[~grid.allowed()] == 0).all()
    rng = np.random.default_rng(24)
    draws = np.array([fixed_size_draw(grid, density, rng, spread=spread) for _ in range(DRAWS)])
    assert hotelling(draws, density) > 1e-3


@pytest.mark.parametrize("law", UNEQUAL)
@DESIGNS
def test_sequential_drawing_fails_the_same_check(design, law: str, laws) -> None:
    # Source, from memory: Tille, Sampling Algorithms (2006): successive drawing does not keep the inclusion
    # probabilities.
    pattern_class, grid, acceleration = design
    density = pattern_class(**laws(grid)[law]).density(grid, acceleration)
    rng = np.random.default_rng(21)
    draws = np.array([sequential_draw(density, rng) for _ in range(2000)])
    assert p_value(draws.sum(axis=0), 2000, density) < 1e-9
    assert hotelling(draws, density) < 1e-9


def test_the_check_of_any_design_is_calibrated() -> None:
    density = VariableDensityLines(power=2).density(Grid((24,), 4), 3)
    rng = np.random.default_rng(25)
    found = [
        hotelling(np.array([pivotal_draw(density, rng) for _ in range(400)]), density) for _ in range(100)
    ]
    assert kstest(found, "uniform").pvalue > 1e-3


def test_spread_draws_are_more_even() -> None:
    # Source, from memory: Grafstrom 2012: well spread samples have Voronoi polytopes of about one unit of
    # probability. The
    # balance B = mean (v_i - 1)^2 over the samples, v_i the sum of the probabilities nearest to sample i.
    from scipy.spatial import KDTree

    density = VariableDensityPoints(power=1).density(Grid((32, 24)), 6)
    where = np.argwhere(np.ones(density.shape))

    def balance(spread: bool) -> float:
        pattern, rng = VariableDensityPoints(power=1, spread=spread), np.random.default_rng(26)
        found = []
        for _ in range(30):
            taken = pattern.draw(Grid((32, 24)), 6, rng)
            nearest = KDTree(np.argwhere(taken)).query(where)[1]
            v = np.bincount(nearest, weights=density.ravel(), minlength=int(taken.sum()))
            found.append(np.mean((v - 1) ** 2))
        return float(np.mean(found))

    assert balance(True) < 0.5 * balance(False)


def test_the_check_itself_is_calibrated() -> None:
    # p-values of independent batches are uniform: the test is neither too strict nor too lenient.
    density = VariableDensityLines(power=2).density(Grid((48,), 4), 3)
    rng = np.random.default_rng(22)
    found = [p_value(count(400, lambda: pivotal_draw(density, rng)), 400, density) for _ in range(100)]
    assert kstest(found, "uniform").pvalue > 1e-3


def test_equal_probabilities_make_every_pair_equally_likely() -> None:
    # Source: elementary sampling theory. In simple random sampling of K of N without replacement every pair
    # is taken with the probability K (K - 1) / (N (N - 1)); a systematic draw keeps neighbours apart.
    points, samples, draws = 24, 6, 20_000
    rng = np.random.default_rng(23)
    taken = np.array(
        [pivotal_draw(np.full(points, samples / points), rng) for _ in range(draws)], dtype=float
    )
    together = (taken.T @ taken)[np.triu_indices(points, 1)]
    expected = draws * samples * (samples - 1) / (points * (points - 1))
    # 276 pairs, each binomial
    assert abs(together - expected).max() < 4.5 * np.sqrt(expected)
    assert np.var(together) == pytest.approx(expected, rel=0.35)
