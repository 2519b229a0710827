import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skipline import InputError
from skipline.recon.acquired import Acquired
from skipline.recon.fourier import to_image, to_kspace
from skipline.recon.noise import estimate_sigma
from skipline.recon.sensing import Sensing
from skipline.recon.team import Team


def complex_normal(rng, *shape):
    return rng.normal(size=shape) + 1j * rng.normal(size=shape)


@st.composite
def problems(draw):
    """Shape, mask on any set of undersampled axes, maps or none, in double or single precision."""
    shape = draw(st.tuples(*[st.integers(1, 9)] * 3))
    under = draw(st.tuples(*[st.booleans()] * 3))
    rng = np.random.default_rng(draw(st.integers(0, 2**31)))
    mask = rng.random([n if u else 1 for n, u in zip(shape, under, strict=True)]) < 0.5
    mask.flat[rng.integers(mask.size)] = True
    coils = draw(st.sampled_from([0, 1, 3]))
    dtype = draw(st.sampled_from([np.complex64, np.complex128]))
    maps = complex_normal(rng, coils, *shape).astype(dtype) if coils else None
    x = complex_normal(rng, *shape).astype(dtype)
    y = complex_normal(rng, max(coils, 1), *shape).astype(dtype)
    return Sensing(mask, shape, maps, dtype, Team(draw(st.integers(1, 2)))), x, y


@settings(max_examples=80, deadline=None)
@given(problems())
def test_operator_identities(problem):
    A, x, y = problem
    within = (1e-4 if A.dtype == np.complex64 else 1e-10) * np.linalg.norm(x) * np.linalg.norm(y) * A.bound
    Ax, Ahy, e = A.forward(x), A.adjoint(y), A.encode(y)
    assert abs(np.vdot(Ax, y) - np.vdot(x, Ahy)) < within
    assert abs(np.linalg.norm(e) - np.linalg.norm(y * A.mask)) < within
    assert np.linalg.norm(A.backproject(e) - Ahy) < within
    assert np.linalg.norm(A.normal(x, np.empty_like(x)) - A.adjoint(Ax)) < within
    step = x - A.adjoint(Ax - y) / A.bound
    assert np.linalg.norm(A.descend(x, e, np.empty_like(x)) - step) < within
    assert abs(A.residual_norm2(x, e) - np.linalg.norm(Ax - y * A.mask) ** 2) < within * 10
    assert np.linalg.norm(Ax) ** 2 <= A.bound * np.linalg.norm(x) ** 2 * (1 + 1e-5)


@settings(max_examples=30, deadline=None)
@given(problems(), st.floats(0.01, 10))
def test_relaxation_solves_its_normal_equations(problem, rho):
    A, w, y = problem
    if A.maps is not None:
        return
    e = A.encode(y)
    x = A.relax(w, e, rho, np.empty_like(w))
    left = A.normal(x, np.empty_like(x)) + A.dtype.type(rho) * x
    right = A.backproject(e) + A.dtype.type(rho) * w
    assert np.linalg.norm(left - right) < 1e-4 * np.linalg.norm(right)


@settings(max_examples=30, deadline=None)
@given(st.tuples(*[st.integers(1, 12)] * 3), st.integers(0, 2**31))
def test_transform_is_unitary_and_centred(shape, seed):
    x = complex_normal(np.random.default_rng(seed), *shape)
    k = to_kspace(x)
    assert np.allclose(to_image(k), x)
    assert np.isclose(np.linalg.norm(k), np.linalg.norm(x))
    centre = tuple(n // 2 for n in shape)
    assert np.isclose(k[centre], x.sum() / np.sqrt(x.size)), "zero frequency sits at N // 2"


@pytest.mark.parametrize("shape", [(67, 71, 83), (1, 513, 517)])
@pytest.mark.parametrize("coils", [0, 3])
def test_same_bytes_for_any_number_of_threads(shape, coils):
    rng = np.random.default_rng(0)
    mask = rng.random((1, *shape[1:])) < 0.4
    maps = complex_normal(rng, coils, *shape).astype(np.complex64) if coils else None
    x = complex_normal(rng, *shape).astype(np.complex64)
    y = complex_normal(rng, max(coils, 1), *shape).astype(np.complex64)
    results = set()
    for threads in (1, 2, 3, 5):
        A = Sensing(mask, shape, maps, team=Team(threads))
        e = A.encode(y)
        arrays = (e, A.descend(x, e, np.empty_like(x)), A.normal(x, np.empty_like(x)))
        results.add(b"".join(array.tobytes() for array in arrays) + repr(A.residual_norm2(x, e)).encode())
    assert len(results) == 1


GOOD = np.ones((6, 8, 4), np.complex64)


@pytest.mark.parametrize("bad", [np.asfortranarray(GOOD), GOOD.astype(np.complex128), GOOD[:, :4]])
@pytest.mark.parametrize("maps", [None, np.ones((2, 6, 8, 4), np.complex64)])
def test_memory_that_the_kernels_must_not_see_is_refused(bad, maps):
    A = Sensing(np.ones((1, 8, 1), bool), GOOD.shape, maps)
    e = A.encode(np.ones((A.coils, *GOOD.shape), np.complex64))
    out = np.empty_like(GOOD)
    for call in (
        lambda: A.normal(bad, out),
        lambda: A.normal(GOOD, bad),
        lambda: A.descend(bad, e, out),
        lambda: A.descend(GOOD, e, bad),
    ):
        with pytest.raises(InputError, match="C-contiguous complex64"):
            call()


def test_what_the_mask_leaves_out_is_not_read():
    rng = np.random.default_rng(1)
    k = complex_normal(rng, 1, 16, 16, 1)
    mask = np.arange(16)[None, :, None] % 2 == 0
    dirty = k.copy()
    dirty[:, :, 1] = np.nan
    dirty[:, :, 3] = 1e30
    clean, found = Acquired(k * mask, mask), Acquired(dirty, mask)
    assert np.array_equal(clean.kspace, found.kspace)


def test_any_form_of_the_same_mask_is_the_same():
    k = np.ones((1, 6, 8, 3), np.complex64)
    lines = np.arange(8)[None, :, None] % 2 == 0
    for mask in (lines, np.broadcast_to(lines, (6, 8, 3)), np.broadcast_to(lines, (6, 8, 3)) * np.uint8(255)):
        data = Acquired(k, mask)
        assert data.mask.shape == (1, 8, 1)
        assert data.mask.dtype == bool
        assert data.acceleration == 2


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"mask": np.zeros((1, 8, 1), bool)}, "mask is empty"),
        ({"mask": np.ones((1, 7, 1), bool)}, r"mask has shape \(1, 7, 1\)"),
        ({"kspace": np.full((1, 8, 8, 1), np.nan, np.complex64)}, "NaN"),
        ({"kspace": np.ones((2, 8, 8, 1), np.complex64)}, "no coil maps"),
        ({"maps": np.zeros((1, 8, 8, 1), np.complex64)}, "zero everywhere"),
        ({"maps": np.ones((2, 8, 8, 1), np.complex64)}, "coil maps have shape"),
        ({"sigma": -1.0}, "sigma is -1"),
        ({"kspace": np.ones((8, 8, 1), np.complex64)}, r"expected \(coil, x, y, z\)"),
    ],
)
def test_data_that_cannot_be_used(change, message):
    good = {"kspace": np.ones((1, 8, 8, 1), np.complex64), "mask": np.ones((1, 8, 1), bool)}
    with pytest.raises(InputError, match=message):
        Acquired(**(good | change))


def test_sigma_from_the_border_of_kspace():
    rng = np.random.default_rng(3)
    x = np.zeros((1, 128, 128, 1), np.complex64)
    x[:, 40:90, 30:100] = 100
    noisy = to_kspace(x) + 0.7 * complex_normal(rng, 1, 128, 128, 1)
    mask = rng.random((1, 128, 1)) < 0.4
    assert estimate_sigma(Acquired(noisy * mask, mask)) == pytest.approx(0.7, rel=0.15)
