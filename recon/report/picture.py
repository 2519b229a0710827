"""Arrays as PNG images in the page: x to the right, y up, at the array's own resolution."""

from __future__ import annotations

import base64
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from .png import palette_png
from .wording import nice_below, number

GREY = "grey"
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
    shares = (np.asarray(values, float) - low) / (high - low)
    levels = np.clip(np.round(255 * shares), 0, 255).astype(np.uint8)
    # rows of an image go down
    encoded = base64.b64encode(palette_png(levels.T[::-1], _palette(colours))).decode()
    return Picture(f"data:image/png;base64,{encoded}", aspect)


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


@lru_cache
def _palette(name: str) -> np.ndarray:
    from matplotlib import colormaps
    from matplotlib.colors import LinearSegmentedColormap

    colours = colormaps["gray"]
    if name == ERROR:
        # dark at zero, as the surroundings are; blue and orange are told apart by all, and equally light
        stops = ["#d6f1ff", "#5db3ea", "#1c5d92", "#0d0f12", "#8f4a06", "#ee9536", "#ffeacb"]
        colours = LinearSegmentedColormap.from_list(name, stops)
    elif name == SAMPLES:
        colours = LinearSegmentedColormap.from_list(name, ["#14181c", "#f4f1e8"])
    return colours(np.arange(256) / 255, bytes=True)[:, :3]
