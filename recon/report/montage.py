"""Montages: for each pattern, reference, reconstructions and errors side by side at a few accelerations."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..files import read_volume
from ..measures import error_map
from ..study.cases import text
from .findings import Curve, Findings, Finished, Point
from .picture import ERROR, GREY, Picture, ScaleBar, colour_bar, picture, scale_bar
from .wording import nice_above, number

ROWS = 4
"""The most accelerations of a montage."""

METHODS = 3
"""The most methods of a montage."""


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
        Name and value of the measure in the caption; empty for the reference and for errors.
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
    """One acceleration: its tiles from left to right, and what is particular about it."""

    acceleration: str
    achieved: str
    mark: str
    reference: Tile
    images: tuple[Tile, ...]
    errors: tuple[Tile, ...]


@dataclass(frozen=True)
class Montage:
    """A pattern: columns' names and rows."""

    pattern: str
    settings: str
    methods: tuple[str, ...]
    rows: tuple[Row, ...]


@dataclass(frozen=True)
class Montages:
    """All montages, which share a slice, a window and a scale.

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
class _Column:
    """A method of a montage."""

    name: str
    curve: Curve


@dataclass(frozen=True, eq=False)
class _Plan:
    """What a montage shows, before anything is read."""

    pattern: str
    columns: tuple[_Column, ...]
    accelerations: tuple[float, ...]


def montages(findings: Findings) -> Montages | None:
    """Return a montage a pattern, of the object and acquisition that decide; None when nothing finished.

    Of each pattern the settings that reach furthest are shown, with each method at its best.
    """
    deciding = findings.deciding_curve
    with_cases = [curve for curve in findings.curves if any(point.cases for point in curve.points)]
    if not with_cases:
        return None
    condition = (deciding if deciding in with_cases else with_cases[0]) or with_cases[0]
    curves = [curve for curve in with_cases if curve.condition == condition.condition]
    plans = [
        _plan(curves, pattern, deciding) for pattern in dict.fromkeys(c.choice["pattern"] for c in curves)
    ]

    a_case = next(case for curve in curves for point in curve.points for case in point.cases)
    volume = read_volume(findings.reference_of(a_case))
    slice_ = _best_slice(volume.data)
    reference = volume.data[:, :, slice_ : slice_ + 1]
    voxel = volume.voxel_mm[:2]
    peak = float(np.abs(volume.data).max())
    # a few bright voxels must not darken all the rest
    top = float(np.quantile(np.abs(reference), 0.998))
    top = peak if top > 0.9 * peak or top == 0 else top

    images = {
        case.id: read_volume(case.folder / "image.nii.gz", allow_zero=True).data[:, :, slice_ : slice_ + 1]
        for plan in plans
        for r in plan.accelerations
        for case in _shown(plan, r)
        if case is not None and (case.folder / "image.nii.gz").is_file()
    }
    errors = {case: error_map(reference, image) for case, image in images.items()}
    error_top = _error_window(list(errors.values()), peak)

    def image(values: np.ndarray) -> Picture:
        return picture(np.abs(values[:, :, 0]), 0, top, GREY, voxel)

    def error(values: np.ndarray) -> Picture:
        return picture(values[:, :, 0], -error_top, error_top, ERROR, voxel)

    shown_reference = image(reference)

    def row(plan: _Plan, r: float) -> Row:
        cases = _shown(plan, r)
        pairs = list(zip(plan.columns, cases, strict=True))
        mark = _mark(plan, r, deciding)
        of = f"{plan.pattern}, R = {number(r)}"
        achieved = next((case.record.get("acceleration_achieved") for case in cases if case), None)
        return Row(
            acceleration=number(r),
            achieved=number(achieved),
            mark=mark,
            reference=Tile(shown_reference, "fully sampled reference"),
            images=tuple(
                Tile(
                    image(images[case.id]) if case and case.id in images else None,
                    f"{column.name}, {of}",
                    _caption(case),
                    _broken(column.curve.at(r)),
                    case is None or bool(case.record["convergence"]["converged"]),
                )
                for column, case in pairs
            ),
            errors=tuple(
                Tile(
                    error(errors[case.id]) if case and case.id in errors else None,
                    f"error of {column.name}, {of}",
                )
                for column, case in pairs
            ),
        )

    return Montages(
        montages=tuple(
            Montage(
                plan.pattern,
                _settings(plan),
                tuple(column.name for column in plan.columns),
                tuple(row(plan, r) for r in plan.accelerations),
            )
            for plan in plans
        ),
        matrix=_matrix(volume.data.shape, volume.voxel_mm),
        condition=condition.condition_label,
        slice=f"slice {slice_ + 1} of {volume.data.shape[2]}" if volume.data.shape[2] > 1 else "",
        window=number(100 * top / peak, 3),
        error_window=number(100 * error_top / peak, 3),
        grey=colour_bar(GREY),
        colours=colour_bar(ERROR),
        scale=scale_bar(volume.data.shape[0] * voxel[0]),
        aspect=shown_reference.aspect,
    )


def choose_rows(tried: Sequence[float], wanted: Sequence[float | None], most: int = ROWS) -> list[float]:
    """Choose accelerations to show: those wanted, then the ends, then those that fill the widest gaps.

    Parameters
    ----------
    tried : sequence of float
        Rising.
    wanted : sequence of float or None
        The most important first; what was not tried is left out.
    most : int

    Examples
    --------
    >>> choose_rows([1.5, 2, 3, 4, 6, 8, 10], [4, 6])
    [1.5, 4, 6, 10]
    >>> choose_rows([1, 2, 3, 4, 5, 6, 7], [None, None])
    [1, 3, 5, 7]
    >>> choose_rows([2, 4], [2, None])
    [2, 4]
    """
    given = [r for r in dict.fromkeys(wanted) if r is not None and r in tried]
    if not given:
        places = np.linspace(0, len(tried) - 1, min(most, len(tried))).round().astype(int)
        return [tried[place] for place in places]
    chosen = [r for r in dict.fromkeys([*given, *tried[-1:], *tried[:1]])][:most]
    while len(chosen) < min(most, len(tried)):
        places = sorted(tried.index(r) for r in chosen)
        gaps = [(b - a, (a + b) // 2) for a, b in zip(places, places[1:], strict=False)]
        gaps += [
            (2 * places[0], places[0] // 2),
            (2 * (len(tried) - 1 - places[-1]), (places[-1] + len(tried)) // 2),
        ]
        _, middle = max(gaps, key=lambda gap: gap[0])
        chosen.append(tried[middle])
    return sorted(chosen)


def _plan(curves: Sequence[Curve], pattern: str, deciding: Curve | None) -> _Plan:
    """Choose the settings of a pattern that reach furthest, and each method at its best."""

    def reach(curve: Curve) -> tuple[bool, float, bool, float]:
        excess = float((curve.first_failure or {}).get("excess", math.inf))
        as_decided = deciding is not None and curve.method == deciding.method
        # solvers of one problem differ in the last digits only, which is no reason to change columns
        return curve is deciding, curve.acceleration or 0.0, as_decided, -round(excess, 3)

    of_pattern = [curve for curve in curves if curve.choice["pattern"] == pattern]
    best = max(of_pattern, key=reach)
    paired = [curve for curve in of_pattern if curve.sampling == best.sampling]
    by_method: dict[str, Curve] = {}
    for curve in paired:
        name = curve.choice["method"]
        if name not in by_method or reach(curve) > reach(by_method[name]):
            by_method[name] = curve
    # the best must be there, whatever else is left out
    names = list(by_method)[:METHODS]
    if best.choice["method"] not in names:
        names[-1] = best.choice["method"]
    columns = tuple(_Column(_method_name(by_method[name], paired), by_method[name]) for name in names)
    tried = sorted({point.acceleration for column in columns for point in column.curve.points})
    failing = (best.first_failure or {}).get("acceleration")
    verdict = deciding.acceleration if deciding else None
    return _Plan(pattern, columns, tuple(choose_rows(tried, [verdict, failing, best.acceleration])))


def _method_name(curve: Curve, others: Sequence[Curve]) -> str:
    """Return the method's name, with the options that tell it from others of the same name."""
    rivals = [other.method for other in others if other.choice["method"] == curve.choice["method"]]
    told = [name for name in curve.method if len({str(rival.get(name)) for rival in rivals}) > 1]
    options = ", ".join(f"{name} {text(curve.method[name]) or 'none'}" for name in told)
    return curve.choice["method"] + (f" ({options})" if options else "")


def _settings(plan: _Plan) -> str:
    sampling = {name: value for name, value in plan.columns[0].curve.sampling.items() if name != "pattern"}
    return ", ".join(f"{name} {text(value)}" for name, value in sampling.items() if value is not None)


def _shown(plan: _Plan, acceleration: float) -> list[Finished | None]:
    """Return one case a column: the first draw that all columns have, or else the first of each."""
    by_draw = []
    for column in plan.columns:
        point = column.curve.at(acceleration)
        by_draw.append({case.draws: case for case in (point.cases if point else ())})
    common = set.intersection(*(set(cases) for cases in by_draw)) if by_draw else set()
    if common:
        return [cases[min(common)] for cases in by_draw]
    return [cases[min(cases)] if cases else None for cases in by_draw]


def _caption(case: Finished | None) -> str:
    if case is None or not case.measures:
        return ""
    name = "nrmse" if "nrmse" in case.measures else next(iter(case.measures))
    return f"{name} {number(case.measures[name], 3)}"


def _broken(point: Point | None) -> tuple[str, ...]:
    return point.broken if point else ()


def _mark(plan: _Plan, acceleration: float, deciding: Curve | None) -> str:
    """Say what is particular about an acceleration for this montage."""
    if deciding is None:
        return ""
    mine = next((column.curve for column in plan.columns if column.curve is deciding), None)
    if acceleration == deciding.acceleration:
        return "verdict" if mine else "the verdict’s R"
    best = mine or max((column.curve for column in plan.columns), key=lambda curve: curve.acceleration or 0.0)
    if acceleration == (best.first_failure or {}).get("acceleration"):
        return "first to fail"
    return ""


def _error_window(errors: Sequence[np.ndarray], peak: float) -> float:
    """Return an end of the window that hides neither the worst nor the best: a few voxels lie beyond it."""
    if not errors:
        return peak
    share = max(float(np.quantile(np.abs(errors), 0.98)) / peak, 1e-3)
    return nice_above(share) * peak


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
