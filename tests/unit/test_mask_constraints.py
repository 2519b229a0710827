"""Constraints in free combination: a mask that keeps them all, or a message that names those that collide."""

import hashlib
import itertools
import re
import subprocess
import sys
from collections.abc import Iterator
from math import ceil
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skipline import InputError
from skipline.masks import (
    Grid,
    Pattern,
    RegularLines,
    VariableDensityLines,
    VariableDensityPoints,
    bounded_gap_draw,
    fixed_size_draw,
    grid_probabilities,
    power_law,
)

CONSTRAINTS = (
    "acceleration",
    "calibration",
    "shutter",
    "partial_fourier",
    "largest_gap",
    "skip_conjugates",
    "train_length",
    "the grid",
)
options: st.SearchStrategy[dict[str, Any]] = st.fixed_dictionaries(
    {
        "law": st.sampled_from(["power", "gaussian", "uniform"]),
        "power": st.floats(0, 20),
        "width": st.floats(0.05, 5),
        "spread": st.booleans(),
    }
)
patterns = st.one_of(
    options.map(lambda o: VariableDensityLines(**o)),
    options.map(lambda o: VariableDensityPoints(**o)),
    st.just(RegularLines()),
)
seeds = st.integers(0, 2**32 - 1)


@st.composite
def constrained(draw: st.DrawFn, axes: int) -> dict[str, Any]:
    """The arguments of a grid; some combinations cannot be met."""
    shape = tuple(draw(st.integers(1, 200 if axes == 1 else 32)) for _ in range(axes))
    calibration = draw(
        st.sampled_from([0, 0, *{max(min(shape) // 8, 1), max(min(shape) // 3, 1), min(shape)}])
    )
    return {
        "shape": shape,
        "calibration": calibration,
        "calibration_shape": draw(st.sampled_from(["rectangle", "ellipse"])),
        "shutter": draw(st.booleans()),
        "partial_fourier": draw(st.sampled_from([1.0, 1.0, 0.51, 0.625, 0.75])),
        "largest_gap": draw(st.sampled_from([None, 1, 2, 3, 5, 8, 30, 300])) if axes == 1 else None,
        "skip_conjugates": draw(st.booleans()),
        "train_length": draw(st.sampled_from([None, None, 1, 2, 5, 8, 32])),
    }


def nearest_counts(grid: Grid, acceleration: float) -> list[int]:
    """The one or two multiples of the train length that are nearest to size / R."""
    length = grid.train_length or 1
    exact = grid.size / acceleration
    candidates = {length * n for n in (int(exact / length), ceil(exact / length)) if n}
    return [
        n for n in candidates if abs(n - exact) <= min(abs(m - exact) for m in candidates) + 1e-9 * grid.size
    ]


def refusal(error: InputError) -> str:
    """The message, once it is one line that names at least two of what collides."""
    message = str(error)
    assert "\n" not in message
    assert len([name for name in CONSTRAINTS if name in message]) >= 2, message
    return message


@settings(max_examples=500, deadline=None)
@given(patterns, st.data(), st.floats(1, 20), seeds)
def test_acceleration_is_met_and_no_constraint_broken_or_the_message_names_them(
    pattern: Pattern, data: st.DataObject, acceleration: float, seed: int
) -> None:
    arguments = data.draw(constrained(pattern.axes))
    try:
        grid = Grid(**arguments)
    except InputError as error:
        refusal(error)
        return
    acceleration = min(acceleration, grid.size)
    message = ""
    for _ in range(3):  # the grid may offer what the pattern then refuses with an offer of its own
        try:
            mask = pattern.draw(grid, acceleration, np.random.default_rng(seed))
            break
        except InputError as error:
            message = refusal(error)
            if not pattern.random and message.endswith("it cannot be had at any R"):
                return
            offered = re.search(r"at (?:most|least) R = ([\d.]+) can be had$", message)
            assert offered, message
            acceleration = float(offered[1])
    else:
        pytest.fail(message)
    assert mask.sum() in nearest_counts(grid, acceleration)
    assert keeps(mask, arguments) is None
    again = pattern.draw(grid, acceleration, np.random.default_rng(seed))
    assert again.tobytes() == mask.tobytes()


def keeps(mask: np.ndarray, arguments: dict[str, Any]) -> str | None:
    """Which constraint is broken, from the definitions, point by point."""
    shape, gap = mask.shape, arguments["largest_gap"]
    region = Grid(shape, arguments["calibration"], arguments["calibration_shape"]).calibration_region()
    first = shape[0] - ceil(round(arguments["partial_fourier"] * shape[0], 6))
    taken = {tuple(int(i) for i in index) for index in np.argwhere(mask)}
    centre = tuple(n // 2 for n in shape)
    if not mask[region].all():
        return "calibration"
    if any(index[0] < first for index in taken):
        return "partial_fourier"
    if arguments["shutter"] and len(shape) == 2:
        for index in taken:
            if sum(((i - c) / max(c, 1)) ** 2 for i, c in zip(index, centre, strict=True)) > 1 + 1e-9:
                return "shutter"
    if gap is not None:
        lines = [first - 1, *sorted(i for (i,) in taken), shape[0]]
        if any(b - a > gap for a, b in itertools.pairwise(lines)):
            return "largest_gap"
    if arguments["skip_conjugates"]:
        for index in taken:
            other = tuple(2 * c - i for i, c in zip(index, centre, strict=True))
            if other != index and other in taken and not (region[index] and region[other]):
                return "skip_conjugates"
    if arguments["train_length"] and len(taken) % arguments["train_length"]:
        return "train_length"
    return None


def small_grids() -> Iterator[Grid]:
    for n, c, f, gap, skip in itertools.product(
        (1, 2, 5, 8, 9), (0, 1, 2, 3), (0.55, 0.7, 1.0), (None, 1, 2, 3, 5), (False, True)
    ):
        try:
            yield Grid((n,), c, partial_fourier=f, largest_gap=gap, skip_conjugates=skip)
        except InputError:
            continue


def test_the_numbers_of_samples_that_can_be_had_are_those_of_all_masks_there_are() -> None:
    seen = 0
    for grid in small_grids():
        gap_and_pairs = grid.largest_gap is not None and grid.skip_conjugates
        counts = {
            sum(lines)
            for lines in itertools.product([False, True], repeat=grid.size)
            if any(lines)
            and grid.broken(np.array(lines)) is None
            # with pairs and a largest gap k = 0 is always taken
            and (lines[grid.size // 2] or not gap_and_pairs)
        }
        assert counts == set(grid.counts()), grid
        seen += 1
    assert seen > 200


def test_broken_is_what_the_definitions_say() -> None:
    rng = np.random.default_rng(1)
    for grid in small_grids():
        arguments = {f: getattr(grid, f) for f in grid.__dataclass_fields__}
        for _ in range(10):
            mask = rng.random(grid.shape) < rng.random()
            found = grid.broken(mask)
            assert (found is None) == (keeps(mask, arguments) is None)


@pytest.mark.parametrize("skip", [False, True])
@pytest.mark.parametrize("calibration", [0, 3, 4])
def test_bounded_gap_draw_has_the_distribution_of_all_masks_that_keep_the_constraints(
    skip: bool, calibration: int
) -> None:
    # every mask, with the product of its odds: the definition, and not the way it is drawn
    grid = Grid((11,), calibration, largest_gap=3, skip_conjugates=skip, partial_fourier=0.9)
    samples = grid.counts()[1]
    p = grid_probabilities(grid, power_law(grid, 1) + 0.1, samples)
    none = np.where(p < 1, 1 - p, 1.0)
    weights = {}
    for lines in itertools.product([False, True], repeat=grid.size):
        mask = np.array(lines)
        if mask.sum() != samples or grid.broken(mask) is not None or (skip and not mask[5]):
            continue
        partner = grid.partner()
        free = grid.allowed() & ~grid.calibration_region()
        pairs = free & (partner >= 0) & free[partner] if skip else np.zeros(11, bool)
        rest = np.where(pairs, np.maximum(1 - p - p[partner], 1e-12), none)
        centre = np.arange(11) == 5 if skip else np.zeros(11, bool)
        weights[mask.tobytes()] = np.prod(
            np.where(mask & ~centre & ~grid.calibration_region(), p / rest, 1.0)
        )
    assert len(weights) >= 5
    rng = np.random.default_rng(2)
    draws = 3000
    found = dict.fromkeys(weights, 0)
    for _ in range(draws):
        found[bounded_gap_draw(grid, p, rng).tobytes()] += 1
    expected = np.array(list(weights.values())) * draws / sum(weights.values())
    counted = np.array(list(found.values()))
    common = expected >= 5
    pooled = [*((counted - expected)[common] ** 2 / expected[common])]
    if not common.all() and (rare := expected[~common].sum()) > 1:
        pooled.append((counted[~common].sum() - rare) ** 2 / rare)
    from scipy.stats import chi2

    assert chi2.sf(sum(pooled), len(pooled) - 1) > 1e-3


def test_each_constraint_is_seen_when_broken() -> None:
    n = 16
    lines = np.arange(n)
    cases = [
        (Grid((n,), 4), lines < 8, "calibration 4: 2 lines of the region"),
        (Grid((n,), partial_fourier=0.75), lines >= 3, "partial_fourier 0.75: 1 lines outside"),
        (Grid((n,), largest_gap=3), lines % 4 == 0, "largest_gap 3: 4 positions from line 0 to line 4"),
        (Grid((n,), largest_gap=3), (lines > 3), "largest_gap 3: 5 positions from the start of k-space"),
        (Grid((n,), skip_conjugates=True), abs(lines - 8) == 3, "skip_conjugates: both of 1 conjugate pairs"),
        (Grid((n,), train_length=3), lines < 8, "train_length 3: 8 samples are no multiple"),
        (Grid((n,)), lines, "shape"),
        (Grid((n,)), lines[1:] > 0, "shape"),
        (Grid((n, n), shutter=True), np.ones((n, n), bool), "shutter: "),
    ]
    for grid, mask, says in cases:
        assert (grid.broken(mask) or "").startswith(says)


@pytest.mark.parametrize(
    ("arguments", "acceleration", "says"),
    [
        (
            {"calibration": 40, "partial_fourier": 0.55},
            2,
            "calibration 40 and partial_fourier 0.55 collide: part of the calibration region would not be "
            "taken; at most calibration 9 fits",
        ),
        (
            {"shape": (32, 32), "calibration": 30, "shutter": True},
            2,
            "calibration 30 and shutter collide: part of the calibration region would not be taken; "
            "at most calibration 23 fits",
        ),
        (
            {"largest_gap": 1, "skip_conjugates": True},
            2,
            "largest_gap 1 and skip_conjugates collide: one takes every line, the other skips some; expected "
            "a largest_gap of at least 2",
        ),
        (
            {"partial_fourier": 0.625},
            1,
            "acceleration 1 needs 64 of 64 lines but partial_fourier 0.625 leaves 40: at least "
            "R = 1.6 can be had",
        ),
        (
            {"largest_gap": 4, "calibration": 8},
            4,
            "acceleration 4 needs 16 of 64 lines but largest_gap 4 takes 22 (with calibration 8): at most "
            "R = 2.9 can be had",
        ),
        (
            {"skip_conjugates": True, "partial_fourier": 0.75},
            1.5,
            "acceleration 1.5 needs 43 of 64 lines but partial_fourier 0.75 and skip_conjugates leave 32: at "
            "least R = 2 can be had",
        ),
        (
            {"train_length": 60, "partial_fourier": 0.75},
            2,
            "train_length 60 and partial_fourier 0.75 collide: from 1 to 48 lines can be taken, and no "
            "multiple of it is among these; the nearest train_length is 48",
        ),
        (
            {"train_length": 16, "calibration": 20},
            4,
            "acceleration 4 needs 16 of 64 lines (train_length 16) but the calibration region alone takes "
            "20: at most R = 2 can be had",
        ),
    ],
)
def test_refusals(arguments: dict[str, Any], acceleration: float, says: str) -> None:
    with pytest.raises(InputError) as error:
        Grid(**{"shape": (64,), **arguments}).samples(acceleration)
    assert str(error.value).startswith(says)
    refusal(error.value)


@pytest.mark.parametrize(
    "arguments",
    [
        {"calibration_shape": "circle"},
        {"partial_fourier": 0.5},
        {"partial_fourier": 1.01},
        {"partial_fourier": float("nan")},
        {"largest_gap": 0},
        {"largest_gap": 2.5},
        {"train_length": 0},
        {"train_length": True},
        {"shape": (8, 8), "largest_gap": 3},
    ],
)
def test_fields_without_meaning(arguments: dict[str, Any]) -> None:
    with pytest.raises(InputError, match=r"expected"):
        Grid(**{"shape": (64,), **arguments})


def test_regular_lines_say_where_they_break_a_constraint() -> None:
    grid = Grid((32,), 4, largest_gap=3, skip_conjugates=True, partial_fourier=0.75)
    with pytest.raises(InputError) as error:
        RegularLines().draw(grid, 3.2, np.random.default_rng())
    assert str(error.value) == (
        "regular-lines at acceleration 3.2 collides with largest_gap 3: 5 positions from line 22 to line 27: "
        "at most R = 2.9 can be had"
    )
    assert RegularLines().draw(grid, 2.9, np.random.default_rng()).sum() == 11


PROGRAM = """
import hashlib, numpy as np
from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints
rng = np.random.default_rng(42)
digest = hashlib.sha256()
for law in "power", "gaussian", "uniform":
    for spread in False, True:
        for kind, grid in (
            (VariableDensityLines, Grid((96,), 12, skip_conjugates=True, largest_gap=6)),
            (VariableDensityLines, Grid((96,), 12, largest_gap=6)),
            (VariableDensityPoints, Grid((48, 32), 6, "ellipse", True, 0.75, None, True, 8)),
        ):
            digest.update(kind(law=law, spread=spread).draw(grid, 3.1, rng).tobytes())
"""


def test_same_seed_same_bytes_in_another_process() -> None:
    command = [sys.executable, "-c", PROGRAM + "print(digest.hexdigest())"]
    there = subprocess.run(command, capture_output=True, text=True, check=True).stdout.strip()
    here: dict[str, Any] = {}
    exec(PROGRAM, here)
    assert there == here["digest"].hexdigest() != hashlib.sha256().hexdigest()


def test_a_largest_gap_whose_table_is_too_large_is_refused() -> None:
    grid = Grid((2048,), largest_gap=500, skip_conjugates=True)
    density = grid_probabilities(grid, np.ones(2048), 400)
    with pytest.raises(InputError, match=r"largest_gap 500 and skip_conjugates .* at most 127"):
        fixed_size_draw(grid, density, np.random.default_rng(1))
