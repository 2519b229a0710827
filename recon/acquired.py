"""What a scan acquired: the input of every reconstruction method."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .. import InputError


def fits(mask: np.ndarray, shape: tuple[int, int, int]) -> bool:
    """Tell whether a mask broadcasts to an image's shape.

    Examples
    --------
    >>> fits(np.ones((1, 8, 1), bool), (6, 8, 2)), fits(np.ones((1, 7, 1), bool), (6, 8, 2))
    (True, False)
    """
    return mask.ndim == 3 and all(m in (1, n) for m, n in zip(mask.shape, shape, strict=True))


@dataclass(frozen=True)
class Acquired:
    """Undersampled k-space of one coil or several.

    Parameters
    ----------
    kspace : complex array ``(coil, x, y, z)``
        Centred k-space on all three axes (an axis of length 1 is its own transform); what the mask leaves
        out is not read.
    mask : bool array, broadcastable to ``(x, y, z)``
        The sampled points: not zero where a sample was taken; an axis of length 1 is sampled fully. Kept as
        bool, reduced to length 1 along each axis where it does not change.
    maps : complex array ``(coil, x, y, z)``, optional
        Coil sensitivities, on any scale; needed with more than one coil.
    sigma : float, optional
        Standard deviation of the real (and of the imaginary) part of the noise in k-space.

    Raises
    ------
    InputError
        Shapes that do not fit, an empty mask, NaN or infinite values, sigma below zero, or several coils
        without maps.

    Examples
    --------
    >>> data = Acquired(np.ones((1, 4, 4, 1), np.complex64), np.ones((1, 4, 1), bool))
    >>> data.shape, data.dtype, data.acceleration
    ((4, 4, 1), dtype('complex64'), 1.0)
    """

    kspace: np.ndarray
    mask: np.ndarray
    maps: np.ndarray | None = None
    sigma: float | None = None

    def __post_init__(self):
        if self.kspace.ndim != 4 or 0 in self.kspace.shape:
            raise InputError(f"k-space has shape {self.kspace.shape}, expected (coil, x, y, z)")
        mask = np.asarray(self.mask) != 0
        if not fits(mask, self.shape):
            raise InputError(f"the mask has shape {mask.shape}, which does not fit k-space of {self.shape}")
        if not mask.any():
            raise InputError("the mask is empty: no sample is taken")
        object.__setattr__(self, "mask", without_full_axes(mask))
        if np.any(self.kspace[~np.broadcast_to(mask, self.kspace.shape)]):
            object.__setattr__(self, "kspace", np.where(mask, self.kspace, self.kspace.dtype.type(0)))
        if not np.isfinite(self.kspace).all():
            raise InputError("k-space holds NaN or infinite values")
        if self.maps is None:
            if len(self.kspace) > 1:
                raise InputError(
                    f"k-space has {len(self.kspace)} coils but no coil maps are given; give one for each coil"
                )
        elif self.maps.shape != self.kspace.shape:
            raise InputError(
                f"coil maps have shape {self.maps.shape}, expected that of k-space, {self.kspace.shape}"
            )
        elif not np.isfinite(self.maps).all():
            raise InputError("the coil maps hold NaN or infinite values")
        elif not self.maps.any():
            raise InputError("the coil maps are zero everywhere")
        if self.sigma is not None and not (np.isfinite(self.sigma) and self.sigma >= 0):
            raise InputError(f"sigma is {self.sigma}, expected a number of at least 0")

    @property
    def shape(self) -> tuple[int, int, int]:
        """Shape of the image."""
        x, y, z = self.kspace.shape[1:]
        return x, y, z

    @property
    def dtype(self) -> np.dtype:
        """complex128 when k-space is given in double precision, otherwise complex64."""
        return np.dtype(np.complex128 if self.kspace.dtype in (np.complex128, np.float64) else np.complex64)

    @property
    def acceleration(self) -> float:
        """Points of the grid over samples taken."""
        return self.mask.size / int(self.mask.sum())


def without_full_axes(mask: np.ndarray) -> np.ndarray:
    """Reduce to length 1 each axis along which a mask does not change: it is sampled fully, or not encoded.

    Examples
    --------
    >>> lines = np.zeros((6, 8, 1), bool)
    >>> lines[:, ::2] = True
    >>> without_full_axes(lines).shape
    (1, 8, 1)
    """
    for axis in range(mask.ndim):
        first = mask.take([0], axis)
        if np.array_equal(np.broadcast_to(first, mask.shape), mask):
            mask = first
    return mask
