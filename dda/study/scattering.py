"""The scattered light of a point: numbers with error bars, and arrays for its file."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from dda.accuracy import extrapolate
from dda.lattice import Polarization
from dda.light import PlaneWave
from dda.response import Settled
from dda.response.averages import OrientationAverage
from dda.response.far_field import scattering_amplitude
from dda.response.mueller import averaged_mueller_matrix, mueller_matrix
from dda.response.multipoles import averaged_multipoles, multipoles
from dda.response.one_direction import OneDirection, from_two, radiation_pressure
from dda.response.tmatrix import TMatrix
from dda.response.tmatrix_file import t_matrix_arrays
from dda.study.lights import light_count
from dda.study.mistakes import Mistake
from dda.study.more import NOTHING_MORE, Array, More
from dda.study.points import Point
from dda.study.scattering_table import MULTIPOLES, ScatteringTable
from dda.study.schema import StudyTables

KINDS = ("electric", "magnetic")
_PATTERN = (
    "dC_sca/dOmega of the study's light towards (azimuth, angle); extrapolated to cells of size "
    "zero where the study has a target, else of the finest cells"
)
_MUELLER = (
    "(azimuth, angle, 4, 4) for the Stokes parameters I, Q, U, V (Bohren & Huffman 1983): "
    "mueller[..., 0, 0] = k^2 dC_sca/dOmega for unpolarized light; of the finest cells"
)


@dataclass(frozen=True, eq=False)
class Scattered:
    """What one lattice shows of the scattered light.

    Attributes
    ----------
    columns : dict
        Value and the solver's share of its error, by column.
    pattern : ndarray, shape (azimuths, angles), or None
        Differential cross section of the study's light, nm^2 per steradian.
    arrays : tuple of Array
    """

    columns: dict[str, tuple[float, float]]
    pattern: np.ndarray | None
    arrays: tuple[Array, ...]


def check_scattering(tables: StudyTables) -> None:
    """Find the mistakes of ``[scattering]`` that other tables show.

    Raises
    ------
    Mistake
    """
    table, averaged = tables.scattering, tables.light.orientation == "average"
    if table is None:
        return
    if tables.light.beam is not None:
        raise Mistake(
            ("scattering",), "it describes what a plane wave scatters; leave out it or light.beam"
        )
    if averaged and "azimuths" in table.model_fields_set:
        raise Mistake(
            ("scattering", "azimuths"),
            'with orientation = "average" all azimuths are alike; leave it out',
        )
    if table.t_matrix and not averaged:
        raise Mistake(
            ("scattering", "t_matrix"),
            'the T-matrix comes with orientation = "average" in [light]; for a single direction it '
            "is not computed",
        )


def partner(point: Point, lights: Sequence) -> tuple[PlaneWave, ...]:
    """Return the plane wave of the other polarization where ``[scattering]`` needs it too."""
    if not partner_count(point):
        return ()
    (light,) = lights
    other = np.cross(light.direction, light.polarization.conj())
    return (PlaneWave(light.direction, other),)


def partner_count(point: Point) -> int:
    """Return how many plane waves `partner` adds to the solves of a point."""
    table = point.tables.scattering
    single = not point.averaged and light_count(point) == 1
    return int(table is not None and table.both_polarizations and single)


def of_direction(point: Point, solved: Sequence[Settled], count: int) -> Scattered | None:
    """Return what one lattice shows for a fixed direction.

    Parameters
    ----------
    point : Point
    solved : sequence of Settled
        For the study's light, and after that for its `partner` if there is one.
    count : int
        How many of them are the study's light.
    """
    table = point.tables.scattering
    if table is None:
        return None
    waves = [each.polarization for each in solved[:count]]
    columns, arrays = _of_light(waves, solved[:count])
    pattern = None
    if table.multipoles:
        parts = [multipoles(wave) for wave in waves]
        taken, radiated = (
            np.mean([getattr(p, name) for p in parts], axis=0) for name in ("c_ext", "c_sca")
        )
        columns |= _multipole_columns(table.multipoles, taken, radiated, _relative(solved[:count]))
        arrays += _multipole_arrays(taken, radiated)
    if table.both_polarizations:
        both = from_two(solved[0].polarization, solved[1].polarization, solved[0].error)
        turn = _reference_azimuth(point, both)
        if table.dichroism:
            columns |= _dichroism_columns(both, turn, solved)
        if table.angles is not None:
            pattern, more = _by_angle(table, both, turn, waves)
            arrays += more
    return Scattered(columns, pattern, tuple(arrays))


def of_average(point: Point, average: OrientationAverage, t: TMatrix) -> Scattered | None:
    """Return what one lattice shows averaged over all orientations."""
    table = point.tables.scattering
    if table is None:
        return None
    ends = averaged_mueller_matrix(t, [0.0, 180.0])[:, 0, 0] / t.k**2
    rel = np.array([average.c_ext_error / average.c_ext, average.c_sca_error / average.c_sca])
    pressure = average.c_ext - average.asymmetry * average.c_sca
    columns = {
        "asymmetry": (average.asymmetry, rel[1] * abs(average.asymmetry)),
        "c_pr_nm2": (pressure, average.c_ext_error),
        "c_forward_nm2_per_sr": (ends[0], rel[1] * ends[0]),
        "c_back_nm2_per_sr": (ends[1], rel[1] * ends[1]),
    }
    arrays: list[Array] = []
    pattern = None
    if table.dichroism:
        columns["c_ext_circular_dichroism_nm2"] = (average.cd_ext, 2 * average.c_ext_error)
        columns["c_abs_circular_dichroism_nm2"] = (average.cd_abs, 2 * average.c_abs_error)
        columns["dissymmetry"] = (average.g_ext, 2 * rel[0])
    if table.multipoles:
        taken, radiated = averaged_multipoles(t)
        columns |= _multipole_columns(table.multipoles, taken, radiated, rel)
        arrays += _multipole_arrays(taken, radiated)
    if table.angles is not None:
        matrices = averaged_mueller_matrix(t, table.angles)[None]
        pattern = matrices[..., 0, 0] / t.k**2
        arrays += _angle_arrays(table, (0.0,), t.k, matrices, pattern * 4 * np.pi / average.c_sca)
    if table.t_matrix:
        arrays += [
            Array(f"t_matrix/{name}", values, unit, about)
            for name, values, unit, about in t_matrix_arrays(t)
        ]
    return Scattered(columns, pattern, tuple(arrays))


def over_levels(
    spacings: Sequence[float], found: Sequence[Scattered | None], size: float, to_zero: bool
) -> More:
    """Combine the lattices of a point: values, error bars, and the arrays of the finest.

    Parameters
    ----------
    spacings : sequence of float
        Coarse to fine, nm.
    found : sequence of Scattered or None
        One for each.
    size : float
        Largest extent of the particle, nm.
    to_zero : bool
        Whether values are extrapolated to cells of size zero; else they are those of the finest.
    """
    levels = [level for level in found if level is not None]
    if not levels:
        return NOTHING_MORE
    d = np.asarray(spacings, float)

    def best(values, errors) -> tuple[float, float]:
        if len(d) < 2:
            return values[-1], np.nan
        fit = extrapolate(d, np.asarray(values), np.asarray(errors), size=size)
        return (fit.value, fit.error) if to_zero else (values[-1], fit.finest_error + errors[-1])

    columns: dict[str, float] = {}
    for name in levels[-1].columns:
        values, errors = zip(*(level.columns[name] for level in levels), strict=True)
        value, error = best(values, errors)
        columns |= {name: float(value), error_name(name): float(error)}
    arrays = levels[-1].arrays
    patterns = [level.pattern for level in levels if level.pattern is not None]
    if patterns:
        none = np.zeros(len(d))
        pairs = [best(v, none) for v in np.stack(patterns, axis=-1).reshape(-1, len(d))]
        value, error = np.array(pairs).T.reshape(2, *patterns[-1].shape)
        about = "error bar of dc_sca from the spacings"
        arrays += (
            Array("scattering/dc_sca", value, "nm^2/sr", _PATTERN),
            Array("scattering/dc_sca_error", error, "nm^2/sr", about),
        )
    return More(columns, arrays)


def error_name(column: str) -> str:
    """Return the column of a number's error bar.

    >>> error_name("c_pr_nm2"), error_name("c_back_nm2_per_sr"), error_name("asymmetry")
    ('c_pr_error_nm2', 'c_back_error_nm2_per_sr', 'asymmetry_error')
    """
    stem, unit, rest = column.partition("_nm2")
    return f"{stem}_error{unit}{rest}"


def _relative(solved: Sequence[Settled]) -> np.ndarray:
    """The solver's relative errors of C_ext and C_sca, the largest of some lights."""
    pairs = [each.error[[0, 2]] / [each.sections.c_ext, each.sections.c_sca] for each in solved]
    return np.max(pairs, axis=0)


def _of_light(waves: Sequence[Polarization], solved: Sequence[Settled]) -> tuple[dict, list]:
    """Numbers and arrays of the study's light, averaged over its polarizations."""
    along = waves[0].light.direction  # type: ignore[attr-defined]
    ends = [scattering_amplitude(wave, np.stack([along, -along])) for wave in waves]
    forward, back = np.mean([(abs(f) ** 2).sum(axis=1) for f in ends], axis=0)
    pressures = [radiation_pressure(wave) for wave in waves]
    c_pr = np.mean([p.c_pr for p in pressures], axis=0)
    c_sca = np.mean([p.c_sca for p in pressures])
    asymmetry = float(np.mean([p.asymmetry * p.c_sca for p in pressures], axis=0) @ along / c_sca)
    rel = _relative(solved)
    columns = {
        "asymmetry": (asymmetry, rel[1] * abs(asymmetry)),
        "c_pr_nm2": (float(c_pr @ along), float(np.mean([each.error[0] for each in solved]))),
        "c_forward_nm2_per_sr": (forward, 2 * rel[0] * forward),
        "c_back_nm2_per_sr": (back, rel[1] * back),
    }
    said = "vector amplitude F of the scattered field F exp(ikr)/r, (polarization, x y z)"
    arrays = [
        Array(
            "scattering/radiation_pressure",
            c_pr,
            "nm^2",
            "force over the incident intensity times the speed of light in the host, x y z",
        ),
        Array("scattering/forward_amplitude", np.stack([f[0] for f in ends]), "nm", said),
        Array("scattering/backward_amplitude", np.stack([f[1] for f in ends]), "nm", said),
    ]
    return columns, arrays


def _multipole_columns(highest: int, taken, radiated, relative) -> dict:
    """Columns of the first multipoles; `taken`, `radiated` (kinds, orders) nm^2."""
    columns = {}
    for name, parts, rel in (("ext", taken, relative[0]), ("sca", radiated, relative[1])):
        for kind, row in zip(KINDS, parts, strict=True):
            for order, part in enumerate(row[:highest]):
                label = f"c_{name}_{kind}_{MULTIPOLES[order]}_nm2"
                columns[label] = (float(part), float(rel * abs(part)))
    return columns


def _multipole_arrays(taken, radiated) -> list[Array]:
    about = (
        "part of {} by multipole about the centre of the box of cells: rows electric, magnetic; "
        "columns dipole, quadrupole, ...; of the finest cells"
    )
    return [
        Array("multipoles/c_ext", taken, "nm^2", about.format("C_ext")),
        Array("multipoles/c_sca", radiated, "nm^2", about.format("C_sca")),
    ]


def _reference_azimuth(point: Point, both: OneDirection) -> float:
    """Degrees from e1 to the study's polarization, zero where that is no real vector."""
    if isinstance(point.polarization, str):
        return 0.0
    vector = np.asarray(point.polarization, complex)
    if abs(vector.imag).max() > 0:
        return 0.0
    e1, e2 = both.axes
    return float(np.degrees(np.arctan2(vector.real @ e2, vector.real @ e1)))


def _dichroism_columns(both: OneDirection, turn: float, solved: Sequence[Settled]) -> dict:
    errors = np.sum([each.error for each in solved[:2]], axis=0)
    columns: dict[str, tuple[float, float]] = {}
    for kind in ("circular", "linear"):
        ext, absorbed = both.dichroism(kind, turn)
        columns[f"c_ext_{kind}_dichroism_nm2"] = (ext, errors[0])
        columns[f"c_abs_{kind}_dichroism_nm2"] = (absorbed, errors[1])
        if kind == "circular":
            mean = float(np.mean([each.sections.c_ext for each in solved[:2]]))
            columns["dissymmetry"] = (ext / mean, errors[0] / mean)
    return columns


def _by_angle(
    table: ScatteringTable, both: OneDirection, turn: float, waves: Sequence[Polarization]
) -> tuple[np.ndarray, list[Array]]:
    assert table.angles is not None
    azimuths = [azimuth + turn for azimuth in table.azimuths]
    amplitudes = np.stack([both.amplitude_matrices(table.angles, a) for a in azimuths])
    matrices = mueller_matrix(amplitudes)
    outgoing = [both.outgoing(table.angles, a) for a in azimuths]
    pattern = np.mean(
        [[(abs(scattering_amplitude(w, n)) ** 2).sum(axis=1) for n in outgoing] for w in waves],
        axis=0,
    )
    c_sca = np.mean([radiation_pressure(wave).c_sca for wave in (both.first, both.second)])
    phase = matrices[..., 0, 0] * 4 * np.pi / (both.k**2 * c_sca)
    e1, e2 = both.axes
    axis = np.cos(np.deg2rad(turn)) * e1 + np.sin(np.deg2rad(turn)) * e2
    arrays = _angle_arrays(table, table.azimuths, both.k, matrices, phase)
    about = "(azimuth, angle, 2, 2): [[S2, S3], [S4, S1]] of Bohren & Huffman (1983), finest cells"
    arrays.append(Array("scattering/amplitudes", amplitudes, "", about))
    about = "unit vector at azimuth 0; azimuths turn about the direction of the light"
    return pattern, [*arrays, Array("scattering/reference_axis", axis, "", about)]


def _angle_arrays(table: ScatteringTable, azimuths, k: float, matrices, phase) -> list[Array]:
    return [
        Array("scattering/k", np.array(k), "1/nm", "wave number in the host"),
        Array(
            "scattering/angles",
            np.asarray(table.angles, float),
            "degrees",
            "between the incident and the scattered light",
        ),
        Array(
            "scattering/azimuths",
            np.asarray(azimuths, float),
            "degrees",
            "of the scattering plane about the light; all alike where orientations are averaged",
        ),
        Array("scattering/mueller", matrices, "", _MUELLER),
        Array(
            "scattering/phase_function",
            phase,
            "",
            "(azimuth, angle), for unpolarized light; its mean over all directions is one",
        ),
    ]
