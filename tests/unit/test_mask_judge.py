"""Judgement of a mask: sidelobes, gaps, local density, energy, conjugate pairs."""

import json
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import Grid, RegularLines, VariableDensityLines, VariableDensityPoints
from skipline.masks.judge import conjugate_pairs, judge, largest_gap, model_spectrum
from skipline.masks.pointspread import highest_outside_main_lobe, point_spread, sidelobes, spread_power


def _random_mask(shape: list[int], seed: int, share: float) -> np.ndarray:
    mask = np.random.default_rng(seed).random(shape) < share
    mask[(0,) * mask.ndim] = True
    return mask


masks = st.builds(
    _random_mask,
    st.lists(st.integers(1, 14), min_size=1, max_size=2),
    st.integers(0, 2**32 - 1),
    st.floats(0, 1),
)


def _outside_by_walking(power: np.ndarray) -> float:
    """Walk down from the peak as long as that is possible, and look at what was not reached."""
    reached, front = {(0,) * power.ndim}, [(0,) * power.ndim]
    while front:
        here = front.pop()
        for step in np.ndindex((3,) * power.ndim):
            there = tuple((i + s - 1) % n for i, s, n in zip(here, step, power.shape, strict=True))
            if there not in reached and power[there] < power[here]:
                reached.add(there)
                front.append(there)
    return max((float(power[i]) for i in np.ndindex(power.shape) if i not in reached), default=0.0)


@given(masks)
def test_the_main_lobe_is_what_can_be_reached_going_down(mask: np.ndarray) -> None:
    power = spread_power(mask[None])
    assert highest_outside_main_lobe(power)[0] == _outside_by_walking(power[0])


def test_the_first_sidelobe_of_a_block_of_lines_is_that_of_a_sinc() -> None:
    block = abs(np.arange(16385) - 8192) <= 50  # textbook: -13.3 dB
    assert 20 * np.log10(sidelobes(block).outside_main_lobe) == pytest.approx(-13.3, abs=0.1)
    assert sidelobes(block).peak > 0.9  # on the flank of the main lobe


@given(masks, st.integers(0, 2**32 - 1))
def test_compensated_sidelobes(mask: np.ndarray, seed: int) -> None:
    density = np.random.default_rng(seed).uniform(0.05, 1, mask.shape)
    found = sidelobes(mask, density)
    centre = np.ravel_multi_index([n // 2 for n in mask.shape], mask.shape)
    others = np.delete(abs(point_spread(mask, density)).ravel(), centre)
    # Parseval, with K / N for all weights alike
    weights, n = 1 / density[mask], mask.size
    energy = (n * np.sum(weights**2) / np.sum(weights) ** 2 - 1) / max(n - 1, 1)
    assert found.compensated_peak == pytest.approx(others.max(initial=0), abs=1e-9)
    assert found.compensated_rms == pytest.approx(np.sqrt(max(energy, 0)), abs=1e-7)
    plain, alike = sidelobes(mask), sidelobes(mask, np.full(mask.shape, 0.3))
    assert alike.compensated_peak == pytest.approx(plain.peak, abs=1e-9)
    assert alike.compensated_rms == pytest.approx(plain.rms, abs=1e-9)


@given(masks)
def test_conjugate_pairs_are_counted_one_by_one(mask: np.ndarray) -> None:
    taken = {tuple(int(i - n // 2) for i, n in zip(k, mask.shape, strict=True)) for k in np.argwhere(mask)}
    pairs = {frozenset((k, tuple(-i for i in k))) for k in taken if tuple(-i for i in k) in taken}
    assert conjugate_pairs(mask) == sum(len(pair) == 2 for pair in pairs)


@given(masks)
def test_the_largest_gap_is_found_one_by_one(mask: np.ndarray) -> None:
    if mask.ndim == 1:
        expected = longest = 1
        for taken in mask:
            longest = 1 if taken else longest + 1
            expected = max(expected, longest)
    else:
        samples = np.argwhere(mask)
        farthest = max(
            np.sqrt(((samples - k) ** 2).sum(axis=1).min()) for k in np.argwhere(np.ones(mask.shape))
        )
        expected = max(2 * farthest, 1)
    assert largest_gap(mask) == pytest.approx(expected)


def test_gaps_and_densities_are_those_of_the_allowed_part() -> None:
    grid = Grid((64,), 8, partial_fourier=0.625)
    mask = grid.allowed()
    assert mask.sum() == 40
    assert judge(mask).largest_gap == 25
    found = judge(mask, allowed=grid.allowed(), cells=8)
    assert found.largest_gap == 1
    np.testing.assert_array_equal(found.local_density, [np.nan] * 3 + [1.0] * 5)
    assert found.to_dict()["local_density"] == [None] * 3 + [1.0] * 5
    round_grid = Grid((32, 32), 4, shutter=True)
    assert judge(round_grid.allowed(), allowed=round_grid.allowed()).largest_gap == 1


@given(masks, st.integers(1, 5))
def test_local_densities_are_means_over_cells(mask: np.ndarray, cells: int) -> None:
    found = judge(mask, cells=cells)
    for cell in np.ndindex(found.local_density.shape):
        block = tuple(
            slice(starts[i], [*starts, n][i + 1])
            for i, starts, n in zip(cell, found.cells, mask.shape, strict=True)
        )
        assert found.local_density[cell] == pytest.approx(mask[block].mean())


def test_energies_are_of_the_model_or_of_what_was_given() -> None:
    mask = RegularLines().draw(Grid((16,), 4), 2, np.random.default_rng())
    model = 1 / (1 + (np.arange(16) - 8.0) ** 2)
    found = judge(mask)
    assert found.spectrum == "model"
    assert found.energy == pytest.approx(model[mask].sum() / model.sum())
    assert found.centre_energy == pytest.approx((model[6:11] * mask[6:11]).sum() / model[6:11].sum())
    given = judge(mask, spectrum=np.where(mask, 3.0, 1.0))
    assert given.spectrum == "given"
    assert given.energy == pytest.approx(24 / 32)
    np.testing.assert_array_equal(model_spectrum((16, 1))[:, 0], model)


@pytest.mark.parametrize("shape", [(1,), (7,), (1, 1), (6, 9)])
def test_full_sampling(shape: tuple[int, ...]) -> None:
    found = judge(np.ones(shape, bool), density=np.ones(shape))
    assert (found.acceleration, found.largest_gap, found.energy, found.centre_energy) == (1, 1, 1, 1)
    assert found.sidelobes.outside_main_lobe == pytest.approx(0, abs=1e-12)
    assert found.sidelobes.compensated_peak == pytest.approx(0, abs=1e-12)


def test_a_judgement_is_json() -> None:
    grid, pattern = Grid((24, 18), 4), VariableDensityPoints()
    mask = pattern.draw(grid, 3, np.random.default_rng(1))
    found = json.loads(json.dumps(judge(mask, density=pattern.density(grid, 3)).to_dict(), allow_nan=False))
    assert found["samples"] == 144
    assert found["sidelobes"]["rms"] == pytest.approx(found["sidelobes"]["rms_uniform"])
    assert np.shape(found["local_density"]) == (8, 8)


LINES = np.arange(8) % 2 == 0
WRONG: Any = "mask"


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        ({"mask": np.zeros(8, bool)}, "no sample"),
        ({"mask": np.ones((2, 2, 2), bool)}, "one phase-encode axis, or two"),
        ({"mask": np.array(WRONG)}, "one phase-encode axis, or two"),
        ({"mask": LINES, "density": np.ones(7)}, "density: expected the shape"),
        ({"mask": LINES, "density": np.zeros(8)}, "above 0 at every sample"),
        ({"mask": LINES, "density": np.full(8, np.nan)}, "finite"),
        ({"mask": LINES, "spectrum": np.ones(7)}, "power spectrum: expected the shape"),
        ({"mask": LINES, "spectrum": np.zeros(8)}, "not 0 everywhere"),
        ({"mask": LINES, "spectrum": -np.ones(8)}, "at least 0"),
        ({"mask": LINES, "allowed": np.ones(7, bool)}, "allowed points: expected the shape"),
        ({"mask": LINES, "cells": 0}, "cells 0: expected at least 1"),
    ],
)
def test_refusals(arguments: dict[str, Any], says: str) -> None:
    with pytest.raises(InputError, match=says) as refusal:
        judge(**arguments)
    assert "\n" not in str(refusal.value)


def test_a_density_of_0_is_no_matter_where_nothing_is_taken() -> None:
    density = np.where(LINES, 0.5, 0.0)
    assert sidelobes(LINES, density).compensated_peak == pytest.approx(sidelobes(LINES).peak)


def test_lines_judged_with_their_density() -> None:
    pattern, grid = VariableDensityLines(), Grid((256,), 24)
    mask = pattern.draw(grid, 4, np.random.default_rng(3))
    found = judge(mask, density=pattern.density(grid, 4)).sidelobes
    assert found.compensated_peak is not None
    assert found.outside_main_lobe < found.peak
