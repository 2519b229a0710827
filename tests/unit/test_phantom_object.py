"""k-space and reference images of phantoms: scale, axes, coils, refusals; the slab's data; lazy imports."""

import subprocess
import sys

import numpy as np
import pytest

from skipline import InputError
from skipline.phantoms import (
    CoilArray,
    Ellipse,
    Phantom,
    Polygon,
    Rectangle,
    line_pair_slab_phantom,
    ring_array,
    shepp_logan_phantom,
)
from skipline.phantoms.line_pair_slab import BAR_GROUPS, DISCS, EDGES, UNIFORM_PATCH

BLOCK = Phantom(
    "block", "off-centre block", (Rectangle((20.0, -10.0), (40.0, 24.0), amplitude=3.0),), (120.0, 96.0)
)


@pytest.mark.parametrize("matrix", [(64, 64), (65, 48), (96, 63)])
def test_reference_has_the_values_and_the_place_of_the_object(matrix: tuple[int, int]) -> None:
    image = BLOCK.reference(matrix)
    assert image.shape == (*matrix, 1)
    assert image.dtype == np.complex64
    x = (np.arange(matrix[0]) - matrix[0] // 2) * 120.0 / matrix[0]
    y = (np.arange(matrix[1]) - matrix[1] // 2) * 96.0 / matrix[1]
    inside = (abs(x - 20.0) < 12.0)[:, None] & (abs(y + 10.0) < 7.0)[None, :]
    outside = (abs(x - 20.0) > 30.0)[:, None] | (abs(y + 10.0) > 20.0)[None, :]
    assert image[inside].mean() == pytest.approx(3.0, abs=0.1)
    assert abs(image[outside]).mean() < 0.1


def test_kspace_is_the_unitary_centred_dft_of_the_reference() -> None:
    kspace, image = BLOCK.kspace((48, 33)), BLOCK.reference((48, 33))
    dft = np.fft.fftshift(np.fft.fftn(np.fft.ifftshift(image), norm="ortho"))
    np.testing.assert_allclose(dft, kspace, atol=1e-5 * abs(kspace).max())


def test_larger_matrix_extends_kspace_and_changes_none_of_it() -> None:
    small, large = BLOCK.kspace((32, 32)), BLOCK.kspace((64, 64))
    np.testing.assert_allclose(large[16:48, 16:48] / 2, small, rtol=1e-5, atol=1e-5)


def test_field_of_view_changes_the_pixel_and_not_the_object() -> None:
    disc = Phantom("disc", "disc", (Ellipse((0.0, 0.0), (20.0, 20.0)),), (120.0, 120.0))
    same = disc.kspace((64, 64), 240.0)
    assert np.array_equal(same, disc.kspace((64, 64, 1), (240.0, 240.0)))
    # Twice the field of view samples k-space twice as densely.
    np.testing.assert_allclose(same[::2, ::2] * 4 / 2, disc.kspace((32, 32)), rtol=1e-4, atol=1e-5)


def fine_product(phantom: Phantom, array: CoilArray, n: int, inside: np.ndarray) -> np.ndarray:
    """Low k-space (coil, 24, 24) of maps times object, both on a fine n x n grid."""
    product = array.maps((n, n))[..., 0] * inside
    dft = np.fft.fftshift(np.fft.fftn(np.fft.ifftshift(product, (1, 2)), axes=(1, 2), norm="ortho"), (1, 2))
    middle = slice(n // 2 - 12, n // 2 + 12)
    return dft[:, middle, middle] * (24 / n)


def random_array() -> CoilArray:
    rng = np.random.default_rng(2)
    shape = (3, 5, 3, 1)  # orders that differ along x and y
    return CoilArray(rng.standard_normal(shape) + 1j * rng.standard_normal(shape))


@pytest.mark.parametrize("array", [ring_array(5), random_array()], ids=["ring", "random"])
def test_coil_kspace_is_that_of_maps_times_object(array: CoilArray) -> None:
    # The block's borders lie midway between points of the fine grid, so that its sum converges as 1/n^2.
    n = 960
    half_pixels = np.array([120.0, 96.0]) / n / 2
    x0, x1, y0, y1 = 0.0 - half_pixels[0], 40.0 - half_pixels[0], -22.0 - half_pixels[1], 2.0 - half_pixels[1]
    block = Polygon(((x0, y0), (x1, y0), (x1, y1), (x0, y1)), 3.0)
    phantom = Phantom("block", "block", (block,), (120.0, 96.0))
    x, y = ((np.arange(n) - n // 2) * length / n for length in (120.0, 96.0))
    inside = 3.0 * ((x > x0) & (x < x1))[:, None] * ((y > y0) & (y < y1))[None, :]
    kspace = phantom.kspace((24, 24), array=array)
    assert kspace.shape == (array.coils, 24, 24, 1)
    assert kspace.dtype == np.complex64
    brute = fine_product(phantom, array, n, inside)
    assert np.linalg.norm(kspace[..., 0] - brute) < 2e-4 * np.linalg.norm(brute)


def test_one_even_coil_is_no_coil() -> None:
    array = CoilArray(np.ones((1, 1, 1, 1), dtype=complex))
    np.testing.assert_allclose(BLOCK.kspace((32, 24), array=array)[0], BLOCK.kspace((32, 24)), rtol=1e-6)
    np.testing.assert_allclose(
        BLOCK.reference((32, 24), array=array), BLOCK.reference((32, 24)), rtol=1e-5, atol=1e-6
    )


def test_reference_through_an_array_is_the_object() -> None:
    slab = line_pair_slab_phantom()
    plain, combined = slab.reference((128, 128)), slab.reference((128, 128), array=ring_array(8))
    assert np.linalg.norm(combined - plain) < 0.01 * np.linalg.norm(plain)


def test_orientation_x_to_the_right_y_up() -> None:
    image = abs(line_pair_slab_phantom().reference((240, 240)))[:, :, 0]  # pixels of 1 mm
    assert image[120 + 62, 120 - 36] == pytest.approx(0.5, abs=0.05)  # the square: right, below
    assert image[120 - 76, 120 - 7] == pytest.approx(0.8, abs=0.05)  # the darkest disc: left
    assert image[120 - 100, 120] < 0.05
    assert image[120, 120 - 85] < 0.05


def bounds(group) -> tuple[float, float, float, float]:
    bars = group.shapes()
    x = [bar.centre_mm[0] + sign * bar.size_mm[0] / 2 for bar in bars for sign in (-1, 1)]
    y = [bar.centre_mm[1] + sign * bar.size_mm[1] / 2 for bar in bars for sign in (-1, 1)]
    return min(x), max(x), min(y), max(y)


def test_slab_has_what_its_table_says_and_nothing_overlaps() -> None:
    assert [group.width_mm for group in BAR_GROUPS if group.axis == 0] == sorted(
        group.width_mm for group in BAR_GROUPS if group.axis == 1
    )
    widths = {group.width_mm for group in BAR_GROUPS}
    assert (min(widths), max(widths)) == (0.6, 2.5)
    assert len({disc.diameter_mm for disc in DISCS}) == 5
    assert {disc.contrast for disc in DISCS} == {-0.025, -0.05, -0.1, -0.2}
    boxes = [bounds(group) for group in BAR_GROUPS]
    for disc in DISCS:
        (x, y), r = disc.centre_mm, disc.diameter_mm / 2
        boxes.append((x - r, x + r, y - r, y + r))
    (x, y), reach = (62.0, -36.0), 19 * (np.cos(np.radians(5)) + np.sin(np.radians(5)))
    boxes.append((x - reach, x + reach, y - reach, y + reach))
    (x, y), (w, h) = UNIFORM_PATCH.centre_mm, UNIFORM_PATCH.size_mm
    boxes.append((x - w / 2, x + w / 2, y - h / 2, y + h / 2))
    for i, a in enumerate(boxes):
        assert a[0] > -90 + 4, a
        assert a[1] < 90 - 4, a
        assert a[2] > -75 + 4, a
        assert a[3] < 75 - 4, a
        for b in boxes[i + 1 :]:
            apart = max(a[0] - b[1], b[0] - a[1], a[2] - b[3], b[2] - a[3])
            assert apart >= 2.0, (a, b)


@pytest.fixture(scope="module")
def fine_slab() -> np.ndarray:
    """Magnitude of the slab on pixels of 0.15 mm, which resolve every group."""
    return abs(line_pair_slab_phantom().reference((1600, 1600)))[:, :, 0]


@pytest.mark.parametrize("group", BAR_GROUPS[::3], ids=lambda group: f"{group.width_mm}-{group.axis}")
def test_bar_groups_lie_where_the_data_say(group, fine_slab: np.ndarray) -> None:
    centre = np.round(np.array(group.centre_mm) / 0.15).astype(int) + 800
    for step in range(-4, 5):  # bar, gap, bar, ...
        place = centre.copy()
        place[group.axis] = round(group.centre_mm[group.axis] / 0.15 + step * group.width_mm / 0.15) + 800
        value = fine_slab[tuple(place)]
        assert (value < 0.25) if step % 2 == 0 else (value > 0.75)


@pytest.mark.parametrize("edge", EDGES, ids=["x", "y"])
def test_edges_lie_where_the_data_say(edge) -> None:
    image = abs(line_pair_slab_phantom().reference((480, 480)))[:, :, 0]  # pixels of 0.5 mm
    normal = np.array([np.cos(np.radians(edge.normal_degrees)), np.sin(np.radians(edge.normal_degrees))])
    along = np.array([-normal[1], normal[0]])
    assert np.argmax(abs(normal)) == edge.axis
    for offset in (-15.0, 0.0, 15.0):
        middle = np.array(edge.centre_mm) + offset * along
        assert abs(offset) < edge.length_mm / 2
        before, after = (
            image[tuple(np.round((middle + d * normal) / 0.5).astype(int) + 240)] for d in (-2, 2)
        )
        assert before == pytest.approx(edge.values[0], abs=0.08)
        assert after == pytest.approx(edge.values[1], abs=0.08)


@pytest.mark.parametrize("matrix", [(0, 32), (32,), (32, 32, 4), (32.5, 32), (-4, 4)])
def test_refuses_a_matrix_that_is_none(matrix) -> None:
    with pytest.raises(InputError, match="matrix: expected two whole numbers"):
        shepp_logan_phantom().kspace(matrix)


@pytest.mark.parametrize("fov", [0.0, (240.0, -1.0), (240.0, float("nan")), (1.0, 2.0, 3.0)])
def test_refuses_a_field_of_view_that_is_none(fov) -> None:
    with pytest.raises(InputError, match="field_of_view_mm: expected"):
        shepp_logan_phantom().kspace((32, 32), fov)


def test_refuses_a_phantom_of_nothing() -> None:
    with pytest.raises(InputError, match="at least one shape"):
        Phantom("void", "nothing", (), (240.0, 240.0))


def test_importing_and_building_phantoms_loads_nothing_heavy() -> None:
    code = (
        "import sys, skipline.phantoms as p; "
        "p.line_pair_slab_phantom(); p.shepp_logan_phantom(); p.ring_array(8); p.acquire; "
        "print([m for m in ('scipy', 'numba', 'matplotlib', 'skimage', 'pydantic') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_names_of_the_package_are_those_it_lists() -> None:
    import skipline.phantoms as phantoms

    assert dir(phantoms) == sorted(phantoms.__all__)
    assert all(callable(getattr(phantoms, name)) for name in phantoms.__all__)
    with pytest.raises(AttributeError, match="no attribute 'blob'"):
        phantoms.blob  # noqa: B018  # pyright: ignore[reportAttributeAccessIssue]
