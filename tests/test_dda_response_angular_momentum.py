"""Clebsch-Gordan coefficients against Racah's formula in exact arithmetic."""

from fractions import Fraction
from math import factorial

import numpy as np
import pytest

from dda.response.angular_momentum import clebsch_gordan, irreducible
from dda.response.vector_waves import wave_count
from dda.response.wave_rotations import rotation_matrix


def racah(j1, m1, j2, m2, j):
    """<j1 m1 j2 m2 | j m1+m2> (Edmonds 1957, equation 3.6.11)."""
    m = m1 + m2
    if abs(m) > j or not abs(j1 - j2) <= j <= j1 + j2:
        return 0.0
    f = factorial
    square = Fraction(
        (2 * j + 1) * f(j1 + j2 - j) * f(j1 - j2 + j) * f(j2 - j1 + j), f(j1 + j2 + j + 1)
    )
    square *= f(j1 + m1) * f(j1 - m1) * f(j2 + m2) * f(j2 - m2) * f(j + m) * f(j - m)
    total = Fraction(0)
    for z in range(j1 + j2 + 1):
        terms = (z, j1 + j2 - j - z, j1 - m1 - z, j2 + m2 - z, j - j2 + m1 + z, j - j1 - m2 + z)
        if min(terms) >= 0:
            total += Fraction((-1) ** z, int(np.prod([f(t) for t in terms], dtype=object)))
    return float(total) * float(square) ** 0.5


@pytest.mark.parametrize(("j1", "j2"), [(1, 1), (1, 2), (2, 1), (3, 2), (4, 4), (7, 5)])
def test_coefficients_are_racahs(j1, j2):
    table = clebsch_gordan(j1, j2)
    for m1 in range(-j1, j1 + 1):
        for m2 in range(-j2, j2 + 1):
            for j in range(abs(j1 - j2), j1 + j2 + 1):
                ours = table[m1 + j1, m2 + j2, j - abs(j1 - j2)]
                assert abs(ours - racah(j1, m1, j2, m2, j)) < 1e-13


def test_they_stay_orthonormal_at_high_orders():
    flat = clebsch_gordan(20, 18)
    for m1 in (0, 20, 37):  # total degree m1 - 18 .. all rows with one sum
        rows = [(a, m1 - a) for a in range(41) if 0 <= m1 - a <= 36]
        part = np.array([flat[a, b] for a, b in rows])
        assert abs(part @ part.T - np.eye(len(rows))).max() < 1e-12


def test_irreducible_tensors_turn_without_mixing_ranks():
    order = 2
    rng = np.random.default_rng(5)
    t = rng.normal(size=(wave_count(order),) * 2) + 1j * rng.normal(size=(wave_count(order),) * 2)
    c, s = np.cos(0.7), np.sin(0.7)
    about_z, about_x = [[c, -s, 0], [s, c, 0], [0, 0, 1]], [[1, 0, 0], [0, s, c], [0, -c, s]]
    turn = np.array(about_z) @ np.array(about_x)
    d = rotation_matrix(order, turn)
    before, after = irreducible(t, order), irreducible(d @ t @ d.conj().T, order)
    for one, two in zip(before, after, strict=True):
        # the sum over M of products of two tensors of one rank is invariant
        a = np.einsum("inlpM,jmkqM->inlpjmkq", one, one.conj())
        b = np.einsum("inlpM,jmkqM->inlpjmkq", two, two.conj())
        assert abs(a - b).max() < 1e-12 * max(abs(a).max(), 1)
    assert np.isclose(
        sum((abs(x) ** 2).sum() for x in before), (abs(t) ** 2).sum()
    )  # nothing is lost
