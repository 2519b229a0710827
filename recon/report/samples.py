"""The masks: which samples each pattern takes at each acceleration."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..files import read_volume
from ..study.cases import text
from .findings import Findings, Finished
from .picture import SAMPLES, Picture, picture
from .wording import number


@dataclass(frozen=True)
class MaskTile:
    """A mask, its acceleration, and how many samples it takes of how many."""

    picture: Picture
    acceleration: str
    achieved: str
    samples: str


@dataclass(frozen=True)
class MaskRow:
    """The masks of one choice of sampling."""

    pattern: str
    settings: str
    axes: tuple[str, str]
    tiles: tuple[MaskTile, ...]


def mask_rows(findings: Findings) -> list[MaskRow]:
    """Return a row a choice of sampling, a mask each acceleration, of the first draw that finished."""
    # the same mask serves all methods, noise levels and coils
    found: dict[str, dict[float, Finished]] = {}
    samplings: dict[str, Mapping[str, Any]] = {}
    for case in findings.cases:
        sampling = _sampling(case)
        key = str([*sampling.items(), *_lengths(case).items()])
        samplings[key] = sampling
        at = found.setdefault(key, {})
        if case.acceleration not in at or case.draws < at[case.acceleration].draws:
            at[case.acceleration] = case
    rows = []
    for key, cases in found.items():
        tiles, axes = [], ("x", "y")
        for acceleration, case in sorted(cases.items()):
            if not (case.folder / "mask.nii.gz").is_file():
                continue
            volume = read_volume(case.folder / "mask.nii.gz")
            mask = volume.data != 0
            encoded = case.settings.get("phase_encode") or encoded_axes(mask)
            axes = _plane(encoded)
            # samples of k-space lie 1 / field of view apart
            apart = {
                axis: 1 / (n * size) for axis, n, size in zip("xyz", mask.shape, volume.voxel_mm, strict=True)
            }
            grid = int(np.prod([mask.shape["xyz".index(axis)] for axis in encoded]))
            taken = round(grid * float(mask.mean()))
            tiles.append(
                MaskTile(
                    picture(_section(mask, axes), 0, 1, SAMPLES, (apart[axes[0]], apart[axes[1]])),
                    number(acceleration),
                    number(case.record.get("acceleration_achieved", 1 / mask.mean())),
                    f"{taken:,} of {grid:,} {'lines' if len(encoded) == 1 else 'points'}",
                )
            )
        sampling = samplings[key]
        settings = ", ".join(
            f"{name} {text(value)}"
            for name, value in sampling.items()
            if name != "pattern" and value is not None
        )
        rows.append(MaskRow(str(sampling["pattern"]), settings, axes, tuple(tiles)))
    return [row for row in rows if row.tiles]


def encoded_axes(mask: np.ndarray) -> str:
    """Return the axes along which a mask changes; ``"y"`` for a full one.

    Examples
    --------
    >>> lines = np.zeros((4, 4, 1), bool)
    >>> lines[:, ::2] = True
    >>> encoded_axes(lines)
    'y'
    """
    return (
        "".join(axis for number, axis in enumerate("xyz") if (mask != np.take(mask, [0], axis=number)).any())[
            :2
        ]
        or "y"
    )


def sampled_profile(case: Finished) -> tuple[str, list[float]] | None:
    """Return the last phase-encode axis of a case and the share taken along it; None without a mask."""
    path = case.folder / "mask.nii.gz"
    if not path.is_file():
        return None
    mask = read_volume(path).data != 0
    encoded = case.settings.get("phase_encode") or encoded_axes(mask)
    others = tuple(number for number, axis in enumerate("xyz") if axis != encoded[-1])
    return encoded[-1], [round(float(share), 3) for share in mask.mean(axis=others)]


def _sampling(case: Finished) -> Mapping[str, Any]:
    names = list(case.settings)
    first, last = names.index("pattern"), names.index("acceleration")
    return {name: case.settings[name] for name in names[first:last]}


def _lengths(case: Finished) -> Mapping[str, Any]:
    return {name: case.settings.get(name) for name in ("reference", "matrix", "slices", "encoded_axes")}


def _plane(encoded: str) -> tuple[str, str]:
    """Return the two axes to draw, the undersampled ones or one of them with the readout."""
    if len(encoded) == 2:
        first, second = sorted(encoded)
        return first, second
    return ("x", "z") if encoded == "z" else ("x", "y")


def _section(mask: np.ndarray, axes: Sequence[str]) -> np.ndarray:
    """Cut a mask through the centre of the axis that is not drawn."""
    (other,) = set("xyz") - set(axes)
    number_ = "xyz".index(other)
    return np.take(mask, mask.shape[number_] // 2, axis=number_)
