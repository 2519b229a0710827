"""Objects made of shapes, and their k-space on a Cartesian grid, in closed form.

No image grid takes part: each sample is the continuous Fourier transform of the object at that frequency, as
on a scanner. The fully sampled image is therefore band-limited, with the truncation (Gibbs) ringing of a real
scan.

Orientation: array axis 0 is x and grows to the patient's or phantom's right in the picture, axis 1 is y and
grows upwards. To show an image that way, draw `image[:, :, 0].T` with the origin at the lower left.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .coils import CoilArray
from .shapes import Shape

FieldOfView = float | Sequence[float]


@dataclass(frozen=True)
class Phantom:
    """A numerical phantom: a sum of shapes, with a field of view that holds it.

    Parameters
    ----------
    name : str
        Short name, as used in study files.
    title : str
        One line that says what it is.
    shapes : tuple of Shape
        Shapes in mm about the centre of the field of view; their values add where they overlap.
    field_of_view_mm : tuple of float
        Field of view (x, y) in mm that is imaged unless another is asked for.

    Raises
    ------
    InputError
        When there is no shape, or the field of view is not positive.

    Examples
    --------
    >>> from skipline.phantoms import Ellipse, Phantom
    >>> disc = Phantom("disc", "a disc of 60 mm", (Ellipse((0.0, 0.0), (30.0, 30.0)),), (120.0, 120.0))
    >>> disc.kspace((32, 32)).shape
    (32, 32, 1)
    """

    name: str
    title: str
    shapes: tuple[Shape, ...]
    field_of_view_mm: tuple[float, float]

    def __post_init__(self) -> None:
        if not self.shapes:
            raise InputError(f"phantom {self.name!r}: expected at least one shape, got none")
        _checked_field_of_view(self.field_of_view_mm)

    def kspace(
        self,
        matrix: Sequence[int],
        field_of_view_mm: FieldOfView | None = None,
        array: CoilArray | None = None,
    ) -> NDArray[np.complex64]:
        """Fully sampled, noise-free k-space, scaled so that its unitary inverse DFT has the object's values.

        Index `i` of an axis of length `N` is the frequency `(i - N//2) / field of view`. On an even axis the
        frequency at index 0 has no partner of opposite sign, so the image of a real object has a small
        imaginary part, as in a real scan.

        Parameters
        ----------
        matrix : sequence of int
            Numbers of samples (nx, ny); (nx, ny, 1) is accepted too.
        field_of_view_mm : float or sequence of float, optional
            Field of view in mm, one number or (x, y); the phantom's own when left out. What of the object
            lies outside folds back, as on a scanner.
        array : CoilArray, optional
            Receive coils. The k-space of coil times object stays in closed form: a sum of shifted transforms.

        Returns
        -------
        ndarray of complex64
            Shape (nx, ny, 1), or (coil, nx, ny, 1) when `array` is given.

        Raises
        ------
        InputError
            When the matrix or the field of view cannot be used.

        Examples
        --------
        The centre sample is the sum of all pixels / sqrt(number of pixels): area / pixel area / sqrt(pixels).

        >>> from skipline.phantoms import Phantom, Rectangle
        >>> slab = Phantom("slab", "50 mm x 40 mm", (Rectangle((0.0, 0.0), (50.0, 40.0)),), (100.0, 100.0))
        >>> kspace = slab.kspace((20, 20))
        >>> round(float(kspace[10, 10, 0].real), 4)  # 2000 mm^2 / 25 mm^2 / 20
        4.0
        """
        nx, ny = _checked_matrix(matrix)
        if field_of_view_mm is None:
            field_of_view_mm = self.field_of_view_mm
        fov_x, fov_y = _checked_field_of_view(field_of_view_mm)
        scale = np.sqrt(nx * ny) / (fov_x * fov_y)
        if array is None:
            transform = self._transform(_frequencies(nx) / fov_x, _frequencies(ny) / fov_y)
            return (scale * transform).astype(np.complex64)[:, :, None]

        # Maps of period 2 FOV shift k-space by half samples, so every shifted grid is every other point of
        # ONE grid of half steps, which reaches `order` half steps beyond the acquired one. Evaluate that grid
        # once.
        order_x, order_y = array.order[:2]
        transform = self._transform(
            _half_steps(nx, order_x) / (2 * fov_x), _half_steps(ny, order_y) / (2 * fov_y)
        )
        in_plane = array.coefficients.sum(axis=3)  # the plane z = 0
        kspace = np.zeros((array.coils, nx * ny), dtype=np.complex128)
        for m in range(-order_x, order_x + 1):  # one m at a time bounds the memory
            rows = transform[order_x - m :: 2][:nx]
            shifted = np.stack([rows[:, order_y - n :: 2][:, :ny] for n in range(-order_y, order_y + 1)])
            kspace += in_plane[:, m + order_x] @ shifted.reshape(2 * order_y + 1, nx * ny)
        return (scale * kspace).astype(np.complex64).reshape(array.coils, nx, ny, 1)

    def reference(
        self,
        matrix: Sequence[int],
        field_of_view_mm: FieldOfView | None = None,
        array: CoilArray | None = None,
    ) -> NDArray[np.complex64]:
        """Fully sampled, noise-free image: the unitary inverse DFT of `kspace`, band-limited.

        With an array the coil images are combined by least squares, sum conj(S) image / sum |S|^2: the image
        that any least-squares reconstruction returns from all samples. It differs from the image without an
        array only at sharp edges (the band limit of S times the object is not quite S times its band limit).

        Parameters
        ----------
        matrix : sequence of int
            Image size (nx, ny); (nx, ny, 1) is accepted too.
        field_of_view_mm : float or sequence of float, optional
            Field of view in mm; the phantom's own when left out.
        array : CoilArray, optional
            Receive coils.

        Returns
        -------
        ndarray of complex64
            Shape (nx, ny, 1).

        Raises
        ------
        InputError
            When the matrix or the field of view cannot be used.

        Examples
        --------
        >>> from skipline.phantoms import line_pair_slab_phantom
        >>> image = line_pair_slab_phantom().reference((64, 64))
        >>> image.shape, str(image.dtype)
        ((64, 64, 1), 'complex64')
        """
        kspace = self.kspace(matrix, field_of_view_mm, array)
        axes = (-3, -2)
        image = np.fft.ifftn(np.fft.ifftshift(kspace.astype(np.complex128), axes), axes=axes, norm="ortho")
        image = np.fft.fftshift(image, axes)
        if array is not None:
            maps = array.maps(image.shape[1:]).astype(np.complex128)
            image = np.sum(maps.conj() * image, axis=0) / np.sum(np.abs(maps) ** 2, axis=0)
        return image.astype(np.complex64)

    def _transform(self, kx: NDArray[np.float64], ky: NDArray[np.float64]) -> NDArray[np.complex128]:
        """Transform of the whole object on the product grid of `kx` and `ky` in cycles/mm."""
        total = np.zeros((kx.size, ky.size), dtype=np.complex128)
        for shape in self.shapes:
            total += shape.transform(kx[:, None], ky[None, :])
        return total


def _frequencies(n: int) -> NDArray[np.float64]:
    """Return the indices of `n` samples about zero frequency, in steps of 1/FOV."""
    return np.arange(n, dtype=float) - n // 2


def _half_steps(n: int, order: int) -> NDArray[np.float64]:
    """Return the indices, in steps of 1/(2 FOV), of all `n` samples shifted by up to `order` half steps."""
    first = -2 * (n // 2) - order
    return np.arange(first, first + 2 * n - 1 + 2 * order, dtype=float)


def _checked_matrix(matrix: Sequence[int]) -> tuple[int, int]:
    sizes = tuple(matrix)
    flat = len(sizes) == 2 or (len(sizes) == 3 and sizes[2] == 1)
    if not flat or any(int(n) != n or n < 1 for n in sizes):
        raise InputError(f"matrix: expected two whole numbers above 0, (nx, ny), got {sizes}")
    return int(sizes[0]), int(sizes[1])


def _checked_field_of_view(field_of_view_mm: FieldOfView) -> tuple[float, float]:
    both = np.ravel(np.asarray(field_of_view_mm, dtype=float))
    if both.size not in (1, 2) or not all(isfinite(length) and length > 0 for length in both):
        raise InputError(
            f"field_of_view_mm: expected one length or two, (x, y), above 0 mm, got {field_of_view_mm}"
        )
    return float(both[0]), float(both[-1])
