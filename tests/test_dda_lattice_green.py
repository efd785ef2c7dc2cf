"""Green tensors: the textbook formula, the filter's limits and its band in reciprocal space."""

import numpy as np
import pytest
from scipy.integrate import quad

from dda.lattice.green import COMPONENTS, octant, radial_table, tensor

D, K = 2.5, 0.08  # nm, 1/nm: k d = 0.2


def textbook(r: np.ndarray, k: float) -> np.ndarray:
    """Field tensor of a dipole (Jackson 1999, equation 9.18, Gaussian units), at r (3,)."""
    distance = np.linalg.norm(r)
    dyad = np.outer(r, r) / distance**2
    far = k**2 * (np.eye(3) - dyad)
    near = (3 * dyad - np.eye(3)) * (1 / distance**2 - 1j * k / distance)
    return np.exp(1j * k * distance) / distance * (far + near)


def test_point_tensor_is_the_dipole_field():
    steps = np.array([[1, 0, 0], [1, 2, 3], [-4, 2, 0], [7, -7, 7]])
    table = radial_table("point", D, K, int((steps**2).sum(axis=1).max()))
    expected = np.array([textbook(D * s, K) for s in steps])
    # The same closed form written another way: rounding only.
    assert tensor(table, steps) == pytest.approx(expected, rel=1e-13, abs=1e-20)


def test_point_tensor_is_the_second_derivative_of_the_outgoing_wave():
    """G = (k^2 + grad grad) exp(ikr)/r by central differences, good to step^2 = 1e-6."""
    place, h = D * np.array([2.0, 1.0, -3.0]), 0.02

    def wave(r):
        distance = np.linalg.norm(r)
        return np.exp(1j * K * distance) / distance

    unit = h * np.eye(3)
    numeric = np.empty((3, 3), complex)
    for a in range(3):
        for b in range(3):
            corners = [
                s * t * wave(place + s * unit[a] + t * unit[b]) for s in (1, -1) for t in (1, -1)
            ]
            numeric[a, b] = sum(corners) / (4 * h**2) + (a == b) * K**2 * wave(place)
    ours = tensor(radial_table("point", D, K, 14), np.array([2, 1, -3]))
    assert abs(numeric - ours).max() < 1e-4 * abs(ours).max()


def filtered_wave(r: float, k: float, cut: float) -> complex:
    """exp(ikr)/r without the spatial frequencies above `cut`, from the Fourier integral itself.

    g(r) = (2/(pi r)) int_0^cut q sin(qr)/(q^2 - k^2 - i0) dq: the pole gives (pi/2) i sin(kr) and a
    principal value, which is taken as a Cauchy integral.
    """
    regular, _ = quad(
        lambda q: q * np.sin(q * r) / (q + k), 0, cut, weight="cauchy", wvar=k, limit=400
    )
    return (2 / (np.pi * r)) * (regular + 0.5j * np.pi * np.sin(k * r))


def test_filtered_tensor_is_the_truncated_fourier_integral():
    """Along an axis: k^2 g + g'' + (4 pi/3) h longitudinal and k^2 g + g'/r + ... transverse.

    h is the truncated delta function and (4 pi/3) h takes the place of the delta function's part
    of grad grad (1/r) (Piller & Martin 1998). Central differences limit the agreement to 1e-5.
    """
    cut, h = np.pi / D, 2e-3
    table = radial_table("fcd", D, K, 25)
    for m in (1, 2, 3, 5):
        r = m * D
        left, middle, right = (filtered_wave(s, K, cut) for s in (r - h, r, r + h))
        slope, bend = (right - left) / (2 * h), (right - 2 * middle + left) / h**2
        delta = (np.sin(cut * r) - cut * r * np.cos(cut * r)) / (2 * np.pi**2 * r**3)
        common = K**2 * middle + 4 * np.pi / 3 * delta
        g = tensor(table, np.array([m, 0, 0]))
        scale = abs(g).max()
        assert abs(g[0, 0] - (common + bend)) < 1e-5 * scale
        assert abs(g[1, 1] - (common + slope / r)) < 1e-5 * scale


def test_filtered_tensor_tends_to_the_point_tensor_far_away():
    """The edge of the band at pi/d leaves ripples (-1)^m that fall as 1/R like the wave itself; a
    smooth average over neighbouring distances removes them and the wave stays."""
    steps = np.arange(60, 100)
    places = np.stack([steps, 0 * steps, 0 * steps], axis=1)
    point, fcd = (tensor(radial_table(kind, D, K, 99**2), places) for kind in ("point", "fcd"))
    weight = np.hanning(len(steps)) * steps * np.exp(-1j * K * D * steps)
    for a in (0, 1):
        ours, expected = (np.sum(weight * g[:, a, a]) for g in (fcd, point))
        assert abs(ours - expected) < 1e-3 * abs(expected)


def test_imaginary_part_is_untouched_by_the_filter():
    """Im G is made of waves of frequency k alone, which the filter keeps; at contact it is the
    radiation reaction (2/3) k^3, to order (k d)^2/5."""
    steps = np.array([[1, 0, 0], [2, 1, 0], [3, 3, 3]])
    point, fcd = (tensor(radial_table(kind, D, K, 27), steps) for kind in ("point", "fcd"))
    corners = tensor(radial_table("fcd-corners", D, K, 27), steps)
    assert fcd.imag == pytest.approx(point.imag, rel=1e-10)
    assert corners.imag == pytest.approx(point.imag, rel=1e-10)
    assert fcd[0, 1, 1].imag == pytest.approx(2 / 3 * K**3, rel=(K * D) ** 2 / 4)


@pytest.fixture(scope="module")
def lattice_sum():
    """Fourier sum of d^3 G over a ball of cells, for k d -> 0, as a function of kernel and q d.

    The lattice carries what the filter lets through, so no image of the band overlaps. The sum
    misses what lies beyond the ball, smoothed by a Gaussian taper, which blurs q by 0.11.
    """
    reach, taper = 30, 9.0
    line = np.arange(-reach, reach + 1)
    steps = np.stack(np.meshgrid(line, line, line, indexing="ij"), axis=-1).reshape(-1, 3)
    weight = np.exp(-((steps**2).sum(axis=1)) / (2 * taper**2))
    tables = {
        kind: tensor(radial_table(kind, 1.0, 1e-4, 3 * reach**2), steps).real
        for kind in ("fcd", "fcd-corners")
    }

    def total(kind, q):
        own = -8 * np.pi / 3 * (1 - np.pi / 6) if kind == "fcd-corners" else 0.0
        waves = np.cos(steps @ np.asarray(q)) * weight
        return np.einsum("n,nab->ab", waves, tables[kind]) + own * np.eye(3)

    return total


@pytest.mark.parametrize("kind", ["fcd", "fcd-corners"])
@pytest.mark.parametrize("q", [(1.2, 0, 0), (1.0, 1.0, 0.5), (0.3, -1.1, 1.6)])
def test_static_filtered_tensor_in_the_band(lattice_sum, kind, q):
    """4 pi/3 - 4 pi qq/q^2, the exact electrostatic interaction; the taper leaves 2 % of 4 pi."""
    expected = 4 * np.pi / 3 * np.eye(3) - 4 * np.pi * np.outer(q, q) / np.dot(q, q)
    assert abs(lattice_sum(kind, q) - expected).max() < 0.02 * 4 * np.pi


@pytest.mark.parametrize(("kind", "value"), [("fcd", 0.0), ("fcd-corners", -8 * np.pi / 3)])
@pytest.mark.parametrize("q", [(np.pi, np.pi, np.pi), (np.pi, np.pi, 2.0)])
def test_static_filtered_tensor_in_the_corners_of_the_zone(lattice_sum, kind, value, q):
    """Beyond the sphere of radius pi/d nothing, or what longitudinal waves get: 4 pi/3 - 4 pi."""
    assert abs(lattice_sum(kind, q) - value * np.eye(3)).max() < 0.02 * 4 * np.pi


def test_octant_holds_the_tensors_components():
    table = radial_table("fcd", D, K, 3 * 9)
    steps = np.stack(np.meshgrid(*[np.arange(4)] * 3, indexing="ij"), axis=-1)
    dense = tensor(table, steps)
    for component, (a, b) in enumerate(COMPONENTS):
        expected = dense[..., a, b]
        expected[0, 0, 0] = 0
        assert octant(table, component, (4, 4, 4)) == pytest.approx(expected, rel=1e-13, abs=1e-20)


def test_a_cell_does_not_act_on_itself():
    table = radial_table("fcd", D, K, 3)
    assert np.all(tensor(table, np.zeros(3, int)) == 0)


def test_bad_arguments_are_refused():
    with pytest.raises(ValueError, match="fcd, point"):
        radial_table("other", D, K, 3)
    with pytest.raises(ValueError, match="too coarse"):
        radial_table("fcd", D, np.pi / D, 3)
