"""Patterns of points of a phase-encode plane, for 3-D scans."""

from __future__ import annotations

from typing import ClassVar

from .variable_density import VariableDensity


class VariableDensityPoints(VariableDensity):
    """Random points, denser towards the centre: with the probabilities of a density law.

    By default the law is (1 - r)^2. Source: Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.masks import Grid
    >>> mask = VariableDensityPoints(power=3).draw(Grid((96, 64), 16), 6, np.random.default_rng(1))
    >>> mask.shape, int(mask.sum()), bool(mask[40:56, 24:40].all())
    ((96, 64), 1024, True)
    """

    name: ClassVar[str] = "variable-density-points"
    axes: ClassVar[int] = 2
