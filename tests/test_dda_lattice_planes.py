"""The loops over planes against the same written with whole arrays."""

import itertools

import numpy as np
import pytest

from dda.lattice import planes

PAIRS = ((0, 1), (0, 2), (1, 2))


def numbers(*shape, seed=0):
    return np.random.default_rng(seed).normal(size=(*shape, 2)) @ [1, 1j]


def expected(spectrum, block, places, shape, folded, signs, turned):
    """The 3x3 matrix of every frequency, from the components' parities, times the block."""
    matrix = np.zeros((len(places), 3, 3, *shape[1:]), complex)
    number = [np.asarray(places), np.arange(shape[1]), np.arange(shape[2])]
    mirrored = [
        (n > length // 2) & (not fold)
        for n, length, fold in zip(number, shape, folded, strict=True)
    ]
    stored = [
        np.where(m, length - n, n) for n, m, length in zip(number, mirrored, shape, strict=True)
    ]
    sign = [np.where(m, -1, 1) for m in mirrored]
    sign = [s.reshape([-1 if a == b else 1 for b in range(3)]) for a, s in enumerate(sign)]
    for c in range(3):
        matrix[:, c, c] = spectrum[:, c][np.ix_(*stored)]
    for c, (a, b) in enumerate(PAIRS):
        part = signs[c] * sign[a] * sign[b] * spectrum[:, 3 + c][np.ix_(*stored)]
        turn = [1j if turned[axis] else 1 for axis in (a, b)]
        matrix[:, a, b] = part * turn[1] / turn[0]
        matrix[:, b, a] = part * turn[0] / turn[1]
    return np.einsum("gabyz,gbyz->gayz", matrix, block)


@pytest.mark.parametrize("folded", list(itertools.product((False, True), repeat=3)))
@pytest.mark.parametrize("precision", ["double", "mixed", "single"])
@pytest.mark.parametrize("shape", [(6, 8, 20), (4, 2, 2), (2, 10, 14)])
def test_multiplication(folded, precision, shape):
    halves = [n // 2 + 1 for n in shape]
    lengths = tuple(h if fold else n for h, n, fold in zip(halves, shape, folded, strict=True))
    spectrum = numbers(halves[0], 6, *halves[1:])
    places = np.array([lengths[0] - 1, 0])
    block = numbers(2, 3, lengths[1], lengths[2] | 1, seed=1)
    if precision != "double":
        spectrum = spectrum.astype(np.complex64)
    if precision == "single":
        block = block.astype(np.complex64)
    real = block.real.dtype
    signs = np.array([1, -1, -1], real)
    turned = np.array(folded) & (not all(folded))
    right = expected(
        spectrum.astype(complex), block[..., : lengths[2]].astype(complex), places, lengths,
        folded, signs, turned,
    )  # fmt: skip
    rest = block[..., lengths[2] :].copy()
    planes.multiply(
        spectrum.view(spectrum.real.dtype), block.view(real), places, lengths, np.array(folded),
        signs, turned,
    )  # fmt: skip
    ours = block[..., : lengths[2]]
    rounding = 1e-6 if precision == "single" else 1e-14
    assert np.linalg.norm(ours - right) < rounding * np.linalg.norm(right)
    assert np.array_equal(block[..., lengths[2] :], rest)  # what pads the rows is left alone


def test_planes_go_out_as_they_came_in():
    columns = numbers(6, 3, 4, 5)
    places = np.array([4, 1])
    block = np.full((2, 3, 8, 11), 7 + 7j)
    planes.pad(columns, 4, 3, places, block)
    assert np.array_equal(block[:, :, :4, :3], columns[places][..., :3])
    assert not block[:, :, 4:].any()
    assert not block[:, :, :4, 3:].any()
    before = columns.copy()
    planes.truncate(2 * block, 4, 3, places, columns)
    assert np.array_equal(columns[places][..., :3], 2 * before[places][..., :3])
    untouched = [0, 2, 3, 5]
    assert np.array_equal(columns[untouched], before[untouched])


def test_cells_are_scattered_and_gathered():
    index = np.array([[0, 1, 2], [3, 0, 1], [2, 2, 0]], np.int32)
    shifts = np.array([[1, 0, 0], [0, 1, 0], [0, 0, 0]])  # of each component along x, y, z
    p, out = numbers(3, 3), np.zeros((3, 3), complex)
    columns = np.zeros((5, 3, 4, 3), complex)
    planes.scatter(index, p, shifts, columns, 0, 3)
    assert columns[4, 0, 0, 1] == p[1, 0]
    assert columns[3, 1, 1, 1] == p[1, 1]
    assert np.count_nonzero(columns) == 9
    planes.gather(index, columns, shifts, out, 0, 2)
    assert np.array_equal(out[:2], p[:2])
    assert not out[2].any()
