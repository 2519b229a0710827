import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from skipline import InputError
from skipline.recon.team import Team
from skipline.recon.wavelet import WaveletTransform
from skipline.recon.wavelet_filters import orthogonal_wavelets
from skipline.recon.wavelet_l1 import WaveletL1
from skipline.recon.wavelet_levels import axis_levels

WAVELETS = st.sampled_from(["haar", "db2", "db3", "db4", "db7", "sym5", "sym8", "coif1", "coif3", "db20"])
DTYPES = st.sampled_from([np.complex64, np.complex128, np.float32, np.float64])
AXES = st.sampled_from([(0, 1, 2), (1, 2), (0, 1), (0, 2), (0,), (1,), (2,)])
SHAPES = st.tuples(*[st.integers(2, 40)] * 3)


def random_array(shape, dtype, seed):
    rng = np.random.default_rng(seed)
    x = rng.normal(size=shape)
    return (x + 1j * rng.normal(size=shape)).astype(dtype) if np.dtype(dtype).kind == "c" else x.astype(dtype)


def close(dtype):
    return 1e-5 if dtype in (np.complex64, np.float32) else 1e-10


@settings(max_examples=60, deadline=None)
@given(SHAPES, WAVELETS, AXES, DTYPES, st.integers(0, 2), st.integers(0, 2**31))
def test_unitary_for_every_size(shape, wavelet, axes, dtype, levels, seed):
    levels = min(levels, int(np.ceil(np.log2(min(shape[a] for a in axes)))))
    W = WaveletTransform(shape, wavelet, levels, axes, dtype)
    x, c = random_array(shape, dtype, seed), random_array(shape, dtype, seed + 1)
    Wx, Whc = W.forward(x), W.inverse(c)
    assert Wx.dtype == dtype
    scale = np.linalg.norm(x) * np.linalg.norm(c)
    assert abs(np.vdot(c, Wx) - np.vdot(Whc, x)) < close(dtype) * scale, "adjoint"
    assert np.linalg.norm(W.inverse(Wx) - x) < close(dtype) * np.linalg.norm(x), "W^H W = 1"
    assert np.linalg.norm(W.forward(Whc) - c) < close(dtype) * np.linalg.norm(c), "W W^H = 1"


@pytest.mark.parametrize("axes", [(0, 1, 2), (1, 2), (0, 1)])
@pytest.mark.parametrize("shape", [(64, 64, 96), (65, 63, 97)])
def test_same_bytes_for_any_number_of_threads(shape, axes):
    x = random_array(shape, np.complex64, 0)
    results = []
    for threads in (1, 2, 3):
        W = WaveletTransform(shape, "db4", 2, axes, team=Team(threads))
        c = W.forward(x)
        results.append((c.tobytes(), W.inverse(c).tobytes()))
    assert results[0] == results[1] == results[2]


def test_default_levels_leave_eight_samples_and_are_at_least_one():
    for n in range(3, 600):
        (levels,) = axis_levels(None, [n])
        assert levels >= 1
        for _ in range(levels):
            n = (n + 1) // 2
        assert levels == 1 or 8 <= n < 16


def test_few_slices_do_not_take_the_levels_of_the_plane():
    """A volume of 12 slices once had no level at all, and its reconstruction no sparsity."""
    W = WaveletTransform((64, 48, 12), "db4")
    assert W.coarsest == (slice(8), slice(12), slice(6))
    x = random_array((64, 48, 12), np.complex64, 0)
    assert np.linalg.norm(W.inverse(W.forward(x)) - x) < 1e-5 * np.linalg.norm(x)


@pytest.mark.parametrize(
    "bad",
    [
        np.asfortranarray(np.ones((1, 16, 20), np.complex64)),
        np.ones((1, 16, 20), np.complex128),
        np.ones((1, 16, 21), np.complex64),
    ],
)
def test_memory_that_the_kernels_must_not_see_is_refused(bad):
    W = WaveletTransform((1, 16, 20), "db4", 1, (1, 2))
    good = np.ones((1, 16, 20), np.complex64)
    for call in (W.forward, W.inverse):
        with pytest.raises(InputError, match="C-contiguous complex64"):
            call(bad)
        with pytest.raises(InputError, match="C-contiguous complex64"):
            call(good, bad)


def test_smooth_signals_are_sparse():
    # db4 has four vanishing moments: a cubic has no detail away from the seam of the period
    t = np.linspace(-1, 1, 128)
    c = WaveletTransform((1, 1, 128), "db4", 1, (2,), np.float64).forward((t**3 - t)[None, None])
    assert np.max(np.abs(c[0, 0, 70:120])) < 1e-9
    assert np.max(np.abs(c[0, 0, :64])) > 0.1


def test_unknown_wavelet_names_the_nearest():
    with pytest.raises(InputError, match="did you mean 'sym8'"):
        WaveletTransform((1, 16, 16), "syn8", 1, (1, 2))
    with pytest.raises(InputError, match="at most 4"):
        WaveletTransform((1, 16, 16), "db4", 5, (1, 2))
    assert "bior4.4" not in orthogonal_wavelets()


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**31), st.floats(0, 3), st.booleans(), st.sampled_from([np.complex64, np.complex128]))
def test_prox_is_the_minimiser(seed, weight, coarsest, dtype):
    """Moreau: v - prox(v) is in the subdifferential, so no other point does better."""
    shape = (1, 24, 20)
    penalty = WaveletL1(WaveletTransform(shape, "db2", 2, (1, 2), dtype), weight, coarsest)
    v, other = random_array(shape, dtype, seed), random_array(shape, dtype, seed + 1)
    x = penalty.prox(v, 1.0, np.empty_like(v))

    def value(u):
        return 0.5 * np.linalg.norm(u - v) ** 2 + penalty.value(u)

    best = value(x)
    for step in (1e-3, 0.1, 1.0):
        # strong convexity: F(u) >= F(x) + |u - x|^2 / 2
        u = x + dtype(step) * other
        assert value(u) >= best + 0.5 * np.linalg.norm(u - x) ** 2 - 1e-4 * max(best, 1)


def test_coarsest_scale_is_left_alone_when_asked():
    W = WaveletTransform((1, 32, 32), "haar", 2, (1, 2))
    c = np.full((1, 32, 32), 1 + 0j, np.complex64)
    WaveletL1(W, 0.5, penalise_coarsest=False).shrink(c, 1.0)
    assert np.all(c[W.coarsest] == 1)
    assert np.allclose(c[0, 8:], 0.5)
    assert np.allclose(c[0, :8, 8:], 0.5)
