"""Interpolation: through the rows, smooth, no overshoot, and better than straight lines."""

import numpy as np
import pytest

from dda.materials import find
from dda.materials.interpolation import TabulatedCurve, TabulatedPermittivity


def test_passes_through_the_rows():
    gold = find("gold").model
    n, k = np.asarray(gold.n), np.asarray(gold.k)
    np.testing.assert_allclose(gold(np.asarray(gold.wavelength_nm)), (n + 1j * k) ** 2, rtol=1e-9)


def test_stays_between_neighbouring_rows():
    wavelength = (400.0, 450.0, 500.0, 550.0, 600.0)
    step = TabulatedCurve(wavelength, (0.0, 0.0, 1.0, 1.0, 1.0))
    values = step(np.linspace(400.0, 600.0, 1001))
    assert values.min() >= 0.0
    assert values.max() <= 1.0
    assert (np.diff(values) >= -1e-15).all()


def test_slope_is_continuous_at_a_row():
    """A straight-line interpolant would jump here by tens of per cent of the slope."""
    gold, row = find("gold"), 520.9
    h = 1e-3
    left = (gold.permittivity(row) - gold.permittivity(row - h)) / h
    right = (gold.permittivity(row + h) - gold.permittivity(row)) / h
    assert abs(right - left) < 1e-3 * abs(left)


@pytest.mark.parametrize("page", ["main/Au/Magnozzi-25C", "main/Cu/McPeak", "main/Ag/Ferrera-298K"])
def test_restores_a_thinned_table_better_than_straight_lines(page):
    dense = find(page).model
    sparse = np.asarray(find("gold").model.wavelength_nm)
    rows = np.asarray(dense.wavelength_nm)
    sparse = sparse[(sparse > rows[0]) & (sparse < rows[-1])]
    index = np.sqrt(dense(sparse))
    curve = TabulatedPermittivity(tuple(sparse), tuple(index.real), tuple(index.imag))
    wavelength = np.linspace(400.0, 1000.0, 601)
    truth = dense(wavelength)
    lines = np.interp(wavelength, sparse, index.real) + 1j * np.interp(
        wavelength, sparse, index.imag
    )
    ours = np.abs(curve(wavelength) / truth - 1)
    theirs = np.abs(lines**2 / truth - 1)
    assert np.sqrt(np.mean(ours**2)) < 0.6 * np.sqrt(np.mean(theirs**2))


def test_one_row_is_a_constant():
    assert TabulatedCurve((589.0,), (1.5,))(np.array([589.0, 589.0])).tolist() == [1.5, 1.5]
