"""Golden-angle spokes: on the grid, angles, R to the nearest sample, constraints."""

from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from hypothesis import given, reject, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from skipline import InputError
from skipline.masks.grid import Grid
from skipline.masks.spokes import GOLDEN_ANGLE, GoldenSpokes


@st.composite
def designs(draw: st.DrawFn) -> tuple[Grid, float]:
    """A grid with constraints, and an acceleration that it can give."""
    shape = draw(st.tuples(st.integers(1, 48), st.integers(1, 48)))
    side = draw(st.integers(0, min(shape)))
    try:
        grid = Grid(
            shape,
            draw(st.sampled_from([0, side // 2, side // 3])),
            shutter=draw(st.booleans()),
            partial_fourier=draw(st.sampled_from([1.0, 0.75])),
            skip_conjugates=draw(st.booleans()),
            train_length=draw(st.sampled_from([None, 4])),
        )
        acceleration = draw(st.floats(1, 30))
        grid.samples(acceleration)
    except InputError:
        reject()
    return grid, acceleration


@settings(max_examples=200, deadline=None)
@given(designs(), st.floats(0, 359), st.one_of(st.none(), st.floats(0.3, 3)))
def test_samples_and_constraints(design: tuple[Grid, float], angle: float, aspect: float | None) -> None:
    grid, acceleration = design
    mask = GoldenSpokes(first_angle=angle, aspect=aspect).draw(grid, acceleration, np.random.default_rng(1))
    assert mask.sum() == grid.samples(acceleration)
    assert grid.broken(mask) is None
    assert (grid.allowed() | ~mask).all()


def test_the_golden_angle() -> None:
    # Source, from memory: Winkelmann et al., IEEE Trans. Med. Imaging 26 (2007) 68: 111.246 degrees
    assert pytest.approx(111.246, abs=5e-4) == GOLDEN_ANGLE


@pytest.mark.parametrize("aspect", [None, 1.0, 1.6])
def test_every_sample_is_the_grid_point_nearest_to_a_spoke(aspect: float | None) -> None:
    grid = Grid((120, 96))
    mask = GoldenSpokes(first_angle=20, aspect=aspect).draw(grid, 8, np.random.default_rng(1))
    lengths = (1 / 60, 1 / 48) if aspect is None else (1.0, aspect)
    points = np.argwhere(mask) - [60, 48]
    # the first spokes are complete, and no sample is more than half a step from one
    numbers = np.arange(25)
    angles = np.deg2rad(20 + 111.246117975 * numbers)
    direction = np.stack([np.cos(angles) / lengths[0], np.sin(angles) / lengths[1]])
    # off a spoke, along the axis that it is less steep in
    off = np.abs(points[:, :1] * direction[1] - points[:, 1:] * direction[0]) / np.abs(direction).max(axis=0)
    assert off.min(axis=1).max() <= 0.5 + 1e-6
    for spoke in range(10):
        along = direction[:, spoke] / np.abs(direction[:, spoke]).max()
        ends = np.floor(np.outer(np.arange(-40, 41), along) + 0.5 + 1e-9).astype(int) + np.array([60, 48])
        assert mask[tuple(ends[((ends >= 0) & (ends < grid.shape)).all(axis=1)].T)].all()


def test_the_last_spoke_is_trimmed_from_its_outer_ends() -> None:
    grid = Grid((65, 65))
    more = GoldenSpokes().draw(grid, 65 * 65 / 300, np.random.default_rng(1))
    fewer = GoldenSpokes().draw(grid, 65 * 65 / 297, np.random.default_rng(1))
    lost = more & ~fewer
    assert lost.sum() == 3
    assert not (fewer & ~more).any()
    last = [GoldenSpokes().draw(grid, 65 * 65 / n, np.random.default_rng(1)) for n in range(290, 301)]
    radii = [grid.radius()[b & ~a].item() for a, b in pairwise(last)]
    assert radii == sorted(radii)


def test_draws_do_not_differ_but_first_angles_do() -> None:
    grid = Grid((64, 48), 8)
    one, again = (GoldenSpokes().draw(grid, 6, np.random.default_rng(s)) for s in (1, 2))
    assert np.array_equal(one, again)
    assert not np.array_equal(one, GoldenSpokes(first_angle=45).draw(grid, 6, np.random.default_rng(1)))


def test_full_sampling_and_one_sample() -> None:
    assert GoldenSpokes().draw(Grid((31, 12), 4), 1, np.random.default_rng(1)).all()
    one = GoldenSpokes().draw(Grid((31, 12)), 31 * 12, np.random.default_rng(1))
    assert one.sum() == 1
    assert one[15, 6]


@pytest.mark.parametrize("options", [{"first_angle": 360}, {"first_angle": -1}, {"aspect": 0}, {"spokes": 3}])
def test_refused_options(options: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        GoldenSpokes.model_validate(options)
    with pytest.raises(InputError, match="expected a grid of two phase-encode axes"):
        GoldenSpokes().draw(Grid((64,)), 2, np.random.default_rng(1))
