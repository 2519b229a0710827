"""Montages: for each pattern, reference, reconstructions and errors side by side at a few accelerations."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..files import read_volume
from ..measures import error_map
from ..study.cases import text
from .findings import Curve, Findings, Finished
from .picture import ERROR, GREY, Picture, ScaleBar, colour_bar, picture, scale_bar
from .selection import Selection, select, shown_condition
from .wording import nice_above, number

if TYPE_CHECKING:
    from ..files import Volume


@dataclass(frozen=True)
class Tile:
    """An image with its caption.

    Attributes
    ----------
    picture : Picture or None
        None when there is no image to show.
    what : str
        The image in words, for those who do not see it.
    measure : str
        Name and value of the measure in the caption.
    broken : tuple of str
        The measures whose mean over the draws is outside its limit.
    converged : bool
        False when the reconstruction stopped before it met its criterion.
    """

    picture: Picture | None
    what: str
    measure: str = ""
    broken: tuple[str, ...] = ()
    converged: bool = True


@dataclass(frozen=True)
class Row:
    """One acceleration: what is particular about it, and its tiles from left to right."""

    acceleration: str
    achieved: str
    mark: str
    reference: Tile
    images: tuple[Tile, ...]
    errors: tuple[Tile, ...]


@dataclass(frozen=True)
class Montage:
    """A pattern with its settings, the names of the methods, and the rows."""

    pattern: str
    settings: str
    methods: tuple[str, ...]
    rows: tuple[Row, ...]


@dataclass(frozen=True)
class Montages:
    """All montages, which share a slice, their windows and a scale.

    Attributes
    ----------
    montages : tuple of Montage
    matrix : str
        The reference's matrix and field of view.
    condition : str
        Which object and acquisition, when the study has several.
    slice : str
        Which slice of a volume; empty for a 2-D image.
    window, error_window : str
        The ends of the windows, in percent of the reference's maximum.
    grey, colours : Picture
        The colour bars of images and errors.
    scale : ScaleBar
    aspect : float
        Width over height of all tiles.
    """

    montages: tuple[Montage, ...]
    matrix: str
    condition: str
    slice: str
    window: str
    error_window: str
    grey: Picture
    colours: Picture
    scale: ScaleBar
    aspect: float


@dataclass(frozen=True, eq=False)
class _Shown:
    """The slices that are shown, (x, y, 1), by the id of their case, and how they are drawn."""

    reference: np.ndarray
    images: Mapping[str, np.ndarray]
    errors: Mapping[str, np.ndarray]
    voxel: tuple[float, float]
    top: float
    error_top: float

    def image(self, case: Finished | None) -> Picture | None:
        """Draw the magnitude of a case's image."""
        return self._grey(self.images[case.id]) if case is not None and case.id in self.images else None

    def error(self, case: Finished | None) -> Picture | None:
        """Draw the error of a case."""
        if case is None or case.id not in self.errors:
            return None
        return picture(self.errors[case.id][:, :, 0], -self.error_top, self.error_top, ERROR, self.voxel)

    def truth(self) -> Picture:
        """Draw the magnitude of the reference."""
        return self._grey(self.reference)

    def _grey(self, values: np.ndarray) -> Picture:
        return picture(np.abs(values[:, :, 0]), 0, self.top, GREY, self.voxel)


def montages(findings: Findings) -> Montages | None:
    """Return a montage a pattern, of the object and acquisition that decide; None when nothing finished."""
    condition = shown_condition(findings)
    if condition is None:
        return None
    selections = select(findings, condition)
    cases = {
        case.id: case
        for selection in selections
        for r in selection.accelerations
        for case in selection.cases(r)
        if case is not None
    }
    any_case = next(case for point in condition.points for case in point.cases)
    volume = read_volume(findings.reference_of(any_case))
    z = _best_slice(volume.data)
    peak = float(np.abs(volume.data).max())
    shown = _read(volume, z, peak, list(cases.values()))
    truth = shown.truth()
    slices = volume.data.shape[2]
    return Montages(
        montages=tuple(
            Montage(
                selection.pattern,
                _settings(selection),
                tuple(column.name for column in selection.columns),
                tuple(
                    _row(selection, r, shown, truth, findings.deciding_curve) for r in selection.accelerations
                ),
            )
            for selection in selections
        ),
        matrix=_matrix(volume.data.shape, volume.voxel_mm),
        condition=condition.condition_label,
        slice=f"slice {z + 1} of {slices}" if slices > 1 else "",
        window=number(100 * shown.top / peak, 3),
        error_window=number(100 * shown.error_top / peak, 3),
        grey=colour_bar(GREY),
        colours=colour_bar(ERROR),
        scale=scale_bar(volume.data.shape[0] * volume.voxel_mm[0]),
        aspect=truth.aspect,
    )


def _read(volume: Volume, z: int, peak: float, cases: Sequence[Finished]) -> _Shown:
    """Read the slice of each case, and choose the windows."""
    reference = volume.data[:, :, z : z + 1]
    images = {}
    for case in cases:
        path = case.folder / "image.nii.gz"
        if path.is_file():
            images[case.id] = read_volume(path, allow_zero=True).data[:, :, z : z + 1].copy()
    errors = {name: error_map(reference, image) for name, image in images.items()}
    # a few bright voxels must not darken all the rest
    top = float(np.quantile(np.abs(reference), 0.998))
    # nor may the few worst hide all other errors
    errors_up_to = float(np.quantile(np.abs(list(errors.values())), 0.98)) / peak if errors else 1.0
    return _Shown(
        reference=reference,
        images=images,
        errors=errors,
        voxel=volume.voxel_mm[:2],
        top=peak if top > 0.9 * peak or top == 0 else top,
        error_top=nice_above(max(errors_up_to, 1e-3)) * peak,
    )


def _row(selection: Selection, r: float, shown: _Shown, truth: Picture, deciding: Curve | None) -> Row:
    images, errors, achieved = [], [], None
    for column, case in zip(selection.columns, selection.cases(r), strict=True):
        what = f"{column.name}, {selection.pattern}, R = {number(r)}"
        point = column.curve.at(r)
        broken = point.broken if point else ()
        measure, converged = "", True
        if case is not None:
            achieved = achieved or case.record.get("acceleration_achieved")
            measure, converged = _measure(case), case.converged
        images.append(Tile(shown.image(case), what, measure, broken, converged))
        errors.append(Tile(shown.error(case), f"error of {what}", measure))
    return Row(
        acceleration=number(r),
        achieved=number(achieved),
        mark=selection.mark(r, deciding),
        reference=Tile(truth, "fully sampled reference"),
        images=tuple(images),
        errors=tuple(errors),
    )


def _measure(case: Finished) -> str:
    """Name and value of the error, or of the first measure that there is."""
    name = "nrmse" if "nrmse" in case.measures else next(iter(case.measures), "")
    return f"{name} {number(case.measures[name], 3)}" if name else ""


def _settings(selection: Selection) -> str:
    sampling = selection.columns[0].curve.sampling
    return ", ".join(
        f"{name} {text(value)}" for name, value in sampling.items() if name != "pattern" and value is not None
    )


def _matrix(shape: Sequence[int], voxel_mm: Sequence[float]) -> str:
    axes = 3 if shape[2] > 1 else 2
    lengths = [number(n * size) for n, size in zip(shape, voxel_mm, strict=True)]
    return f"{' × '.join(map(str, shape[:axes]))}, {' × '.join(lengths[:axes])} mm"


def _best_slice(volume: np.ndarray) -> int:
    """Return the slice with most of the object; of several, the middle one."""
    from ...phantoms.acquisition import support

    if volume.shape[2] == 1:
        return 0
    area = support(volume).sum(axis=(0, 1))
    largest = np.flatnonzero(area == area.max())
    return int(largest[len(largest) // 2])
