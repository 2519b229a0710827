"""The Shepp-Logan head, with the values of 1974 and with the higher contrast of Toft.

The head is defined on the square [-1, 1]^2; the square is scaled to the field of view. At the standard 240 mm
one unit is 120 mm and the skull measures 166 mm x 221 mm. Drawn with x to the right and y upwards, as in
the paper.

References
----------
L. A. Shepp, B. F. Logan, The Fourier reconstruction of a head section, IEEE Trans. Nucl. Sci. 21 (1974).
P. Toft, The Radon transform: theory and implementation, PhD thesis, Technical University of Denmark (1996).
"""

from __future__ import annotations

from .object import Phantom
from .shapes import Ellipse

# Centre x, y; semi-axes a (along x before rotation), b; angle in degrees; value of 1974; value of Toft 1996.
ELLIPSES = (
    (0.0, 0.0, 0.69, 0.92, 0.0, 2.0, 1.0),  # skull
    (0.0, -0.0184, 0.6624, 0.874, 0.0, -0.98, -0.8),  # brain
    (0.22, 0.0, 0.11, 0.31, -18.0, -0.02, -0.2),  # ventricles
    (-0.22, 0.0, 0.16, 0.41, 18.0, -0.02, -0.2),
    (0.0, 0.35, 0.21, 0.25, 0.0, 0.01, 0.1),  # tumours
    (0.0, 0.1, 0.046, 0.046, 0.0, 0.01, 0.1),
    (0.0, -0.1, 0.046, 0.046, 0.0, 0.01, 0.1),
    (-0.08, -0.605, 0.046, 0.023, 0.0, 0.01, 0.1),
    (0.0, -0.605, 0.023, 0.023, 0.0, 0.01, 0.1),
    (0.06, -0.605, 0.023, 0.046, 0.0, 0.01, 0.1),
)


def shepp_logan_phantom(field_of_view_mm: float = 240.0) -> Phantom:
    """Shepp-Logan head with the values of 1974: skull 2, brain 1.02, detail of 1 and 2 %.

    Parameters
    ----------
    field_of_view_mm : float
        Field of view in mm to which the square [-1, 1]^2 of the definition is scaled.

    Returns
    -------
    Phantom
        Named `shepp-logan`.

    Examples
    --------
    >>> head = shepp_logan_phantom()
    >>> len(head.shapes), round(sum(shape.amplitude for shape in head.shapes[:2]), 2)
    (10, 1.02)
    """
    shapes = tuple(_ellipse(row, row[5], field_of_view_mm) for row in ELLIPSES)
    return Phantom(
        "shepp-logan", "Shepp-Logan head, values of 1974", shapes, (field_of_view_mm, field_of_view_mm)
    )


def shepp_logan_high_contrast_phantom(field_of_view_mm: float = 240.0) -> Phantom:
    """Shepp-Logan head with the higher contrast of Toft 1996: skull 1, brain 0.2, detail of 0.1 and 0.2.

    Parameters
    ----------
    field_of_view_mm : float
        Field of view in mm to which the square [-1, 1]^2 of the definition is scaled.

    Returns
    -------
    Phantom
        Named `shepp-logan-high-contrast`.

    Examples
    --------
    >>> head = shepp_logan_high_contrast_phantom()
    >>> len(head.shapes), round(sum(shape.amplitude for shape in head.shapes[:2]), 2)
    (10, 0.2)
    """
    shapes = tuple(_ellipse(row, row[6], field_of_view_mm) for row in ELLIPSES)
    return Phantom(
        "shepp-logan-high-contrast",
        "Shepp-Logan head, higher contrast of Toft 1996",
        shapes,
        (field_of_view_mm, field_of_view_mm),
    )


def _ellipse(row: tuple[float, ...], value: float, field_of_view_mm: float) -> Ellipse:
    x, y, a, b, angle, *_ = row
    unit = field_of_view_mm / 2
    return Ellipse((unit * x, unit * y), (unit * a, unit * b), angle, value)
