"""The convolution against the sum over pairs."""

import numpy as np
import pytest

from dda.errors import InputError
from dda.lattice.convolution import Convolution
from dda.lattice.green import radial_table, tensor
from dda.lattice.kernel import Kernel, kernel, padded_shape
from dda.lattice.workers import Workers

SHAPES = [(1, 1, 1), (5, 1, 1), (1, 1, 6), (3, 4, 5), (7, 2, 3), (6, 6, 6), (11, 3, 1), (2, 9, 7)]


def problem(shape, filled=0.7, kind="fcd", seed=0):
    """Table, occupied cells and random dipoles of a box."""
    generator = np.random.default_rng(seed)
    box = np.stack(np.meshgrid(*[np.arange(n) for n in shape], indexing="ij"), axis=-1)
    index = box.reshape(-1, 3).astype(np.int32)
    kept = generator.random(len(index)) < filled
    kept[[0, -1]] = True  # so that the box is tight
    index = np.ascontiguousarray(index[kept])
    p = generator.normal(size=(2, len(index), 3))
    table = radial_table(kind, 2.0, 0.1, int(sum((n - 1) ** 2 for n in shape)))
    return table, index, p[0] + 1j * p[1]


def by_pairs(table, index, p):
    pairs = tensor(table, index[:, None].astype(int) - index[None])
    return np.einsum("ijab,jb->ia", pairs, p)


def convolved(shape, table, index, p, precision="double", **options):
    convolution = Convolution(kernel(shape, table, precision), **options)
    p = p.astype(convolution.dtype)
    return convolution(index, p, np.empty_like(p))


# Rounding of an FFT grows as the square root of its stages: a few digits above the unit in the
# last place, 2e-16 and 1e-7.
ROUNDING = {"double": 1e-13, "single": 2e-6}


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("fft", ["scipy", "ducc0"])
@pytest.mark.parametrize("precision", ["double", "single"])
def test_against_the_sum_over_pairs(shape, fft, precision):
    if fft == "ducc0":
        pytest.importorskip("ducc0")
    table, index, p = problem(shape)
    ours = convolved(shape, table, index, p, precision=precision, fft=fft)
    expected = by_pairs(table, index, p)
    scale = max(np.linalg.norm(expected), 1e-30)
    assert np.linalg.norm(ours - expected) <= ROUNDING[precision] * scale
    assert ours.dtype == (np.complex128 if precision == "double" else np.complex64)


@pytest.mark.parametrize("kind", ["point", "fcd-corners"])
def test_other_kernels_too(kind):
    table, index, p = problem((4, 5, 3), kind=kind)
    ours = convolved((4, 5, 3), table, index, p)
    assert ours == pytest.approx(by_pairs(table, index, p), rel=1e-12, abs=1e-15)


@pytest.mark.parametrize("threads", [1, 2, 3])
def test_threads_change_nothing(threads):
    shape = (20, 9, 10)
    table, index, p = problem(shape)
    ours = convolved(shape, table, index, p, workers=Workers(threads))
    alone = convolved(shape, table, index, p, workers=Workers(1))
    # Planes are grouped otherwise, so that the FFT may round otherwise.
    assert np.linalg.norm(ours - alone) < 1e-14 * np.linalg.norm(alone)


def test_a_second_product_does_not_remember_the_first():
    shape = (6, 5, 4)
    table, index, p = problem(shape)
    convolution = Convolution(kernel(shape, table))
    first = convolution(index, p, np.empty_like(p))
    convolution(index, 1j * p[::-1].copy(), np.empty_like(p))
    assert np.array_equal(convolution(index, p, np.empty_like(p)), first)


def test_product_is_symmetric():
    """u.(G v) = v.(G u): reciprocity of the interaction."""
    shape = (8, 7, 5)
    table, index, u = problem(shape, seed=1)
    v = np.random.default_rng(2).normal(size=(*u.shape, 2)) @ [1, 1j]
    convolution = Convolution(kernel(shape, table))
    left = np.sum(u * convolution(index, v, np.empty_like(v)))
    right = np.sum(v * convolution(index, u, np.empty_like(u)))
    assert abs(left - right) < 1e-12 * abs(left)


def test_padding_keeps_images_apart():
    for n in (1, 2, 7, 11, 31, 64, 97):
        (length,) = set(padded_shape((n, n, n)))
        assert length % 2 == 0
        assert 2 * n <= length <= 2.6 * n + 2


def test_unknown_library_is_refused():
    table, _, _ = problem((2, 2, 2))
    with pytest.raises(InputError, match="scipy"):
        Convolution(kernel((2, 2, 2), table), fft="unknown")


@pytest.mark.parametrize("shape", SHAPES)
def test_double_precision_on_a_single_precision_kernel(shape):
    """Nothing but the kernel's rounding is left, 6e-8 of its largest elements."""
    table, index, p = problem(shape)
    single = kernel(shape, table, "single")
    mixed = Convolution(single, dtype=complex)(index, p, np.empty_like(p))
    again = Kernel(single.shape, single.padded, single.spectrum.astype(complex))
    expected = Convolution(again)(index, p, np.empty_like(p))
    assert mixed.dtype == complex
    assert np.linalg.norm(mixed - expected) <= 1e-13 * max(np.linalg.norm(expected), 1e-30)


def test_released_buffers_come_back():
    shape = (6, 5, 4)
    table, index, p = problem(shape)
    convolution = Convolution(kernel(shape, table))
    first = convolution(index, p, np.empty_like(p))
    convolution.release()
    assert np.array_equal(convolution(index, p, np.empty_like(p)), first)
