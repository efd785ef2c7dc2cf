"""The solver's share of the error: the estimate against direct and far tighter solutions."""

import numpy as np
import pytest

import dda
import shapes
from dda.lattice import solve_dense
from dda.response.sections import cross_sections
from dda.response.settled import settle

LIGHT = dda.plane_wave()


def values(sections):
    return np.array([sections.c_ext, sections.c_abs, sections.c_sca])


def off(done, exact):
    """True solver errors of C_ext, C_abs, C_sca in nm^2."""
    return np.abs(values(done.sections) - values(exact))


def make(particle, wavelength, across, host=1.33, **options):
    return dda.system(shapes.voxelize(particle, cells=across), wavelength, host, **options)


# Metals in the places where iterations are slow, and an easy dielectric; (particle, wavelength).
DENSE = {
    "silver sphere": (lambda: shapes.sphere(40, "silver"), 400, 8),
    "silver ellipsoid": (lambda: shapes.ellipsoid((30, 20, 20), "silver"), 420, 10),
    "gold cube": (lambda: shapes.cube(edge=40, rounding=6, material="gold"), 640, 7),
    "gold sphere": (lambda: shapes.sphere(80, "gold"), 785, 8),
    "silicon sphere": (lambda: shapes.sphere(100, "silicon"), 500, 8),
}


@pytest.mark.parametrize("name", DENSE)
def test_estimate_holds_against_the_direct_solution(name):
    """True error below the estimate, with a factor of 3 for an estimate that is one spread, and
    below the tolerance."""
    body, wavelength, across = DENSE[name]
    system = make(body(), wavelength, across)
    exact = cross_sections(solve_dense(system, LIGHT))
    floor = 1e-6 * exact.c_ext
    for tolerance in (1e-2, 1e-3):
        done = settle(system, LIGHT, tolerance=tolerance)
        assert done.polarization.status == "converged"
        error = off(done, exact)
        assert np.all(error <= 3 * done.error + floor)
        assert error[0] <= 3 * tolerance * exact.c_ext
        assert error[1] <= 3 * tolerance * exact.c_abs
        # two sectors are lit, each allowed the tolerance
        assert done.error[0] <= 2 * tolerance * exact.c_ext
        assert done.error[1] <= 2 * tolerance * exact.c_abs


@pytest.mark.parametrize("wavelength", [380, 400, 450])
def test_estimate_holds_for_silver_against_a_tight_run(wavelength):
    system = make(shapes.sphere(50, "silver"), wavelength, 12)
    done = settle(system, LIGHT)
    tight = dda.solve(system, LIGHT, tolerance=1e-9, limit=6000)
    assert tight.status == "converged"
    exact = cross_sections(tight)
    assert np.all(off(done, exact) <= 3 * done.error + 1e-6 * exact.c_ext)
    # by how much depends on rounding: on a slow case it moves the stop by some hundred products
    assert done.polarization.products < tight.products


def test_tolerance_costs_products_and_pays():
    system = make(shapes.sphere(40, "silver"), 400, 8)
    exact = cross_sections(solve_dense(system, LIGHT))
    loose, tight = (settle(system, LIGHT, tolerance=t) for t in (3e-2, 1e-4))
    assert loose.polarization.products < tight.polarization.products
    assert np.all(tight.error[:2] < loose.error[:2])
    assert off(tight, exact)[1] <= 3e-4 * exact.c_abs


def test_particle_without_mirrors_and_skew_light():
    body = shapes.ellipsoid((40, 24, 20), "gold").rotated(35, (1, 2, 3))
    system = make(body, 650, 10)
    light = dda.plane_wave((1, 2, -1), (1, 0, 1))
    done = settle(system, light)
    exact = cross_sections(solve_dense(system, light))
    assert done.polarization.status == "converged"
    assert np.all(off(done, exact) <= 3 * done.error + 1e-6 * exact.c_ext)


@pytest.mark.parametrize("sense", ["left", "right"])
def test_circular_light(sense):
    """On a body of two unlike halves, in one direction, against the direct solution."""
    body = shapes.ellipsoid((40, 24, 20), "gold").rotated(35, (1, 2, 3))
    system = make(body, 600, 10)
    light = dda.plane_wave((0, 0, 1), sense)
    done = settle(system, light)
    exact = cross_sections(solve_dense(system, light))
    assert done.polarization.status == "converged"
    assert np.all(off(done, exact) <= 3e-3 * exact.c_ext)


def test_first_guess_changes_no_answer_and_saves_products():
    cells = shapes.voxelize(shapes.cube(edge=40, rounding=6, material="gold"), cells=7)
    at = {w: dda.system(cells, w, "water") for w in (600, 605, 610)}
    plain = {w: settle(s, LIGHT) for w, s in at.items()}
    near = [plain[w].polarization.p for w in (600, 605)]
    exact = cross_sections(solve_dense(at[610], LIGHT))
    products = {}
    for options in ({"start": near[1]}, {"previous": near}):
        helped = settle(at[610], LIGHT, **options)
        assert helped.polarization.status == "converged"
        assert np.all(off(helped, exact)[:2] <= 3e-3 * exact.c_ext)
        products[next(iter(options))] = helped.polarization.products
    # One neighbour as it stands may bring more slow waves than it saves; the best combination
    # of two does not.
    assert products["previous"] < plain[610].polarization.products


def test_previous_solutions_without_part_in_a_sector_are_no_trouble():
    system = make(shapes.sphere(40, "gold"), 560, 9)
    nothing = np.zeros((system.n, 3), complex)
    plain = settle(system, LIGHT)
    same = settle(system, LIGHT, previous=[nothing])
    assert values(same.sections) == pytest.approx(values(plain.sections), rel=1e-12)


def test_exact_first_guess_is_kept():
    system = make(shapes.sphere(40, "gold"), 560, 9)
    exact = solve_dense(system, LIGHT)
    done = settle(system, LIGHT, start=exact.p)
    assert done.polarization.status == "converged"
    assert done.polarization.iterations <= 2
    assert values(done.sections) == pytest.approx(values(cross_sections(exact)), rel=1e-6)
    # told from the residual, as there is nothing to see settle
    assert np.all(done.error <= 1e-4 * done.sections.c_ext)


def test_limit_is_reported_with_the_error_reached():
    system = make(shapes.sphere(40, "silver"), 400, 8)
    exact = cross_sections(solve_dense(system, LIGHT))
    done = settle(system, LIGHT, tolerance=1e-6, limit=40)
    assert done.polarization.status == "limit"
    assert done.polarization.iterations == 40
    assert np.all(np.isfinite(done.error))
    assert done.error[1] > 1e-6 * exact.c_abs
    assert np.all(off(done, exact) <= 3 * done.error)


def test_a_few_steps_give_no_small_error():
    """With less than an estimate takes, the error comes from the residual and is not small."""
    system = make(shapes.sphere(40, "silver"), 400, 8)
    done = settle(system, LIGHT, limit=4)
    assert done.polarization.status == "limit"
    assert done.error[0] > 0.1 * done.sections.c_ext


def test_particle_that_absorbs_nothing_converges():
    system = make(shapes.sphere(100, "1.5"), 500, 9, host=1.0)
    done = settle(system, LIGHT)
    assert done.polarization.status == "converged"
    assert done.polarization.products < 60
    assert abs(done.sections.c_abs) < 1e-3 * done.sections.c_ext


def test_single_precision():
    double, single = (
        settle(make(shapes.sphere(40, "gold"), 560, 10, precision=p), LIGHT)
        for p in ("double", "single")
    )
    assert single.polarization.status == "converged"
    # Each may be off by its tolerance of 1e-3.
    assert values(single.sections) == pytest.approx(values(double.sections), rel=4e-3)


def test_monitor_sees_every_step():
    system = make(shapes.sphere(40, "gold"), 785, 8)
    steps = []

    def monitor(step, x, residual):
        steps.append(step)
        return False

    done = settle(system, LIGHT, monitor=monitor)
    assert len(steps) >= done.polarization.iterations - 1
    # the step that ends the iteration by itself is not shown
    assert max(steps) >= done.polarization.iterations - 1


def test_mixed_precision_gives_the_answers_of_double():
    """To a residual of 1e-6: the cross sections to 1e-5 of their values, half the kernel."""
    cells = shapes.voxelize(shapes.sphere(60, "gold"), cells=10)
    found = {}
    for precision in ("double", "mixed"):
        system = dda.system(cells, 700, "water", precision=precision)
        found[precision] = dda.solve(system, LIGHT, tolerance=1e-6)
        assert found[precision].status == "converged"
        assert found[precision].p.dtype == np.complex128
    mixed, double = (cross_sections(found[k]) for k in ("mixed", "double"))
    assert values(mixed) == pytest.approx(values(double), rel=1e-5)
    # the residual it states is that of the double-precision system, up to its rounded kernel
    rest = found["double"].incident - found["double"].system.matvec(found["mixed"].p)
    scale = found["double"].system.precondition
    true = np.linalg.norm(scale(rest)) / np.linalg.norm(scale(found["double"].incident))
    assert true < 1.5e-6
    kernels = [found[k].system.convolution.kernel.spectrum.nbytes for k in ("mixed", "double")]
    assert 2 * kernels[0] == kernels[1]


@pytest.mark.parametrize("method", ["cocr", "idr"])
def test_mixed_precision_with_other_methods(method):
    system = make(shapes.sphere(40, "gold"), 540, 9, precision="mixed")
    exact = cross_sections(solve_dense(make(shapes.sphere(40, "gold"), 540, 9), LIGHT))
    done = settle(system, LIGHT, method=method)
    assert done.polarization.status == "converged"
    assert np.all(off(done, exact) <= 3 * done.error + 1e-6 * exact.c_ext)
