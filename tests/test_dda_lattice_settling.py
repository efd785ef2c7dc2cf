"""When quantities have settled: made-up sequences whose limit is known."""

import numpy as np
import pytest

from dda.lattice.settling import Settling


def run(sequence, allowed, most=400, after_step=None, residual=lambda n: 0.1, second=False):
    """Steps until the watch stops a made-up iteration whose quantities are ``sequence(step)``."""
    watch = Settling(
        lambda x: np.array([x[0].real]), lambda values: np.array([allowed]), after_step
    )
    watch.by_residual = second
    for step in range(1, most + 1):
        if watch(step, np.array([sequence(step)], complex), residual(step)):
            break
    return step, watch


@pytest.mark.parametrize("rate", [0.8, 0.9, 0.97])
def test_geometric_convergence_stops_within_the_allowed_error(rate):
    """What is left of rate^n after a third of the steps is the error times less than one."""
    step, watch = run(lambda n: 1 + rate**n, 1e-3, residual=lambda n: rate**n)
    assert step < 400
    error = abs(watch.values[-1][0] - 1)
    assert error <= watch.spread[0] <= 1e-3


def test_slow_oscillation_is_not_taken_for_rest():
    """Turning points look like rest; the window of a third of the steps sees past them."""
    step, watch = run(lambda n: 1 + 0.1 * np.cos(2 * np.pi * n / 60) * 0.99**n, 1e-3)
    assert abs(watch.values[-1][0] - 1) <= 1e-3
    assert step > 200


def test_what_moves_on_is_never_settled():
    step, watch = run(lambda n: np.log(n), 1e-3)
    assert step == 400
    assert not watch.settled
    assert watch.spread[0] > 0.2


def test_no_estimate_without_enough_looks():
    watch = Settling(lambda x: np.array([1.0]), lambda v: np.array([1.0]))
    assert not watch.settled
    assert np.all(np.isinf(watch.spread))
    for step in range(1, 9):
        assert not watch(step, np.zeros(1, complex), 1.0)
        assert np.all(np.isinf(watch.spread))


def test_a_short_run_is_not_settled_by_chance():
    """Values that stand still from the first step on still take a dozen steps."""
    step, _ = run(lambda n: 1.0, 1e-12)
    assert 10 <= step <= 20


def test_every_quantity_must_settle():
    def watch_two(allowed):
        watch = Settling(lambda x: np.array([1.0, x[0].real]), lambda v: np.array(allowed))
        for step in range(1, 101):
            if watch(step, np.array([np.log(step)], complex), 1.0):
                return step
        return None

    assert watch_two([1e-3, 1e-3]) is None
    assert watch_two([1e-3, np.inf]) is not None


def test_whoever_watches_can_stop():
    seen = []

    def after_step(step, x, residual):
        seen.append((step, residual))
        return step == 7

    step, _ = run(lambda n: np.log(n), 1e-9, after_step=after_step)
    assert step == 7
    assert seen == [(n, 0.1) for n in range(1, 8)]


def test_a_large_residual_widens_the_estimate():
    """The same quantities with a residual of one: six times the spread, so it goes on longer."""
    sequence = [1 + 0.9**n for n in range(401)]
    quick, _ = run(lambda n: sequence[n], 1e-3, residual=lambda n: 1e-3)
    slow, watch = run(lambda n: sequence[n], 1e-3, residual=lambda n: 1.0)
    assert slow > quick
    assert watch.spread[0] > 5 * np.ptp([v[0] for v in watch.values[-5:]])


@pytest.mark.parametrize("rate", [0.9, 0.97])
def test_second_order_errors_settle_sooner_and_within_what_is_allowed(rate):
    """Errors that fall as the square of the residual, here with a ripple on them."""

    def residual(n):
        return rate**n * (1.5 + np.sin(1.7 * n))

    def sequence(n):
        return 1 + residual(n) ** 2 * np.cos(0.9 * n)

    plain, _ = run(sequence, 1e-3, residual=residual)
    step, watch = run(sequence, 1e-3, residual=residual, second=True)
    assert step < plain
    assert abs(watch.values[-1][0] - 1) <= watch.spread[0] <= 1e-3


def test_iterates_with_large_residuals_are_not_looked_at():
    """Every third iterate is a wild one, and says so by its residual."""

    def sequence(n):
        return 1 + 0.9**n + (5.0 if n % 3 == 0 else 0.0)

    def residual(n):
        return 0.95**n * (10 if n % 3 == 0 else 1)

    step, watch = run(sequence, 1e-3, residual=residual, second=True)
    assert step < 400
    assert not any(step % 3 == 0 for step in watch.steps[1:])
    assert abs(watch.values[-1][0] - 1) <= watch.spread[0] <= 1e-3


def test_a_residual_that_does_not_fall_is_no_ground_for_scaling():
    step, watch = run(lambda n: np.log(n), 1e-3, residual=lambda n: 0.1, second=True)
    assert step == 400
    assert watch.spread[0] > 0.2


def test_an_unknown_residual_makes_the_estimate_wide():
    """Methods that do not tell their residual must hold still for longer."""
    sequence = [1 + 0.9**n for n in range(401)]
    told, _ = run(lambda n: sequence[n], 1e-3, residual=lambda n: 1e-3)
    untold, watch = run(lambda n: sequence[n], 1e-3, residual=lambda n: float("nan"))
    assert untold > told
    assert watch.settled
