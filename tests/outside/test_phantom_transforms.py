"""Closed-form transforms of shapes against tables, quadrature, brute-force DFTs, each other and Parseval."""

from fractions import Fraction

import numpy as np
import pytest
from scipy.special import j1

from skipline.phantoms import Ellipse, Phantom, Polygon, Rectangle

# M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions, table 9.1: x, J1(x). From memory.
J1_TABLE = (
    (0.5, 0.2422684577),
    (1.0, 0.4400505857),
    (2.0, 0.5767248078),
    (3.0, 0.3390589585),
    (4.0, -0.0660433280),
    (5.0, -0.3275791376),
    (10.0, 0.0434727462),
)
# The same, table 9.5: first zeros of J1. From memory.
J1_ZEROS = (3.8317059702, 7.0155866698, 10.1734681351)


def j1_exact(x: Fraction) -> float:
    """J1 by its power series, in exact rational arithmetic (Abramowitz & Stegun 9.1.10)."""
    term = x / 2
    total = term
    for n in range(1, 80):
        term *= -(x * x) / (4 * n * (n + 1))
        total += term
    return float(total)


@pytest.mark.parametrize(("x", "value"), J1_TABLE)
def test_unit_disc_has_the_bessel_values_of_the_table(x: float, value: float) -> None:
    q = x / (2 * np.pi)
    disc = Ellipse((0.0, 0.0), (1.0, 1.0))  # its transform is J1(2 pi q) / q
    for kx, ky in ((q, 0.0), (0.0, -q), (0.6 * q, 0.8 * q)):
        transform = disc.transform(kx, ky)
        assert transform.real * q == pytest.approx(value, abs=5e-11)
        assert transform.imag == 0.0


@pytest.mark.parametrize("zero", J1_ZEROS)
def test_disc_transform_vanishes_at_the_zeros_of_j1(zero: float) -> None:
    assert abs(Ellipse((0.0, 0.0), (1.0, 1.0)).transform(zero / (2 * np.pi), 0.0)) < 1e-9


def test_the_bessel_function_that_we_call_agrees_with_exact_arithmetic() -> None:
    for x in (Fraction(1, 1000), Fraction(1, 3), Fraction(7, 2), Fraction(12), Fraction(30)):
        assert float(j1(float(x))) == pytest.approx(j1_exact(x), rel=1e-12, abs=1e-15)


def coverage(ellipse: Ellipse, n: int, pixel: float, supersampling: int) -> np.ndarray:
    """Share of each pixel of an n x n grid that lies inside the ellipse, by supersampling."""
    fine = n * supersampling
    position = ((np.arange(fine) + 0.5) / supersampling - 0.5 - n // 2) * pixel
    x, y = position[:, None] - ellipse.centre_mm[0], position[None, :] - ellipse.centre_mm[1]
    angle = np.radians(ellipse.angle_degrees)
    u, v = x * np.cos(angle) + y * np.sin(angle), y * np.cos(angle) - x * np.sin(angle)
    inside = (u / ellipse.semi_axes_mm[0]) ** 2 + (v / ellipse.semi_axes_mm[1]) ** 2 <= 1
    return inside.reshape(n, supersampling, n, supersampling).mean(axis=(1, 3))


def centred_dft(image: np.ndarray) -> np.ndarray:
    return np.fft.fftshift(np.fft.fftn(np.fft.ifftshift(image), norm="ortho"))


def test_ellipse_kspace_against_the_dft_of_a_finely_sampled_ellipse() -> None:
    # Brute force: elementary Fourier theory. A sample of the DFT of pixel averages is the transform times the
    # sinc of the pixel, plus aliases that fall as the grid is refined.
    ellipse = Ellipse((7.3, -11.9), (31.0, 18.0), 27.0, 1.5)
    phantom = Phantom("ellipse", "one ellipse", (ellipse,), (100.0, 100.0))
    n = 32
    kspace = phantom.kspace((n, n))[:, :, 0]
    errors = []
    for fine in (128, 256, 512):
        dft = centred_dft(1.5 * coverage(ellipse, fine, 100.0 / fine, 4))
        middle = slice(fine // 2 - n // 2, fine // 2 + n // 2)
        pixel = np.sinc((np.arange(n) - n // 2) / fine)
        low = dft[middle, middle] / (pixel[:, None] * pixel[None, :]) * (n / fine)
        errors.append(np.linalg.norm(low - kspace) / np.linalg.norm(kspace))
    # Pixel averages alias with 1/frequency^3.5: at least a factor 2 each time the pixel is halved.
    assert errors[0] < 5e-3
    assert errors[1] < errors[0] / 2
    assert errors[2] < errors[1] / 2
    assert errors[2] < 5e-4


def quadrature(shape: Rectangle, kx: float, ky: float) -> complex:
    """Fourier integral over a turned rectangle by Gauss-Legendre quadrature."""
    nodes, weights = np.polynomial.legendre.leggauss(80)
    u, v = nodes[:, None] * shape.size_mm[0] / 2, nodes[None, :] * shape.size_mm[1] / 2
    angle = np.radians(shape.angle_degrees)
    x = shape.centre_mm[0] + u * np.cos(angle) - v * np.sin(angle)
    y = shape.centre_mm[1] + u * np.sin(angle) + v * np.cos(angle)
    jacobian = shape.size_mm[0] * shape.size_mm[1] / 4
    wave = np.exp(-2j * np.pi * (kx * x + ky * y))
    return complex(shape.amplitude * jacobian * (weights[:, None] * weights[None, :] * wave).sum())


@pytest.mark.parametrize("angle", [0.0, 31.0, 90.0, -45.0, 180.0, 270.0, 400.0])
def test_rectangle_against_the_fourier_integral(angle: float) -> None:
    # Source: the definition of the transform, integrated by Gauss-Legendre quadrature.
    rectangle = Rectangle((3.0, -5.0), (12.0, 4.0), angle, 0.7)
    rng = np.random.default_rng(4)
    for kx, ky in [(0.0, 0.0), (0.0, 0.25), *rng.uniform(-1, 1, (20, 2))]:
        assert complex(rectangle.transform(kx, ky)) == pytest.approx(quadrature(rectangle, kx, ky), abs=1e-11)


def corners(rectangle: Rectangle) -> tuple[tuple[float, float], ...]:
    angle = np.radians(rectangle.angle_degrees)
    w, h = rectangle.size_mm[0] / 2, rectangle.size_mm[1] / 2
    return tuple(
        (
            rectangle.centre_mm[0] + u * np.cos(angle) - v * np.sin(angle),
            rectangle.centre_mm[1] + u * np.sin(angle) + v * np.cos(angle),
        )
        for u, v in ((-w, -h), (w, -h), (w, h), (-w, h))
    )


@pytest.mark.parametrize("angle", [0.0, 20.0, 90.0])
@pytest.mark.parametrize("clockwise", [False, True])
def test_polygon_equals_rectangle_at_any_frequency(angle: float, clockwise: bool) -> None:
    # From 1e-300 to 100 cycles/mm; along the edges, across them, and at angles nearly so.
    rectangle = Rectangle((20.0, -7.0), (12.0, 5.0), angle, 1.3)
    vertices = corners(rectangle)
    polygon = Polygon(vertices[::-1] if clockwise else vertices, 1.3)
    area = 1.3 * 60.0
    directions = np.radians(np.add.outer((0, 90, 180, 270), (0, 1e-13, 1e-9, 1e-5, -1e-3, 10, 30, 45))) + (
        np.radians(angle)
    )
    for k in (0.0, 1e-300, 1e-160, *10.0 ** np.arange(-12.0, 2.1, 0.25)):
        kx, ky = k * np.cos(directions), k * np.sin(directions)
        # The phase itself is uncertain by 2 pi k r eps.
        tolerance = area * (1e-13 + 1e-14 * k)
        np.testing.assert_allclose(
            polygon.transform(kx, ky), rectangle.transform(kx, ky), rtol=0, atol=tolerance
        )


def triangle_quadrature(a: np.ndarray, b: np.ndarray, c: np.ndarray, kx: float, ky: float) -> complex:
    """Fourier integral over a triangle by Gauss-Legendre quadrature on a collapsed square."""
    nodes, weights = np.polynomial.legendre.leggauss(60)
    s, t, w = (nodes + 1) / 2, (nodes + 1) / 2, weights / 2
    points = (1 - s)[:, None, None] * a + s[:, None, None] * (b + t[None, :, None] * (c - b))
    jacobian = s * abs((b - a)[0] * (c - b)[1] - (b - a)[1] * (c - b)[0])
    wave = np.exp(-2j * np.pi * (points @ np.array([kx, ky])))
    return complex(((w * jacobian)[:, None] * w[None, :] * wave).sum())


def test_triangle_against_the_fourier_integral_down_to_zero_frequency() -> None:
    # Source: the definition of the transform, integrated by Gauss-Legendre quadrature. A triangle has no
    # parallel edges, whose rounding errors would cancel.
    a, b, c = np.array([-9.0, -4.0]), np.array([11.0, -6.5]), np.array([1.0, 14.0])
    triangle = Polygon(((-9.0, -4.0), (11.0, -6.5), (1.0, 14.0)))
    area = float(triangle.transform(0.0, 0.0).real)
    for k in 10.0 ** np.arange(-12.0, 0.1, 0.25):
        for angle in np.radians([0, 17, 76, 90, 119, 200, 315]):
            kx, ky = k * np.cos(angle), k * np.sin(angle)
            exact = triangle_quadrature(a, b, c, kx, ky)
            assert abs(complex(triangle.transform(kx, ky)) - exact) < 1e-13 * area


def test_concave_polygon_is_the_sum_of_its_rectangles() -> None:
    # An L, and the two rectangles that it consists of.
    polygon = Polygon(((0.0, 0.0), (6.0, 0.0), (6.0, 2.0), (2.0, 2.0), (2.0, 5.0), (0.0, 5.0)))
    parts = (Rectangle((3.0, 1.0), (6.0, 2.0)), Rectangle((1.0, 3.5), (2.0, 3.0)))
    kx, ky = np.random.default_rng(8).uniform(-2, 2, (2, 200))
    np.testing.assert_allclose(
        polygon.transform(kx, ky), sum(part.transform(kx, ky) for part in parts), rtol=0, atol=1e-12
    )


def regular_polygon(vertices: int, circumradius: float, centre: tuple[float, float]) -> Polygon:
    angles = 2 * np.pi * np.arange(vertices) / vertices
    return Polygon(
        tuple(
            (float(centre[0] + circumradius * np.cos(a)), float(centre[1] + circumradius * np.sin(a)))
            for a in angles
        )
    )


def test_polygon_of_many_vertices_tends_to_the_disc() -> None:
    # Elementary: with the area of the disc, the outline of a regular polygon wiggles about the circle by
    # O(1/vertices^2), too fast for these frequencies; what is left is of second order in that.
    disc = Ellipse((4.0, 9.0), (25.0, 25.0))
    k = np.linspace(-0.25, 0.25, 33)
    wanted = disc.transform(k[:, None], k[None, :])
    errors = []
    for vertices in (90, 180, 360):
        turn = 2 * np.pi / vertices
        polygon = regular_polygon(vertices, 25.0 * np.sqrt(turn / np.sin(turn)), (4.0, 9.0))
        errors.append(abs(polygon.transform(k[:, None], k[None, :]) - wanted).max() / abs(wanted).max())
    assert errors[0] < 1e-6
    assert errors[1] == pytest.approx(errors[0] / 16, rel=0.05)
    assert errors[2] == pytest.approx(errors[1] / 16, rel=0.05)
    inscribed = regular_polygon(720, 25.0, (4.0, 9.0))  # its area is less by (2 pi / 720)^2 / 6
    missing = 1 - float(abs(inscribed.transform(0.0, 0.0))) / (np.pi * 25.0**2)
    assert missing == pytest.approx((2 * np.pi / 720) ** 2 / 6, rel=1e-4)


@pytest.mark.parametrize(
    "shape",
    [
        Ellipse((3.0, -8.0), (20.0, 11.0), 33.0, 2.0),
        Rectangle((-5.0, 2.0), (30.0, 17.0), 21.0, 2.0),
        Polygon(((-18.0, -9.0), (15.0, -14.0), (2.0, 4.0), (9.0, 20.0), (-14.0, 12.0)), 2.0),
    ],
    ids=["ellipse", "rectangle", "polygon"],
)
def test_parseval(shape: Ellipse | Rectangle | Polygon) -> None:
    # Parseval for a function inside one period: sum |F(i/FOV)|^2 / FOV^2 = integral of |f|^2 = value x F(0).
    # For a sharp edge the energy outside a disc of radius k falls as 1/k.
    fov = 64.0
    energy = shape.amplitude * float(shape.transform(0.0, 0.0).real)
    k = np.arange(-320, 321) / fov
    density = abs(shape.transform(k[:, None], k[None, :])) ** 2 / fov**2
    radius = np.hypot(k[:, None], k[None, :])
    half, full = (float(density[radius <= edge].sum()) for edge in (2.5, 5.0))
    missing_half, missing_full = energy - half, energy - full
    assert 0 < missing_full < 0.02 * energy
    assert missing_half / missing_full == pytest.approx(2.0, rel=0.1)
    assert 2 * full - half == pytest.approx(energy, rel=2e-4)  # the 1/k tail extrapolated
