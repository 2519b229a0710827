"""A mask as a figure: samples, density, point spread, gaps, and the order of acquisition."""

from __future__ import annotations

import os
from collections.abc import Callable
from math import log10
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray

from ... import InputError
from ...masks.judge import Judgement, judge
from ...masks.pointspread import point_spread
from ..files import replacing
from .vector import FAINT, INK, LIMIT, SERIES

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.axis import Axis
    from matplotlib.cm import ScalarMappable
    from matplotlib.colorbar import Colorbar
    from matplotlib.figure import Figure

    from ...masks.order import EchoTrains

ENDINGS = (".png", ".svg", ".pdf")
"""What the name of a figure may end in."""

_FLOOR_DB = -60.0
_MARKED = 64
"""More equal maxima of the point spread than these are not marked one by one."""
_CAUTION = (
    "For research and protocol prototyping. A sampling table says nothing of SAR, nerve stimulation, "
    "gradient heating or acoustic limits."
)
# What each writer would say of the time and of itself, so that equal figures give equal bytes
_UNSAID = {
    ".png": ("Software",),
    ".svg": ("Creator", "Date", "Format", "Type"),
    ".pdf": ("Creator", "Producer", "CreationDate"),
}


def write_mask_figure(
    path: str | os.PathLike[str],
    mask: NDArray[np.bool_],
    *,
    density: NDArray[np.float64] | None = None,
    allowed: NDArray[np.bool_] | None = None,
    trains: EchoTrains | None = None,
    title: str = "",
) -> None:
    """Write a figure of a mask: samples, density, point spread, gaps, and the order when it is given.

    Equal masks give equal bytes. The file appears when it is complete.

    Parameters
    ----------
    path : path
        Ends in .png, .svg or .pdf.
    mask : ndarray of bool
        True where a sample is taken; one phase-encode axis for lines, two for points. The centre of k-space
        has index N // 2.
    density : ndarray of float64, optional
        Inclusion probabilities of the pattern, of the shape of the mask.
    allowed : ndarray of bool, optional
        Points that the sequence may take; gaps and local densities are those of this part of the grid.
    trains : EchoTrains, optional
        Which echo acquires each sample of the mask.
    title : str
        Stands above the acceleration and the number of samples.

    Raises
    ------
    InputError
        When the path has another ending or cannot be written, the mask is empty or has not one or two axes,
        or the density or the trains do not fit it.

    Examples
    --------
    >>> from pathlib import Path
    >>> from tempfile import TemporaryDirectory
    >>> with TemporaryDirectory() as folder:
    ...     write_mask_figure(Path(folder) / "mask.png", np.arange(64) % 4 == 0, title="every fourth line")
    ...     (Path(folder) / "mask.png").read_bytes()[1:4]
    b'PNG'
    >>> write_mask_figure("mask.jpg", np.arange(64) % 4 == 0)
    Traceback (most recent call last):
        ...
    skipline.InputError: mask.jpg cannot hold a figure of a mask; expected a name ending in .png, .svg or .pdf
    """
    path = Path(path)
    ending = path.suffix.lower()
    if ending not in ENDINGS:
        raise InputError(
            f"{path} cannot hold a figure of a mask; expected a name ending in .png, .svg or .pdf"
        )
    mask = np.asarray(mask)
    found = judge(mask, density=density, allowed=allowed)
    if trains is not None and not np.array_equal(trains.mask, mask):
        raise InputError("echo trains: expected those of the mask, but they take other samples")

    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg

    own: Any = {name: value for name, value in matplotlib.rcParamsDefault.items() if "backend" not in name}
    own |= {
        "svg.hashsalt": "mask", "pdf.fonttype": 42, "font.size": 8.5, "axes.labelsize": 8.5,
        "text.color": INK, "axes.edgecolor": INK, "axes.labelcolor": INK, "xtick.color": INK,
        "ytick.color": INK, "axes.linewidth": 0.6, "xtick.major.width": 0.6, "ytick.major.width": 0.6,
        "xtick.major.size": 3, "ytick.major.size": 3, "axes.axisbelow": True,
    }  # fmt: skip
    with matplotlib.rc_context(own):
        draw = _figure_of_lines if mask.ndim == 1 else _figure_of_points
        figure = draw(mask, found, density, trains)
        FigureCanvasAgg(figure)
        _frame(figure, found, title)
        with replacing(path) as file:
            figure.savefig(file, format=ending[1:], dpi=200, metadata=dict.fromkeys(_UNSAID[ending]))


# One phase-encode axis


def _figure_of_lines(
    mask: NDArray[np.bool_],
    found: Judgement,
    density: NDArray[np.float64] | None,
    trains: EchoTrains | None,
) -> Figure:
    """Draw what lies along k at the left, one above the other, and the rest at the right."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(11.0, 6.6 if trains is None else 7.4), layout="constrained")
    left, right = figure.add_gridspec(1, 2, width_ratios=(1.15, 1), wspace=0.05)
    heights = (0.4, 1.4) if trains is None else (0.4, 1.2, 1.4)
    rows = left.subgridspec(len(heights), 1, height_ratios=heights)
    strip = figure.add_subplot(rows[0])
    along_k = [strip, *(figure.add_subplot(rows[n], sharex=strip) for n in range(1, len(heights)))]
    spread, gaps = (figure.add_subplot(row) for row in right.subgridspec(2, 1))

    k = np.arange(mask.size) - mask.size // 2
    _lines(strip, k, mask)
    _density_of_lines(along_k[1], k, found, density)
    if trains is not None:
        _order_of_lines(along_k[2], trains)
    strip.set_xlim(k[0] - 0.5, k[-1] + 0.5)
    for axes in along_k[:-1]:
        axes.tick_params(labelbottom=False)
    along_k[-1].set_xlabel(_k_label("y"))
    _spread_of_lines(spread, k, mask, found)
    _gaps_of_lines(gaps, mask, found)
    return figure


def _lines(axes: Axes, k: NDArray[np.int_], mask: NDArray[np.bool_]) -> None:
    axes.bar(k[mask], 1, width=0.72, color=INK, linewidth=0)
    axes.set(ylim=(0, 1), yticks=[])
    _head(axes, "Lines taken", "one bar for each")


def _density_of_lines(
    axes: Axes, k: NDArray[np.int_], found: Judgement, density: NDArray[np.float64] | None
) -> None:
    edges = _cell_edges(found, 0)
    axes.stairs(found.local_density, edges, fill=True, color=SERIES[0], alpha=0.3, label="taken, by cell")
    axes.stairs(found.local_density, edges, color=SERIES[0], linewidth=0.8, baseline=None)
    if density is not None:
        axes.step(k, density, where="mid", color=SERIES[1], linewidth=1.6, label="inclusion probability")
        axes.legend(frameon=False, loc="upper right", handlelength=1.4, borderaxespad=0.2)
    axes.set(ylim=(0, 1.04), ylabel="share of lines")
    _quiet(axes)
    _head(axes, "Density", f"share taken in {found.local_density.size} cells")


def _order_of_lines(axes: Axes, trains: EchoTrains) -> None:
    k = trains.index[:, 0] - trains.shape[0] // 2
    effective = trains.effective_echo
    axes.axhline(effective, color=LIMIT, linewidth=1, zorder=1)
    axes.axvline(0, color=FAINT, linewidth=0.8, zorder=0)
    dots = axes.scatter(
        k, trains.echo, c=trains.echo, s=20, edgecolors=INK, linewidths=0.4, zorder=3, **_echo_colours(trains)
    )
    axes.set(ylabel="echo", ylim=(trains.train_length + 0.7, 0.3))  # time runs downwards
    _whole_numbers(axes.yaxis)
    bar = _bar(dots, axes, "echo", 0.025)
    bar.ax.invert_yaxis()
    _whole_numbers(bar.ax.yaxis)
    _mark(bar, effective, LIMIT)
    _quiet(axes)
    _head(axes, "Order", _order_said(trains), LIMIT)


def _spread_of_lines(axes: Axes, k: NDArray[np.int_], mask: NDArray[np.bool_], found: Judgement) -> None:
    magnitude = np.abs(point_spread(mask))
    axes.plot(k, _decibels(magnitude), color=SERIES[0], linewidth=1)
    for (place,) in _highest_sidelobes(magnitude, found):
        axes.plot(
            k[place], _decibels(magnitude)[place], "o", color=INK, mfc="none", ms=7, mew=1.1, clip_on=False
        )
    if found.sidelobes.rms_uniform > 0:
        axes.axhline(float(_decibels(found.sidelobes.rms_uniform)), color=LIMIT, linewidth=1.1, dashes=(5, 2))
    axes.set(
        xlim=(k[0] - 0.5, k[-1] + 0.5), ylim=(_FLOOR_DB, 3), ylabel="magnitude (dB)",
        xlabel="y (voxels from the peak)",
    )  # fmt: skip
    _quiet(axes)
    _spread_said(axes, found, "dashed")


def _gaps_of_lines(axes: Axes, mask: NDArray[np.bool_], found: Judgement) -> None:
    gaps = np.diff(np.flatnonzero(mask))
    if gaps.size:
        axes.hist(gaps, [n + 0.5 for n in range(gaps.max() + 1)], rwidth=0.8, color=SERIES[2])
        axes.set_xlim(0.3, gaps.max() + 0.7)
    axes.set(xlabel="from a taken line to the next (index steps; 1: neighbours)", ylabel="number of gaps")
    _whole_numbers(axes.xaxis)
    _whole_numbers(axes.yaxis)
    _quiet(axes)
    _head(axes, "Gaps", f"largest {found.largest_gap:g}, ends of k-space included")


# Two phase-encode axes


def _figure_of_points(
    mask: NDArray[np.bool_],
    found: Judgement,
    density: NDArray[np.float64] | None,
    trains: EchoTrains | None,
) -> Figure:
    """Draw the maps row by row, the first axis to the right; the histogram has the cells that are left."""
    from matplotlib.figure import Figure

    panels: list[Callable[[Axes], None]] = [lambda axes: _points(axes, mask)]
    if trains is not None:
        panels.append(lambda axes: _order_of_points(axes, trains))
    if density is not None:
        panels.append(lambda axes: _probabilities_of_points(axes, np.asarray(density)))
    panels.append(lambda axes: _density_of_points(axes, found))
    panels.append(lambda axes: _spread_of_points(axes, mask, found))
    columns = (len(panels) + 2) // 2
    # maps keep their proportions: the rows are as high as those of this grid need
    height = min(max(3.3 * mask.shape[1] / mask.shape[0], 2.2), 4.6)
    figure = Figure(figsize=(4.3 * columns, 2 * height + 2.1), layout="constrained")
    cells = figure.add_gridspec(2, columns, hspace=0.06)
    for number, draw in enumerate(panels):
        draw(figure.add_subplot(cells[divmod(number, columns)]))
    _distances_of_points(figure.add_subplot(cells[1, len(panels) - columns :]), mask, found)
    return figure


def _points(axes: Axes, mask: NDArray[np.bool_]) -> None:
    _map(axes, mask.astype(np.float64), cmap="Greys", vmin=0, vmax=1)
    _head(axes, "Points taken", "one dark point for each")


def _order_of_points(axes: Axes, trains: EchoTrains) -> None:
    echo = np.full(trains.shape, np.nan)
    echo[tuple(trains.index.T)] = trains.echo
    picture = _map(axes, echo, interpolation="nearest", **_echo_colours(trains))
    first = trains.index[trains.echo == trains.effective_echo] - np.array(trains.shape) // 2
    centre = first[np.argmin((first**2).sum(axis=1))]
    for colour, width in (("white", 3.5), (LIMIT, 1.6)):
        axes.plot(*centre, "o", color=colour, mfc="none", ms=10, mew=width)
    bar = _bar(picture, axes, "echo")
    _whole_numbers(bar.ax.yaxis)
    _mark(bar, trains.effective_echo, LIMIT)
    _head(axes, "Order", _order_said(trains), LIMIT)


def _probabilities_of_points(axes: Axes, density: NDArray[np.float64]) -> None:
    _bar(_map(axes, density, cmap="cividis", vmin=0, vmax=1), axes, "probability")
    _head(axes, "Inclusion probability", "of each point, over draws")


def _density_of_points(axes: Axes, found: Judgement) -> None:
    edges = [_cell_edges(found, axis) for axis in (0, 1)]
    cells = axes.pcolormesh(*edges, found.local_density.T, cmap="cividis", vmin=0)
    axes.set(aspect=_aspect(found.shape), xlabel=_k_label("y"), ylabel=_k_label("z"))
    _bar(cells, axes, "share of points")
    _head(axes, "Local density", "share taken in {} × {} cells".format(*found.local_density.shape))


def _spread_of_points(axes: Axes, mask: NDArray[np.bool_], found: Judgement) -> None:
    magnitude = np.abs(point_spread(mask))
    picture = _map(axes, _decibels(magnitude), cmap="magma", vmin=_FLOOR_DB, vmax=0)
    for place in _highest_sidelobes(magnitude, found):
        axes.plot(*(place - np.array(mask.shape) // 2), "o", color="#5fe0ff", mfc="none", ms=8, mew=1.2)
    axes.set(xlabel="y (voxels from the peak)", ylabel="z (voxels from the peak)")
    bar = _bar(picture, axes, "magnitude (dB)")
    if found.sidelobes.rms_uniform > 0:
        _mark(bar, max(float(_decibels(found.sidelobes.rms_uniform)), _FLOOR_DB), "#5fe0ff")
    _spread_said(axes, found, "line on the bar")


def _distances_of_points(axes: Axes, mask: NDArray[np.bool_], found: Judgement) -> None:
    from scipy.spatial import KDTree

    points = np.argwhere(mask)
    if len(points) > 1:
        distance = KDTree(points).query(points, k=2)[0][:, 1]
        # few distances can be had on a grid: one stem for each is true, bins would show the grid's own gaps
        values, numbers = np.unique(distance.round(6), return_counts=True)
        axes.vlines(values, 0, numbers, color=SERIES[2], linewidth=3)
        axes.plot(values, numbers, "o", color=SERIES[2], ms=4)
        axes.set(xlim=(0, values[-1] + 1), ylim=(0, 1.06 * numbers.max()))
    axes.set(xlabel="to the nearest other sample (index steps)", ylabel="number of samples")
    _whole_numbers(axes.yaxis)
    _quiet(axes)
    _head(axes, "Gaps", f"largest empty circle: diameter {found.largest_gap:.3g} steps")


def _map(axes: Axes, values: NDArray[np.float64], **how: Any) -> ScalarMappable:
    """Show values on the grid, the first axis to the right and the second up, from the centre."""
    (left, right), (bottom, top) = ((-0.5 - n // 2, n - n // 2 - 0.5) for n in values.shape)
    axes.set(xlabel=_k_label("y"), ylabel=_k_label("z"))
    return axes.imshow(
        values.T, origin="lower", extent=(left, right, bottom, top), aspect=_aspect(values.shape), **how
    )


def _aspect(shape: tuple[int, ...]) -> Literal["equal", "auto"]:
    """Return how a map is scaled: true to the grid, unless that would make it a thread."""
    return "equal" if max(shape) <= 4 * min(shape) else "auto"


# What both have


def _frame(figure: Figure, found: Judgement, title: str) -> None:
    """Put the title above and the caution below."""
    points = " × ".join(map(str, found.shape))
    unit = "lines" if len(found.shape) == 1 else "points"
    said = f"R = {found.acceleration:.4g}, {found.samples} of {points} {unit}"
    heading = " ".join(title.split())
    # the title is the user's, and a dollar sign in it is no mathematics
    figure.suptitle(f"{heading}\n{said}" if heading else said, x=0.01, ha="left", size=12, parse_math=False)
    figure.supxlabel(_CAUTION, x=0.01, ha="left", size=8, color=INK)


def _head(axes: Axes, heading: str, said: str, colour: str = INK) -> None:
    axes.set_title(heading, loc="left", size=10, weight="bold", pad=7 + 11 * len(said.splitlines()))
    note = axes.annotate(
        said, (0, 1), (0, 5), size=8, color=colour, xycoords="axes fraction", textcoords="offset points"
    )
    note.set_in_layout(False)  # the title has left the room for it


def _spread_said(axes: Axes, found: Judgement, level: str) -> None:
    lobes = found.sidelobes
    _head(
        axes,
        "Point spread",
        f"highest outside the main lobe {_said(lobes.outside_main_lobe)} (○)\n"
        f"rms {_said(lobes.rms)}; uniform draws {_said(lobes.rms_uniform)} ({level})",
    )


def _order_said(trains: EchoTrains) -> str:
    return f"effective echo {trains.effective_echo} of {trains.train_length} (red)"


def _quiet(axes: Axes) -> None:
    axes.grid(axis="y", color=FAINT, linewidth=0.5)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)


def _whole_numbers(axis: Axis) -> None:
    from matplotlib.ticker import MaxNLocator

    axis.set_major_locator(MaxNLocator(integer=True, nbins=10))


def _bar(picture: ScalarMappable, axes: Axes, label: str, width: float = 0.045) -> Colorbar:
    """Put a colour bar as high as the panel at its right."""
    figure = axes.get_figure(root=True)
    assert figure is not None
    bar = figure.colorbar(picture, cax=axes.inset_axes((1.03, 0, width, 1)), label=label)
    bar.ax.tick_params(labelsize=8)
    return bar


def _mark(bar: Colorbar, value: float, colour: str) -> None:
    for line, width in (("white", 4.5), (colour, 2)):
        bar.ax.axhline(value, color=line, linewidth=width)


def _echo_colours(trains: EchoTrains) -> dict[str, Any]:
    """Return a colour for each echo; none so pale that it vanishes on white."""
    import matplotlib
    from matplotlib.colors import ListedColormap

    colours = matplotlib.colormaps["viridis"](np.linspace(0, 0.92, trains.train_length))
    return {"cmap": ListedColormap(colours), "vmin": 0.5, "vmax": trains.train_length + 0.5}


def _highest_sidelobes(magnitude: NDArray[np.float64], found: Judgement) -> NDArray[np.intp]:
    """Return where the point spread is highest outside the main lobe, (place, axis); none if too many."""
    highest = found.sidelobes.outside_main_lobe
    at = np.abs(magnitude - highest) < 1e-9
    at[tuple(n // 2 for n in magnitude.shape)] = False
    places = np.argwhere(at)
    return places if highest > 1e-6 and len(places) <= _MARKED else places[:0]


def _cell_edges(found: Judgement, axis: int) -> NDArray[np.float64]:
    n = found.shape[axis]
    return np.array([*found.cells[axis], n]) - n // 2 - 0.5


def _k_label(axis: str) -> str:
    return f"$k_{axis}$ (index from the centre)"


def _decibels(magnitude: Any) -> NDArray[np.float64]:
    return 20 * np.log10(np.maximum(magnitude, 10 ** (_FLOOR_DB / 20)))


def _said(magnitude: float) -> str:
    """Return a magnitude in dB in words; what is 0 but for rounding has none."""
    return f"{20 * log10(magnitude):.1f} dB".replace("-", "−") if magnitude > 1e-6 else "none"
