"""Sampling patterns: density laws, random draws, and how a mask is judged before any scan.

Examples
--------
>>> import numpy as np
>>> from skipline.masks import Grid, VariableDensityLines
>>> int(VariableDensityLines().draw(Grid((128,), 16), 4, np.random.default_rng(0)).sum())
32
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .density import inclusion_probabilities as inclusion_probabilities
    from .density import power_law as power_law
    from .grid import Grid as Grid
    from .lines import RegularLines as RegularLines
    from .lines import VariableDensityLines as VariableDensityLines
    from .pivotal import pivotal_draw as pivotal_draw
    from .points import VariableDensityPoints as VariableDensityPoints
    from .pointspread import Sidelobes as Sidelobes
    from .pointspread import point_spread as point_spread
    from .pointspread import sidelobes as sidelobes

_HOME = {
    "Grid": "grid",
    "RegularLines": "lines",
    "Sidelobes": "pointspread",
    "VariableDensityLines": "lines",
    "VariableDensityPoints": "points",
    "inclusion_probabilities": "density",
    "pivotal_draw": "pivotal",
    "point_spread": "pointspread",
    "power_law": "density",
    "sidelobes": "pointspread",
}


def __getattr__(name: str) -> Any:
    """Load a public name when it is first used."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_HOME[name]}", __name__), name)


def __dir__() -> list[str]:
    return sorted(_HOME)


__all__ = [
    "Grid", "RegularLines", "Sidelobes", "VariableDensityLines", "VariableDensityPoints",
    "inclusion_probabilities", "pivotal_draw", "point_spread", "power_law", "sidelobes",
]  # fmt: skip
