"""The patterns: R to the nearest sample, calibration region, reproducible, options, refusals."""

import hashlib
import subprocess
import sys
from itertools import product
from math import prod
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

import skipline.masks
from skipline import InputError
from skipline.masks import Grid, Pattern, RegularLines, VariableDensityLines, VariableDensityPoints

patterns = st.one_of(
    st.builds(VariableDensityLines, power=st.floats(0, 20)),
    st.builds(VariableDensityPoints, power=st.floats(0, 20)),
    st.just(RegularLines()),
)
seeds = st.integers(0, 2**32 - 1)


@st.composite
def designs(draw: st.DrawFn) -> tuple[Pattern, Grid, float]:
    """A pattern, a grid and an acceleration that fit each other."""
    pattern = draw(patterns)
    sizes = st.integers(1, 400) if pattern.axes == 1 else st.integers(1, 48)
    shape = tuple(draw(sizes) for _ in range(pattern.axes))
    sides = tuple(draw(st.integers(1, n)) for n in shape)
    calibration = draw(st.sampled_from([0, min(sides), sides]))
    grid = Grid(shape, calibration)
    highest = grid.size / max(prod(grid.calibration_sides), 1)
    return pattern, grid, draw(st.one_of(st.floats(1, highest), st.sampled_from([1.0, highest])))


@settings(max_examples=300, deadline=None)
@given(designs(), seeds)
def test_acceleration_is_met_to_the_nearest_sample_with_a_complete_calibration_region(
    design: tuple[Pattern, Grid, float], seed: int
) -> None:
    pattern, grid, acceleration = design
    mask = pattern.draw(grid, acceleration, np.random.default_rng(seed))
    assert mask.dtype == bool
    assert mask.shape == grid.shape
    assert abs(mask.sum() - grid.size / acceleration) <= 0.5 + 1e-9
    assert mask[grid.calibration_region()].all()


@settings(max_examples=50, deadline=None)
@given(designs(), seeds)
def test_same_seed_same_bytes(design: tuple[Pattern, Grid, float], seed: int) -> None:
    pattern, grid, acceleration = design
    one, again = (pattern.draw(grid, acceleration, np.random.default_rng(seed)) for _ in range(2))
    assert one.tobytes() == again.tobytes()


PROGRAM = """
import hashlib, numpy as np
from skipline.masks import Grid, RegularLines, VariableDensityLines, VariableDensityPoints
rng = np.random.default_rng(42)
digest = hashlib.sha256()
for pattern in VariableDensityLines(), VariableDensityPoints(power=3), RegularLines():
    grid = Grid((96, 64)[: pattern.axes], 12)
    digest.update(pattern.draw(grid, 3.7, rng).tobytes())
"""


def test_same_seed_same_bytes_in_another_process() -> None:
    command = [sys.executable, "-c", PROGRAM + "print(digest.hexdigest())"]
    there = subprocess.run(command, capture_output=True, text=True, check=True).stdout.strip()
    here: dict[str, Any] = {}
    exec(PROGRAM, here)
    assert there == here["digest"].hexdigest()
    assert there != hashlib.sha256().hexdigest()


def test_random_patterns_differ_from_draw_to_draw_and_say_so() -> None:
    for pattern, grid in (
        (VariableDensityLines(), Grid((64,), 8)),
        (VariableDensityPoints(), Grid((16, 16), 4)),
        (RegularLines(), Grid((64,), 8)),
    ):
        rng = np.random.default_rng(1)
        draws = {pattern.draw(grid, 3, rng).tobytes() for _ in range(20)}
        assert len(draws) == (20 if pattern.random else 1)


@given(st.integers(1, 400), st.data())
def test_regular_lines_are_evenly_spaced(lines: int, data: st.DataObject) -> None:
    calibration = data.draw(st.integers(0, lines))
    grid = Grid((lines,), calibration)
    samples = data.draw(st.integers(max(calibration, 1), lines))
    mask = RegularLines().draw(grid, lines / samples, np.random.default_rng())
    assert mask.sum() == samples
    assert mask[lines // 2]
    centre = max(calibration, 1)
    first = lines // 2 - centre // 2
    # once around k-space, from the last line of the centre to its first one
    around = np.flatnonzero(np.roll(mask, -(first + centre - 1)))
    spacings = np.diff([*around[: samples - centre + 1], lines - centre + 1])
    assert spacings.sum() == lines - centre + 1
    assert spacings.max() - spacings.min() <= 1


@given(st.integers(1, 40), st.integers(1, 12))
def test_every_rth_line_through_the_centre(groups: int, acceleration: int) -> None:
    lines = groups * acceleration
    mask = RegularLines().draw(Grid((lines,)), acceleration, np.random.default_rng())
    k = np.arange(lines) - lines // 2
    assert np.array_equal(mask, k % acceleration == 0)


def test_irregular_spacing_is_far_from_the_centre() -> None:
    mask = RegularLines().draw(Grid((256,)), 3, np.random.default_rng())  # 85 lines: 84 gaps of 3, one of 4
    k = np.flatnonzero(mask) - 128
    assert (np.diff(k[abs(k) < 120]) == 3).all()


def test_samples_where_the_law_is_dense() -> None:
    grid = Grid((64, 64), 8)
    rng = np.random.default_rng(5)
    counts = np.sum([VariableDensityPoints(power=3).draw(grid, 8, rng) for _ in range(50)], axis=0)
    inner, outer = grid.radius() < 0.3, grid.radius() > 0.6
    assert np.mean(counts[inner]) > 8 * np.mean(counts[outer]) > 0


@settings(max_examples=30)
@given(patterns)
def test_full_sampling(pattern: Pattern) -> None:
    shape = (31, 12)[: pattern.axes]
    assert pattern.draw(Grid(shape, 4), 1, np.random.default_rng(1)).all()


@given(patterns, st.integers(1, 2))
def test_a_grid_of_other_axes_is_refused(pattern: Pattern, axes: int) -> None:
    assume(axes != pattern.axes)
    with pytest.raises(InputError, match=r"expected a grid of (one phase-encode axis|two phase-encode axes)"):
        pattern.draw(Grid((16,) * axes), 2, np.random.default_rng(1))


def test_an_acceleration_that_the_calibration_forbids_is_refused_by_every_pattern() -> None:
    for pattern, grid in (
        (VariableDensityLines(), Grid((256,), 32)),
        (VariableDensityPoints(), Grid((256, 256), (128, 64))),
        (RegularLines(), Grid((256,), 32)),
    ):
        with pytest.raises(InputError, match="at most R = 8 can be had"):
            pattern.draw(grid, 9, np.random.default_rng(1))


@pytest.mark.parametrize("power", [-0.1, 21, float("inf"), float("nan"), "two", True])
def test_refused_options(power: Any) -> None:
    with pytest.raises(ValidationError):
        VariableDensityLines.model_validate({"power": power}, strict=True)


@pytest.mark.parametrize(
    ("options", "says"),
    [
        ({"law": "powr"}, r"expected power, gaussian, uniform, or a file \(.npy, .txt, .csv, .tsv\)"),
        ({"law": "density.nii.gz"}, "or a file"),
        ({"law": "gaussian", "width": 0}, "greater than 0"),
    ],
)
def test_refused_laws(options: dict[str, Any], says: str) -> None:
    with pytest.raises(ValidationError, match=says):
        VariableDensityLines.model_validate(options)


def test_every_law_makes_another_density() -> None:
    grid = Grid((32, 24), 4)
    options = [{}, {"power": 3}, {"law": "gaussian"}, {"law": "gaussian", "width": 0.5}, {"law": "uniform"}]
    densities = [VariableDensityPoints(**o).density(grid, 4) for o in options]
    assert len({d.tobytes() for d in densities}) == len(options)
    assert len(np.unique(densities[-1])) == 2  # uniform outside the calibration region


def test_regular_lines_meet_every_number_of_lines_with_partial_fourier_and_conjugates_skipped() -> None:
    rng = np.random.default_rng()
    for lines, calibration, fraction, skip, gap in product(
        (16, 33), (0, 4, 5), (1.0, 0.75, 0.6), (False, True), (None, 3)
    ):
        if skip and gap:
            continue  # not always, see test_mask_constraints
        grid = Grid((lines,), calibration, partial_fourier=fraction, skip_conjugates=skip, largest_gap=gap)
        for samples in grid.counts():
            mask = RegularLines().draw(grid, float(grid.shown(samples)), rng)
            assert mask.sum() == samples
            assert grid.broken(mask) is None


def test_regular_lines_alternate_between_the_sides_when_conjugates_are_skipped() -> None:
    grid = Grid((129,), 9, skip_conjugates=True)
    mask = RegularLines().draw(grid, 129 / 49, np.random.default_rng())
    k = np.flatnonzero(mask) - 64
    assert (np.diff(np.sort(abs(k[abs(k) > 4]))) <= 2).all()  # 40 of 60 pairs
    assert np.diff(k).max() <= 4
    assert abs(int((k > 4).sum()) - int((k < -4).sum())) <= 2


def test_unknown_options_are_refused_and_patterns_do_not_change() -> None:
    with pytest.raises(ValidationError):
        RegularLines.model_validate({"power": 2})
    with pytest.raises(ValidationError):
        VariableDensityLines().power = 3.0  # type: ignore[misc]  # that it is refused is the test


def test_every_option_is_described() -> None:
    for pattern in (VariableDensityLines, VariableDensityPoints, RegularLines):
        assert (pattern.__doc__ or "").split("\n")[0].endswith(".")
        assert all(field.description for field in pattern.model_fields.values())


def test_importing_masks_is_cheap() -> None:
    program = (
        "import sys; from skipline.masks import Grid, RegularLines, VariableDensityLines; "
        "from skipline.masks import VariableDensityPoints; "
        "Grid((256,), 24).samples(4); VariableDensityLines(); "
        "print([name for name in ('numba', 'scipy', 'matplotlib', 'skimage') if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_the_names_of_the_package_are_there_and_no_others() -> None:
    assert dir(skipline.masks) == sorted(skipline.masks.__all__)
    assert all(getattr(skipline.masks, name) is not None for name in skipline.masks.__all__)
    with pytest.raises(AttributeError, match="has no attribute 'Nothing'"):
        _ = skipline.masks.Nothing
