"""The reconstruction against general libraries and published bounds; the source stands beside each check."""

import numpy as np
import pytest
import pywt

from skipline.recon.acquired import Acquired
from skipline.recon.admm import Admm
from skipline.recon.fista import Fista
from skipline.recon.fourier import to_kspace
from skipline.recon.methods.wavelet_sparse import WaveletSparse
from skipline.recon.methods.zero_filled import ZeroFilled
from skipline.recon.problem import Problem, solve
from skipline.recon.sensing import Sensing
from skipline.recon.team import Team
from skipline.recon.wavelet import WaveletTransform
from skipline.recon.wavelet_filters import orthogonal_wavelets
from skipline.recon.wavelet_l1 import WaveletL1


def complex_normal(rng, *shape):
    return rng.normal(size=shape) + 1j * rng.normal(size=shape)


def test_fourier_transform_is_the_defining_sum():
    # source: the definition of the discrete Fourier transform, design conventions for centre and scale
    rng = np.random.default_rng(0)
    x = complex_normal(rng, 5, 6, 1)
    k = to_kspace(x)
    i, j = np.arange(5) - 2, np.arange(6) - 3
    for a in range(5):
        for b in range(6):
            wave = np.exp(-2j * np.pi * (i[a] * i[:, None] / 5 + j[b] * j / 6))
            assert k[a, b, 0] == pytest.approx(np.sum(x[..., 0] * wave) / np.sqrt(30))


# source: PyWavelets, mode "periodization" (Daubechies 1992; Mallat 1989)
@pytest.mark.parametrize("wavelet", orthogonal_wavelets())
@pytest.mark.parametrize("shape", [(64, 96), (16, 32, 24)])
def test_wavelet_coefficients_are_those_of_pywavelets(wavelet, shape):
    levels = 3
    x = complex_normal(np.random.default_rng(1), *shape)
    expected, _ = pywt.coeffs_to_array(pywt.wavedecn(x, wavelet, "periodization", level=levels))
    full = (1,) * (3 - len(shape)) + shape
    W = WaveletTransform(full, wavelet, levels, tuple(range(3 - len(shape), 3)), np.complex128)
    c = W.forward(x.reshape(full))
    np.testing.assert_allclose(c.reshape(shape), expected, atol=1e-10)
    # PyWavelets gives its filters to about twelve digits
    np.testing.assert_allclose(W.inverse(c).reshape(shape), x, atol=1e-9)


def dense(A, shape):
    """The sensing operator as a matrix, one column an image point."""
    columns = []
    for i in range(int(np.prod(shape))):
        unit = np.zeros(shape, complex)
        unit.flat[i] = 1
        columns.append(A.forward(unit).ravel())
    return np.stack(columns, axis=1)


def matrix_of(W, shape):
    columns = []
    for i in range(int(np.prod(shape))):
        unit = np.zeros(shape, W.dtype)
        unit.flat[i] = 1
        columns.append(W.forward(unit).ravel())
    return np.stack(columns, axis=1)


@pytest.mark.parametrize("solver", [Fista(20000, 1e-10), Admm(20000, 1e-10)])
def test_l1_minimiser_is_that_of_the_lasso(solver):
    """Source: Tibshirani 1996, by scikit-learn's coordinate descent.

    A mask and data with conjugate symmetry make the minimiser real, where the complex problem is the Lasso
    on the real and imaginary parts of the samples.
    """
    from sklearn.linear_model import Lasso

    rng = np.random.default_rng(2)
    shape, weight = (1, 8, 15), 0.4
    truth = rng.normal(size=shape) * (rng.random(shape) < 0.2)
    half = rng.random((1, 1, 15)) < 0.4
    mask = half | half[:, :, ::-1]  # odd length: index reversal is k -> -k
    A = Sensing(mask, shape, dtype=np.complex128)
    noise = rng.normal(size=shape) * 0.1
    y = A.forward((truth + noise).astype(complex))
    W = WaveletTransform(shape, "db2", 1, (1, 2), np.complex128)
    problem = Problem(A, A.encode(y), WaveletL1(W, weight))
    solution = solve(problem, solver)
    F = dense(A, shape) @ np.conj(matrix_of(W, shape)).T
    X, b = (np.concatenate([np.real(a), np.imag(a)]) for a in (F, y.ravel()))
    lasso = Lasso(alpha=weight / len(b), fit_intercept=False, tol=1e-14, max_iter=200000).fit(X, b)
    expected = W.inverse(lasso.coef_.reshape(shape).astype(complex))
    assert np.abs(np.imag(solution.x)).max() < 1e-8
    assert problem.objective(solution.x) <= problem.objective(expected) * (1 + 1e-9)
    np.testing.assert_allclose(A.forward(solution.x), A.forward(expected), atol=1e-5)


@pytest.mark.parametrize("coils", [0, 3])
@pytest.mark.parametrize("penalise_coarsest", [True, False])
def test_l1_minimum_is_that_of_a_general_convex_solver(coils, penalise_coarsest):
    """Source: the interior-point solver Clarabel through cvxpy, complex data."""
    import cvxpy as cp

    rng = np.random.default_rng(3)
    shape, weight = (1, 8, 8), 0.3
    mask = rng.random((1, 8, 8)) < 0.6
    maps = complex_normal(rng, coils, *shape) if coils else None
    A = Sensing(mask, shape, maps, np.complex128)
    y = A.forward(complex_normal(rng, *shape)) + 0.1 * complex_normal(rng, max(coils, 1), *shape) * mask
    W = WaveletTransform(shape, "db2", 1, (1, 2), np.complex128)
    problem = Problem(A, A.encode(y), WaveletL1(W, weight, penalise_coarsest))
    penalised = np.ones(shape, bool)
    if not penalise_coarsest:
        penalised[W.coarsest] = False
    x = cp.Variable(64, complex=True)
    detail = matrix_of(W, shape)[penalised.ravel()]
    cost = cp.sum_squares(dense(A, shape) @ x - y.ravel()) / 2 + weight * cp.norm1(detail @ x)
    minimum = cp.Problem(cp.Minimize(cost)).solve(solver=cp.CLARABEL)
    for solver in (Fista(20000, 1e-9), Admm(20000, 1e-9)):
        solution = solve(problem, solver)
        assert solution.objective == pytest.approx(minimum, rel=1e-5)


@pytest.mark.parametrize("coils", [0, 8])
def test_optimality_conditions_on_a_large_case(coils):
    """Karush-Kuhn-Tucker: W grad f = -weight c / |c| where c is not zero, at most weight in size elsewhere.

    Source: Boyd & Vandenberghe, Convex Optimization, section 5.5.3.
    """
    rng = np.random.default_rng(4)
    shape, weight = (1, 256, 256), 0.05
    mask = (rng.random((1, 1, 256)) < 0.35) | (np.abs(np.arange(256) - 128) < 14)
    x = np.zeros(shape, complex)
    x[:, 60:200, 50:180] = np.exp(1j * np.linspace(0, 1, 130))
    maps = complex_normal(rng, coils, 1, 1, 1) * np.ones(shape) * 0.3 if coils else None
    A = Sensing(mask, shape, maps, np.complex128, Team(2))
    y = A.forward(x) + 0.03 * complex_normal(rng, max(coils, 1), *shape) * mask
    W = WaveletTransform(shape, "db4", 4, (1, 2), np.complex128, Team(2))
    solution = solve(Problem(A, A.encode(y), WaveletL1(W, weight)), Fista(5000, 1e-9))
    assert solution.converged
    gradient = W.forward(A.adjoint(A.forward(solution.x) - y))
    c = W.forward(solution.x)
    support = np.abs(c) > 1e-6
    assert 500 < support.sum() < 30000
    assert np.abs(gradient[support] + weight * c[support] / np.abs(c[support])).max() < 1e-4 * weight
    assert np.abs(gradient).max() < weight * (1 + 1e-4)


def test_fista_obeys_its_bound_at_every_iteration():
    """F(x_k) - F* <= 2 L |x_0 - x*|^2 / (k + 1)^2. Source: Beck & Teboulle 2009, theorem 4.4."""
    rng = np.random.default_rng(5)
    shape = (1, 48, 48)
    mask = rng.random((1, 48, 48)) < 0.3
    A = Sensing(mask, shape, None, np.complex128)
    truth = np.zeros(shape, complex)
    truth[:, 12:30, 10:40] = 5
    y = A.forward(truth + 0.3 * complex_normal(rng, *shape))
    W = WaveletTransform(shape, "db4", 2, (1, 2), np.complex128)
    problem = Problem(A, A.encode(y), WaveletL1(W, 0.5))
    best = solve(problem, Fista(20000, 1e-12))
    start = np.zeros(shape, complex)
    distance2 = np.linalg.norm(best.x - start) ** 2
    gaps = []
    solve(
        problem,
        Fista(150, 0.0, restart=False),
        start,
        lambda k, x: gaps.append((problem.objective(x) - best.objective) * (k + 1) ** 2),
    )
    assert max(gaps) <= 2 * A.bound * distance2
    assert max(gaps) > 0, "the bound is tested on a gap that is there"


def test_a_million_pixels_from_fifty_thousand_samples():
    """Rule of thumb (common practice, no source): 10,000 non-zeros among a million pixels come back from
    50,000 random Fourier samples. Pixels are the sparse domain; the weight falls towards zero in steps."""
    rng = np.random.default_rng(6)
    shape, team = (1, 1000, 1000), Team(2)
    x = np.zeros(10**6, np.complex64)
    x[rng.choice(10**6, 10_000, replace=False)] = complex_normal(rng, 10_000)
    x = x.reshape(shape)
    mask = np.zeros(10**6, bool)
    mask[rng.choice(10**6, 50_000, replace=False)] = True
    A = Sensing(mask.reshape(shape), shape, team=team)
    y = A.encode(A.forward(x))
    pixels = WaveletTransform(shape, "haar", 0, (1, 2), team=team)
    largest = float(np.abs(A.backproject(y)).max())
    estimate = np.zeros(shape, np.complex64)
    for weight in largest * 10.0 ** np.arange(-0.5, -5, -0.5):
        problem = Problem(A, y, WaveletL1(pixels, weight))
        estimate = solve(problem, Fista(400, min(1e-4, 0.003 * weight / largest)), estimate).x
    assert np.linalg.norm(estimate - x) < 1e-3 * np.linalg.norm(x)


@pytest.fixture(scope="module")
def brain():
    """The T1 brain template that the nilearn wheel ships (ICBM 152 2009)."""
    from importlib import resources

    import nibabel as nib

    data = resources.files("nilearn.datasets.data")
    with resources.as_file(data / "mni_icbm152_t1_tal_nlin_sym_09a_converted.nii.gz") as path:
        volume = np.asanyarray(nib.load(path).dataobj)  # type: ignore[attr-defined]
    return volume.astype(np.complex64)


@pytest.mark.parametrize(
    ("kind", "acceleration"),
    [("lines", 2), ("lines", 3), ("lines", 4), ("points", 2), ("points", 4), ("points", 6)],
)
def test_sparse_beats_zero_filled_on_a_brain(brain, kind, acceleration):
    """Source of the object: the nilearn wheel. Lines in one slice, points of ky-kz in the volume."""
    from skipline.masks import Grid, VariableDensityLines, VariableDensityPoints
    from skipline.phantoms import acquire, sigma_for_snr, support
    from skipline.recon import plugins

    rng = np.random.default_rng(7)
    if kind == "lines":
        truth = brain[:, :, 94:95]
        mask = VariableDensityLines().draw(Grid((truth.shape[1],), 16), acceleration, rng)[None, :, None]
    else:
        truth = brain
        mask = VariableDensityPoints().draw(Grid(truth.shape[1:], 24), acceleration, rng)[None]
    sigma = sigma_for_snr(truth, 30)
    data = Acquired(acquire(to_kspace(truth[None]), mask, sigma, rng), mask, sigma=sigma)
    inside = support(truth)
    images = [method.reconstruct(data, 2).image for method in (WaveletSparse(), ZeroFilled())]
    nrmse, ssim = (
        [plugins.load("measures", name).compute(truth, image, inside) for image in images]
        for name in ("nrmse", "ssim")
    )
    assert nrmse[0] < nrmse[1]
    assert ssim[0] > ssim[1]
