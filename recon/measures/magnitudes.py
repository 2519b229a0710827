"""The magnitudes that are compared, and the map of their differences."""

from __future__ import annotations

import numpy as np

from ... import InputError


def magnitudes(
    reference: np.ndarray, image: np.ndarray, region: np.ndarray | None = None
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return both magnitudes in double precision, and the region, after checking that they fit.

    Parameters
    ----------
    reference, image : array (x, y, z)
        Real or complex.
    region : bool array (x, y, z), optional
        Where to compare; everywhere when left out.

    Returns
    -------
    reference_magnitude, image_magnitude : float64 array (x, y, z)
    region : bool array (x, y, z)

    Raises
    ------
    InputError
        Shapes differ or are not ``(x, y, z)``; NaN or infinite values; the region is empty, or the reference
        is zero all over it.

    Examples
    --------
    >>> r, x, region = magnitudes(np.full((2, 2, 1), 3 + 4j), np.full((2, 2, 1), -5))
    >>> bool((r == x).all()), int(region.sum())
    (True, 4)
    """
    reference_magnitude, image_magnitude = _magnitude(reference, "reference"), _magnitude(image, "image")
    shape = reference_magnitude.shape
    if image_magnitude.shape != shape:
        raise InputError(
            f"the image has shape {image_magnitude.shape}, expected that of the reference, {shape}"
        )
    inside = np.ones(shape, bool) if region is None else np.asarray(region, bool)
    if inside.shape != shape:
        raise InputError(f"the region has shape {inside.shape}, expected that of the reference, {shape}")
    if not inside.any():
        raise InputError("the region to compare in is empty; expected at least one voxel")
    if not reference_magnitude[inside].any():
        raise InputError("the reference is zero everywhere it is compared; expected an object there")
    return reference_magnitude, image_magnitude, inside


def error_map(reference: np.ndarray, image: np.ndarray) -> np.ndarray:
    """Return magnitude of the image minus magnitude of the reference.

    Parameters
    ----------
    reference, image : array (x, y, z)
        Real or complex.

    Returns
    -------
    float32 array (x, y, z)
        Above zero where the image is too bright; the difference is taken in double precision.

    Raises
    ------
    InputError
        Shapes differ or are not ``(x, y, z)``; NaN or infinite values; the reference is zero everywhere.

    Examples
    --------
    >>> error_map(np.full((1, 2, 1), 2j), np.array([[[1.5], [-3.0]]])).ravel().tolist()
    [-0.5, 1.0]
    """
    reference_magnitude, image_magnitude, _ = magnitudes(reference, image)
    return (image_magnitude - reference_magnitude).astype(np.float32)


def _magnitude(values: np.ndarray, what: str) -> np.ndarray:
    # to double precision first: integers have no magnitude of their lowest value
    magnitude = np.abs(np.asarray(values, np.complex128 if np.iscomplexobj(values) else np.float64))
    if magnitude.ndim != 3:
        raise InputError(f"the {what} has shape {magnitude.shape}, expected (x, y, z); a 2-D image has z = 1")
    if not np.isfinite(magnitude).all():
        raise InputError(f"the {what} holds NaN or infinite values")
    return magnitude
