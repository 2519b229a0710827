"""Flat shapes whose continuous Fourier transform is known in closed form.

Every shape is uniform, of value `amplitude`, and an object is a sum of shapes. Lengths are in mm, spatial
frequencies in cycles/mm, angles in degrees, counter-clockwise from x to y. The transform of f(x, y) is

    F(kx, ky) = integral of f(x, y) exp(-2 pi i (kx x + ky y)) dx dy,

in units of amplitude x mm^2. Frequencies are given as arrays that broadcast against each other. On a product
grid give `kx[:, None]` and `ky[None, :]`: whatever separates is then worked out along the two axes only.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import cos, isfinite, pi, radians, sin
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .. import InputError

Point = tuple[float, float]


class Shape(Protocol):
    """What a `Phantom` asks of its shapes: a value and a transform in closed form."""

    @property
    def amplitude(self) -> float:
        """Value inside the shape; values add where shapes overlap."""
        ...

    def transform(self, kx: ArrayLike, ky: ArrayLike) -> NDArray[np.complex128]:
        """Continuous Fourier transform at the frequencies `kx`, `ky` in cycles/mm."""
        ...


@dataclass(frozen=True)
class Ellipse:
    """Ellipse with semi-axes `a` and `b`; `a` lies along x before rotation.

    With the frequencies (u, v) along the axes of the ellipse and q = sqrt((a u)^2 + (b v)^2), its transform
    is a b J1(2 pi q) / q, and pi a b at q = 0 (Shepp & Logan 1974; Van de Walle et al. 2000).

    Parameters
    ----------
    centre_mm : tuple of float
        Centre (x, y) in mm.
    semi_axes_mm : tuple of float
        Semi-axes (a, b) in mm.
    angle_degrees : float
        Rotation about the centre, counter-clockwise.
    amplitude : float
        Value inside.

    Raises
    ------
    InputError
        When a semi-axis is not positive, or a number is not finite.

    References
    ----------
    L. A. Shepp, B. F. Logan, The Fourier reconstruction of a head section, IEEE Trans. Nucl. Sci. 21 (1974).
    R. Van de Walle et al., Reconstruction of MR images from data acquired on a general nonregular grid by
    pseudoinverse calculation, IEEE Trans. Med. Imaging 19 (2000).

    Examples
    --------
    A disc of radius 10 mm; at zero frequency the transform is its area.

    >>> disc = Ellipse((0.0, 0.0), (10.0, 10.0))
    >>> round(float(disc.transform(0.0, 0.0).real), 3)
    314.159
    """

    centre_mm: Point
    semi_axes_mm: Point
    angle_degrees: float = 0.0
    amplitude: float = 1.0

    def __post_init__(self) -> None:
        _check_finite("ellipse", *self.centre_mm, self.angle_degrees, self.amplitude)
        _check_sizes("ellipse", "semi-axes", self.semi_axes_mm)

    def transform(self, kx: ArrayLike, ky: ArrayLike) -> NDArray[np.complex128]:
        """Continuous Fourier transform at the frequencies `kx`, `ky`.

        Parameters
        ----------
        kx, ky : array_like of float
            Frequencies in cycles/mm, broadcast against each other.

        Returns
        -------
        ndarray of complex128
            Values in amplitude x mm^2, of the broadcast shape.

        Examples
        --------
        >>> import numpy as np
        >>> k = np.array([-0.1, 0.0, 0.1])
        >>> Ellipse((0.0, 0.0), (3.0, 2.0)).transform(k[:, None], k[None, :]).shape
        (3, 3)
        """
        from scipy.special import j1

        a, b = self.semi_axes_mm
        u, v = _turned(kx, ky, self.angle_degrees)
        x = 2 * pi * np.sqrt((a * u) ** 2 + (b * v) ** 2)
        bell = np.full_like(x, 0.5)  # J1(x)/x at x = 0
        np.divide(j1(x), x, out=bell, where=x > 0)
        return 2 * pi * a * b * self.amplitude * bell * _shift(kx, ky, self.centre_mm)


@dataclass(frozen=True)
class Rectangle:
    """Rectangle of `size_mm` = (width, height); the width lies along x before rotation.

    Its transform is a product of two sincs along its sides (any textbook).

    Parameters
    ----------
    centre_mm : tuple of float
        Centre (x, y) in mm.
    size_mm : tuple of float
        Width and height in mm.
    angle_degrees : float
        Rotation about the centre, counter-clockwise.
    amplitude : float
        Value inside.

    Raises
    ------
    InputError
        When a side is not positive, or a number is not finite.

    Examples
    --------
    The transform of a bar 2 mm wide is zero at one cycle in 2 mm.

    >>> bar = Rectangle((0.0, 0.0), (2.0, 10.0))
    >>> abs(complex(bar.transform(0.5, 0.0))) < 1e-12
    True
    """

    centre_mm: Point
    size_mm: Point
    angle_degrees: float = 0.0
    amplitude: float = 1.0

    def __post_init__(self) -> None:
        _check_finite("rectangle", *self.centre_mm, self.angle_degrees, self.amplitude)
        _check_sizes("rectangle", "sides", self.size_mm)

    def transform(self, kx: ArrayLike, ky: ArrayLike) -> NDArray[np.complex128]:
        """Continuous Fourier transform at the frequencies `kx`, `ky`.

        Parameters
        ----------
        kx, ky : array_like of float
            Frequencies in cycles/mm, broadcast against each other.

        Returns
        -------
        ndarray of complex128
            Values in amplitude x mm^2, of the broadcast shape.

        Examples
        --------
        >>> float(Rectangle((0.0, 0.0), (4.0, 3.0), amplitude=2.0).transform(0.0, 0.0).real)
        24.0
        """
        width, height = self.size_mm
        u, v = _turned(kx, ky, self.angle_degrees)
        sides = (width * height * self.amplitude * np.sinc(width * u)) * np.sinc(height * v)
        return sides * _shift(kx, ky, self.centre_mm)


@dataclass(frozen=True)
class Polygon:
    """Simple polygon, given by its vertices in order, in either sense; the last is joined to the first.

    By the divergence theorem the transform is a sum over edges. With the edge vector e, its mid-point m and
    its outward normal n of the length of the edge,

        F(k) = i / (2 pi |k|^2)  sum (k.n) exp(-2 pi i k.m) sinc(k.e),

    which is what McInturff & Simon (1991) have for uniform amplitude, with the edge terms kept together so
    that nothing is divided by k.e. The normals sum to zero, so 1 may be subtracted from each exp() sinc():
    what is left falls like |k| and the division by |k|^2 stays accurate down to k = 0.

    Parameters
    ----------
    vertices_mm : tuple of tuple of float
        At least three vertices (x, y) in mm.
    amplitude : float
        Value inside.

    Raises
    ------
    InputError
        When there are fewer than three vertices, the area is zero, or a number is not finite.

    References
    ----------
    K. McInturff, P. S. Simon, The Fourier transform of linearly varying functions with polygonal support,
    IEEE Trans. Antennas Propag. 39 (1991).

    Examples
    --------
    >>> triangle = Polygon(((0.0, 0.0), (4.0, 0.0), (0.0, 3.0)))
    >>> float(triangle.transform(0.0, 0.0).real)
    6.0
    """

    vertices_mm: tuple[Point, ...]
    amplitude: float = 1.0

    def __post_init__(self) -> None:
        vertices = np.asarray(self.vertices_mm, dtype=float)
        if vertices.ndim != 2 or vertices.shape[1] != 2 or len(vertices) < 3:
            raise InputError(
                "polygon: expected at least three vertices (x, y) in mm, "
                f"got an array of shape {vertices.shape}"
            )
        _check_finite("polygon", *vertices.ravel(), self.amplitude)
        extent = float(np.ptp(vertices, axis=0).max())
        if abs(_area_and_centroid(vertices)[0]) <= 1e-12 * extent**2:
            raise InputError("polygon: its area is zero; expected vertices that do not lie on one line")

    def transform(self, kx: ArrayLike, ky: ArrayLike) -> NDArray[np.complex128]:
        """Continuous Fourier transform at the frequencies `kx`, `ky`.

        Parameters
        ----------
        kx, ky : array_like of float
            Frequencies in cycles/mm, broadcast against each other.

        Returns
        -------
        ndarray of complex128
            Values in amplitude x mm^2, of the broadcast shape.

        Examples
        --------
        >>> square = Polygon(((-1.0, -1.0), (1.0, -1.0), (1.0, 1.0), (-1.0, 1.0)))
        >>> float(square.transform(1e-9, 0.0).real)
        4.0
        """
        vertices = np.asarray(self.vertices_mm, dtype=float)
        area, centroid = _area_and_centroid(vertices)
        corners = vertices - centroid  # keeps k.m small, so that small k stays accurate
        edges = np.roll(corners, -1, axis=0) - corners
        middles = corners + edges / 2
        kx, ky = np.asarray(kx, dtype=float), np.asarray(ky, dtype=float)
        total = np.zeros(np.broadcast_shapes(kx.shape, ky.shape), dtype=np.complex128)
        for (ex, ey), (mx, my) in zip(edges, middles, strict=True):
            along = kx * ex + ky * ey
            half_turn = pi * (kx * mx + ky * my)
            # exp(-2i t) - 1 = -2i sin(t) exp(-i t), without cancellation
            exp_minus_one = np.sin(half_turn) * np.exp(-1j * half_turn) * -2j
            total += (kx * ey - ky * ex) * (exp_minus_one * np.sinc(along) + _sinc_minus_one(along))

        # Seen from the centroid the transform is area (1 - O((k size)^2)): below 1e-8 it is the area,
        # exactly.
        k_squared = kx**2 + ky**2
        at_zero = k_squared * np.ptp(vertices, axis=0).max() ** 2 < 1e-16
        centred = np.full_like(total, abs(area))
        np.divide(np.sign(area) * 1j / (2 * pi) * total, k_squared, out=centred, where=~at_zero)
        return self.amplitude * centred * _shift(kx, ky, (float(centroid[0]), float(centroid[1])))


def _turned(kx: ArrayLike, ky: ArrayLike, degrees: float) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Frequencies along the axes of a shape turned by `degrees`; right angles stay separable (and exact)."""
    kx, ky = np.asarray(kx, dtype=float), np.asarray(ky, dtype=float)
    quarter_turns, rest = divmod(degrees, 90.0)
    if rest == 0.0:
        return [(kx, ky), (ky, -kx), (-kx, -ky), (-ky, kx)][int(quarter_turns) % 4]
    c, s = cos(radians(degrees)), sin(radians(degrees))
    return c * kx + s * ky, c * ky - s * kx


def _shift(kx: ArrayLike, ky: ArrayLike, centre: Point) -> NDArray[np.complex128]:
    """Phase of a shape moved from the origin to `centre` (shift theorem)."""
    x, y = centre
    return np.exp(-2j * pi * x * np.asarray(kx)) * np.exp(-2j * pi * y * np.asarray(ky))


def _sinc_minus_one(x: NDArray[np.float64]) -> NDArray[np.float64]:
    """Evaluate sin(pi x)/(pi x) - 1, by its power series where the difference would lose digits."""
    t = np.square(pi * np.minimum(np.abs(x), 0.03))
    series = -t / 6 * (1 - t / 20 * (1 - t / 42 * (1 - t / 72)))
    return np.where(np.abs(x) < 0.03, series, np.sinc(x) - 1)


def _area_and_centroid(vertices: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
    """Signed area (positive counter-clockwise) and centroid of a polygon, by the shoelace formula."""
    mean = vertices.mean(axis=0)
    here = vertices - mean
    after = np.roll(here, -1, axis=0)
    cross = here[:, 0] * after[:, 1] - after[:, 0] * here[:, 1]
    area = float(cross.sum() / 2)
    if area == 0.0:
        return area, mean
    return area, mean + ((here + after) * cross[:, None]).sum(axis=0) / (6 * area)


def _check_finite(shape: str, *numbers: float) -> None:
    if not all(isfinite(number) for number in numbers):
        raise InputError(f"{shape}: expected finite numbers, got {[float(number) for number in numbers]}")


def _check_sizes(shape: str, what: str, sizes: Point) -> None:
    if not all(isfinite(size) and size > 0 for size in sizes):
        raise InputError(f"{shape}: expected {what} above 0 mm, got {sizes[0]:g} and {sizes[1]:g} mm")
