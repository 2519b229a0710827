"""Poisson-disc masks: exact distances, R to the nearest sample, constraints, reproducible."""

import hashlib
import subprocess
import sys
from typing import Any

import numpy as np
import pytest
from hypothesis import given, reject, settings
from hypothesis import strategies as st
from pydantic import ValidationError
from scipy.spatial.distance import cdist

from skipline import InputError
from skipline.masks.darts import throw
from skipline.masks.grid import Grid
from skipline.masks.metric import distance_from_centre, steps
from skipline.masks.poisson_disc import PoissonDisc

TIE = 1 - 1e-12  # rounding of a distance that equals a radius
seeds = st.integers(0, 2**32 - 1)
patterns = st.builds(
    PoissonDisc,
    growth=st.one_of(st.just(0.0), st.floats(0, 8)),
    aspect=st.one_of(st.none(), st.floats(0.3, 3)),
)


@st.composite
def designs(draw: st.DrawFn) -> tuple[Grid, float]:
    """A grid with constraints, and an acceleration that it can give."""
    shape = draw(st.tuples(st.integers(1, 40), st.integers(1, 40)))
    side = draw(st.integers(0, min(shape)))
    try:
        grid = Grid(
            shape,
            draw(st.sampled_from([0, side // 2, side // 3])),
            draw(st.sampled_from(["rectangle", "ellipse"])),
            shutter=draw(st.booleans()),
            partial_fourier=draw(st.sampled_from([1.0, 0.75, 0.6])),
            skip_conjugates=draw(st.booleans()),
            train_length=draw(st.sampled_from([None, 4])),
        )
        acceleration = draw(st.floats(1, 30))
        grid.samples(acceleration)
    except InputError:
        reject()
    return grid, acceleration


def places(mask: np.ndarray, lengths: tuple[float, float]) -> np.ndarray:
    return np.argwhere(mask) * np.array(lengths)


def check_distances(pattern: PoissonDisc, grid: Grid, mask: np.ndarray, radii: np.ndarray) -> None:
    """Every pair, by brute force."""
    region, lengths = grid.calibration_region(), steps(grid, pattern.aspect)
    outside = mask & ~region
    between = cdist(places(outside, lengths), places(outside, lengths))
    np.fill_diagonal(between, np.inf)
    assert (between >= TIE * np.maximum.outer(radii[outside], radii[outside])).all()
    if region.any() and outside.any():
        to_region = cdist(places(outside, lengths), places(region, lengths)).min(axis=1)
        assert (to_region >= TIE * radii[outside]).all()


@settings(max_examples=200, deadline=None)
@given(patterns, designs(), seeds)
def test_distances_samples_and_constraints(
    pattern: PoissonDisc, design: tuple[Grid, float], seed: int
) -> None:
    grid, acceleration = design
    mask, radii = pattern.draw_with_radii(grid, acceleration, np.random.default_rng(seed))
    assert mask.sum() == grid.samples(acceleration)
    assert grid.broken(mask) is None
    assert (grid.allowed() | ~mask).all()
    check_distances(pattern, grid, mask, radii)
    assert mask.tobytes() == pattern.draw(grid, acceleration, np.random.default_rng(seed)).tobytes()


@pytest.mark.parametrize("growth", [0.0, 3.0])
@pytest.mark.parametrize("aspect", [None, 1.0, 2.0])
def test_distances_on_a_large_grid(growth: float, aspect: float | None) -> None:
    grid = Grid((160, 128), 16)
    pattern = PoissonDisc(growth=growth, aspect=aspect)
    mask, radii = pattern.draw_with_radii(grid, 8, np.random.default_rng(1))
    assert mask.sum() == 160 * 128 / 8
    check_distances(pattern, grid, mask, radii)


def test_radii_follow_the_law_with_an_excess_of_at_most_two_percent() -> None:
    grid, pattern = Grid((96, 64), 8), PoissonDisc(growth=2.5, aspect=1.5)
    _, radii = pattern.draw_with_radii(grid, 5, np.random.default_rng(2))
    distance = distance_from_centre(grid, 1.5)
    scale = radii / (1 + 2.5 * distance / distance.max())
    assert 1 < scale.max() / scale.min() <= 1.02


def test_the_distance_is_as_large_as_random_packing_permits() -> None:
    # A radius that is far too small would pass every other test of distances. About 0.7 darts fall on an
    # area of one radius squared when no further one fits.
    grid = Grid((128, 128))
    _, radii = PoissonDisc(growth=0).draw_with_radii(grid, 20, np.random.default_rng(3))
    assert radii.min() * 64 == pytest.approx((0.7 * 20) ** 0.5, rel=0.07)


def test_no_further_point_fits_but_for_the_few_that_were_dropped() -> None:
    grid = Grid((96, 96), 12)
    mask, radii = PoissonDisc().draw_with_radii(grid, 6, np.random.default_rng(4))
    lengths = steps(grid)
    left = ~mask
    distance = cdist(places(left, lengths), places(mask & ~grid.calibration_region(), lengths))
    wanted = np.maximum.outer(radii[left], radii[mask & ~grid.calibration_region()])
    to_region = cdist(places(left, lengths), places(grid.calibration_region(), lengths)).min(axis=1)
    fits = (distance >= wanted).all(axis=1) & (to_region >= radii[left])
    assert fits.mean() < 0.002


def test_uniform_radii_meet_the_number_without_random_holes() -> None:
    # Distances on a grid are discrete. Without the excess of the radii a tenth of the darts would be surplus.
    grid = Grid((128, 128))
    for acceleration in (6, 7, 8, 9):
        mask, radii = PoissonDisc(growth=0).draw_with_radii(grid, acceleration, np.random.default_rng(5))
        lengths = steps(grid)
        left = ~mask
        wanted = np.maximum.outer(radii[left], radii[mask])
        fits = (cdist(places(left, lengths), places(mask, lengths)) >= wanted).all(axis=1)
        assert fits.mean() < 0.002


def test_denser_towards_the_centre_and_stretched_by_the_aspect() -> None:
    grid = Grid((128, 128))
    count = np.sum(
        [PoissonDisc(growth=4).draw(grid, 10, np.random.default_rng(s)) for s in range(10)], axis=0
    )
    assert count[grid.radius() < 0.2].mean() > 4 * count[grid.radius() > 0.7].mean() > 0
    # steps along the second axis are four times as long: four times as many fit into a distance
    spread = np.argwhere(PoissonDisc(growth=0, aspect=4).draw(grid, 20, np.random.default_rng(6)))
    between = np.abs(spread[:, None] - spread)
    along_first = between[..., 0][(between[..., 1] == 0) & (between[..., 0] > 0)].min()
    along_second = between[..., 1][(between[..., 0] == 0) & (between[..., 1] > 0)].min()
    assert along_first == pytest.approx(4 * along_second, abs=3)


def test_a_dart_is_kept_off_by_the_larger_of_two_radii() -> None:
    radii = np.array([[1.0, 1, 1, 3.5, 1, 1, 1]])
    closed = np.zeros((1, 7), dtype=bool)
    small_first = throw(np.array([0, 3, 6, 1, 2, 4, 5]), radii, (1.0, 1.0), closed, np.arange(7))
    assert small_first.nonzero()[1].tolist() == [0, 1, 2, 4, 5, 6]
    large_first = throw(np.array([3, 0, 1, 2, 4, 5, 6]), radii, (1.0, 1.0), closed, np.arange(7))
    assert large_first.nonzero()[1].tolist() == [3]


def test_full_sampling_and_the_calibration_region_alone() -> None:
    assert PoissonDisc().draw(Grid((31, 12), 4), 1, np.random.default_rng(1)).all()
    grid = Grid((32, 32), 8)
    only = PoissonDisc().draw(grid, 16, np.random.default_rng(1))
    assert np.array_equal(only, grid.calibration_region())
    assert PoissonDisc().draw(Grid((16, 16)), 256, np.random.default_rng(1)).sum() == 1


@pytest.mark.parametrize("aspect", [None, 0.3, 0.75, 0.7, 3.0])
@pytest.mark.parametrize("growth", [0.0, 1.5, 8.0])
@pytest.mark.parametrize("shape", [(1, 1), (1, 4), (4, 1), (2, 3)])
def test_full_sampling_can_be_had_on_every_grid(
    shape: tuple[int, int], growth: float, aspect: float | None
) -> None:
    # the largest radius came out above one step by rounding, for one seed in a few
    pattern = PoissonDisc(growth=growth, aspect=aspect)
    for seed in range(40):
        assert pattern.draw(Grid(shape), 1, np.random.default_rng(seed)).all()


PROGRAM = """
import hashlib, numpy as np
from skipline.masks.grid import Grid
from skipline.masks.poisson_disc import PoissonDisc
from skipline.masks.frames import draw_frames
rng = np.random.default_rng(42)
digest = hashlib.sha256()
grid = Grid((96, 64), 12, shutter=True)
for growth in 0, 3:
    digest.update(PoissonDisc(growth=growth).draw(grid, 5.5, rng).tobytes())
digest.update(draw_frames(PoissonDisc(), grid, 5.5, 3, rng).tobytes())
"""


def test_same_seed_same_bytes_in_another_process_and_other_seeds_differ() -> None:
    command = [sys.executable, "-c", PROGRAM + "print(digest.hexdigest())"]
    there = subprocess.run(command, capture_output=True, text=True, check=True).stdout.strip()
    here: dict[str, Any] = {}
    exec(PROGRAM, here)
    assert there == here["digest"].hexdigest() != hashlib.sha256().hexdigest()
    grid = Grid((24, 24))
    assert len({PoissonDisc().draw(grid, 4, np.random.default_rng(s)).tobytes() for s in range(20)}) == 20


@pytest.mark.parametrize(
    "options",
    [{"growth": -1}, {"growth": float("nan")}, {"aspect": 0}, {"aspect": float("inf")}, {"step": 2}],
)
def test_refused_options(options: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        PoissonDisc.model_validate(options)


def test_refused_grids() -> None:
    with pytest.raises(InputError, match="expected a grid of two phase-encode axes"):
        PoissonDisc().draw(Grid((64,)), 2, np.random.default_rng(1))
    with pytest.raises(InputError, match="at most R = 4 can be had"):
        PoissonDisc().draw(Grid((32, 32), 16), 5, np.random.default_rng(1))
    with pytest.raises(InputError, match="aspect 0: expected a positive number"):
        steps(Grid((4, 4)), 0)
    with pytest.raises(InputError, match="two axes"):
        steps(Grid((4,)))


def test_options_load_no_numerics() -> None:
    program = (
        "import sys; from skipline.masks.poisson_disc import PoissonDisc; "
        "from skipline.masks.lattice import RegularPoints; from skipline.masks.spokes import GoldenSpokes; "
        "PoissonDisc(), RegularPoints(), GoldenSpokes(); "
        "print([name for name in ('numba', 'scipy', 'matplotlib') if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
