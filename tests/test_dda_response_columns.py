"""Many right-hand sides: the same dipoles as solving for each of them directly."""

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest

import dda
import shapes
from dda.lattice.solution import solve_dense
from dda.response import columns as columns_module
from dda.response.columns import Column, solve_columns
from dda.response.symmetry import find_sectors


@dataclass(frozen=True)
class Given:
    values: np.ndarray

    def field(self, positions, k):
        return self.values


PARTICLES = {
    "mirrors": lambda: shapes.cube(edge=30, rounding=5),
    "half turn": lambda: shapes.helix(diameter=30, pitch=24, turns=1.5, thickness=13),
    "none": lambda: shapes.star(24, 5, 14, 8, 4, seed=2),
}


@cache
def case(name):
    """System, sectors, two random columns of every sector, and their exact dipoles."""
    system = dda.system(shapes.voxelize(PARTICLES[name](), cells=5), 560.0, 1.33)
    sectors = find_sectors(system)
    rng = np.random.default_rng(0)
    columns, exact = [], []
    for sector in range(sectors.count):
        home = np.array([sector])
        for _ in range(2):
            field = rng.normal(size=(system.n, 3)) + 0j
            part = np.empty((1, len(sectors.cells), 3), complex)
            sectors.gather(field, home, part)
            field = sectors.spread(part, home, field)
            columns.append(Column(sector, part[0]))
            answer = np.ascontiguousarray(solve_dense(system, Given(field)).p)
            exact.append(sectors.gather(answer, home, np.empty_like(part))[0])
    return system, sectors, columns, exact


@pytest.mark.parametrize("name", PARTICLES)
def test_columns_are_those_of_a_direct_solution(name):
    system, sectors, columns, exact = case(name)
    solved, _ = solve_columns(system, sectors, columns, tolerance=1e-9)
    for one, dipoles in zip(solved, exact, strict=True):
        assert one.status == "converged"
        # the residual leaves room for the condition of the matrix, some thousands
        assert np.linalg.norm(one.dipoles - dipoles) < 1e-5 * np.linalg.norm(dipoles)


@pytest.mark.parametrize("name", PARTICLES)
def test_values_are_better_than_the_dipoles(name):
    system, sectors, columns, exact = case(name)
    solved, _ = solve_columns(system, sectors, columns, tolerance=1e-3)
    for one, column, dipoles in zip(solved, columns, exact, strict=True):
        value = np.sum(column.incident * dipoles)
        error = abs(one.value - value)
        first = np.linalg.norm(one.dipoles - dipoles) / np.linalg.norm(dipoles)
        assert error < 0.1 * first * np.sum(abs(column.incident * dipoles))
        # what is tracked along the way is what the dipoles give
        again = np.sum(column.incident * one.dipoles) + np.sum(one.dipoles * one.remainder)
        assert abs(one.value - again) < 1e-9 * abs(again)


def test_remainder_is_what_the_dipoles_leave():
    system, sectors, columns, _ = case("half turn")
    solved, _ = solve_columns(system, sectors, columns, tolerance=1e-2)
    for one in solved:
        home = np.array([one.sector])
        whole = sectors.spread(one.dipoles[None], home, np.empty((system.n, 3), complex))
        image = sectors.gather(system.matvec(whole), home, np.empty_like(one.dipoles[None]))[0]
        assert abs(one.image - image).max() < 1e-9 * abs(image).max()


def test_a_product_serves_all_sectors_without_mirrors():
    system, sectors, columns, _ = case("half turn")
    solved, products = solve_columns(system, sectors, columns, tolerance=1e-6)
    by_sector = [sum(s.steps for s in solved if s.sector == i) for i in range(sectors.count)]
    assert products == max(by_sector)


def test_mirror_sectors_cost_their_share():
    system, sectors, columns, _ = case("mirrors")
    solved, products = solve_columns(system, sectors, columns, tolerance=1e-6)
    assert products == sum(s.steps for s in solved) / 8


def test_known_columns_are_a_start():
    system, sectors, columns, _ = case("none")
    solved, _ = solve_columns(system, sectors, columns, tolerance=1e-8)
    mixed = Column(0, 2 * columns[0].incident - 3 * columns[1].incident)
    again, products = solve_columns(system, sectors, [mixed], tolerance=1e-6, known=solved)
    assert products == 0
    exact = 2 * solved[0].dipoles - 3 * solved[1].dipoles
    # the known ones were solved to 1e-8
    assert abs(again[0].dipoles - exact).max() < 1e-7 * abs(exact).max()


def test_enough_ends_a_column_early():
    system, sectors, columns, _ = case("none")
    full, most = solve_columns(system, sectors, columns, tolerance=1e-8)
    early, fewer = solve_columns(
        system,
        sectors,
        columns,
        tolerance=1e-8,
        enough=lambda number, value, drift: drift < 1e-3 * abs(value),
    )
    assert fewer < most
    for one, all_ in zip(early, full, strict=True):
        assert one.status == "converged"
        assert abs(one.value - all_.value) <= one.drift


def test_a_column_that_does_not_arrive_goes_to_the_general_solver(monkeypatch):
    system, sectors, columns, exact = case("mirrors")
    asked = []
    original = columns_module.solve

    def spy(*args, **kwargs):
        asked.append(kwargs["start"])
        kwargs["limit"] = 500
        return original(*args, **kwargs)

    monkeypatch.setattr(columns_module, "solve", spy)
    solved, _ = solve_columns(system, sectors, columns[:1], tolerance=1e-9, limit=3)
    assert len(asked) == 1
    assert np.linalg.norm(asked[0]) > 0  # it goes on from what there was
    assert solved[0].status == "converged"
    assert np.linalg.norm(solved[0].dipoles - exact[0]) < 1e-5 * np.linalg.norm(exact[0])
