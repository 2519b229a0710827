"""Time to a relative objective gap of 1e-4: a plain script against skipline, side by side in one run.

    python tests/bench/solvers.py [--runs 5] [--threads 2] [slice stack coils volume]

The plain script is what one writes in an afternoon: FISTA on `scipy.fft` (all cores) and PyWavelets in
complex64. Both minimise the same objective from the same start on the same data. First each is run once
with a look at its objective after every iteration, to find how many iterations it needs to come within
1e-4 of the minimum (from a long run of skipline); then it is timed for that many. Compilation and the set-up
of the data are outside the clock for both.
"""

from __future__ import annotations

import argparse
import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pywt
import scipy.fft
from rich.console import Console
from rich.table import Table

from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints
from skipline.phantoms import ring_array, shepp_logan_high_contrast_phantom
from skipline.recon.fista import Fista
from skipline.recon.fourier import to_kspace
from skipline.recon.problem import Problem, solve
from skipline.recon.sensing import Sensing
from skipline.recon.team import Team
from skipline.recon.wavelet import WaveletTransform
from skipline.recon.wavelet_l1 import WaveletL1

GAP = 1e-4
WAVELET = "db4"
SNR = 30.0
ACCELERATION = 4.0


@dataclass
class Case:
    """Images ``(batch, x, y[, z])`` of independent problems with the same mask and maps."""

    title: str
    images: np.ndarray
    mask: np.ndarray
    maps: np.ndarray | None
    levels: int
    weight: float
    data: np.ndarray  # (batch, coil, x, y[, z]), centred k-space


def make_case(name: str) -> Case:
    """Invented data: a head, or a stack of heads of different size, in complex noise."""
    rng = np.random.default_rng(0)
    head = shepp_logan_high_contrast_phantom().reference((256, 256))[..., 0]
    lines = VariableDensityLines().draw(Grid((256,), 24), ACCELERATION, rng)[None]
    maps = None
    if name == "slice":
        images, mask, title = head[None], lines, "one 256x256 slice"
    elif name == "stack":
        grown = [np.roll(head, s, axis=1) * (0.5 + s / 64) for s in range(64)]
        images, mask, title = np.stack(grown), lines, "64 slices of 256x256"
    elif name == "coils":
        images, mask, title = head[None], lines, "256x256, eight coils"
        maps = ring_array(8).maps((256, 256, 1))[..., 0]
    else:
        edge = np.linspace(-1, 1, 128)
        outside = edge[:, None, None] ** 2 + (edge[:, None] * 1.2) ** 2 + edge**2
        small = shepp_logan_high_contrast_phantom().reference((128, 128))[..., 0]
        images = (small[:, :, None] * (outside < 0.8) * (1 + 0.3 * np.cos(7 * edge)))[None]
        mask = VariableDensityPoints().draw(Grid((128, 128), (16, 16)), ACCELERATION, rng)[None]
        title = "one 128x128x128 volume"
    images = images.astype(np.complex64)
    sigma = float(np.abs(head[np.abs(head) > 0.1]).mean() / SNR)
    axes = tuple(range(-images.ndim + 1, 0))
    per_coil = images[:, None] if maps is None else images[:, None] * maps
    data: Any = to_kspace(per_coil, axes)
    data = data + sigma * (rng.normal(size=data.shape) + 1j * rng.normal(size=data.shape))
    data = (data * mask).astype(np.complex64)
    return Case(title, images, mask, maps, 3 if name == "volume" else 4, 2 * sigma, data)


# ---- the plain script ------------------------------------------------------------------------------------


def plain_fista(
    case: Case, item: int, threads: int, iterations: int, look: Callable | None = None
) -> np.ndarray:
    """FISTA as one writes it on SciPy and PyWavelets; the transforms uncentred to save the shifts."""
    axes = tuple(range(-case.mask.ndim, 0))
    mask = scipy.fft.ifftshift(case.mask, axes=axes).astype(np.float32)
    y = scipy.fft.ifftshift(case.data[item], axes=axes)
    maps = None if case.maps is None else scipy.fft.ifftshift(case.maps, axes=axes)
    bound = np.float32(1 if maps is None else np.max(np.sum(np.abs(maps) ** 2, axis=0)))

    def forward(x):
        per_coil = x[None] if maps is None else maps * x
        return mask * scipy.fft.fftn(per_coil, axes=axes, norm="ortho", workers=threads)

    def adjoint(k) -> Any:
        per_coil = scipy.fft.ifftn(k * mask, axes=axes, norm="ortho", workers=threads)
        return per_coil[0] if maps is None else np.sum(np.conj(maps) * per_coil, axis=0)

    def shrink(c, t):
        return pywt.threshold(c, t, "soft")

    def prox(x, t):
        # the wavelets see the centred image
        x = scipy.fft.fftshift(x, axes=axes)
        c = pywt.wavedecn(x, WAVELET, "periodization", level=case.levels)
        c = [shrink(c[0], t)] + [{k: shrink(v, t) for k, v in d.items()} for d in c[1:]]
        return scipy.fft.ifftshift(pywt.waverecn(c, WAVELET, "periodization"), axes=axes)

    x: Any = adjoint(y)
    if maps is not None:
        x = x / np.sum(np.abs(maps) ** 2, axis=0)
    z, t = x, 1.0
    for k in range(iterations):
        x_before, x = x, prox(z - adjoint(forward(z) - y) / bound, np.float32(case.weight) / bound)
        t_before, t = t, (1 + np.sqrt(1 + 4 * t * t)) / 2
        z = x + np.float32((t_before - 1) / t) * (x - x_before)
        if look is not None and look(k + 1, scipy.fft.fftshift(x, axes=axes)):
            break
    return x


# ---- skipline --------------------------------------------------------------------------------------------


def make_problem(case: Case, item: int, team: Team) -> Problem:
    """The case's `item` as a skipline problem."""
    if case.mask.ndim == 2:  # a slice: (1, x, y)
        data, mask, axes = case.data[item][:, None], case.mask[None], (1, 2)
        maps = None if case.maps is None else case.maps[:, None]
    else:
        data, mask, axes, maps = case.data[item], case.mask, (0, 1, 2), case.maps
    shape = data.shape[1:]
    sensing = Sensing(mask, shape, maps, team=team)
    penalty = WaveletL1(WaveletTransform(shape, WAVELET, case.levels, axes, team=team), case.weight)
    return Problem(sensing, sensing.encode(data), penalty)


# ---- measuring -------------------------------------------------------------------------------------------


def iterations_to_gap(run: Callable, problem: Problem, target: float) -> int:
    """Run with a look at the objective until it is within the gap."""
    found = []

    def look(k: int, x: np.ndarray) -> bool:
        if problem.objective(np.ascontiguousarray(x.reshape(problem.sensing.shape))) <= target:
            found.append(k)
        return bool(found)

    run(look)
    return found[0]


def median_seconds(run: Callable, runs: int) -> float:
    run()
    seconds = []
    for _ in range(runs):
        start = time.perf_counter()
        run()
        seconds.append(time.perf_counter() - start)
    return statistics.median(seconds)


def measure(name: str, runs: int, threads: int) -> list[str]:
    case = make_case(name)
    count = len(case.images)
    inner = Team(threads if count == 1 else 1)
    across = Team(threads if count > 1 else 1)
    problems = [make_problem(case, item, inner) for item in range(count)]
    plain, ours = [], []
    for item in range(count):
        best = solve(problems[item], Fista(iterations=2000, tolerance=1e-6)).objective
        target = best * (1 + GAP)
        first = problems[item]
        ours.append(
            iterations_to_gap(lambda look, p=first: solve(p, Fista(2000, 0.0), callback=look), first, target)
        )
        plain.append(
            iterations_to_gap(lambda look, i=item: plain_fista(case, i, threads, 2000, look), first, target)
        )

    def run_plain() -> None:
        for item in range(count):
            plain_fista(case, item, threads, plain[item])

    def run_ours() -> None:
        across.each(
            lambda item: Fista(ours[item], 0.0).minimise(problems[item], problems[item].start()), range(count)
        )

    seconds_plain = median_seconds(run_plain, 1 if count > 1 else runs)
    seconds_ours = median_seconds(run_ours, runs)
    return [
        case.title,
        f"{statistics.mean(plain):.0f}",
        f"{seconds_plain:.3f}",
        f"{statistics.mean(ours):.0f}",
        f"{seconds_ours:.3f}",
        f"{seconds_plain / seconds_ours:.1f}x",
    ]


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("cases", nargs="*", default=["slice", "stack", "coils", "volume"])
    parser.add_argument("--runs", type=int, default=5)
    parser.add_argument("--threads", type=int, default=2)
    options = parser.parse_args()
    table = Table(title=f"Time to a relative objective gap of {GAP:g}, {options.threads} threads")
    for column in ("case", "plain: iterations", "seconds", "skipline: iterations", "seconds", "faster by"):
        table.add_column(column, justify="left" if column == "case" else "right")
    for name in options.cases:
        table.add_row(*measure(name, options.runs, options.threads))
    Console(width=110).print(table)


if __name__ == "__main__":
    main()
