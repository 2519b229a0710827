from typing import Any

import numpy as np
import pytest

from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints
from skipline.phantoms import acquire, ring_array, shepp_logan_high_contrast_phantom, sigma_for_snr
from skipline.recon.acquired import Acquired
from skipline.recon.admm import Admm
from skipline.recon.fista import Fista
from skipline.recon.fourier import to_image, to_kspace
from skipline.recon.methods.wavelet_sparse import WaveletSparse
from skipline.recon.methods.zero_filled import ZeroFilled
from skipline.recon.problem import Problem, solve
from skipline.recon.sensing import Sensing
from skipline.recon.wavelet import WaveletTransform
from skipline.recon.wavelet_l1 import WaveletL1


def scan(shape, coils, undersampled, snr=30.0, seed=0, dtype: Any = np.complex64):
    """A blocky object with a smooth phase, some coils, random samples around a full centre."""
    rng = np.random.default_rng(seed)
    grids = np.meshgrid(*[np.linspace(-1, 1, n) for n in shape], indexing="ij")
    r2 = sum(g**2 for g in grids)
    x = ((r2 < 0.7) + 0.5 * (np.abs(grids[0]) < 0.3) * (np.abs(grids[1] - 0.2) < 0.4)) * np.exp(1j * grids[1])
    maps = None
    if coils:
        angles = 2 * np.pi * np.arange(coils) / coils
        maps = np.stack(
            [np.exp(-((grids[0] - np.cos(a)) ** 2 + (grids[1] - np.sin(a)) ** 2) + 1j * a) for a in angles]
        )
        maps /= np.sqrt(np.sum(np.abs(maps) ** 2, axis=0)).mean()
    grid = Grid(tuple(shape[a] for a in undersampled), max(shape) // 6)
    pattern = VariableDensityLines() if len(undersampled) == 1 else VariableDensityPoints()
    mask = pattern.draw(grid, 2.5, rng).reshape([n if a in undersampled else 1 for a, n in enumerate(shape)])
    sigma = 1 / snr
    k = to_kspace(x[None] if maps is None else maps * x)
    k = k + sigma * (rng.normal(size=k.shape) + 1j * rng.normal(size=k.shape))
    return x, Acquired((k * mask).astype(dtype), mask, None if maps is None else maps.astype(dtype), sigma)


SCANS = {
    "one coil": ((64, 64, 1), 0, (1,)),
    "points": ((64, 60, 1), 0, (0, 1)),
    "eight coils": ((64, 64, 1), 8, (1,)),
    "volume": ((24, 40, 36), 0, (1, 2)),
    "stack": ((48, 64, 3), 4, (1,)),
}


@pytest.mark.parametrize("name", SCANS)
def test_fista_and_admm_reach_the_same_minimum(name):
    _, data = scan(*SCANS[name])
    a, b = (
        method.reconstruct(data) for method in (WaveletSparse(solver="fista"), WaveletSparse(solver="admm"))
    )
    assert a.converged
    assert b.converged
    assert a.objective == pytest.approx(b.objective, rel=1e-5)
    for result in (a, b):
        assert result.optimality is not None
        assert result.optimality < 1e-4
    assert np.linalg.norm(a.image - b.image) < 1e-2 * np.linalg.norm(a.image)


@pytest.mark.parametrize("solver", ["fista", "admm"])
@pytest.mark.parametrize("factor", [1e-6, 1e6])
@pytest.mark.parametrize("name", ["one coil", "eight coils", "volume"])
@pytest.mark.parametrize("known_sigma", [True, False])
def test_the_scale_of_the_data_does_not_matter(name, factor, solver, known_sigma):
    _, data = scan(*SCANS[name])
    scaled = Acquired(
        data.kspace * np.float32(factor), data.mask, data.maps, data.sigma * factor if known_sigma else None
    )
    plain = Acquired(data.kspace, data.mask, data.maps, data.sigma if known_sigma else None)
    for method in (WaveletSparse(solver=solver), ZeroFilled()):
        a, b = method.reconstruct(plain).image, method.reconstruct(scaled).image
        assert np.linalg.norm(b / np.float32(factor) - a) < 1e-5 * np.linalg.norm(a)


@pytest.mark.parametrize("method", [ZeroFilled(), WaveletSparse(), WaveletSparse(solver="admm")])
@pytest.mark.parametrize("name", SCANS)
def test_full_sampling_without_noise_returns_the_reference(name, method):
    shape, coils, axes = SCANS[name]
    x, data = scan(shape, coils, axes, snr=np.inf)
    full = np.ones(data.mask.shape, bool)
    k = to_kspace(x[None] if data.maps is None else data.maps * x).astype(np.complex64)
    result = method.reconstruct(Acquired(k, full, data.maps, 0.0))
    assert np.linalg.norm(result.image - x) < 1e-5 * np.linalg.norm(x)
    assert result.converged


@pytest.mark.parametrize("solver", ["fista", "admm"])
def test_the_iteration_limit_is_told(solver):
    _, data = scan(*SCANS["stack"])
    result = WaveletSparse(solver=solver, iterations=3, tolerance=1e-9).reconstruct(data)
    assert not result.converged
    assert result.stopped == "iteration limit in 3 of 3 slices"
    assert result.iterations == 3
    assert result.optimality is not None
    assert result.optimality > 1e-6


def test_same_bytes_for_any_number_of_threads():
    for name in ("stack", "volume", "eight coils"):
        _, data = scan(*SCANS[name])
        for solver in ("fista", "admm"):
            method = WaveletSparse(solver=solver, iterations=20)
            assert method.reconstruct(data, 1).image.tobytes() == method.reconstruct(data, 2).image.tobytes()


@pytest.mark.parametrize("coils", [1, 8])
def test_sparse_beats_zero_filled(coils):
    array = ring_array(coils) if coils > 1 else None
    phantom = shepp_logan_high_contrast_phantom()
    k = np.atleast_3d(phantom.kspace((128, 128), array=array)).reshape(coils, 128, 128, 1)
    truth = phantom.reference((128, 128), array=array)
    maps = None if array is None else array.maps((128, 128, 1))
    for acceleration in (2, 3, 4):
        rng = np.random.default_rng(acceleration)
        mask = VariableDensityLines().draw(Grid((128,), 16), acceleration, rng)[None, :, None]
        sigma = sigma_for_snr(truth, 40)
        data = Acquired(acquire(k, mask, sigma, rng), mask, maps, sigma)
        sparse, zero = (
            np.linalg.norm(m.reconstruct(data).image - truth) for m in (WaveletSparse(), ZeroFilled())
        )
        assert sparse < 0.9 * zero, acceleration


@pytest.mark.parametrize("solver", ["fista", "admm"])
@pytest.mark.parametrize("factor", [1e-12, 0.1, 10, 1e12])
def test_the_scale_of_the_coil_maps_does_not_matter(factor, solver):
    _, data = scan(*SCANS["eight coils"])
    assert data.maps is not None
    scaled = Acquired(data.kspace, data.mask, data.maps * np.float32(factor), data.sigma)
    for method in (WaveletSparse(solver=solver), ZeroFilled()):
        a, b = method.reconstruct(data).image, method.reconstruct(scaled).image * np.float32(factor)
        assert np.linalg.norm(b - a) < 1e-4 * np.linalg.norm(a)


@pytest.mark.parametrize("solver", ["fista", "admm"])
def test_slices_of_nothing_converge(solver):
    _, data = scan(*SCANS["stack"])
    planes = to_image(data.kspace, (-1,))
    planes[..., 1] = 0
    rng = np.random.default_rng(0)
    noise = 1e-3 * (rng.normal(size=planes.shape[:3]) + 1j * rng.normal(size=planes.shape[:3]))
    planes[..., 2] = noise * data.mask[..., 0]
    result = WaveletSparse(solver=solver).reconstruct(
        Acquired(to_kspace(planes, (-1,)).astype(np.complex64), data.mask, data.maps, data.sigma)
    )
    assert result.converged
    assert not result.image[..., 1].any()


def test_a_thin_volume_has_its_wavelets_in_the_plane():
    """12 slices once left no level at all: the image was only sparse in its voxels."""
    x, data = scan((64, 64, 12), 0, (1, 2))
    default, voxels = (
        np.linalg.norm(method.reconstruct(data).image - x)
        for method in (WaveletSparse(), WaveletSparse(levels=0))
    )
    assert default < 0.8 * voxels


def problem_of(data, weight=0.05):
    shape = (1, *data.shape[:2])
    A = Sensing(np.moveaxis(data.mask, -1, 0), shape, None, data.dtype)
    penalty = WaveletL1(WaveletTransform(shape, "db4", 2, (1, 2), data.dtype), weight)
    return Problem(A, A.encode(np.moveaxis(data.kspace, -1, 1)), penalty)


def test_callback_sees_each_iterate_and_can_stop():
    problem = problem_of(scan(*SCANS["one coil"])[1])
    for solver in (Fista(), Admm()):
        seen = []

        def stop_at_five(k, x, seen=seen):
            seen.append(problem.objective(x))
            return k == 5

        solution = solve(problem, solver, callback=stop_at_five)
        assert (solution.iterations, solution.stopped, solution.converged) == (
            5,
            "stopped by the callback",
            False,
        )
        assert solution.objective == pytest.approx(seen[-1], rel=1e-5)


def test_a_warm_start_saves_iterations():
    problem = problem_of(scan(*SCANS["one coil"])[1])
    cold = solve(problem, Fista(tolerance=1e-5))
    warm = solve(problem, Fista(tolerance=1e-5), start=cold.x)
    assert warm.iterations < cold.iterations / 4
    assert warm.objective <= cold.objective * (1 + 1e-6)


def test_double_precision_is_kept():
    _, data = scan(*SCANS["one coil"], dtype=np.complex128)
    result = WaveletSparse(tolerance=1e-9, iterations=5000).reconstruct(data)
    assert result.image.dtype == np.complex128
    assert result.optimality is not None
    assert result.optimality < 1e-8


def test_phantom_and_array_fit_the_methods():
    array = ring_array(4)
    phantom = shepp_logan_high_contrast_phantom()
    k = phantom.kspace((64, 64), array=array)
    mask = np.ones((1, 64, 1), bool)
    image = ZeroFilled().reconstruct(Acquired(k, mask, array.maps((64, 64, 1)))).image
    truth = phantom.reference((64, 64))
    assert np.linalg.norm(image - truth) < 0.06 * np.linalg.norm(truth)
