"""The iteration on matrices small enough for the direct solution."""

import numpy as np
import pytest
from scipy.sparse.linalg import aslinearoperator

from dda.lattice import krylov
from dda.lattice.krylov import Iteration, Subspace


def cocg(operator, b, preconditioner=None, **rules):
    return krylov.cocg(operator, b, preconditioner, Iteration(**rules))


def complex_symmetric(n, seed, shift=3.0):
    """Random A = A^T, and b; the shift keeps the eigenvalues off zero."""
    generator = np.random.default_rng(seed)
    a = generator.normal(size=(n, n, 2)) @ [1, 1j] / np.sqrt(n)
    a = (a + a.T) / 2 + shift * np.eye(n)
    return a, generator.normal(size=(n, 2)) @ [1, 1j]


@pytest.mark.parametrize("n", [1, 2, 7, 60])
@pytest.mark.parametrize("seed", [0, 1])
def test_against_elimination(n, seed):
    a, b = complex_symmetric(n, seed)
    result = cocg(aslinearoperator(a), b, tolerance=1e-11)
    assert result.status == "converged"
    # The condition number is about 3, so the error is within a factor of it of the residual.
    assert result.x == pytest.approx(np.linalg.solve(a, b), rel=1e-10, abs=1e-10)
    assert result.residual <= 1e-11
    assert result.products == result.iterations == len(result.history)


def test_preconditioner_saves_steps_and_changes_no_answer():
    a, b = complex_symmetric(80, 2, shift=0)
    a += np.diag(np.logspace(0.5, 3, 80))
    scale = 1 / np.diag(a)
    plain = cocg(aslinearoperator(a), b, tolerance=1e-10)
    helped = cocg(aslinearoperator(a), b, lambda r: scale * r, tolerance=1e-10)
    assert plain.status == helped.status == "converged"
    assert helped.iterations < 0.6 * plain.iterations
    # The condition number is 300.
    assert np.linalg.norm(plain.x - helped.x) < 1e-7 * np.linalg.norm(helped.x)


def test_residual_is_that_of_the_answer():
    a, b = complex_symmetric(50, 3)
    result = cocg(aslinearoperator(a), b, tolerance=1e-6)
    true = np.linalg.norm(b - a @ result.x) / np.linalg.norm(b)
    # The recurrence and the recomputed residual part by rounding only, 1e-15 of 1e-6.
    assert result.residual == pytest.approx(true, rel=1e-6)


def test_start_vector_is_used():
    a, b = complex_symmetric(40, 4)
    exact = np.linalg.solve(a, b)
    at_once = cocg(aslinearoperator(a), b, start=exact, tolerance=1e-8)
    assert (at_once.status, at_once.iterations, at_once.products) == ("converged", 0, 1)
    far = cocg(aslinearoperator(a), b, tolerance=1e-10)
    near = cocg(aslinearoperator(a), b, start=exact * (1 + 1e-5), tolerance=1e-10)
    assert near.iterations < far.iterations
    assert near.x == pytest.approx(exact, rel=1e-8, abs=1e-8)


def test_zero_right_hand_side():
    a, b = complex_symmetric(5, 5)
    result = cocg(aslinearoperator(a), 0 * b)
    assert result.status == "converged"
    assert np.all(result.x == 0)


def test_limit_is_reported():
    a, b = complex_symmetric(60, 6, shift=0.1)
    result = cocg(aslinearoperator(a), b, tolerance=1e-12, limit=5)
    assert (result.status, result.iterations) == ("limit", 5)
    assert result.residual > 1e-12


def test_breakdown_is_reported_and_not_hidden():
    """p.A p = 0 in the first step although A is regular: nothing to divide by."""
    a = np.array([[0, 1], [1, 0]], complex)
    result = cocg(aslinearoperator(a), np.array([1, 0], complex), tolerance=1e-10)
    assert result.status == "stalled"
    assert np.all(np.isfinite(result.x))
    assert result.residual > 0.5


def test_quasi_null_start_is_reported():
    """r.r = 0 with r not zero, the other way the recurrence can break down."""
    a = np.array([[2, 0], [0, 3]], complex)
    result = cocg(aslinearoperator(a), np.array([1, 1j]), tolerance=1e-10)
    assert result.status == "stalled"
    assert np.all(np.isfinite(result.x))


def test_monitor_stops_the_iteration():
    a, b = complex_symmetric(60, 7)
    seen = []

    def monitor(step, x, residual):
        seen.append((step, residual))
        return step == 3

    result = cocg(aslinearoperator(a), b, tolerance=1e-14, monitor=monitor)
    assert result.status == "stopped"
    assert [step for step, _ in seen] == [1, 2, 3]
    assert [r for _, r in seen] == list(result.history)


def test_single_precision_stays_single():
    a, b = complex_symmetric(30, 8)
    result = cocg(aslinearoperator(a.astype(np.complex64)), b.astype(np.complex64), tolerance=1e-5)
    assert result.x.dtype == np.complex64
    assert result.status == "converged"
    # Residual 1e-5 times a condition number of about 3.
    error = np.linalg.norm(result.x - np.linalg.solve(a, b)) / np.linalg.norm(result.x)
    assert error < 1e-4


@pytest.mark.parametrize("method", sorted(krylov.METHODS))
def test_every_method_solves_and_counts(method):
    rng = np.random.default_rng(3)
    a = rng.normal(size=(40, 40)) + 1j * rng.normal(size=(40, 40))
    a = a + a.T + (30 + 5j) * np.eye(40)
    b = rng.normal(size=40) + 0j
    counted = []

    class Operator:
        shape, dtype = a.shape, a.dtype

        def matvec(self, v):
            counted.append(1)
            return a @ v

    result = krylov.METHODS[method](
        Operator(), b, lambda r: r / np.diag(a), Iteration(tolerance=1e-9)
    )
    assert result.status == "converged"
    # A residual of 1e-9 and a condition number below 10.
    assert result.x == pytest.approx(np.linalg.solve(a, b), rel=1e-6, abs=1e-9)
    assert result.products == len(counted)


@pytest.mark.parametrize("method", sorted(krylov.METHODS))
def test_every_method_stops_when_told_to(method):
    a = np.diag(np.linspace(1, 100, 300)).astype(complex)
    b = np.ones(300, complex)
    rules = Iteration(tolerance=1e-12, monitor=lambda step, x, residual: True)
    result = krylov.METHODS[method](aslinearoperator(a), b, None, rules)
    assert result.status == "stopped"
    assert 0 < np.linalg.norm(a @ result.x - b) < np.linalg.norm(b)


def test_subspace_that_nearly_holds_the_solution():
    """The residual stays orthogonal to it, so that b.x is good to second order; fewer steps."""
    a, b = complex_symmetric(80, 7, shift=1.5)
    exact = np.linalg.solve(a, b)
    near = [exact + 0.05 * v * abs(exact).max() for v in complex_symmetric(80, 8)[0][:3]]
    operator = aslinearoperator(a)
    known = Subspace.of(operator, [*near, near[0], 0 * b])  # doubles and nothing are dropped
    assert len(known.vectors) == 3
    assert known.images == pytest.approx(known.vectors @ a, rel=1e-12, abs=1e-13)
    plain = cocg(operator, b, tolerance=1e-9)
    helped = cocg(operator, b, subspace=known, tolerance=1e-9)
    assert helped.status == "converged"
    assert helped.iterations < plain.iterations
    assert helped.x == pytest.approx(exact, rel=1e-6, abs=1e-7)
    early = cocg(operator, b, subspace=known, tolerance=1e-2)
    rest = b - a @ early.x
    assert np.all(abs(known.vectors @ rest) < 1e-10)
    assert abs(b @ early.x - b @ exact) < 0.1 * early.residual * abs(b @ exact)
    assert Subspace.of(operator, [0 * b]) is None


@pytest.mark.parametrize("method", sorted(krylov.METHODS))
def test_single_precision_products_reach_double_answers(method):
    """With the residual corrected in double; without, single precision stays above 1e-7."""
    a, b = complex_symmetric(70, 9)
    low, high = aslinearoperator(a.astype(np.complex64)), aslinearoperator(a)
    rules = Iteration(tolerance=1e-11, exact=high)
    result = krylov.iterate(method, low, b, None, rules)
    assert result.status == "converged"
    assert result.x.dtype == np.complex128
    true = np.linalg.norm(b - a @ result.x) / np.linalg.norm(b)
    assert true < 1.1e-11  # the residual is that of the answer, rounded in single precision
    assert result.x == pytest.approx(np.linalg.solve(a, b), rel=1e-9, abs=1e-10)


def test_renewed_residuals_cost_few_steps():
    a, b = complex_symmetric(300, 10, shift=1.6)
    low, high = aslinearoperator(a.astype(np.complex64)), aslinearoperator(a)
    plain = cocg(high, b, tolerance=1e-9)
    mixed = krylov.iterate("cocg", low, b, None, Iteration(tolerance=1e-9, exact=high))
    assert mixed.status == "converged"
    # Restarting from scratch at every renewal takes half as many again.
    assert mixed.iterations <= 1.15 * plain.iterations


def test_mixed_precision_monitor_sees_the_whole_iterate():
    a, b = complex_symmetric(60, 11)
    exact = np.linalg.solve(a, b)
    errors = []

    def monitor(step, x, residual):
        errors.append(np.linalg.norm(x - exact))
        return False

    rules = Iteration(tolerance=1e-9, exact=aslinearoperator(a), monitor=monitor)
    krylov.iterate("cocr", aslinearoperator(a.astype(np.complex64)), b, None, rules)
    assert errors[-1] < 1e-7 * np.linalg.norm(exact)
    assert max(errors[len(errors) // 2 :]) < 1e-2 * np.linalg.norm(exact)


def test_idr_takes_no_more_steps_than_its_theory_allows():
    """At most n + n/s products for n unknowns, in exact arithmetic."""
    a, b = complex_symmetric(60, 12)
    for shadow in (1, 2, 8):
        rules = Iteration(tolerance=1e-10, shadow=shadow)
        result = krylov.idr(aslinearoperator(a), b, None, rules)
        assert result.status == "converged"
        assert result.products <= 60 + 60 // shadow + 1


def test_breakdown_goes_on_with_another_method():
    a = np.array([[0, 1], [1, 0]], complex)
    b = np.array([1, 0], complex)
    result = krylov.iterate("cocg", aslinearoperator(a), b, None, Iteration(tolerance=1e-10))
    assert result.status == "converged"
    assert result.x == pytest.approx([0, 1], abs=1e-9)
