from typing import Annotated

import pytest
from pydantic import BaseModel, ConfigDict, Field, ValidationError

from skipline.recon.explain import first_problem, nearest
from skipline.recon.study.seeds import generator
from skipline.recon.study.settings import About, Acquisition, Limit, Reference, Sampling
from skipline.recon.study.sweep import SINGLE, axis, combinations


class Table(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True)
    matrix: tuple[int, int] | None = None
    calibration: int | tuple[int, int] = 0
    weights: list[float] = Field(default_factory=list)
    scale: Annotated[float, Field(gt=0)] = 1.0
    draws: Annotated[int, SINGLE] = 1


@pytest.mark.parametrize(
    ("key", "value", "expected"),
    [
        ("scale", 2, [2]),
        ("scale", [2, 3], [2, 3]),
        ("matrix", [8, 9], [(8, 9)]),
        ("matrix", [[8, 9], [4, 5]], [(8, 9), (4, 5)]),
        ("calibration", [8, 9], [8, 9]),
        ("calibration", [[8, 9], 4], [(8, 9), 4]),
        ("weights", [1.0, 2.0], [[1.0, 2.0]]),
        ("weights", [[1.0], [2.0]], [[1.0], [2.0]]),
        ("draws", [1, 2], [[1, 2]]),
        ("unknown", [1, 2], [1, 2]),
    ],
)
def test_axis(key, value, expected):
    assert axis(value, Table.model_fields.get(key)) == expected


def test_all_combinations_once_with_the_last_key_fastest():
    table = {"scale": [1, 2], "matrix": [8, 9], "calibration": [4, [5, 6]], "draws": 3}
    found = list(combinations(table, Table.model_fields, last="calibration"))
    assert [(one["scale"], one["calibration"]) for one in found] == [(1, 4), (1, (5, 6)), (2, 4), (2, (5, 6))]
    assert all(one["matrix"] == (8, 9) and one["draws"] == 3 for one in found)


@pytest.mark.parametrize(
    ("model", "values", "key", "message"),
    [
        (About, {"seed": 1}, "title", "is missing"),
        (About, {"title": "", "seed": 1}, "title", "must not be empty"),
        (About, {"title": "a", "seed": 1.5}, "seed", "expected a whole number, not 1.5"),
        (About, {"title": "a", "seed": True}, "seed", "expected a whole number, not true"),
        (About, {"title": "a", "seed": [1, 2]}, "seed", "expected a whole number, not [1, 2]"),
        (About, {"title": 3, "seed": 1}, "title", "expected text in quotes, not 3"),
        (About, {"title": "a", "sede": 1}, "seed", "is missing"),
        (About, {"title": "a", "seed": 1, "sede": 1}, "sede", 'is not a key here; did you mean "seed"?'),
        (Reference, {"phantom": "a", "matrix": (32,)}, "matrix", "expected one more item in [32]"),
        (Reference, {"phantom": "a", "matrix": (8, 9, 10)}, "matrix", "expected a list of 2, not [8, 9, 10]"),
        (Reference, {"phantom": "a", "matrix": (32, 4)}, "matrix", "must be at least 16, not 4"),
        (Reference, {"phantom": "a", "matrix": 8}, "matrix", "expected a list, not 8"),
        (Reference, {"image": "a", "matrix": (32, 32)}, "matrix", "goes with phantom only, not with image"),
        (
            Reference,
            {"image": "a", "slices": (8, 4)},
            "slices",
            "expected [first, last], not [8, 4]: the last is lower",
        ),
        (Reference, {"image": "a", "phantom": "b"}, "image", "there is a phantom already"),
        (Reference, {"kspace": "a", "phase": "b"}, "phase", "goes with image only, not with kspace"),
        (Acquisition, {"snr": 0}, "snr", "must be more than 0, not 0"),
        (Acquisition, {"snr": float("nan")}, "snr", "must be more than 0, not nan"),
        (Acquisition, {"snr": "35"}, "snr", 'expected a number, not "35"'),
        (Sampling, {"pattern": "a", "acceleration": 0.9}, "acceleration", "must be at least 1, not 0.9"),
        (
            Sampling,
            {"pattern": "a", "acceleration": float("inf")},
            "acceleration",
            "expected a finite number, not inf",
        ),
        (
            Sampling,
            {"pattern": "a", "acceleration": 2, "phase_encode": "zy"},
            "phase_encode",
            'did you mean "z"?',
        ),
        (
            Sampling,
            {"pattern": "a", "acceleration": 2, "calibration": -1},
            "calibration",
            "must be at least 0",
        ),
        (
            Sampling,
            {"pattern": "a", "acceleration": 2, "calibration": "8"},
            "calibration",
            "expected a whole number or a list",
        ),
        (
            Sampling,
            {"pattern": "a", "acceleration": 2, "calibration": (8, 2, 3)},
            "calibration",
            "expected a list of 2",
        ),
        (Limit, {}, None, "needs at_most or at_least"),
        (Limit, {"at_most": 1, "at_least": 2}, "at_least", "is above at_most"),
        (Table, {"weights": ["a"]}, "weights", 'expected a number, not "a"'),
    ],
)
def test_problems_in_words(model, values, key, message):
    with pytest.raises(ValidationError) as error:
        model.model_validate(values, strict=True)
    way, sentence = first_problem(error.value, model)
    assert [part for part in way if part] == ([key] if key else [])
    assert message in sentence
    assert "\n" not in sentence


def test_nearest_of_nothing():
    assert nearest("x", []) == ""


def test_limits():
    both = Limit(at_least=-1, at_most=2)
    assert [both.allows(value) for value in (-1.1, -1, 0, 2, 2.1)] == [False, True, True, True, False]
    assert [both.broken_bound(value) for value in (-3, 5)] == [-1, 2]
    assert Limit(at_least=40).allows(float("inf"))
    assert not Limit(at_most=40).allows(float("nan"))
    assert not Limit(at_least=40).allows(float("nan"))


def test_streams_are_of_one_purpose_and_draw():
    draws = {
        (seed, purpose, draw): tuple(generator(seed, purpose, draw).integers(2**32, size=4))
        for seed in (0, 7)
        for purpose in ("mask", "noise")
        for draw in (0, 1, 2)
    }
    assert len(set(draws.values())) == len(draws)
    assert tuple(generator(7, "mask", 1).integers(2**32, size=4)) == draws[7, "mask", 1]


def test_streams_stay_what_they_are():
    """Another stream would make another result of every finished case: raise RESULT_VERSION with it."""
    assert generator(7, "mask", 1).integers(10**6, size=3).tolist() == [811086, 377539, 369112]
