"""The phase-encode grid: calibration region, distance from the centre, number of samples, refusals."""

import re
from math import prod
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import Grid

accelerations = st.floats(1, 400)


@st.composite
def grids(draw: st.DrawFn) -> Grid:
    shape = tuple(draw(st.lists(st.integers(1, 300), min_size=1, max_size=2)))
    if draw(st.booleans()):
        return Grid(shape, draw(st.integers(0, min(shape))))
    return Grid(shape, tuple(draw(st.integers(1, n)) for n in shape))


@given(grids())
def test_calibration_region_is_the_centred_block(grid: Grid) -> None:
    region = grid.calibration_region()
    assert region.shape == grid.shape
    assert region.dtype == bool
    assert region.sum() == prod(grid.calibration_sides)
    for axis, (n, c) in enumerate(zip(grid.shape, grid.calibration_sides, strict=True)):
        where = np.flatnonzero(region.any(axis=tuple(a for a in range(grid.axes) if a != axis)))
        assert where.tolist() == [n // 2 - c // 2 + i for i in range(c)]
        if c:
            assert region[tuple(n // 2 for n in grid.shape)]


@given(grids())
def test_elliptical_calibration_region_is_inscribed_in_the_block(grid: Grid) -> None:
    ellipse = Grid(grid.shape, grid.calibration, "ellipse")
    region, block = ellipse.calibration_region(), grid.calibration_region()
    assert not (region & ~block).any()
    if all(c % 2 for c in grid.calibration_sides):  # with a line of points on each of its axes
        for axis in range(grid.axes):
            others = tuple(a for a in range(grid.axes) if a != axis)
            assert np.array_equal(region.any(axis=others), block.any(axis=others))
    inside = (
        region[np.ix_(*[np.flatnonzero(block.any(axis=1 - a)) for a in (0, 1)])] if grid.axes == 2 else region
    )
    assert grid.axes == 1 or np.array_equal(inside, inside[::-1, ::-1])
    if grid.axes == 1:
        assert np.array_equal(region, block)
    elif min(grid.calibration_sides) > 20:
        assert region.sum() / block.sum() == pytest.approx(np.pi / 4, rel=0.05)


@given(grids())
def test_partner_is_the_conjugate(grid: Grid) -> None:
    partner = grid.partner()
    k = np.stack(np.meshgrid(*[np.arange(n) - n // 2 for n in grid.shape], indexing="ij"), axis=-1).reshape(
        -1, grid.axes
    )
    flat = partner.ravel()
    has = flat >= 0
    assert (k[flat[has]] == -k[has]).all()
    assert np.array_equal(flat[flat[has]], np.flatnonzero(has))  # of the partner it is the partner
    for lonely in k[~has]:
        outside = any(-a + n // 2 >= n for a, n in zip(lonely, grid.shape, strict=True))
        assert outside or not lonely.any()


def test_shutter_and_partial_fourier() -> None:
    allowed = Grid((64, 48), shutter=True).allowed()
    assert allowed.sum() / allowed.size == pytest.approx(np.pi / 4, rel=0.03)
    assert allowed[0, 24]
    assert allowed[32, 0]
    assert not allowed[0, 0]
    assert Grid((64,), shutter=True).allowed().all()
    kept = Grid((64, 48), partial_fourier=0.625).allowed()
    assert np.flatnonzero(kept.any(axis=1)).tolist() == list(range(24, 64))
    assert kept[24:].all()
    assert (
        Grid((10,), partial_fourier=0.6).allowed().sum() == 6
    )  # 0.6 * 10 is above 6 in floating point or not


@given(grids(), st.data())
def test_the_acceleration_that_is_shown_gives_the_number_of_samples(grid: Grid, data: st.DataObject) -> None:
    length = data.draw(st.integers(1, min(grid.size, 40)))
    if grid.size // length * length < grid.calibration_region().sum():
        return
    grid = Grid(grid.shape, grid.calibration, train_length=length)
    samples = data.draw(st.sampled_from(grid.counts()))
    assert grid.samples(float(grid.shown(samples))) == samples


@given(grids())
def test_radius_is_0_at_the_centre_and_1_at_the_farthest_point(grid: Grid) -> None:
    radius = grid.radius()
    assert radius.shape == grid.shape
    assert radius[tuple(n // 2 for n in grid.shape)] == 0
    if grid.size > 1:
        assert radius.max() == 1
        assert radius[(0,) * grid.axes] == 1  # index 0 is the highest frequency, N // 2, of each axis


def test_radius_along_an_axis_and_in_the_plane() -> None:
    np.testing.assert_allclose(Grid((6,)).radius(), [1, 2 / 3, 1 / 3, 0, 1 / 3, 2 / 3])
    np.testing.assert_allclose(Grid((5,)).radius(), [1, 0.5, 0, 0.5, 1])
    plane = Grid((8, 4)).radius()
    assert plane[0, 2] == pytest.approx(np.sqrt(0.5))  # the end of either axis
    assert plane[4, 0] == pytest.approx(np.sqrt(0.5))
    assert plane[2, 1] == pytest.approx(0.5)  # half way along both


@given(grids(), accelerations)
def test_samples_are_the_nearest_whole_number_or_the_message_offers_an_acceleration(
    grid: Grid, acceleration: float
) -> None:
    calibration = prod(grid.calibration_sides)
    nearest = max(np.floor(grid.size / acceleration + 0.5), 1)
    if nearest >= calibration and acceleration <= grid.size:
        assert grid.samples(acceleration) == nearest
        assert abs(nearest - grid.size / acceleration) <= 0.5
        return
    with pytest.raises(InputError, match=r"at most R = [\d.]+ can be had$") as refusal:
        grid.samples(acceleration)
    highest = float(re.findall(r"R = ([\d.]+)", str(refusal.value))[0])
    assert 1 <= highest < acceleration
    # what is offered can be had, and more cannot, to the two decimals shown
    assert grid.samples(highest) >= max(calibration, 1)
    assert grid.size / (highest + 0.01) <= max(calibration, 1) + 1e-9


def test_one_sample_less_than_the_calibration_region_is_refused() -> None:
    assert Grid((256,), 32).samples(256 / 32) == 32
    with pytest.raises(InputError, match="needs 31 of 256 lines"):
        Grid((256,), 32).samples(256 / 31)


def test_a_half_is_rounded_upwards() -> None:
    assert Grid((255,)).samples(2) == 128
    assert Grid((5,)).samples(2) == 3


TOO_FEW = "of 256 lines but the calibration region alone takes 32: at most R = 8 can be had"


@pytest.mark.parametrize(
    ("acceleration", "says"),
    [
        (9, f"acceleration 9 needs 28 {TOO_FEW}"),
        (300, f"acceleration 300 needs 1 {TOO_FEW}"),
        (0.99, "acceleration 0.99: expected a number of at least 1, fully sampled"),
        (-2, "acceleration -2: expected a number of at least 1, fully sampled"),
        (float("nan"), "acceleration nan: expected a number of at least 1, fully sampled"),
        (float("inf"), "acceleration inf: expected a number of at least 1, fully sampled"),
    ],
)
def test_refused_accelerations(acceleration: float, says: str) -> None:
    with pytest.raises(InputError) as refusal:
        Grid((256,), 32).samples(acceleration)
    assert str(refusal.value) == says


def test_refused_accelerations_of_other_grids() -> None:
    with pytest.raises(InputError, match=r"leaves no sample of 256 lines: at most R = 256 can be had"):
        Grid((256,)).samples(257)
    with pytest.raises(
        InputError, match=r"needs 328 of 4096 points .* takes 576: at most R = 7\.11 can be had"
    ):
        Grid((64, 64), 24).samples(12.5)


@pytest.mark.parametrize(
    ("shape", "calibration", "says"),
    [
        ((), 0, "expected the numbers of points along one or two axes"),
        ((8, 8, 8), 0, "expected the numbers of points along one or two axes"),
        ((0,), 0, "expected the numbers of points along one or two axes"),
        ((8.5,), 0, "expected the numbers of points along one or two axes"),
        ([8, 8], 0, "expected the numbers of points along one or two axes"),
        ((8,), -1, r"calibration -1: expected at least 1 point, or 0 for none"),
        ((8,), 2.5, r"calibration 2.5: expected a whole number"),
        ((8,), (2, 2), r"calibration \(2, 2\): expected a whole number"),
        ((8, 8), (2,), r"calibration \(2,\): expected a whole number, or one for each of two axes"),
        ((8, 8), (0, 4), r"calibration \(0, 4\): expected at least 1 point, or 0 for none"),
        ((16,), 17, "calibration 17 is larger than the grid of 16 lines; at most 16 fits"),
        ((16, 12), 13, "calibration 13 is larger than the grid of 16 x 12 points; at most 12 fits"),
        ((16, 12), (13, 13), r"is larger than the grid of 16 x 12 points; at most \(16, 12\) fits"),
    ],
)
def test_refused_grids(shape: Any, calibration: Any, says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        Grid(shape, calibration)
    assert "\n" not in str(refusal.value)
