"""What the comparison of preconditioners compares, on systems small enough to be written out."""

import numpy as np
import pytest

import dda
import shapes
from dda.lattice.krylov import Iteration, cocg
from validation.preconditioners import block_cocg, circulant, coarse_grid, deflation, slow_modes


@pytest.fixture(scope="module")
def system():
    body = shapes.ellipsoid((30, 24, 20), "gold").rotated(35, (1, 2, 3))
    cells = shapes.voxelize(body, cells=4)
    return dda.system(cells, 560, "water")


@pytest.fixture(scope="module")
def matrix(system):
    return np.stack([system.matvec(v) for v in np.eye(3 * system.n, dtype=complex)], axis=1)


def field(system, seed=0):
    return np.random.default_rng(seed).normal(size=(3 * system.n, 2)) @ [1, 1j]


@pytest.mark.parametrize("build", [circulant, coarse_grid])
def test_preconditioners_are_complex_symmetric(system, build):
    apply = build(system)
    u, v = field(system), field(system, 1)
    assert np.dot(u, apply(v)) == pytest.approx(np.dot(v, apply(u)), rel=1e-10)


def test_circulant_undoes_the_operator_on_the_padded_box():
    """For a body that fills a box, both are exact inverses of one another up to the edges: the
    matrix of the preconditioner is the box's part of the inverse over the torus."""
    cells = shapes.voxelize(shapes.cuboid((6, 6, 6), material="1.5"), spacing=3.0)
    system = dda.system(cells, 500, "vacuum", surface="whole")
    n = len(system.index)
    lengths = system.convolution.kernel.padded
    torus = np.stack(np.meshgrid(*map(np.arange, lengths), indexing="ij"), -1).reshape(-1, 3)
    # the interaction over the torus, from the fields of unit dipoles on the box around it
    from dda.lattice.green import radial_table, tensor

    reach = [(np.arange(m) + m // 2) % m - m // 2 for m in lengths]
    difference = np.stack(
        [reach[a][(torus[:, None, a] - torus[None, :, a]) % lengths[a]] for a in range(3)], -1
    )
    half = [m // 2 for m in lengths]
    inside = np.all(abs(difference) < np.array(system.cells.shape), axis=-1)
    table = radial_table("fcd-corners", 3.0, system.k, 3 * max(half) ** 2)
    pairs = np.where(inside[..., None, None], tensor(table, difference), 0)
    own = system.alpha_inverse.scalar[0]
    whole = own * np.eye(3 * len(torus)) - pairs.transpose(0, 2, 1, 3).reshape(3 * len(torus), -1)
    inverse = np.linalg.inv(whole).reshape(len(torus), 3, len(torus), 3)
    place = np.ravel_multi_index(tuple(system.index.T), lengths)
    expected = inverse[place][:, :, place].reshape(3 * n, 3 * n)
    ours = np.stack([circulant(system)(v) for v in np.eye(3 * n, dtype=complex)], axis=1)
    assert ours == pytest.approx(expected, rel=1e-9, abs=1e-12 * abs(expected).max())


def test_coarse_grid_solves_for_what_is_equal_in_its_cubes(system, matrix):
    _, member = np.unique(system.index // 2, axis=0, return_inverse=True)
    coarse = np.random.default_rng(2).normal(size=(member.max() + 1, 3)) + 0j
    fine = coarse[member].ravel()
    r = matrix @ fine
    assert coarse_grid(system)(r) - system.precondition(r) == pytest.approx(fine, rel=1e-8)


def test_slow_modes_are_the_eigenvectors_nearest_zero(system, matrix):
    steps = 200
    scaled = np.stack([system.precondition(column) for column in matrix.T], axis=1)
    nearest = np.sort(abs(np.linalg.eigvals(scaled)))[:2]
    modes = slow_modes(system, field(system), 2, steps)
    for mode in modes:
        mode = mode / np.linalg.norm(mode)
        value = np.vdot(mode, scaled @ mode)
        # the matrix is not normal and the spectrum's edge dense: 200 steps come this near
        assert abs(value) < 1.05 * nearest[-1]
        assert np.linalg.norm(scaled @ mode - value * mode) < 0.02 * abs(value)


def test_deflated_solution_is_the_solution(system, matrix):
    b = field(system, 3)
    space = deflation(system, slow_modes(system, b, 5, 40))
    rules = Iteration(tolerance=1e-9, subspace=space)
    found = cocg(system, b, system.precondition, rules)
    assert found.x == pytest.approx(np.linalg.solve(matrix, b), rel=1e-6, abs=1e-6 * abs(b).max())


def test_block_solves_all_its_columns(system, matrix):
    b = np.stack([field(system, 4), field(system, 5)])
    x, steps = block_cocg(system, b, 1e-10, 400)
    exact = np.linalg.solve(matrix, b.T).T
    assert steps < 400
    assert np.linalg.norm(x - exact) < 1e-7 * np.linalg.norm(exact)
