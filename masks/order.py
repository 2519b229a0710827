"""Order of the samples: which echo of which train acquires each of them.

Two steps. The order says which echo acquires a sample, and with it how the decay along the train weights
k-space and which contrast the image has. Then the samples of successive echoes are joined to trains so that
the largest jump in k-space is the least possible: smaller gradient steps make smaller eddy currents.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray

from .. import InputError
from .grid import Grid

OrderName = Literal["linear", "centre-out", "interleaved"]
"""How the echoes are distributed over k-space.

- ``linear``: the echoes are bands along one axis, and pass k-space from one side to the other. With another
  effective echo than the natural one they wrap round at the end of k-space. Called linear modulation for
  3-D fast spin echo (Busse 2008).
- ``centre-out``: the echoes are rings around the centre. The effective echo has the innermost; the farther
  an echo is from it in time, before or after, the farther out is its ring. Radial modulation (Busse 2008).
- ``interleaved``: neighbouring samples are taken by successive echoes, so that a train is a run of
  neighbours. The smallest jumps, for trains of equal echoes such as a steady state; a decay would weight
  k-space with the period of a train and make ghosts.
"""

_GROUP = 256  # trains among which the pairs are the best possible: the search grows fast with their number


@dataclass(frozen=True, eq=False)
class EchoTrains:
    """Samples in the order of their acquisition.

    Attributes
    ----------
    shape : tuple of int
        Points of the phase-encode grid along each axis.
    index : ndarray of int64
        (sample, axis): where on the grid the sample is; the centre of k-space has index N // 2.
    train : ndarray of int64
        Number of the train, from 0.
    echo : ndarray of int64
        Number of the echo in its train, from 1.
    echo_time_ms : ndarray of float64
        Time from the excitation to the echo: echo * echo spacing.
    time_ms : ndarray of float64
        Time from the first excitation to the sample: train * TR + echo * echo spacing.

    Examples
    --------
    >>> trains = echo_trains(np.ones(8, bool), 4, effective_echo=2, repetition_time_ms=500.0)
    >>> trains.index[:4, 0], trains.effective_echo, trains.largest_jump
    (array([2, 4, 6, 0]), 2, 6.0)
    """

    shape: tuple[int, ...]
    index: NDArray[np.int64]
    train: NDArray[np.int64]
    echo: NDArray[np.int64]
    echo_time_ms: NDArray[np.float64]
    time_ms: NDArray[np.float64]

    @property
    def mask(self) -> NDArray[np.bool_]:
        """The mask, true where a sample is taken."""
        mask = np.zeros(self.shape, dtype=bool)
        mask[tuple(self.index.T)] = True
        return mask

    @property
    def train_length(self) -> int:
        """Echoes of a train."""
        return int(self.echo.max())

    @property
    def effective_echo(self) -> int:
        """The echo that acquires the centre of k-space, or the sample that is nearest to it."""
        return int(self.echo[_nearest_to_centre(self.index, self.shape)])

    @property
    def largest_jump(self) -> float:
        """Largest distance between consecutive samples of a train, in grid steps; 0 if it has one echo."""
        steps = np.diff(self.index, axis=0)[np.diff(self.train) == 0]
        return float(np.sqrt((steps**2).sum(axis=1).max(initial=0)))


def echo_trains(
    mask: NDArray[np.bool_],
    train_length: int,
    *,
    order: OrderName = "linear",
    effective_echo: int | None = None,
    axis: int = 0,
    echo_spacing_ms: float = 5.0,
    repetition_time_ms: float = 1000.0,
) -> EchoTrains:
    """Distribute the samples of a mask over echo trains of equal length.

    Among all ways to join the samples of the echoes to trains, the largest jump is the least possible with up
    to 256 trains. More are divided into groups of neighbours, and each group is joined in the best way. The
    largest jump is never above that of trains to which the samples of each echo are dealt out row by row.

    Parameters
    ----------
    mask : ndarray of bool
        True where a sample is taken; one or two axes.
    train_length : int
        Echoes of a train, L; it divides the number of samples.
    order : {"linear", "centre-out", "interleaved"}
        See `OrderName`.
    effective_echo : int, optional
        Number, from 1, of the echo that acquires the centre of k-space, or the sample nearest to it when the
        mask leaves the centre out (by `Grid.radius`). When not given: the echo for which nothing wraps round
        at the end of k-space; with ``centre-out`` the first.
    axis : int
        The axis along which the bands of ``linear`` follow each other.
    echo_spacing_ms : float
        Time between echoes, and from the excitation to the first echo.
    repetition_time_ms : float
        Time between trains.

    Returns
    -------
    EchoTrains
        By train, then by echo. The trains follow each other as their samples at the effective echo do.

    Raises
    ------
    InputError
        When the samples do not fill the trains, the effective echo is not in them, or a train lasts longer
        than the repetition time.

    References
    ----------
    Busse et al., Magn. Reson. Med. 60 (2008) 640. Bieri, Markl & Scheffler, Magn. Reson. Med. 54 (2005) 129,
    for the artefacts of large jumps in steady-state imaging.

    Examples
    --------
    >>> from skipline.masks import Grid, VariableDensityLines
    >>> mask = VariableDensityLines().draw(Grid((256,), 24), 4, np.random.default_rng(1))
    >>> trains = echo_trains(mask, 8, order="centre-out", effective_echo=3)
    >>> int(trains.train.max()) + 1, trains.effective_echo, bool((trains.mask == mask).all())
    (8, 3, True)
    >>> echo_trains(mask, 10)
    Traceback (most recent call last):
        ...
    skipline.InputError: 64 samples do not fill trains of 10 echoes: 60 or 70 samples do, or trains of 8
    """
    mask = np.asarray(mask)
    if mask.dtype != bool or mask.ndim not in (1, 2) or not mask.any():
        raise InputError("mask: expected true and false on one or two axes, with a sample at least")
    index = np.argwhere(mask).astype(np.int64)  # row by row
    _check(len(index), train_length, effective_echo, order)
    if not 0 <= axis < mask.ndim:
        raise InputError(f"axis {axis}: expected 0{' or 1' if mask.ndim == 2 else ''}")
    if not (np.isfinite([echo_spacing_ms, repetition_time_ms]).all() and echo_spacing_ms > 0):
        raise InputError("echo spacing and repetition time: expected finite times in ms, above 0")
    if repetition_time_ms < train_length * echo_spacing_ms:
        raise InputError(
            f"repetition time {repetition_time_ms:g} ms: a train of {train_length} echoes every "
            f"{echo_spacing_ms:g} ms lasts {train_length * echo_spacing_ms:g} ms; expected that at least"
        )

    centre = _nearest_to_centre(index, mask.shape)
    ways = []
    for path in _paths(order, index, mask.shape, axis):
        rank = np.argsort(path)  # of each sample along the path
        echo = _echoes(order, rank, int(rank[centre]), train_length, effective_echo)
        ways.append(_joined(index, echo, rank, int(echo[centre])))
    trains = min(ways, key=lambda way: _largest_squared_jump(index[way]))  # (train, echo) -> sample

    # a thousandth of a nanosecond, so that decimal numbers stay short
    count = len(trains)
    train, echo = (a.ravel() for a in np.mgrid[:count, 1 : train_length + 1])
    echo_time = np.round(echo * echo_spacing_ms, 9)
    return EchoTrains(
        shape=mask.shape,
        index=index[trains.ravel()],
        train=train,
        echo=echo,
        echo_time_ms=echo_time,
        time_ms=np.round(train * repetition_time_ms + echo_time, 9),
    )


def _check(samples: int, length: int, effective_echo: int | None, order: str) -> None:
    if order not in get_args(OrderName):
        raise InputError(f'there is no order "{order}"; expected one of: {", ".join(get_args(OrderName))}')
    if length < 1:
        raise InputError(f"train length {length}: expected at least 1 echo")
    if samples % length:
        fewer, more = samples // length * length, -(-samples // length) * length
        divisors = [n for n in range(1, samples + 1) if samples % n == 0]
        nearest = min(divisors, key=lambda n: (abs(n - length), n))
        counts = f"{fewer} or {more}" if fewer else f"{more}"
        raise InputError(
            f"{samples} samples do not fill trains of {length} echoes: {counts} samples do, "
            f"or trains of {nearest}"
        )
    if effective_echo is not None and not 1 <= effective_echo <= length:
        raise InputError(f"effective echo {effective_echo}: expected 1 to {length}, the length of the train")


def _nearest_to_centre(index: NDArray[np.int64], shape: tuple[int, ...]) -> int:
    """Return the sample that is nearest to the centre of k-space; of equals the first, row by row."""
    radius = Grid(shape).radius()[tuple(index.T)]
    return int(np.lexsort((*index.T[::-1], radius))[0])


def _paths(
    order: OrderName, index: NDArray[np.int64], shape: tuple[int, ...], axis: int
) -> list[NDArray[np.intp]]:
    """Return the paths through the samples, along which the echoes are given out; the best will be taken."""
    if order == "centre-out":
        return [np.argsort(Grid(shape).radius()[tuple(index.T)], kind="stable")]
    if order == "linear" or len(shape) == 1:
        return [np.argsort(index[:, axis], kind="stable")]
    # There and back: along one row, back along the next. Not always better than row by row.
    row = np.unique(index[:, 0], return_inverse=True)[1].ravel()
    there_and_back = np.lexsort((np.where(row % 2 == 0, index[:, 1], -index[:, 1]), row))
    return [there_and_back, np.arange(len(index))]


def _echoes(
    order: OrderName, rank: NDArray[np.intp], centre: int, length: int, effective_echo: int | None
) -> NDArray[np.intp]:
    """Return the echo, from 0, of each sample from its rank along the path and that of the centre."""
    trains = len(rank) // length
    if order == "centre-out":
        effective = 0 if effective_echo is None else effective_echo - 1
        inside_out = sorted(range(length), key=lambda echo: (abs(echo - effective), -echo))
        return np.array(inside_out)[rank // trains]
    step = rank // trains if order == "linear" else rank
    natural = step[rank == centre][0] % length
    effective = natural if effective_echo is None else effective_echo - 1
    return (step - natural + effective) % length


def _joined(
    index: NDArray[np.int64], echo: NDArray[np.intp], rank: NDArray[np.intp], effective: int
) -> NDArray[np.intp]:
    """Return the samples of the trains, (train, echo), joined with the least largest jump.

    A train is a chain of pairs, one for each step from an echo to the next, and the pairs of a step can be
    chosen whatever those of the others are: the least largest jump of all is that of each step alone.
    """
    echoes = np.stack([np.flatnonzero(echo == e) for e in range(echo.max() + 1)])  # rows in row-by-row order
    trains = [echoes[0]]
    for following in echoes[1:]:
        partner = _closest_pairs(index[trains[-1]], index[following])
        trains.append(following[partner])
    joined = np.stack(trains, axis=1)
    return joined[np.argsort(rank[joined[:, effective]])]


def _largest_squared_jump(trains: NDArray[np.int64]) -> int:
    return int((np.diff(trains, axis=1) ** 2).sum(axis=-1).max(initial=0))


def _closest_pairs(a: NDArray[np.int64], b: NDArray[np.int64]) -> NDArray[np.intp]:
    """Return for each of `a` its own partner in `b`, such that the largest distance is the least possible.

    This is the bottleneck assignment problem; on a line, pairing in the order of the line solves it. Of the
    solutions, the one with the least sum of squared distances is taken.
    """
    count, axes = a.shape
    if axes == 1:
        return _paired(a[:, 0], b[:, 0])
    # Plain ways to pair: in the order of the rows, of the columns, of the angle around the centre.
    ways = []
    for first, second in ((0, 1), (1, 0)):
        ways.append([np.lexsort((points[:, second], points[:, first])) for points in (a, b)])
    middle = np.concatenate([a, b]).mean(axis=0)
    ways.append([np.argsort(np.arctan2(*(points - middle).T), kind="stable") for points in (a, b)])
    p, q = min(ways, key=lambda way: ((a[way[0]] - b[way[1]]) ** 2).sum(axis=1).max())
    partner = np.empty(count, dtype=np.intp)
    groups = -(-count // _GROUP)
    for i, j in zip(np.array_split(p, groups), np.array_split(q, groups), strict=True):
        partner[i] = j[_bottleneck(((a[i][:, None] - b[j]) ** 2).sum(axis=-1))]
    return partner


def _bottleneck(cost: NDArray[np.int64]) -> NDArray[np.intp]:
    """Return a column for each row, all different, so that the highest cost is least; all are above 0."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import maximum_bipartite_matching, min_weight_full_bipartite_matching

    def edges(limit: int) -> csr_array:
        return csr_array(np.where(cost <= limit, cost, 0))

    # No less than the highest cost of the cheapest partner will do, and no more than that of the diagonal.
    least = max(cost.min(axis=1).max(), cost.min(axis=0).max())
    limits = np.unique(cost[(cost >= least) & (cost <= np.diagonal(cost).max())])
    low, high = 0, len(limits) - 1
    while low < high:
        middle = (low + high) // 2
        if (maximum_bipartite_matching(edges(limits[middle])) >= 0).all():
            high = middle
        else:
            low = middle + 1
    return min_weight_full_bipartite_matching(edges(limits[high]))[1]


def _paired(a: NDArray[np.int64], b: NDArray[np.int64]) -> NDArray[np.intp]:
    """Return for each of `a` its partner in `b`: the lowest with the lowest, and so on."""
    partner = np.empty(len(a), dtype=np.intp)
    partner[np.argsort(a, kind="stable")] = np.argsort(b, kind="stable")
    return partner
