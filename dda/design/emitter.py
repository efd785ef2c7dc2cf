"""A fluorescent emitter beside a particle: how fast it decays and how much of that is light."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from ..beams import PointDipole, point_dipole
from ..errors import InputError
from ..lattice.linear_system import System
from ..lattice.solution import Polarization, solve
from ..response.far_field import quadrature_order, scattering_amplitude, sphere_quadrature

Solver = Callable[[System, object], Polarization]

#: Closer than this many spacings to the particle, the lattice is too coarse for the dipole's field.
CLOSEST = 2.0

# Relative change between spacings up to which a rate is extrapolated.
_STEADY = 0.5
# Powers of the spacing with which the errors fall: of the radiative rate, and of the absorbed one,
# measured near spheres (two spacings a factor sqrt(2) apart: 2.5 to 3.6, more very close by).
_POWERS = (2, 3)
# Error bars are that much wider than the correction, and no narrower than this part of the rate:
# the lattice is rough (near spheres of 24 cells the radiative rate is off by up to 0.6 %).
_WIDER, _LEAST = 2.0, 0.007


@dataclass(frozen=True)
class DecayRates:
    """Decay rates of an emitter over its radiative rate in the host alone.

    Attributes
    ----------
    total : float
        Radiated and absorbed by the particle, from the field back at the emitter.
    radiative : float
        Radiated, from the far field of emitter and particle.
    absorbed : float
        Taken up by the particle, summed over its cells.
    status : str
        Of the solver; the worst of several.
    """

    total: float
    radiative: float
    absorbed: float
    status: str = "converged"

    @property
    def balance(self) -> float:
        """``(radiative + absorbed - total) / total``, each on its own: zero if all is well."""
        return (self.radiative + self.absorbed - self.total) / self.total

    def quantum_yield(self, intrinsic: float = 1.0) -> float:
        """Photons out per excitation, of an emitter with the yield `intrinsic` in the host.

        Raises
        ------
        InputError
            If `intrinsic` is not above 0 and at most 1.

        Notes
        -----
        ``radiative / (total + 1/intrinsic - 1)``: what the emitter loses by itself is not
        changed by the particle.
        """
        if not 0 < intrinsic <= 1:
            raise InputError(f"intrinsic quantum yield {intrinsic} must be above 0 and at most 1")
        return self.radiative / (self.total + 1 / intrinsic - 1)


def decay_rates(polarization: Polarization) -> DecayRates:
    """Decay rates of the point dipole that a system was solved for.

    Parameters
    ----------
    polarization : Polarization
        Its light is a `dda.beams.PointDipole`.

    Returns
    -------
    DecayRates

    Raises
    ------
    InputError
        If the light is something else.

    Notes
    -----
    Classical rates, in units of ``(2/3) k^3 |p|^2``: the total is one plus
    ``Im(p* . E_scattered)``, which by reciprocity is a sum over the cells' dipoles whose error is
    of second order in the solver's.

    The radiative rate is good to about a per cent from two spacings on. Absorption close to a
    metal happens in waves as short as the emitter's height, which the cells must carry: it comes
    out some 6 to 30 % too large at four spacings from gold and 1 % at eight (more where the metal
    loses little); `refined_rates` extrapolates it and tells its error.

    References
    ----------
    Novotny, L., Hecht, B. (2012), Principles of Nano-Optics, section 8.5.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=40, material="gold"), cells=12)
    >>> system = dda.system(cells, wavelength=550)
    >>> rates = decay_rates(dda.solve(system, point_dipole((0, 0, 30), (0, 0, 1))))
    >>> bool(rates.total > rates.radiative > 1 and abs(rates.balance) < 0.01)
    True
    """
    light, system = polarization.light, polarization.system
    if not isinstance(light, PointDipole):
        raise InputError(
            f"decay rates need the light of a point dipole, not a {type(light).__name__}"
        )
    k = system.k
    unit = 2 / 3 * k**3 * float((np.abs(light.moment) ** 2).sum())
    p = np.ascontiguousarray(polarization.p, np.complex128)
    back = PointDipole(light.position, light.moment.conj()).field(system.positions, k)
    total = 1 + float(np.sum(back * p).imag) / unit
    own = system.alpha_inverse.astype(np.complex128).apply(p, np.empty_like(p))
    lost = float(np.sum((p * own.conj()).imag) - 2 / 3 * k**3 * np.sum(np.abs(p) ** 2))
    return DecayRates(total, _radiated(polarization, light), lost / unit, polarization.status)


def emitter_rates(
    system: System,
    position,
    moment=(0, 0, 1),
    *,
    tolerance: float = 1e-4,
    limit: int = 2000,
    solver: Solver | None = None,
) -> DecayRates:
    """Solve for a dipole at `position` (nm) along `moment` and return its decay rates.

    A `solver` gives the `Polarization` for a system and a light, instead of `dda.solve` with the
    tolerance and the limit.

    Raises
    ------
    InputError
        If the dipole is within two spacings of the particle's cells.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=40, material="gold"), cells=12)
    >>> rates = emitter_rates(dda.system(cells, wavelength=550), (0, 0, 32))
    >>> rates.total > rates.radiative > 1
    True
    """
    light = point_dipole(position, moment)
    cells = system.cells
    full = cells.positions[cells.window.sum(axis=1) >= 0.5]
    closest = float(np.linalg.norm(full - light.position, axis=1).min())
    least = CLOSEST * cells.spacing
    if closest < least:
        raise InputError(
            f"the emitter at {light.position.tolist()} nm is {closest:.3g} nm from the centre of a "
            f"cell of the particle; with cells of {cells.spacing:.3g} nm its decay can be told "
            f"from {least:.3g} nm on: move it away or use a smaller spacing"
        )
    if solver is not None:
        return decay_rates(solver(system, light))
    return decay_rates(solve(system, light, tolerance=tolerance, limit=limit))


def averaged_rates(
    system: System,
    position,
    *,
    tolerance: float = 1e-4,
    limit: int = 2000,
    solver: Solver | None = None,
) -> DecayRates:
    """Decay rates averaged over all directions of the dipole; three solves.

    Examples
    --------
    >>> import dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=40, material="gold"), cells=10)
    >>> averaged_rates(dda.system(cells, wavelength=550), (0, 0, 36)).quantum_yield() < 0.5
    True
    """
    found = [
        emitter_rates(system, position, axis, tolerance=tolerance, limit=limit, solver=solver)
        for axis in np.eye(3)
    ]
    return DecayRates(
        float(np.mean([r.total for r in found])),
        float(np.mean([r.radiative for r in found])),
        float(np.mean([r.absorbed for r in found])),
        _worst(found),
    )


def refined_rates(
    rates: Sequence[DecayRates], spacings: Sequence[float]
) -> tuple[DecayRates, DecayRates]:
    """Rates extrapolated to zero spacing, and their error bars.

    Parameters
    ----------
    rates : sequence of DecayRates
        Of the same emitter, from two or more spacings.
    spacings : sequence of float
        nm.

    Returns
    -------
    value, error : DecayRates
        The radiative rate along a line in d^2, the absorbed one along a line in d^3; the total
        is their sum. An error is twice the correction to the finest value, or 0.7 % of it. A
        rate that changes by more than half between the spacings does not follow a power yet: its
        finest value is returned as it is.

    Examples
    --------
    >>> value, error = refined_rates([DecayRates(4.7, 2, 2.7), DecayRates(4, 2, 2)], [2, 1])
    >>> round(value.total, 3), round(error.absorbed, 3)
    (3.9, 0.2)
    """
    d = np.asarray(spacings, float)
    if len(rates) != len(d) or len(np.unique(d)) < 2:
        raise InputError("an error of decay rates needs them at two or more different spacings")
    best: list[float] = []
    error: list[float] = []
    for power, values in zip(
        _POWERS, ([r.radiative for r in rates], [r.absorbed for r in rates]), strict=True
    ):
        at_zero = float(np.polynomial.polynomial.polyfit(d**power, values, 1)[0])
        fine = values[int(np.argmin(d))]
        steady = np.ptp(values) <= _STEADY * abs(fine)
        best.append(at_zero if steady else fine)
        error.append(max(_WIDER * abs(at_zero - fine), _LEAST * abs(fine)))
    status = _worst(rates)
    return (
        DecayRates(sum(best), best[0], best[1], status),
        DecayRates(sum(error), error[0], error[1], status),
    )


def _worst(rates: Sequence[DecayRates]) -> str:
    return next((r.status for r in rates if r.status != "converged"), "converged")


def _radiated(polarization: Polarization, light: PointDipole) -> float:
    """Power in the far field over that of the free dipole."""
    system = polarization.system
    k = system.k
    places = np.vstack([system.positions, light.position])
    reach = float(np.linalg.norm(places - places.mean(axis=0), axis=1).max())
    directions, weights = sphere_quadrature(quadrature_order(k * reach))
    amplitude = scattering_amplitude(polarization, directions)
    phase = np.exp(-1j * k * (directions @ light.position))[:, None]
    across = light.moment - directions * (directions @ light.moment)[:, None]
    amplitude = amplitude + k**2 * phase * across
    free = 8 * np.pi / 3 * k**4 * float((np.abs(light.moment) ** 2).sum())
    return float(weights @ (np.abs(amplitude) ** 2).sum(axis=1)) / free
