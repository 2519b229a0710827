"""Time to draw masks, after compilation, and how it grows with the grid.

    python tests/bench/masks.py [--runs 7] [--no-growth] [poisson pivotal best ...]

The reference points: a 320x256 variable Poisson-disc mask at R = 8 in under 0.15 s, a 256x256 pivotal draw in
under 20 ms, 1,000 point-spread-judged draws of 256 lines in under 1 s. The growth is the slope of log(time)
over log(side), fitted over sides from 64 to 1024: 2 is in proportion to the points of a plane, 1 to the lines
of an axis.
"""

from __future__ import annotations

import argparse
import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from rich.console import Console
from rich.table import Table

from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints, pivotal_draw
from skipline.masks.best_of import best_of
from skipline.masks.frames import draw_frames
from skipline.masks.lattice import RegularPoints
from skipline.masks.poisson_disc import PoissonDisc
from skipline.masks.spokes import GoldenSpokes

ACCELERATION = 8
SIDES = 64, 128, 256, 512, 1024


@dataclass
class Case:
    """Something to draw on a grid; `draw` makes ready, and gives what is timed."""

    title: str
    shape: tuple[int, ...]
    draw: Callable[[Grid], Callable[[], object]]
    limit: float | None = None  # seconds


def of_pattern(pattern: PoissonDisc | RegularPoints | GoldenSpokes) -> Callable[[Grid], Callable[[], object]]:
    rng = np.random.default_rng(0)
    return lambda grid: lambda: pattern.draw(grid, ACCELERATION, rng)


def of_pivotal(grid: Grid) -> Callable[[], object]:
    density, rng = VariableDensityPoints().density(grid, ACCELERATION), np.random.default_rng(0)
    return lambda: pivotal_draw(density, rng)


def of_best(grid: Grid) -> Callable[[], object]:
    return lambda: best_of(VariableDensityLines(), grid, ACCELERATION, draws=1000, seed=0, threads=2)


def of_frames(grid: Grid) -> Callable[[], object]:
    rng = np.random.default_rng(0)
    return lambda: draw_frames(VariableDensityPoints(), grid, ACCELERATION, 16, rng)


CASES = {
    "poisson": Case("variable Poisson-disc", (320, 256), of_pattern(PoissonDisc()), 0.15),
    "uniform": Case("uniform Poisson-disc", (320, 256), of_pattern(PoissonDisc(growth=0))),
    "pivotal": Case("pivotal draw", (256, 256), of_pivotal, 0.02),
    "best": Case("best of 1,000 draws of lines", (256,), of_best, 1.0),
    "lattice": Case("regular points", (320, 256), of_pattern(RegularPoints())),
    "spokes": Case("golden spokes", (320, 256), of_pattern(GoldenSpokes())),
    "frames": Case("16 frames of variable density", (256, 256), of_frames),
}


def seconds(run: Callable[[], object], runs: int) -> float:
    """Return the median time, after one run to compile and warm up."""
    run()
    found = []
    for _ in range(runs):
        start = time.perf_counter()
        run()
        found.append(time.perf_counter() - start)
    return statistics.median(found)


def grid_of(shape: tuple[int, ...]) -> Grid:
    """The calibration region grows with the grid."""
    return Grid(shape, max(min(shape) // 16, 1))


def measure(case: Case, runs: int, growth: bool) -> list[str]:
    found = seconds(case.draw(grid_of(case.shape)), runs)
    times, slope = "", ""
    if growth:
        grown = [seconds(case.draw(grid_of((side,) * len(case.shape))), max(runs // 2, 1)) for side in SIDES]
        times = " ".join(f"{1000 * t:.3g}" for t in grown)
        slope = f"{np.polyfit(np.log(SIDES), np.log(grown), 1)[0]:.2f}"
    limit = "" if case.limit is None else f"{1000 * case.limit:g}"
    return [case.title, "x".join(map(str, case.shape)), f"{1000 * found:.3g}", limit, times, slope]


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("cases", nargs="*", default=list(CASES), help=", ".join(CASES))
    parser.add_argument("--runs", type=int, default=7)
    parser.add_argument("--no-growth", action="store_true")
    options = parser.parse_args()
    if unknown := set(options.cases) - set(CASES):
        parser.error(f"no such case: {', '.join(sorted(unknown))}; expected {', '.join(CASES)}")
    table = Table(title=f"Time to draw masks at R = {ACCELERATION}, in ms, after compilation")
    sides = "sides " + " ".join(map(str, SIDES))
    for column in ("draw", "grid", "ms", "limit", sides, "slope"):
        table.add_column(column, justify="left" if column == "draw" else "right")
    for name in options.cases:
        table.add_row(*measure(CASES[name], options.runs, not options.no_growth))
    Console(width=120).print(table)


if __name__ == "__main__":
    main()
