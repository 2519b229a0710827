"""Numerical phantoms with closed-form k-space, coil arrays, and their acquisition.

Names are loaded from their modules when they are first used.

Examples
--------
>>> from skipline.phantoms import ring_array, shepp_logan_phantom
>>> shepp_logan_phantom().kspace((32, 32), array=ring_array(4)).shape
(4, 32, 32, 1)
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .acquisition import acquire, complex_noise, sigma_for_snr, support
    from .coils import CoilArray, ring_array
    from .line_pair_slab import line_pair_slab_phantom
    from .object import Phantom
    from .shapes import Ellipse, Polygon, Rectangle, Shape
    from .shepp_logan import shepp_logan_high_contrast_phantom, shepp_logan_phantom

_MODULE_OF = {
    "CoilArray": "coils",
    "Ellipse": "shapes",
    "Phantom": "object",
    "Polygon": "shapes",
    "Rectangle": "shapes",
    "Shape": "shapes",
    "acquire": "acquisition",
    "complex_noise": "acquisition",
    "line_pair_slab_phantom": "line_pair_slab",
    "ring_array": "coils",
    "shepp_logan_high_contrast_phantom": "shepp_logan",
    "shepp_logan_phantom": "shepp_logan",
    "sigma_for_snr": "acquisition",
    "support": "acquisition",
}

__all__ = [
    "CoilArray",
    "Ellipse",
    "Phantom",
    "Polygon",
    "Rectangle",
    "Shape",
    "acquire",
    "complex_noise",
    "line_pair_slab_phantom",
    "ring_array",
    "shepp_logan_high_contrast_phantom",
    "shepp_logan_phantom",
    "sigma_for_snr",
    "support",
]


def __getattr__(name: str) -> Any:
    if name not in _MODULE_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_MODULE_OF[name]}", __name__), name)


def __dir__() -> list[str]:
    return __all__
