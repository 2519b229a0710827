"""How often each point is taken, against the density that was asked for."""

from collections.abc import Callable

import numpy as np
import pytest
from scipy.stats import chi2, kstest

from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints, pivotal_draw

DRAWS = 5000
LINES = (VariableDensityLines, Grid((96,), 8), 3)
POINTS = (VariableDensityPoints, Grid((20, 16), 4), 4)


def p_value(counts: np.ndarray, draws: int, probabilities: np.ndarray) -> float:
    """Chi-square test that points were taken with these probabilities, in draws of fixed size.

    Source: Hajek, Ann. Math. Stat. 35 (1964) 1491. In a design of fixed size and high entropy the number of
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


@pytest.mark.parametrize("power", [0, 1, 2, 4])
@pytest.mark.parametrize("design", [LINES, POINTS], ids=["lines", "points"])
def test_inclusion_frequencies_are_the_density(design, power: float) -> None:
    pattern_class, grid, acceleration = design
    pattern = pattern_class(power=power)
    rng = np.random.default_rng(20)
    counts = count(DRAWS, lambda: pattern.draw(grid, acceleration, rng))
    assert p_value(counts, DRAWS, pattern.density(grid, acceleration)) > 1e-3


@pytest.mark.parametrize("power", [1, 2, 4])
@pytest.mark.parametrize("design", [LINES, POINTS], ids=["lines", "points"])
def test_sequential_drawing_fails_the_same_check(design, power: float) -> None:
    # Source: Tille, Sampling Algorithms (2006): successive drawing does not keep the inclusion probabilities.
    pattern_class, grid, acceleration = design
    density = pattern_class(power=power).density(grid, acceleration)
    rng = np.random.default_rng(21)
    assert p_value(count(DRAWS, lambda: sequential_draw(density, rng)), DRAWS, density) < 1e-20


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
