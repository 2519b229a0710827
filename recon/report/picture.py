"""Arrays as PNG images in the page: x to the right, y up, at the array's own resolution."""

from __future__ import annotations

import base64
import io
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from .wording import nice_below, number

if TYPE_CHECKING:
    from matplotlib.colors import Colormap

GREY = "gray"
ERROR = "error"
SAMPLES = "samples"


@dataclass(frozen=True)
class Picture:
    """An image of the page.

    Attributes
    ----------
    source : str
        The PNG as a ``data:`` URI.
    aspect : float
        Width over height when drawn to scale.
    """

    source: str
    aspect: float


@dataclass(frozen=True)
class ScaleBar:
    """A length in the image: its name, and its share of the image's width in percent."""

    label: str
    percent: float


def picture(values: np.ndarray, low: float, high: float, colours: str, voxel: tuple[float, float]) -> Picture:
    """Draw an array.

    Parameters
    ----------
    values : array (x, y)
        Real or bool.
    low, high : float
        The window: values outside take the colours of its ends.
    colours : str
        ``GREY``, ``ERROR`` or ``SAMPLES``.
    voxel : tuple of 2 float
        Size of a voxel along x and y, in any one unit.

    Examples
    --------
    >>> drawn = picture(np.eye(4), 0, 1, GREY, (1.0, 2.0))
    >>> drawn.source[:22], drawn.aspect
    ('data:image/png;base64,', 0.5)
    """
    aspect = values.shape[0] * voxel[0] / (values.shape[1] * voxel[1])
    # rows of an image go down
    return Picture(_png(np.asarray(values, float).T[::-1], low, high, _colours(colours)), aspect)


def colour_bar(colours: str) -> Picture:
    """Draw the colours from the low to the high end of a window.

    Examples
    --------
    >>> colour_bar(GREY).aspect
    256.0
    """
    return picture(np.linspace(0, 1, 256)[:, None], 0, 1, colours, (1.0, 1.0))


def scale_bar(width_mm: float) -> ScaleBar:
    """Return a scale bar of about a quarter of the width.

    Examples
    --------
    >>> scale_bar(240.0)
    ScaleBar(label='50 mm', percent=20.83)
    """
    length = nice_below(0.3 * width_mm)
    return ScaleBar(f"{number(length)} mm", round(100 * length / width_mm, 2))


def _png(values: np.ndarray, low: float, high: float, colours: Colormap) -> str:
    from matplotlib.image import imsave

    out = io.BytesIO()
    options = {"metadata": {"Software": None}, "pil_kwargs": {"optimize": True}}
    imsave(out, values, vmin=low, vmax=high, cmap=colours, format="png", **options)
    return "data:image/png;base64," + base64.b64encode(out.getvalue()).decode()


@lru_cache
def _colours(name: str) -> Colormap:
    from matplotlib import colormaps
    from matplotlib.colors import LinearSegmentedColormap

    if name == ERROR:
        # dark at zero, as the surroundings are; blue and orange are told apart by all, and equally light
        stops = ["#d6f1ff", "#5db3ea", "#1c5d92", "#0d0f12", "#8f4a06", "#ee9536", "#ffeacb"]
        return LinearSegmentedColormap.from_list(name, stops)
    if name == SAMPLES:
        return LinearSegmentedColormap.from_list(name, ["#14181c", "#f4f1e8"])
    return colormaps[GREY]
