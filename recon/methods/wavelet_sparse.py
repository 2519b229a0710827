"""The image with the sparsest wavelet transform that agrees with the data."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, ClassVar, Literal

from pydantic import BaseModel, ConfigDict, Field, field_validator

from ..acquired import Acquired
from ..result import Reconstruction

if TYPE_CHECKING:
    import numpy as np

    from ..problem import Solution
    from ..team import Team


class WaveletSparse(BaseModel):
    """Sparse wavelet coefficients that agree with the data: min ||A x - y||^2 / 2 + weight sigma ||W x||_1.

    ``A`` is the Fourier sensing operator with the coil maps, ``W`` an orthonormal periodised wavelet
    transform, in each slice or in the volume. Sigma is the noise's standard deviation: the one given with
    the data, otherwise estimated from the k-space border. With several coils the image is penalised as they
    see it, on the scale on which the mean of ``sum_c |S_c|^2`` is 1. A stack whose slices are not coupled by
    the sampling is solved slice by slice, each to its own convergence.

    Source: Lustig, Donoho & Pauly, Magn. Reson. Med. 58 (2007) 1182.

    Examples
    --------
    >>> import numpy as np
    >>> from skipline.recon.acquired import Acquired
    >>> from skipline.recon.fourier import to_kspace
    >>> x = np.zeros((1, 32, 32, 1), np.complex64); x[:, 8:24, 8:24] = 1
    >>> mask = np.random.default_rng(1).random((32, 32, 1)) < 0.6
    >>> data = Acquired(to_kspace(x) * mask, mask, sigma=0.001)
    >>> result = WaveletSparse(wavelet="haar").reconstruct(data)
    >>> result.converged, bool(np.linalg.norm(result.image - x[0]) < 0.02 * np.linalg.norm(x))
    (True, True)
    """

    model_config = ConfigDict(frozen=True, extra="forbid")
    name: ClassVar[str] = "wavelet-sparse"

    solver: Literal["fista", "admm"] = Field(
        default="fista", description="algorithm; both reach the same minimum"
    )
    wavelet: str = Field(
        default="db4", description="any orthogonal wavelet of PyWavelets, such as haar, db4, sym8, coif3"
    )
    levels: int | None = Field(
        default=None,
        ge=0,
        description="wavelet levels; by default each axis is halved down to 8 to 15 samples",
    )
    weight: float = Field(
        default=1.0,
        ge=0,
        allow_inf_nan=False,
        description="regularisation weight in units of the noise's standard deviation",
    )
    wavelet_axes: Literal["auto", "xy", "xyz"] = Field(
        default="auto",
        description="transform each slice (xy) or the volume (xyz); auto: the volume where z is undersampled",
    )
    penalise_coarsest: bool = Field(
        default=True,
        description="penalise the coarsest scale too; false needs a calibration region as wide as that scale",
    )
    tolerance: float = Field(
        default=5e-6,
        gt=0,
        le=0.1,
        description="stop when change and optimality residual are below this, relative to the image; single "
        "precision reaches about 1e-6",
    )
    iterations: int = Field(default=2000, ge=1, le=1_000_000, description="largest number of iterations")

    @field_validator("wavelet")
    @classmethod
    def _known_wavelet(cls, name: str) -> str:
        from ..wavelet_filters import check_orthogonal

        return check_orthogonal(name)

    def check(self, shape: tuple[int, int, int]) -> None:
        """Refuse, before any work, an image that the options do not fit."""
        from ..wavelet_levels import axis_levels

        axis_levels(self.levels, shape[:2])

    def reconstruct(self, data: Acquired, threads: int = 1) -> Reconstruction:
        """Return the image of the acquired data."""
        import numpy as np

        from ..noise import estimate_sigma
        from ..precision import real_type

        sigma = estimate_sigma(data) if data.sigma is None else data.sigma
        # a power of two: the result for scaled data has the very same digits
        largest = float(np.max(np.abs(data.kspace)))
        scale = 2.0 ** np.round(np.log2(largest)) if largest > 0 else 1.0
        threshold = self.weight * sigma / scale
        data, sensitivity = _with_unit_maps(data)
        coupled = data.shape[2] > 1 and (data.mask.shape[2] > 1 or self.wavelet_axes == "xyz")
        solve_blocks = self._solve_volume if coupled else self._solve_slices
        image, solutions = solve_blocks(data, data.kspace / data.dtype.type(scale), threshold, threads)
        limits = [s for s in solutions if not s.converged]
        stopped = solutions[0].stopped if not limits else limits[0].stopped
        if limits and len(solutions) > 1:
            stopped += f" in {len(limits)} of {len(solutions)} slices"
        return Reconstruction(
            image=image * real_type(image.dtype)(scale / sensitivity),
            converged=not limits,
            stopped=stopped,
            iterations=max(s.iterations for s in solutions),
            objective=sum(s.objective for s in solutions) * scale**2,
            optimality=max(s.optimality for s in solutions),
            sigma=sigma,
            sigma_source="k-space border" if data.sigma is None else "given",
            weight=self.weight,
        )

    def _solve_volume(
        self, data: Acquired, kspace: np.ndarray, threshold: float, threads: int
    ) -> tuple[np.ndarray, list[Solution]]:
        """Solve one problem for the whole volume, its lines shared among the threads."""
        from ..team import Team

        axes = (0, 1) if self.wavelet_axes == "xy" else (0, 1, 2)
        solution = self._solve(kspace, data.mask, data.maps, threshold, axes, Team(threads))
        return solution.x, [solution]

    def _solve_slices(
        self, data: Acquired, kspace: np.ndarray, threshold: float, threads: int
    ) -> tuple[np.ndarray, list[Solution]]:
        """Solve a problem for each slice; the threads share the slices, or the coils of a single one."""
        import numpy as np

        from ..fourier import to_image
        from ..team import Team

        if data.shape[2] > 1:
            kspace = to_image(kspace, axes=(-1,), threads=threads)
        # slices first, so that each is contiguous
        stack = np.moveaxis(kspace, -1, 1)[:, :, None]
        maps = None if data.maps is None else np.moveaxis(data.maps, -1, 1)[:, :, None]
        mask = np.moveaxis(data.mask, -1, 0)
        slices = range(data.shape[2])
        alone = Team(threads if len(slices) == 1 else 1)

        def solve_slice(z: int) -> Solution:
            maps_z = None if maps is None else maps[:, z]
            return self._solve(stack[:, z], mask, maps_z, threshold, (1, 2), alone)

        solutions = Team(threads if len(slices) > 1 else 1).each(solve_slice, slices)
        return np.stack([s.x[0] for s in solutions], axis=-1), solutions

    def _solve(
        self,
        kspace: np.ndarray,
        mask: np.ndarray,
        maps: np.ndarray | None,
        threshold: float,
        axes: tuple[int, ...],
        team: Team,
    ) -> Solution:
        from ..admm import Admm
        from ..fista import Fista
        from ..problem import Problem, solve
        from ..sensing import Sensing
        from ..wavelet import WaveletTransform
        from ..wavelet_l1 import WaveletL1

        shape = kspace.shape[1:]
        sensing = Sensing(mask, shape, maps, kspace.dtype, team)
        transform = WaveletTransform(shape, self.wavelet, self.levels, axes, kspace.dtype, team)
        penalty = WaveletL1(transform, threshold, self.penalise_coarsest)
        solver = {"fista": Fista, "admm": Admm}[self.solver]
        problem = Problem(sensing, sensing.encode(kspace), penalty)
        return solve(problem, solver(self.iterations, self.tolerance))


def _with_unit_maps(data: Acquired) -> tuple[Acquired, float]:
    """Return the data with coil maps of unit power, and the factor by which they were divided.

    The unit is the root of the mean of ``sum_c |S_c|^2`` where any coil sees: so the weight means the same
    whatever the scale of the maps.
    """
    import numpy as np

    if data.maps is None:
        return data, 1.0
    largest = float(np.max(np.abs(data.maps)))
    maps = data.maps / data.maps.dtype.type(largest)
    power = np.sum(np.abs(maps) ** 2, axis=0)
    unit = float(np.sqrt(np.mean(power[power > 0], dtype=np.float64)))
    return replace(data, maps=maps / maps.dtype.type(unit)), largest * unit
