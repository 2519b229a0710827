"""Sampling patterns: which points of the phase-encode grid a scan takes.

Names are loaded from their modules when they are first used.

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
    from .bounded_gaps import bounded_gap_draw
    from .density import adaptive_law, gaussian_law, inclusion_probabilities, power_law, read_law
    from .fixed_size import fixed_size_draw, grid_probabilities
    from .grid import Grid
    from .lines import RegularLines, VariableDensityLines
    from .local_pivotal import local_pivotal_draw
    from .pattern import Pattern
    from .pivotal import pivotal_draw
    from .points import VariableDensityPoints
    from .pointspread import Sidelobes, point_spread, sidelobes
    from .variable_density import VariableDensity

_MODULE_OF = {
    "Grid": "grid",
    "Pattern": "pattern",
    "RegularLines": "lines",
    "Sidelobes": "pointspread",
    "VariableDensity": "variable_density",
    "VariableDensityLines": "lines",
    "VariableDensityPoints": "points",
    "adaptive_law": "density",
    "bounded_gap_draw": "bounded_gaps",
    "fixed_size_draw": "fixed_size",
    "gaussian_law": "density",
    "grid_probabilities": "fixed_size",
    "inclusion_probabilities": "density",
    "local_pivotal_draw": "local_pivotal",
    "pivotal_draw": "pivotal",
    "point_spread": "pointspread",
    "power_law": "density",
    "read_law": "density",
    "sidelobes": "pointspread",
}

__all__ = [
    "Grid",
    "Pattern",
    "RegularLines",
    "Sidelobes",
    "VariableDensity",
    "VariableDensityLines",
    "VariableDensityPoints",
    "adaptive_law",
    "bounded_gap_draw",
    "fixed_size_draw",
    "gaussian_law",
    "grid_probabilities",
    "inclusion_probabilities",
    "local_pivotal_draw",
    "pivotal_draw",
    "point_spread",
    "power_law",
    "read_law",
    "sidelobes",
]


def __getattr__(name: str) -> Any:
    if name not in _MODULE_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_MODULE_OF[name]}", __name__), name)


def __dir__() -> list[str]:
    return __all__
