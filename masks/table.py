"""The sampling table: what a sequence plays, a row a sample, as tab-separated text with a JSON sidecar."""

from __future__ import annotations

import contextlib
import json
import os
import secrets
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from .. import CAUTION, InputError, __version__
from .order import EchoTrains

_COLUMNS: dict[str, dict[str, str]] = {
    "train": {"Description": "number of the echo train, from 0 in the order of time"},
    "echo": {"Description": "number of the echo in its train, from 1"},
    "ky": {"Description": "first phase-encode axis: grid index - N // 2", "Units": "1 / field of view"},
    "kz": {
        "Description": "second phase-encode axis: grid index - N // 2; 0 in a scan of lines",
        "Units": "1 / field of view",
    },
    "echo_time_ms": {"Description": "time from the excitation of the train to the echo", "Units": "ms"},
    "time_ms": {"Description": "time from the first excitation to the sample", "Units": "ms"},
}
_CONVENTION = (
    "Index i of an axis of N points is the spatial frequency (i - N // 2) / field of view. ky and kz are "
    "i - N // 2: 0 is the centre of k-space, and the lowest is -(N // 2). time_ms = train * repetition time "
    "+ echo * echo spacing, and echo_time_ms = echo * echo spacing."
)
_WHOLE = ("train", "echo", "ky", "kz")
_LARGEST = 2**53  # of the whole numbers that every program reads exactly


def write_table(
    path: str | os.PathLike[str], trains: EchoTrains, more: Mapping[str, Any] | None = None
) -> None:
    r"""Write a sampling table, and beside it the JSON sidecar that describes its columns.

    Both are written under another name and renamed, so a file that exists is complete.

    Parameters
    ----------
    path : path
        Ends with ``.tsv``; the sidecar has the same name with ``.json``.
    trains : EchoTrains
    more : mapping, optional
        Further entries of the sidecar, such as the pattern and its seed.

    Raises
    ------
    InputError
        When the name does not end with ``.tsv``, or a file cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> from skipline.masks.order import echo_trains
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_table(Path(folder) / "scan.tsv", echo_trains(np.arange(8) % 2 == 0, 2))
    ...     print((Path(folder) / "scan.tsv").read_text().expandtabs(13).replace(" \n", "\n"))
    train        echo         ky           kz           echo_time_ms time_ms
    0            1            -4           0            5.0          5.0
    0            2            0            0            10.0         10.0
    1            1            -2           0            5.0          1005.0
    1            2            2            0            10.0         1010.0
    <BLANKLINE>
    """
    path = _named(path)
    k = trains.index - np.array(trains.shape) // 2
    columns = {
        "train": trains.train,
        "echo": trains.echo,
        "ky": k[:, 0],
        "kz": k[:, 1] if k.shape[1] == 2 else np.zeros(len(k), int),
        "echo_time_ms": trains.echo_time_ms,
        "time_ms": trains.time_ms,
    }
    rows = zip(*(column.tolist() for column in columns.values()), strict=True)
    lines = ["\t".join(columns), *("\t".join(map(repr, row)) for row in rows)]
    ours = {
        "Description": "sampling table: a row a sample, in the order of acquisition",
        "Convention": _CONVENTION,
        "GridShape": list(trains.shape),
        "TrainLength": trains.train_length,
        "EffectiveEcho": trains.effective_echo,
        **_COLUMNS,
    }
    signed = {"GeneratedBy": [{"Name": "skipline", "Version": __version__}], "Caution": CAUTION}
    sidecar = ours | dict(more or {}) | ours | signed  # nothing further takes the place of ours
    try:
        described = json.dumps(sidecar, allow_nan=False, ensure_ascii=False, indent=2) + "\n"
    except (TypeError, ValueError) as error:
        raise InputError(f"{path}: its sidecar cannot hold what it was given ({error})") from None
    _write(path.with_suffix(".json"), described)  # first, so that no table lies without its description
    _write(path, "\n".join(lines) + "\n")


def read_table(path: str | os.PathLike[str], shape: tuple[int, ...] | None = None) -> EchoTrains:
    """Read a sampling table with its order.

    Parameters
    ----------
    path : path
        Tab-separated text with a line of column names: train, echo, ky, kz, echo_time_ms, time_ms in any
        order; others are passed over. kz may be missing when the grid has one axis.
    shape : tuple of int, optional
        Points of the grid along each axis. Needed when no sidecar says it.

    Returns
    -------
    EchoTrains
        In the order of train and echo.

    Raises
    ------
    InputError
        When the file is missing or no table, a column is missing, a value is no number or outside the grid,
        a sample or an echo is there twice, or the shape is not known. It says which line.

    Examples
    --------
    >>> import tempfile
    >>> from skipline.masks.order import echo_trains
    >>> trains = echo_trains(np.ones((4, 4), bool), 4)
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_table(Path(folder) / "scan.tsv", trains)
    ...     again = read_table(Path(folder) / "scan.tsv")
    >>> bool((again.index == trains.index).all()), again.effective_echo
    (True, 3)
    """
    path = Path(path)
    shape = _shape(path, shape)
    columns = _columns(path, [*_needed(shape), "train", "echo", "echo_time_ms", "time_ms"])
    index = _index(path, columns, shape)
    train, echo = np.array(columns["train"], np.int64), np.array(columns["echo"], np.int64)
    for row, (t, e) in enumerate(zip(train, echo, strict=True)):
        if t < 0 or e < 1:
            raise InputError(
                f"{path}, line {row + 2}: train {t}, echo {e}: expected trains from 0, echoes from 1"
            )
    _refuse_twice(path, list(zip(train.tolist(), echo.tolist(), strict=True)), ("train", "echo"))
    order = np.lexsort((echo, train))
    return EchoTrains(
        shape=shape,
        index=index[order],
        train=train[order],
        echo=echo[order],
        echo_time_ms=np.array(columns["echo_time_ms"], np.float64)[order],
        time_ms=np.array(columns["time_ms"], np.float64)[order],
    )


def read_mask(path: str | os.PathLike[str], shape: tuple[int, ...] | None = None) -> NDArray[np.bool_]:
    r"""Read the mask of a sampling table; only the columns ky and kz are needed (kz not on one axis).

    Parameters
    ----------
    path : path
    shape : tuple of int, optional
        Points of the grid along each axis. Needed when no sidecar says it.

    Returns
    -------
    ndarray of bool
        Of this shape, true where a sample is taken.

    Raises
    ------
    InputError
        As `read_table` does.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = (Path(folder) / "theirs.tsv").write_text("ky\n-2\n0\n1\n")
    ...     read_mask(Path(folder) / "theirs.tsv", shape=(4,))
    array([ True, False,  True,  True])
    """
    path = Path(path)
    shape = _shape(path, shape)
    mask = np.zeros(shape, dtype=bool)
    mask[tuple(_index(path, _columns(path, _needed(shape)), shape).T)] = True
    return mask


def _needed(shape: tuple[int, ...]) -> list[str]:
    return ["ky", "kz"] if len(shape) == 2 else ["ky"]


def _named(path: str | os.PathLike[str]) -> Path:
    path = Path(path)
    if path.suffix != ".tsv":
        raise InputError(f"{path}: expected a name that ends with .tsv for a sampling table")
    return path


def _shape(path: Path, shape: tuple[int, ...] | None) -> tuple[int, ...]:
    """Return the shape of the grid, by the sidecar or by the caller."""
    beside = path.with_suffix(".json")
    said: Any = None
    if beside != path and beside.exists():
        try:
            content = json.loads(beside.read_text("utf-8"))
        except (OSError, ValueError):
            raise InputError(
                f"{beside} cannot be read as JSON; expected the sidecar of {path.name}"
            ) from None
        said = content.get("GridShape") if isinstance(content, dict) else None
    if said is not None:
        whole = isinstance(said, list) and all(type(n) is int and n >= 1 for n in said)
        if not whole or len(said) not in (1, 2):
            raise InputError(
                f"{beside}: GridShape {said}: expected the numbers of points along one or two axes"
            )
        if shape is not None and tuple(shape) != tuple(said):
            raise InputError(
                f"{path} is for a grid of {_by(said)} points by its sidecar; expected {_by(shape)}"
            )
        return tuple(said)
    if shape is None:
        raise InputError(f"{path} has no sidecar with GridShape; expected one, or the shape of the grid")
    if len(shape) not in (1, 2) or min(shape) < 1:
        raise InputError(f"shape {shape}: expected the numbers of points along one or two axes")
    return tuple(shape)


def _columns(path: Path, needed: list[str]) -> dict[str, list[Any]]:
    """Return the needed columns, and kz where it is there, as numbers."""
    lines = [line.removesuffix("\r") for line in _text(path).split("\n")]
    while lines and not lines[-1].strip():
        lines.pop()
    names = [name.strip() for name in lines[0].split("\t")] if lines else []
    if not set(names) & set(_COLUMNS):
        raise InputError(f"{path}, line 1: not a sampling table; expected the columns {', '.join(needed)}")
    if len(set(names)) < len(names):
        twice = next(name for name in names if names.count(name) > 1)
        raise InputError(f'{path}, line 1: the column "{twice}" is there twice')
    missing = [name for name in needed if name not in names]
    if missing:
        raise InputError(
            f"{path}, line 1: the column {' and '.join(missing)} is missing; expected {', '.join(needed)}"
        )
    if len(lines) == 1:
        raise InputError(f"{path}, line 2: the table ends before its first row; expected a sample at least")
    wanted = [name for name in names if name in needed or name == "kz"]
    columns: dict[str, list[Any]] = {name: [] for name in wanted}
    for number, line in enumerate(lines[1:], start=2):
        fields = line.split("\t")
        if len(fields) != len(names):
            raise InputError(
                f"{path}, line {number}: {len(fields)} fields; expected {len(names)}, as many as columns"
            )
        for name, field in zip(names, fields, strict=True):
            if name in columns:
                columns[name].append(_number(path, number, name, field))
    return columns


def _number(path: Path, line: int, name: str, field: str) -> int | float:
    try:
        value = float(field)
        if not np.isfinite(value):
            raise ValueError
    except ValueError:
        value = None
    if value is None or (name in _WHOLE and not (value.is_integer() and abs(value) < _LARGEST)):
        kind = "whole number" if name in _WHOLE else "finite number"
        raise InputError(f"{path}, line {line}: {name} is {field.strip()[:40]!r}; expected a {kind}")
    return int(value) if name in _WHOLE else value


def _index(path: Path, columns: dict[str, list[Any]], shape: tuple[int, ...]) -> NDArray[np.int64]:
    """Return (sample, axis) indices of the grid, once all are on it and none is there twice."""
    axes = (*shape, 1)[:2]  # kz of lines, where it is there, is that of a grid of one point
    for name, n in zip(("ky", "kz"), axes, strict=True):
        for row, k in enumerate(columns.get(name, [])):
            if not 0 <= k + n // 2 < n:
                lowest, highest = -(n // 2), n - 1 - n // 2
                raise InputError(
                    f"{path}, line {row + 2}: {name} {k} is outside the grid of {_by(shape)} points; "
                    f"expected {lowest} to {highest}"
                )
    names = _needed(shape)
    k = list(zip(*(columns[name] for name in names), strict=True))
    _refuse_twice(path, k, tuple(names))
    return np.array(k, np.int64) + np.array(shape) // 2


def _refuse_twice(path: Path, keys: list[tuple[int, ...]], names: tuple[str, ...]) -> None:
    first: dict[tuple[int, ...], int] = {}
    for row, key in enumerate(keys):
        if key in first:
            what = ", ".join(f"{name} {value}" for name, value in zip(names, key, strict=True))
            raise InputError(
                f"{path}, line {row + 2}: {what} is there already, in line {first[key] + 2}; expected it once"
            )
        first[key] = row


def _text(path: Path) -> str:
    try:
        return path.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError:
        raise InputError(f"{path}, line 1: not a sampling table; expected tab-separated text") from None
    except OSError as error:
        raise InputError(f"{path} cannot be read ({error.strerror})") from None


def _write(path: Path, text: str) -> None:
    """Write a text atomically."""
    temporary = path.with_name(f".skipline-{secrets.token_hex(8)}.part")
    try:
        try:
            with temporary.open("xb") as file:
                file.write(text.encode())
                file.flush()
                os.fsync(file.fileno())
            temporary.replace(path)
        finally:
            with contextlib.suppress(OSError):
                temporary.unlink()
    except OSError as error:
        raise InputError(f"{path} cannot be written ({error.strerror})") from None


def _by(shape: Any) -> str:
    return " x ".join(map(str, shape))
