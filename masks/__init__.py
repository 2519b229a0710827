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
    from .density import inclusion_probabilities, power_law
    from .grid import Grid
    from .lines import RegularLines, VariableDensityLines
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
    "inclusion_probabilities": "density",
    "pivotal_draw": "pivotal",
    "point_spread": "pointspread",
    "power_law": "density",
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
    "inclusion_probabilities",
    "pivotal_draw",
    "point_spread",
    "power_law",
    "sidelobes",
]


def __getattr__(name: str) -> Any:
    if name not in _MODULE_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_MODULE_OF[name]}", __name__), name)


def __dir__() -> list[str]:
    return __all__
