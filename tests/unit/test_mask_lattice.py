"""Regular points: R to the nearest sample, constraints, shape of the lattice, refusals."""

import subprocess
import sys
from typing import Any

import numpy as np
import pytest
from hypothesis import given, reject, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from skipline import InputError
from skipline.masks.grid import Grid
from skipline.masks.lattice import Lattice, RegularPoints, farthest_aliases


@st.composite
def designs(draw: st.DrawFn) -> tuple[Grid, float]:
    """A grid with constraints, and an acceleration that it can give."""
    shape = draw(st.tuples(st.integers(1, 48), st.integers(1, 48)))
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
        acceleration = draw(st.one_of(st.floats(1, 30), st.integers(1, 12)))
        grid.samples(acceleration)
    except InputError:
        reject()
    return grid, acceleration


@settings(max_examples=300, deadline=None)
@given(designs(), st.one_of(st.none(), st.integers(0, 5)))
def test_samples_and_constraints(design: tuple[Grid, float], shift: int | None) -> None:
    grid, acceleration = design
    pattern = RegularPoints(shift=shift)
    mask = pattern.draw(grid, acceleration, np.random.default_rng(1))
    assert mask.sum() == grid.samples(acceleration)
    assert grid.broken(mask) is None
    assert (grid.allowed() | ~mask).all()
    assert mask.tobytes() == pattern.draw(grid, acceleration, np.random.default_rng(2)).tobytes()


def test_the_search_of_the_spacing_ends_when_the_first_guess_is_too_wide() -> None:
    # too few points at the first spacing, 1.038, too many at 1: this once looked at 1 forever. The shutter
    # and the elliptic region make it so.
    program = (
        "import numpy as np; from skipline.masks.grid import Grid; "
        "from skipline.masks.lattice import RegularPoints; "
        "grid = Grid((31, 38), 4, 'ellipse', shutter=True); "
        "mask = RegularPoints().draw(grid, 1.3755611459775836, np.random.default_rng(1)); "
        "print(mask.sum() - grid.samples(1.3755611459775836))"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, timeout=60)
    assert done.stdout.strip() == "0", done.stderr


@given(st.integers(1, 5), st.integers(1, 6), st.integers(0, 5), st.integers(1, 6), st.integers(1, 6))
def test_whole_numbers_give_the_exact_lattice(
    step: int, spacing: int, shift: int, rows: int, columns: int
) -> None:
    # the shifted rows close over the grid
    grid = Grid((step * spacing * rows, spacing * columns))
    mask = RegularPoints(step=step, shift=shift).draw(grid, step * spacing, np.random.default_rng(1))
    i, j = (np.arange(n) - n // 2 for n in grid.shape)
    on = (i[:, None] % step == 0) & ((j - shift * (i[:, None] // step)) % spacing == 0)
    assert np.array_equal(mask, on)


def test_calibration_region_on_the_lattice() -> None:
    # 24 x 24 points of which the lattice has a quarter: R such that the rest is the exact lattice
    grid = Grid((128, 96), 24)
    samples = 128 * 96 // 4 + 24 * 24 * 3 // 4
    lattice = RegularPoints().lattice(grid, grid.size / samples)
    assert lattice == Lattice(2, 2.0, 1.0)


@pytest.mark.parametrize("acceleration", [2.5, 3.7, 5.3])
def test_fractional_spacings_differ_by_at_most_one_point(acceleration: float) -> None:
    grid = Grid((96, 120))
    pattern = RegularPoints(step=1, shift=0)
    mask = pattern.draw(grid, acceleration, np.random.default_rng(1))
    spacing = pattern.lattice(grid, acceleration).spacing
    middle = mask[48]
    assert middle[60]
    assert set(np.diff(np.flatnonzero(middle))) <= {int(spacing), int(spacing) + 1}


def test_samples_too_many_are_left_out_farthest_from_the_centre() -> None:
    grid = Grid((64, 64))
    mask = RegularPoints(step=2, shift=0).draw(grid, 64 * 64 / (32 * 32 - 5), np.random.default_rng(1))
    full = RegularPoints(step=2, shift=0).draw(grid, 4, np.random.default_rng(1))
    assert full.sum() - mask.sum() == 5
    dropped = full & ~mask
    assert grid.radius()[dropped].min() >= grid.radius()[mask].max() - 1e-12


def test_where_conjugates_are_skipped_the_lattice_stays_whole() -> None:
    grid = Grid((96, 96), skip_conjugates=True)
    for acceleration in (3, 4, 6, 8):
        mask = RegularPoints().draw(grid, acceleration, np.random.default_rng(1))
        spread = np.abs(np.fft.ifft2(mask, norm="forward")) / mask.sum()
        # as many aliases of full height as R: the lattice is exact, only displaced
        assert np.count_nonzero(spread > 1 - 1e-9) == acceleration
        assert grid.broken(mask) is None


def test_farthest_aliases_by_brute_force() -> None:
    for area in range(1, 17):
        best = 0.0
        for step in (n for n in range(1, area + 1) if area % n == 0):
            for shift in range(area // step):
                best = max(best, nearest_alias(RegularPoints(step=step, shift=shift), area))
        step, shift = farthest_aliases(area)
        assert nearest_alias(RegularPoints(step=step, shift=shift), area) == pytest.approx(best)


def nearest_alias(pattern: RegularPoints, area: int) -> float:
    side = 2 * area
    positions = pattern.alias_positions(Grid((side, side)), area) / side
    return float(np.hypot(*positions[1:].T).min()) if area > 1 else 1.0


def test_the_object_comes_first_and_the_nearest_aliases_next() -> None:
    positions = RegularPoints().alias_positions(Grid((96, 72), 12), 7)
    distance = np.hypot(*positions.T)
    assert tuple(positions[0]) == (0, 0)
    assert (np.diff(distance) > -1e-6).all()
    assert (np.abs(positions) <= np.array([48, 36])).all()


def test_refused() -> None:
    with pytest.raises(InputError, match=r"rows of step 4 have 256 points .* expected a smaller step"):
        RegularPoints(step=4).draw(Grid((32, 32)), 3, np.random.default_rng(1))
    with pytest.raises(InputError, match="expected a grid of two phase-encode axes"):
        RegularPoints().draw(Grid((64,)), 2, np.random.default_rng(1))
    refused: list[dict[str, Any]] = [{"step": 0}, {"shift": -1}, {"step": 1.5}, {"growth": 1}]
    for options in refused:
        with pytest.raises(ValidationError):
            RegularPoints.model_validate(options)
