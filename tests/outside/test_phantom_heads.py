"""The Shepp-Logan heads against scikit-image's picture and the published values."""

import numpy as np
import pytest
from scipy.ndimage import binary_erosion
from skimage.data import shepp_logan_phantom as picture_of_scikit_image

from skipline.phantoms import Ellipse, Phantom, shepp_logan_high_contrast_phantom, shepp_logan_phantom


def drawn(phantom: Phantom, x_mm: np.ndarray, y_mm: np.ndarray) -> np.ndarray:
    """Point values of a phantom of ellipses."""
    values = np.zeros(np.broadcast_shapes(x_mm.shape, y_mm.shape))
    for shape in phantom.shapes:
        assert isinstance(shape, Ellipse)
        angle = np.radians(shape.angle_degrees)
        x, y = x_mm - shape.centre_mm[0], y_mm - shape.centre_mm[1]
        u, v = x * np.cos(angle) + y * np.sin(angle), y * np.cos(angle) - x * np.sin(angle)
        values += shape.amplitude * ((u / shape.semi_axes_mm[0]) ** 2 + (v / shape.semi_axes_mm[1]) ** 2 <= 1)
    return values


@pytest.fixture(scope="module")
def picture() -> np.ndarray:
    """scikit-image's picture (Toft's values, 400 x 400 points from -1 to 1, eight bits) in our axes."""
    return picture_of_scikit_image()[::-1].T  # its rows run downwards


def test_parameters_against_scikit_image(picture: np.ndarray) -> None:
    # Source: scikit-image, skimage.data.shepp_logan_phantom.
    points = np.linspace(-120.0, 120.0, 400)
    ours = drawn(shepp_logan_high_contrast_phantom(), points[:, None], points[None, :])
    differs = abs(ours - picture) > 0.01
    assert differs.sum() <= 4  # points on an outline; there are 160000
    assert abs(ours - picture)[~differs].max() < 1 / 255


def test_reference_image_against_scikit_image(picture: np.ndarray) -> None:
    # The closed-form k-space has the place, the size and the orientation of the picture: compare the means
    # over blocks of 8 x 8 points that are uniform in the picture, and so are their neighbours (edges ring).
    ours = shepp_logan_high_contrast_phantom().reference((400, 400))[:, :, 0]
    assert abs(ours.imag).max() < 1e-2
    blocks = picture.reshape(50, 8, 50, 8)
    uniform = binary_erosion(np.ptp(blocks, axis=(1, 3)) < 0.02, np.ones((3, 3)), border_value=1)
    gap = abs(ours.real.reshape(50, 8, 50, 8).mean(axis=(1, 3)) - blocks.mean(axis=(1, 3)))
    assert uniform.sum() > 1500
    assert gap[uniform].max() < 0.03
    assert np.median(gap[uniform]) < 0.004


@pytest.mark.parametrize(
    ("x", "y", "value_1974", "value_toft"),
    [
        (0.0, 0.9, 2.0, 1.0),  # skull
        (0.0, -0.4, 1.02, 0.2),  # brain
        (0.22, -0.1, 1.0, 0.0),  # right ventricle
        (-0.22, -0.1, 1.0, 0.0),  # left ventricle
        (0.0, 0.45, 1.03, 0.3),  # large tumour
        (0.0, 0.12, 1.04, 0.4),  # large and small tumour overlap
        (0.06, -0.605, 1.03, 0.3),  # small tumour
        (0.95, 0.0, 0.0, 0.0),  # outside
    ],
)
def test_values_at_points(x: float, y: float, value_1974: float, value_toft: float) -> None:
    # Source: Shepp & Logan 1974 and Toft 1996, from memory; in units of the square [-1, 1]^2, 120 mm each.
    point = np.array([120 * x]), np.array([120 * y])
    assert drawn(shepp_logan_phantom(), *point)[0] == pytest.approx(value_1974)
    assert drawn(shepp_logan_high_contrast_phantom(), *point)[0] == pytest.approx(value_toft, abs=1e-12)
