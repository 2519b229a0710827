"""Shift and rotation theorems, limits and refusals of the shapes."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skipline import InputError
from skipline.phantoms import Ellipse, Polygon, Rectangle

Shape = Ellipse | Rectangle | Polygon

length = st.floats(0.2, 80.0)
place = st.floats(-100.0, 100.0)
frequency = st.floats(-1.0, 1.0)
angle = st.one_of(st.floats(-360.0, 360.0), st.sampled_from([0.0, 90.0, -90.0, 180.0, 270.0, 360.0]))
point = st.tuples(place, place)
size = st.tuples(length, length)
TRIANGLE = Polygon(((-10.0, -4.0), (12.0, -6.0), (1.0, 15.0)), 1.7)
shapes = st.one_of(
    st.builds(Ellipse, point, size, angle, st.floats(-3.0, 3.0)),
    st.builds(Rectangle, point, size, angle, st.floats(-3.0, 3.0)),
    st.builds(lambda by: moved(TRIANGLE, *by), point),
)


def moved(shape: Shape, dx: float, dy: float) -> Shape:
    if isinstance(shape, Polygon):
        return replace(shape, vertices_mm=tuple((x + dx, y + dy) for x, y in shape.vertices_mm))
    return replace(shape, centre_mm=(shape.centre_mm[0] + dx, shape.centre_mm[1] + dy))


def turned(shape: Shape, degrees: float) -> Shape:
    """The shape turned about the origin."""
    c, s = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))

    def turn(p: tuple[float, float]) -> tuple[float, float]:
        return float(c * p[0] - s * p[1]), float(s * p[0] + c * p[1])

    if isinstance(shape, Polygon):
        return replace(shape, vertices_mm=tuple(turn(vertex) for vertex in shape.vertices_mm))
    return replace(shape, centre_mm=turn(shape.centre_mm), angle_degrees=shape.angle_degrees + degrees)


def scale_of(shape: Shape) -> float:
    return float(abs(shape.transform(0.0, 0.0))) + 1e-12


@given(shapes, point, frequency, frequency)
def test_shift_theorem(shape: Shape, by: tuple[float, float], kx: float, ky: float) -> None:
    phase = np.exp(-2j * np.pi * (kx * by[0] + ky * by[1]))
    gap = moved(shape, *by).transform(kx, ky) - phase * shape.transform(kx, ky)
    assert abs(gap) < 1e-10 * scale_of(shape)


@given(shapes, angle, frequency, frequency)
def test_rotation_theorem(shape: Shape, degrees: float, kx: float, ky: float) -> None:
    c, s = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
    gap = turned(shape, degrees).transform(c * kx - s * ky, s * kx + c * ky) - shape.transform(kx, ky)
    assert abs(gap) < 1e-10 * scale_of(shape)


@given(shapes, frequency, frequency)
def test_real_object_has_hermitian_transform(shape: Shape, kx: float, ky: float) -> None:
    gap = shape.transform(-kx, -ky) - np.conj(shape.transform(kx, ky))
    assert abs(gap) < 1e-10 * scale_of(shape)


@given(shapes, st.floats(0.0, 1e-7), st.floats(0.0, 360.0))
def test_transform_is_continuous_at_zero(shape: Shape, k: float, degrees: float) -> None:
    near = shape.transform(k * np.cos(np.radians(degrees)), k * np.sin(np.radians(degrees)))
    # The phase of an off-centre shape is 2 pi k r, with r below 150 mm.
    assert abs(near - shape.transform(0.0, 0.0)) <= scale_of(shape) * (1000 * k + 1e-14)


@pytest.mark.parametrize("angle_degrees", [0.0, 90.0, 30.0])
def test_area_at_zero_frequency(angle_degrees: float) -> None:
    assert Ellipse((1.0, 2.0), (3.0, 4.0), angle_degrees, 2.0).transform(0.0, 0.0) == pytest.approx(
        24 * np.pi
    )
    assert Rectangle((1.0, 2.0), (3.0, 4.0), angle_degrees, 2.0).transform(0.0, 0.0) == pytest.approx(24.0)
    assert Polygon(((0.0, 0.0), (0.0, 2.0), (3.0, 0.0)), 2.0).transform(0.0, 0.0) == pytest.approx(6.0)


@pytest.mark.parametrize(
    "shape", [Ellipse((1.0, 2.0), (3.0, 4.0)), Rectangle((1.0, 2.0), (3.0, 4.0)), TRIANGLE]
)
def test_broadcasts_and_is_complex128(shape: Shape) -> None:
    kx, ky = np.linspace(-1, 1, 7), np.linspace(-2, 2, 5)
    grid = shape.transform(kx[:, None], ky[None, :])
    assert grid.shape == (7, 5)
    assert grid.dtype == np.complex128
    flat = shape.transform(np.repeat(kx, 5), np.tile(ky, 7))
    np.testing.assert_allclose(grid.ravel(), flat, rtol=1e-12, atol=1e-13)


@pytest.mark.parametrize(
    ("make", "says"),
    [
        (lambda: Ellipse((0.0, 0.0), (0.0, 1.0)), "semi-axes above 0 mm"),
        (lambda: Ellipse((0.0, float("nan")), (1.0, 1.0)), "finite"),
        (lambda: Rectangle((0.0, 0.0), (1.0, -2.0)), "sides above 0 mm"),
        (lambda: Rectangle((0.0, 0.0), (1.0, 2.0), amplitude=float("inf")), "finite"),
        (lambda: Polygon(((0.0, 0.0), (1.0, 1.0))), "three vertices"),
        (lambda: Polygon(((0.0, 0.0), (1.0, 1.0), (3.0, 3.0))), "area is zero"),
    ],
)
def test_refuses_what_is_no_shape(make, says: str) -> None:
    with pytest.raises(InputError, match=says):
        make()
