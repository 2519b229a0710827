"""Sampling patterns: which points of the phase-encode grid a scan takes.

Names are loaded from their modules when they are first used. `judge.judge`, `best_of.best_of` and
`leakage.leakage` have the names of their modules and are imported from there.

Examples
--------
>>> import numpy as np
>>> from skipline.masks import Grid, VariableDensityLines
>>> mask = VariableDensityLines().draw(Grid((256,), calibration=24), 4, np.random.default_rng(1))
>>> int(mask.sum())
64
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .best_of import Best, nth_generator
    from .bounded_gaps import bounded_gap_draw
    from .density import adaptive_law, gaussian_law, inclusion_probabilities, power_law, read_law
    from .fixed_size import fixed_size_draw, grid_probabilities
    from .frames import draw_frames
    from .grid import Grid
    from .judge import Judgement
    from .lattice import RegularPoints
    from .leakage import Leakage
    from .lines import RegularLines, VariableDensityLines
    from .local_pivotal import local_pivotal_draw
    from .order import EchoTrains, echo_trains
    from .pattern import Pattern
    from .pivotal import pivotal_draw
    from .points import VariableDensityPoints
    from .pointspread import Sidelobes, point_spread, sidelobes
    from .poisson_disc import PoissonDisc
    from .spokes import GoldenSpokes
    from .table import read_mask, read_table, write_table
    from .variable_density import VariableDensity

_MODULE_OF = {
    "Best": "best_of",
    "EchoTrains": "order",
    "GoldenSpokes": "spokes",
    "Grid": "grid",
    "Judgement": "judge",
    "Leakage": "leakage",
    "Pattern": "pattern",
    "PoissonDisc": "poisson_disc",
    "RegularLines": "lines",
    "RegularPoints": "lattice",
    "Sidelobes": "pointspread",
    "VariableDensity": "variable_density",
    "VariableDensityLines": "lines",
    "VariableDensityPoints": "points",
    "adaptive_law": "density",
    "bounded_gap_draw": "bounded_gaps",
    "draw_frames": "frames",
    "echo_trains": "order",
    "fixed_size_draw": "fixed_size",
    "gaussian_law": "density",
    "grid_probabilities": "fixed_size",
    "inclusion_probabilities": "density",
    "local_pivotal_draw": "local_pivotal",
    "nth_generator": "best_of",
    "pivotal_draw": "pivotal",
    "point_spread": "pointspread",
    "power_law": "density",
    "read_law": "density",
    "read_mask": "table",
    "read_table": "table",
    "sidelobes": "pointspread",
    "write_table": "table",
}

__all__ = [
    "Best",
    "EchoTrains",
    "GoldenSpokes",
    "Grid",
    "Judgement",
    "Leakage",
    "Pattern",
    "PoissonDisc",
    "RegularLines",
    "RegularPoints",
    "Sidelobes",
    "VariableDensity",
    "VariableDensityLines",
    "VariableDensityPoints",
    "adaptive_law",
    "bounded_gap_draw",
    "draw_frames",
    "echo_trains",
    "fixed_size_draw",
    "gaussian_law",
    "grid_probabilities",
    "inclusion_probabilities",
    "local_pivotal_draw",
    "nth_generator",
    "pivotal_draw",
    "point_spread",
    "power_law",
    "read_law",
    "read_mask",
    "read_table",
    "sidelobes",
    "write_table",
]


def __getattr__(name: str) -> Any:
    if name not in _MODULE_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_MODULE_OF[name]}", __name__), name)


def __dir__() -> list[str]:
    return __all__
