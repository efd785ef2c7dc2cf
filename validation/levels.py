"""One particle solved at one spacing until its cross sections have settled."""

from __future__ import annotations

import time

import dda
import shapes
from dda.accuracy import Level
from dda.response.settled import Settled, settle


def settled(
    particle: shapes.Particle,
    wavelength: float,
    across: int,
    host: float = 1.33,
    *,
    tolerance: float = 1e-3,
    limit: int = 1500,
    light: dda.PlaneWave | None = None,
    window: float = 2.2,
    **options,
) -> tuple[Settled, Level]:
    """Voxelize and solve.

    Parameters
    ----------
    particle : shapes.Particle
    wavelength : float
        In vacuum, nm.
    across : float
        Cells across the largest extent.
    host : float
        Refractive index.
    tolerance, limit
        Of `dda.settle`.
    light : dda.PlaneWave, optional
        Along z, polarized along x by default.
    window : float
        Width of the surface's window in cells.
    **options
        Of `dda.system`.

    Returns
    -------
    Settled
    Level
        The same as a rung of `dda.accuracy`.
    """
    begin = time.perf_counter()
    light = light or dda.plane_wave()
    cells = shapes.voxelize(particle, cells=across, window=window)
    system = dda.system(cells, wavelength, host, light=light, **options)
    done = settle(system, light, tolerance=tolerance, limit=limit)
    p, c = done.polarization, done.sections
    ext, absorbed, scattered = (float(v) for v in done.error)
    rung = Level(
        cells.spacing,
        (c.c_ext, c.c_abs, c.c_sca),
        (ext, absorbed, scattered),
        system.n,
        p.iterations,
        p.products,
        p.residual,
        p.status,
        time.perf_counter() - begin,
    )
    return done, rung


def level(particle: shapes.Particle, wavelength: float, across: int, host: float = 1.33, **options):
    """The `Level` of `settled` alone, for ``refine_to`` and ``refine_at``."""
    return settled(particle, wavelength, across, host, **options)[1]
