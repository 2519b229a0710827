"""Controlled aliasing: the aliases are where the reciprocal lattice has them."""

import numpy as np
import pytest

from skipline.masks.grid import Grid
from skipline.masks.lattice import RegularPoints

EXACT = [
    (RegularPoints(), (96, 80), 2),
    (RegularPoints(), (96, 80), 4),
    (RegularPoints(), (72, 90), 6),
    (RegularPoints(), (60, 75), 5),
    (RegularPoints(), (64, 96), 8),
    (RegularPoints(step=1, shift=0), (64, 96), 3),
    (RegularPoints(step=1, shift=1), (66, 96), 3),
    (RegularPoints(step=2, shift=1), (72, 96), 6),
    (RegularPoints(step=2, shift=0), (64, 96), 4),
    (RegularPoints(step=4, shift=0), (64, 33), 4),
]


def to_image(kspace: np.ndarray) -> np.ndarray:
    return np.fft.fftshift(np.fft.ifft2(np.fft.ifftshift(kspace), norm="ortho"))


def to_kspace(image: np.ndarray) -> np.ndarray:
    return np.fft.fftshift(np.fft.fft2(np.fft.ifftshift(image), norm="ortho"))


@pytest.mark.parametrize(("pattern", "shape", "acceleration"), EXACT)
def test_the_image_is_the_mean_of_its_copies_at_the_alias_positions(
    pattern: RegularPoints, shape: tuple[int, int], acceleration: int
) -> None:
    # Source, from memory: Petersen & Middleton, Inf. Control 5 (1962) 279: sampling on a lattice repeats the
    # transform on
    # the reciprocal lattice; Breuer et al., Magn. Reson. Med. 55 (2006) 549, for the shifted lattice of phase
    # encodes.
    grid = Grid(shape)
    aliases = pattern.alias_positions(grid, acceleration)
    whole = aliases.round().astype(int)
    assert len(aliases) == acceleration == len({tuple(p) for p in whole % shape})
    np.testing.assert_allclose(aliases, whole, atol=1e-9)

    rng = np.random.default_rng(50)
    image = rng.standard_normal(shape) + 1j * rng.standard_normal(shape)
    mask = pattern.draw(grid, acceleration, rng)
    copies = [np.roll(image, tuple(p), axis=(0, 1)) for p in whole]
    np.testing.assert_allclose(to_image(mask * to_kspace(image)), np.mean(copies, axis=0), atol=1e-12)


def test_published_lattices() -> None:
    # Source: Breuer et al. (2006), from memory: a reduction of 2 x 2 with a shift of 1 moves the aliases
    # along the second axis by half a field of view to between those along the first; without the shift all
    # overlap in rows.
    shifted = RegularPoints(step=2, shift=1).alias_positions(Grid((64, 64)), 4)
    plain = RegularPoints(step=2, shift=0).alias_positions(Grid((64, 64)), 4)
    assert {tuple(p) for p in shifted} == {(0, 0), (-32, 0), (-16, -32), (16, -32)}
    assert {tuple(p) for p in plain} == {(0, 0), (-32, 0), (0, -32), (-32, -32)}


@pytest.mark.parametrize("acceleration", [2.3, 3.4, 4.6, 6.7])
@pytest.mark.parametrize("calibration", [0, 16])
def test_aliases_of_a_fractional_acceleration(acceleration: float, calibration: int) -> None:
    # Source: as above; rounding to the grid takes some of their height.
    grid = Grid((192, 160), calibration)
    pattern = RegularPoints()
    mask = pattern.draw(grid, acceleration, np.random.default_rng(51))
    spread = np.abs(to_image(mask)) * (grid.size**0.5 / mask.sum())
    assert spread.max() == pytest.approx(1)
    aliases = pattern.alias_positions(grid, acceleration)
    near = [tuple((np.round(p).astype(int) + np.array(grid.shape) // 2) % grid.shape) for p in aliases]
    heights = [
        max(spread[(i + a) % 192, (j + b) % 160] for a in (-1, 0, 1) for b in (-1, 0, 1)) for i, j in near
    ]
    assert heights[0] == pytest.approx(1)
    # each is a local giant: 8 times the root mean square
    assert min(heights) > 8 * np.sqrt(np.mean(spread**2))
