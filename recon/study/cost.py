"""What a study will cost: cases, time, memory, disk; from a simple model, before anything is computed.

Time. A case costs a constant for drawing, measuring and writing, and for each iteration a pair of Fourier
transforms for each coil, a pair of wavelet transforms and a few passes over the image::

    seconds = CASE + points * (WRITTEN + iterations * (coils * FOURIER * log2(points) + WAVELET))

A process starts, loads its libraries and takes its compiled code from the cache, or compiles it, once. An
iterative method is taken to need `TYPICAL_ITERATIONS`, or its limit when that is lower; with several coils an
iteration of ADMM, which solves linear equations, counts `COIL_ADMM` fold. The constants were measured on one
core of a small server; expect a factor of two either way, and more where the number of iterations is unusual.

Memory. A process holds its libraries, and of k-space and maps a few copies for each coil.

Disk. A case keeps a complex image, a real error map and a mask; compression saves some of that.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from . import references
from .cases import Case
from .machine import cores
from .plan import Study

START_SECONDS = 4.0
CASE_SECONDS = 0.06
WRITTEN_SECONDS = 1.0e-6
FOURIER_SECONDS = 4.5e-10
WAVELET_SECONDS = 1.2e-8
TYPICAL_ITERATIONS = 200
COIL_ADMM = 5.0

PROCESS_BYTES = 220e6
COPIES_OF_COIL = 5
COPIES_OF_IMAGE = 7

CASE_BYTES = 8e3
POINT_BYTES = 11.0
"""Compressed bytes a point: noise hardly compresses (8 of a complex image, 3 of a real map and a mask)."""


@dataclass(frozen=True)
class Estimate:
    """What a study will cost.

    Attributes
    ----------
    cases : int
        Number of cases, finished ones included.
    workers : int
        Processes that the estimate is for.
    seconds : float
        Time from start to end.
    memory_bytes : float
        Of all processes together.
    disk_bytes : float
        Of the results folder.

    Examples
    --------
    >>> print(Estimate(cases=40, workers=2, seconds=95, memory_bytes=8e8, disk_bytes=3e7))
    40 cases; about 1.6 min with 2 workers, 800 MB of memory, 30 MB on disk
    """

    cases: int
    workers: int
    seconds: float
    memory_bytes: float
    disk_bytes: float

    def __str__(self) -> str:
        cases = "1 case" if self.cases == 1 else f"{self.cases} cases"
        workers = "1 worker" if self.workers == 1 else f"{self.workers} workers"
        memory, disk = _bytes(self.memory_bytes), _bytes(self.disk_bytes)
        return f"{cases}; about {_time(self.seconds)} with {workers}, {memory} of memory, {disk} on disk"


def estimate(study: Study, workers: int | None = None) -> Estimate:
    """Estimate what a study will cost when none of it is done.

    Parameters
    ----------
    study : Study
    workers : int, optional
        Processes; one a core when not given.

    Examples
    --------
    >>> from pathlib import Path
    >>> import skipline
    >>> from skipline.recon.study import load_study
    >>> study = load_study(Path(skipline.__file__).parent / "configs" / "first-study.toml")
    >>> estimate(study).cases == len(study.cases())
    True
    """
    cases = study.cases()
    workers = max(1, min(workers or cores(), len(cases)))
    points = {one: math.prod(references.shape(one)) for one in {case.reference for case in cases}}
    seconds = [_case_seconds(case, points[case.reference]) for case in cases]
    memory = max(map(_process_bytes, cases, (points[case.reference] for case in cases)), default=0.0)
    disk = sum(CASE_BYTES + POINT_BYTES * points[case.reference] for case in cases)
    # the parent process too holds the references while it writes them
    processes = workers + (workers > 1)
    return Estimate(len(cases), workers, _makespan(seconds, workers), processes * memory, disk)


def _case_seconds(case: Case, points: int) -> float:
    coils = case.acquisition.coils or 1
    limit = getattr(case.method, "iterations", 0)
    iterations = min(limit, TYPICAL_ITERATIONS) if isinstance(limit, int) else TYPICAL_ITERATIONS
    if coils > 1 and getattr(case.method, "solver", "") == "admm":
        iterations *= COIL_ADMM
    iteration = coils * FOURIER_SECONDS * math.log2(points) + WAVELET_SECONDS
    return CASE_SECONDS + points * (WRITTEN_SECONDS + iterations * iteration)


def _makespan(seconds: Sequence[float], workers: int) -> float:
    """Time of the last process to end; it is at least that of the longest case."""
    if not seconds:
        return 0.0
    return START_SECONDS + max(sum(seconds) / workers, max(seconds))


def _process_bytes(case: Case, points: int) -> float:
    coils = case.acquisition.coils or 1
    return PROCESS_BYTES + 8.0 * points * (COPIES_OF_COIL * coils + COPIES_OF_IMAGE)


def _time(seconds: float) -> str:
    for size, unit in ((3600.0, "h"), (60.0, "min")):
        if seconds >= 1.5 * size:
            return f"{seconds / size:.1f} {unit}"
    return f"{seconds:.0f} s"


def _bytes(number: float) -> str:
    for size, unit in ((1e9, "GB"), (1e6, "MB")):
        if number >= size:
            return f"{number / size:.3g} {unit}"
    return f"{number / 1e3:.3g} kB"
