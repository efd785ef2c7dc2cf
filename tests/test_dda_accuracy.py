"""Error bars: on made-up data with a known limit, and on one real sphere."""

import math

import numpy as np
import pytest

import dda
import shapes
from dda.accuracy import LADDER, Level, extrapolate, refine_at, refine_to, relative_error
from dda.materials import find
from validation.mie import sphere

SIZE = 40.0  # nm


def rung(across, ext=0.0, absorbed=0.0, ripple=0.0, solver=0.0, seconds=0.0):
    """A level whose errors are (ext, absorbed) d^2 and an irregular part that falls as d^2."""
    d = SIZE / across
    wobble = ripple * d**2 * math.sin(2.4 * across)
    c_ext, c_abs = 100 + ext * d**2 + wobble, 40 + absorbed * d**2 - wobble
    values = (c_ext, c_abs, c_ext - c_abs)
    return Level(d, values, (solver,) * 3, across**3, 10, 10, 1e-6, "converged", seconds)


def test_a_parabola_is_extrapolated_exactly():
    d = np.array([4.0, 3.0, 2.0, 1.5])
    fit = extrapolate(d, 7 - 0.3 * d**2, np.zeros(4))
    assert fit.value == pytest.approx(7, rel=1e-12)
    assert fit.order == pytest.approx(2, abs=0.01)
    assert fit.finest == 7 - 0.3 * 1.5**2
    # the finest value is off by 0.675, and its bar must say so
    assert 0.3 * 1.5**2 <= fit.finest_error < 3 * 0.3 * 1.5**2
    assert fit.solver_error == 0
    assert fit.error == fit.spacing_error


@pytest.mark.parametrize("power", [1.0, 1.3, 1.5, 1.8, 2.5, 3.0])
def test_bar_covers_another_order_and_the_order_is_seen(power):
    d = SIZE / np.array([12, 16, 20, 26, 32])
    fit = extrapolate(d, 100 + 0.5 * d**power, np.zeros(5))
    assert fit.order == pytest.approx(power, abs=0.02)
    assert abs(fit.value - 100) < fit.error
    assert abs(fit.finest - 100) < fit.finest_error


def test_bar_covers_scatter_nine_times_in_ten():
    """Irregular errors a third of the smooth one, seeded; five levels cannot do better than 5."""
    generator = np.random.default_rng(3)
    d = SIZE / np.array([12, 16, 20, 26, 32])
    off = []
    for noise in generator.normal(size=(200, 5)):
        fit = extrapolate(d, 100 + 0.3 * d**2 * (1 + noise / 3), np.zeros(5))
        off.append(abs(fit.value - 100) / fit.error)
    assert np.mean(np.array(off) <= 1) >= 0.9
    assert max(off) < 5


def test_two_levels_are_given_the_whole_step():
    d = np.array([3.0, 2.0])
    fit = extrapolate(d, 10 + d**2, np.zeros(2))
    assert fit.value == pytest.approx(10, rel=1e-12)
    assert fit.spacing_error >= 4
    assert fit.finest_error >= 8
    assert math.isnan(fit.order)


def test_no_bar_is_nothing():
    """Values that happen to agree do not show that the value is exact."""
    fit = extrapolate(np.array([3.0, 2.0, 1.0]), np.full(3, 5.0), np.zeros(3), size=20.0)
    assert fit.spacing_error > 1e-4 * 5


def test_small_quantity_is_measured_against_the_large_one():
    d, values = np.array([3.0, 2.0, 1.0]), np.full(3, 0.01)
    alone = extrapolate(d, values, np.zeros(3), size=20.0)
    beside = extrapolate(d, values, np.zeros(3), size=20.0, scale=100.0)
    assert beside.spacing_error > 100 * alone.spacing_error


def test_solver_errors_are_carried_and_weigh():
    d = np.array([4.0, 3.0, 2.5, 2.0])
    values = 100 + d**2
    spoiled = values + np.array([0, 30.0, 0, 0])
    told = extrapolate(d, spoiled, np.array([0.01, 30.0, 0.01, 0.01]))
    untold = extrapolate(d, spoiled, np.full(4, 0.01))
    assert abs(told.value - 100) < 0.2
    assert abs(untold.value - 100) > 5 * abs(told.value - 100)
    assert extrapolate(d, values, np.full(4, 0.5)).solver_error >= 0.5


@pytest.mark.parametrize("spacings", [[2.0], [2.0, 2.0], [1.0, 2.0], [3.0, 1.0, 2.0]])
def test_spacings_must_fall(spacings):
    with pytest.raises(ValueError, match="fall"):
        extrapolate(spacings, np.ones(len(spacings)), np.zeros(len(spacings)))


def test_relative_error_of_what_hardly_absorbs():
    assert relative_error((100, 50, 50), (1, 2, 0)) == pytest.approx(0.04)
    # 1e-3 of C_ext is absorbed: its error counts against a hundredth of C_ext
    assert relative_error((100, 0.1, 99.9), (0.1, 0.05, 0)) == pytest.approx(0.05)
    assert relative_error((0, 0, 0), (1, 1, 1)) == math.inf


def climb(**options):
    """Refine made-up levels and note what was solved."""
    made = {k: options.pop(k) for k in ("ext", "absorbed", "ripple") if k in options}
    asked = []

    def solve(across):
        asked.append(across)
        return rung(across, **made)

    return refine_to(solve, size=SIZE, **options), asked


def test_stops_at_the_target_and_not_before():
    loose, few = climb(ext=1.0, absorbed=0.5, target=0.02)
    tight, many = climb(ext=1.0, absorbed=0.5, target=0.001)
    for found, asked, target in ((loose, few, 0.02), (tight, many, 0.001)):
        assert found.stopped == "target"
        assert found.relative <= target
        assert tuple(asked) == LADDER[: len(asked)]
        assert abs(found.sections[0] - 100) <= found.error[0]
        assert abs(found.sections[1] - 40) <= found.error[1]
        assert len(found.levels) == len(asked)
    assert 3 <= len(few) < len(many)


def test_end_of_the_ladder_is_reported():
    found, asked = climb(ext=1.0, ripple=1.0, target=1e-9, ladder=(8, 10, 12, 14))
    assert (found.stopped, asked) == ("ladder", [8, 10, 12, 14])
    assert found.relative > 1e-9


def test_memory_is_respected():
    found, asked = climb(ext=1.0, ripple=1.0, target=1e-9, fits=lambda across: across <= 20)
    assert (found.stopped, max(asked)) == ("memory", 20)


def test_a_pair_is_solved_even_where_only_one_fits():
    found, asked = climb(ext=1.0, target=1e-9, fits=lambda across: across <= 12)
    assert found.stopped == "memory"
    assert len(asked) == 2
    assert math.isfinite(found.relative)


def test_time_is_respected():
    """Levels said to take 60, 164, 359 s: the third would end after 200 s."""
    found = refine_to(
        lambda n: rung(n, 1.0, ripple=1.0, seconds=60 * (n / 12) ** 3.5), 1e-9, SIZE, seconds=200.0
    )
    assert found.stopped == "minutes"
    assert [v.cells for v in found.levels] == [12**3, 16**3]


def test_value_at_a_spacing_is_not_extrapolated():
    found = refine_at(lambda n: rung(n, ext=1.0, absorbed=0.5, solver=0.01), 24, SIZE)
    assert found.stopped == "asked"
    assert len(found.levels) == 3
    assert found.levels[-1].cells == 24**3
    assert found.sections == found.levels[-1].sections
    d = SIZE / 24
    assert d**2 <= found.spacing_error[0] < 3 * d**2
    assert 0.5 * d**2 <= found.spacing_error[1]
    assert found.solver_error == (0.01,) * 3
    assert found.error[0] == pytest.approx(found.spacing_error[0] + 0.01)


def test_a_single_level_has_no_error_bar():
    found = refine_at(lambda n: rung(n, ext=1.0), 4, SIZE)
    assert len(found.levels) == 1
    assert all(math.isnan(v) for v in found.spacing_error)
    assert not found.relative <= 1.0


def test_a_gold_sphere_lies_within_its_bar():
    """40 nm at 530 nm, in water, against the Mie series."""
    particle, light = shapes.sphere(40, "gold"), dda.plane_wave()

    def solve(across):
        cells = shapes.voxelize(particle, cells=across)
        system = dda.system(cells, 530.0, 1.33)
        done = dda.settle(system, light, tolerance=1e-3)
        p, c = done.polarization, done.sections
        e, a, s = done.error
        return Level(
            cells.spacing, (c.c_ext, c.c_abs, c.c_sca), (e, a, s), system.n, p.iterations,
            p.products, p.residual, p.status, 0.0,
        )  # fmt: skip

    exact = sphere(40, 530, complex(find("gold").permittivity([530.0])[0]), 1.33)
    found = refine_to(solve, 0.01, SIZE)
    assert found.stopped == "target"
    assert len(found.levels) <= 5
    assert found.relative <= 0.01
    for ours, bar, true in zip(
        found.sections, found.error, (exact.c_ext, exact.c_abs, exact.c_sca), strict=True
    ):
        assert abs(ours - true) <= bar
    at = refine_at(solve, 16, SIZE)
    assert abs(at.sections[0] - exact.c_ext) <= at.error[0]
    assert abs(at.sections[1] - exact.c_abs) <= at.error[1]
