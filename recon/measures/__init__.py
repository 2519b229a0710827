"""Measures: numbers from comparing an image with its fully sampled reference, on arrays alone.

A measure is a `Measure`: a name, which way is better, and ``compute(reference, image, support)``. Those of
other packages join through the entry points of `skipline.recon.plugins`. Nothing is loaded until it is used.

Examples
--------
>>> import numpy as np
>>> from skipline.recon.measures import NRMSE, error_map
>>> reference = np.ones((16, 16, 1))
>>> NRMSE.compute(reference, 1.5 * reference, reference > 0)
0.5
>>> float(error_map(reference, 1.5 * reference).max())
0.5
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .magnitudes import error_map
    from .measure import Measure
    from .nrmse import NRMSE, NRMSE_OVERALL
    from .psnr import PSNR, PSNR_OVERALL
    from .ssim import SSIM, SSIM_OVERALL

_MODULE_OF = {
    "NRMSE": "nrmse",
    "NRMSE_OVERALL": "nrmse",
    "PSNR": "psnr",
    "PSNR_OVERALL": "psnr",
    "SSIM": "ssim",
    "SSIM_OVERALL": "ssim",
    "Measure": "measure",
    "error_map": "magnitudes",
}

__all__ = [
    "NRMSE",
    "NRMSE_OVERALL",
    "PSNR",
    "PSNR_OVERALL",
    "SSIM",
    "SSIM_OVERALL",
    "Measure",
    "error_map",
]


def __getattr__(name: str) -> Any:
    if name not in _MODULE_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_MODULE_OF[name]}", __name__), name)


def __dir__() -> list[str]:
    return __all__
