"""Riccati-Bessel functions of complex argument, by recurrences that cannot blow up.

psi_n(z) = z j_n(z) and xi_n(z) = z h_n^(1)(z), as in Bohren & Huffman (1983), section 4.4.  All the
reference solutions stand on these, so that none of them depends on the program they check.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

_TINY = 1e-290


@dataclass(frozen=True)
class Riccati:
    """Riccati-Bessel functions of orders 0..N at the points z, free of overflow.

    The functions run over hundreds of decades in the order, so they are kept divided by their
    small-argument forms: psi_n = small_psi * z**(n+1) / (2n+1)!! and
    xi_n = small_xi * (2n-1)!! / z**n.

    Attributes
    ----------
    z : (...,) complex ndarray
    d_psi, d_xi : (N+1, ...) complex ndarray
        Logarithmic derivatives psi_n'/psi_n and xi_n'/xi_n.
    small_psi, small_xi : (N+1, ...) complex ndarray
        The functions divided by the forms above.
    """

    z: np.ndarray
    d_psi: np.ndarray
    d_xi: np.ndarray
    small_psi: np.ndarray
    small_xi: np.ndarray

    @property
    def psi(self) -> np.ndarray:
        """psi_n(z), (N+1, ...); underflows to zero for orders far above abs(z)."""
        return np.exp(self._log_psi_form()) * self.small_psi

    @property
    def xi(self) -> np.ndarray:
        """xi_n(z), (N+1, ...); may overflow for orders far above abs(z)."""
        return np.exp(-self._log_psi_form() + np.log(self.z) - self._log_odd()) * self.small_xi

    @property
    def psi_prime(self) -> np.ndarray:
        """Derivative psi_n'(z), (N+1, ...)."""
        return self._derivative(self.psi, np.cos(self.z))

    @property
    def xi_prime(self) -> np.ndarray:
        """Derivative xi_n'(z), (N+1, ...)."""
        return self._derivative(self.xi, np.exp(1j * self.z))

    @property
    def small_psi_prime(self) -> np.ndarray:
        """psi_n'(z) divided by the same form as small_psi, (N+1, ...)."""
        n = self._orders()
        below = np.concatenate([(np.cos(self.z) / self.z)[None], self.small_psi[:-1]])
        below[1:] *= (2 * n[1:] + 1) / self.z
        return below - n * self.small_psi / self.z

    @property
    def small_xi_prime(self) -> np.ndarray:
        """xi_n'(z) divided by the same form as small_xi, (N+1, ...)."""
        n = self._orders()
        below = np.concatenate([1j * self.small_xi[:1], self.small_xi[:-1]])
        below[1:] *= self.z / (2 * n[1:] - 1)
        return below - n * self.small_xi / self.z

    def _orders(self) -> np.ndarray:
        return np.arange(len(self.d_psi)).reshape((-1,) + (1,) * self.z.ndim)

    def _derivative(self, f: np.ndarray, below: np.ndarray) -> np.ndarray:
        """f_n' = f_{n-1} - n f_n / z: unlike f_n times d_f, right at the zeros of f_n too."""
        n = self._orders()
        return np.concatenate([below[None], f[:-1]]) - n * f / self.z

    def _log_odd(self) -> np.ndarray:
        return np.log(2.0 * self._orders() + 1)

    def _log_psi_form(self) -> np.ndarray:
        n = self._orders()
        return (n + 1) * np.log(self.z) - np.cumsum(self._log_odd(), axis=0)


def riccati(order: int, z: np.ndarray | complex) -> Riccati:
    """Riccati-Bessel functions of orders 0..order.

    The logarithmic derivative of psi is recurred downward (Bohren & Huffman 1983, section 4.8) from
    an order where its start is forgotten; the one of xi upward together with the product psi xi
    (Mackowski, Altenkirch & Menguc 1990), which stays accurate in strong absorption; for small
    imaginary parts xi comes from psi and the upward-recurred second solution, so that the tiny
    real part of xi_n keeps all its digits.

    Parameters
    ----------
    order : int
        Highest order.
    z : (...) complex
        Arguments, not zero, Im z >= 0.

    Examples
    --------
    >>> float(abs(riccati(3, 2.0).psi[0] - np.sin(2.0))) < 1e-15
    True
    """
    z = np.asarray(z, dtype=complex)
    if np.any(z == 0):
        raise ValueError("riccati: the argument must not be zero")
    d_psi = _downward(order, z)
    small_psi = _small_psi(order, z, d_psi)
    weak = z.imag < 1
    mild = np.where(weak, z, z.real + 1j)
    small_xi, d_xi = _outgoing(order, mild, np.where(weak, small_psi, 0))
    if not np.all(weak):
        strong_xi, strong_d = _absorbed(order, z, d_psi)
        small_xi, d_xi = np.where(weak, small_xi, strong_xi), np.where(weak, d_xi, strong_d)
    return Riccati(z, d_psi, d_xi, small_psi, small_xi)


def small_argument_ratio(order: int, x: np.ndarray | float) -> np.ndarray:
    """Natural logarithm of x**(n+1) / (2n+1)!! for n = 0..order, real x > 0; (order+1, ...)."""
    x = np.asarray(x, dtype=float)
    n = np.arange(order + 1).reshape((-1,) + (1,) * x.ndim)
    return (n + 1) * np.log(x) - np.cumsum(np.log(2.0 * n + 1), axis=0)


def _downward(order: int, z: np.ndarray) -> np.ndarray:
    top = float(np.max(np.abs(z), initial=0.0))
    start = int(max(order, top + 4 * top ** (1 / 3)) + 30)
    d = np.zeros((order + 1, *z.shape), dtype=complex)
    current = (start + 1) / z
    for n in range(start, 0, -1):
        below = current + n / z
        below = np.where(np.abs(below) < _TINY, _TINY, below)
        current = n / z - 1 / below
        if n - 1 <= order:
            d[n - 1] = current
    return d


def _small_psi(order: int, z: np.ndarray, d_psi: np.ndarray) -> np.ndarray:
    """psi_n / (z**(n+1)/(2n+1)!!), started from the larger of psi_0 and psi_1."""
    sine = np.sin(z) / z
    result = np.empty_like(d_psi)
    result[0] = sine
    if order == 0:
        return result
    # Where sin z is lost in rounding, psi_1 = sin z / z - cos z is not (near the zeros of sin z).
    first = np.where(
        np.abs(z) < 1, sine / (d_psi[1] + 1 / z) * 3 / z, 3 * (sine - np.cos(z)) / z**2
    )
    result[1] = first
    for n in range(2, order + 1):
        result[n] = result[n - 1] * (2 * n + 1) / z / (d_psi[n] + n / z)
    return result


def _outgoing(order: int, z: np.ndarray, small_psi: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Im z < 1: xi = psi - i chi with chi by the upward recurrence, stable there."""
    chi = np.empty((order + 2, *z.shape), dtype=complex)  # chi_n / ((2n-1)!!/z**n)
    chi[0] = np.cos(z)
    chi[1] = np.cos(z) + z * np.sin(z)
    for n in range(1, order + 1):
        chi[n + 1] = chi[n] - z**2 / ((2 * n + 1) * (2 * n - 1)) * chi[n - 1]
    form = z.copy()  # psi_n in units of (2n-1)!!/z**n: z**(2n+1) / ((2n+1)!! (2n-1)!!)
    small_xi = np.empty_like(small_psi)
    for n in range(order + 1):
        if n:
            form = form * z**2 / ((2 * n + 1) * (2 * n - 1))
        # Part by part: the real part of xi, far below the imaginary one, must keep its digits.
        small_xi[n] = form * small_psi[n] - 1j * chi[n]
    # xi_n' = xi_{n-1} - n xi_n / z, in units of (2n-1)!!/z**n; xi_{-1} = i xi_0.
    d_xi = np.empty_like(small_xi)
    d_xi[0] = 1j
    for n in range(1, order + 1):
        d_xi[n] = small_xi[n - 1] * z / (2 * n - 1) / small_xi[n] - n / z
    return small_xi, d_xi


def _absorbed(order: int, z: np.ndarray, d_psi: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Complex z: recur psi xi and the logarithmic derivative of xi together."""
    d_xi = np.empty_like(d_psi)
    small_xi = np.empty_like(d_psi)
    product = 0.5 * (1 - np.exp(2j * z))  # psi_0 xi_0 = sin z * (-i exp(iz))
    d_xi[0] = 1j
    small_xi[0] = -1j * np.exp(1j * z)
    for n in range(1, order + 1):
        product = product * (n / z - d_psi[n - 1]) * (n / z - d_xi[n - 1])
        d_xi[n] = d_psi[n] + 1j / product
        small_xi[n] = small_xi[n - 1] * (n / z - d_xi[n - 1]) * z / (2 * n - 1)
    return small_xi, d_xi
