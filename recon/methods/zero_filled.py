"""The zero-filled image."""

from __future__ import annotations

from typing import ClassVar

from pydantic import BaseModel, ConfigDict

from ..acquired import Acquired
from ..result import Reconstruction


class ZeroFilled(BaseModel):
    """Inverse Fourier transform with zeros where no sample was taken; coils combined by their maps.

    With several coils the image is ``sum_c conj(S_c) x_c / sum_c |S_c|^2``, zero where no coil sees
    (Roemer et al., Magn. Reson. Med. 16 (1990) 192, for uncorrelated noise).

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.recon.acquired import Acquired
    >>> k = np.zeros((1, 4, 4, 1), np.complex64); k[0, 2, 2] = 4
    >>> ZeroFilled().reconstruct(Acquired(k, np.ones((1, 4, 1), bool))).image.real.min()
    np.float32(1.0)
    """

    model_config = ConfigDict(frozen=True, extra="forbid")
    name: ClassVar[str] = "zero-filled"

    def reconstruct(self, data: Acquired, threads: int = 1) -> Reconstruction:
        """Return the image of the acquired data."""
        from ..sensing import Sensing
        from ..team import Team

        sensing = Sensing(data.mask, data.shape, data.maps, data.dtype, Team(threads))
        return Reconstruction(sensing.zero_filled(sensing.encode(data.kspace)))
