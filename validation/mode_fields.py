"""Fields of the spherical modes that an x-polarised plane wave along z excites in a sphere.

Functions M_o1n, M_e1n, N_o1n, N_e1n of Bohren & Huffman (1983), equations 4.17 to 4.20 and 4.50.
"""

from __future__ import annotations

import numpy as np

from validation.riccati import riccati


def angular(order: int, cosine: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Angular functions pi_n and tau_n (Bohren & Huffman 1983, equation 4.47).

    Parameters
    ----------
    order : int
        Highest order N.
    cosine : (P,) ndarray
        Cosine of the polar angle.

    Returns
    -------
    pi, tau : (N+1, P) ndarrays
        Row n holds order n; row 0 is zero.
    """
    cosine = np.asarray(cosine, dtype=float)
    pi = np.zeros((order + 1, *cosine.shape))
    tau = np.zeros_like(pi)
    pi[1] = 1.0
    for n in range(2, order + 1):
        pi[n] = ((2 * n - 1) * cosine * pi[n - 1] - n * pi[n - 2]) / (n - 1)
    for n in range(1, order + 1):
        tau[n] = n * cosine * pi[n] - (n + 1) * pi[n - 1]
    return pi, tau


def mode_fields(
    points: np.ndarray,
    wavenumber: complex,
    host_wavenumber: float,
    regular: tuple[np.ndarray, np.ndarray],
    outgoing: tuple[np.ndarray, np.ndarray] | None = None,
) -> tuple[np.ndarray, np.ndarray]:
    """Sum of modes, sum_n E_n (u_n M_o1n + v_n N_e1n) with E_n = i^n (2n+1)/(n(n+1)).

    Parameters
    ----------
    points : (P, 3) ndarray
        Places, nm, the sphere's centre at the origin.
    wavenumber : complex
        In the medium at these points, 1/nm.
    host_wavenumber : float
        In the host, 1/nm; H is in units of the incident wave's H.
    regular : (u, v), two (N+1,) complex ndarrays
        Amplitudes of the modes regular at the origin; entry 0 is not used.
    outgoing : (u, v), optional
        Amplitudes of the outgoing modes.

    Returns
    -------
    e, h : (P, 3) complex ndarrays
        Cartesian components in units of the incident amplitudes.
    """
    points = np.asarray(points, dtype=float)
    order = len(regular[0]) - 1
    radius = np.linalg.norm(points, axis=1)
    # At the centre only the dipole survives and has a limit: step off it by a hair.
    centre = radius < 1e-7 / abs(wavenumber)
    points = np.where(centre[:, None], np.array([0, 0, 1e-7 / abs(wavenumber)]), points)
    radius = np.linalg.norm(points, axis=1)
    cosine = np.clip(points[:, 2] / radius, -1, 1)
    cylinder = np.hypot(points[:, 0], points[:, 1])
    sine = cylinder / radius
    axis = cylinder == 0
    cos_phi = np.where(axis, 1.0, points[:, 0] / np.where(axis, 1.0, cylinder))
    sin_phi = np.where(axis, 0.0, points[:, 1] / np.where(axis, 1.0, cylinder))
    pi, tau = angular(order, cosine)
    rho = wavenumber * radius
    functions = riccati(order, rho)

    n = np.arange(1, order + 1)[:, None]
    weight = 1j**n * (2 * n + 1) / (n * (n + 1))
    kinds = [(regular, functions.psi, functions.psi_prime)]
    if outgoing is not None:
        kinds.append((outgoing, functions.xi, functions.xi_prime))
    e = np.zeros((3, len(points)), dtype=complex)
    h = np.zeros((3, len(points)), dtype=complex)
    for (u, v), value, slope in kinds:
        z = value[1:] / rho  # z_n
        d = slope[1:] / rho  # (rho z_n)' / rho
        wu, wv = weight * u[1:, None], weight * v[1:, None]
        even = (wu * pi[1:] * z, wu * tau[1:] * z)
        odd = (wv * pi[1:] * z, wv * tau[1:] * z)
        rim = n * (n + 1) * sine * pi[1:] * z / rho
        e[0] += cos_phi * np.sum(wv * rim, axis=0)
        e[1] += cos_phi * np.sum(even[0] + wv * tau[1:] * d, axis=0)
        e[2] += -sin_phi * np.sum(even[1] + wv * pi[1:] * d, axis=0)
        h[0] += sin_phi * np.sum(wu * rim, axis=0)
        h[1] += sin_phi * np.sum(wu * tau[1:] * d - odd[0], axis=0)
        h[2] += cos_phi * np.sum(wu * pi[1:] * d - odd[1], axis=0)
    h *= wavenumber / (1j * host_wavenumber)

    r_hat = np.stack([sine * cos_phi, sine * sin_phi, cosine])
    t_hat = np.stack([cosine * cos_phi, cosine * sin_phi, -sine])
    p_hat = np.stack([-sin_phi, cos_phi, np.zeros_like(cosine)])
    return (
        (r_hat * e[0] + t_hat * e[1] + p_hat * e[2]).T,
        (r_hat * h[0] + t_hat * h[1] + p_hat * h[2]).T,
    )


def plane_wave_fields(points: np.ndarray, host_wavenumber: float) -> tuple[np.ndarray, np.ndarray]:
    """The incident wave itself, E = x exp(ikz), H = y exp(ikz), (P, 3) each."""
    phase = np.exp(1j * host_wavenumber * np.asarray(points, dtype=float)[:, 2])
    return phase[:, None] * np.array([1, 0, 0]), phase[:, None] * np.array([0, 1, 0])
