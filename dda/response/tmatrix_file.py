"""T-matrices in HDF5 files that say what they hold."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np

from ..errors import InputError
from .tmatrix import TMatrix

FORMAT = "motelight T-matrix 1"

_NOTES = {
    "convention": (
        "outgoing amplitudes = matrix @ regular amplitudes; time dependence exp(-i w t); vector "
        "spherical waves M = curl(r z_n Y_nm)/sqrt(n(n+1)) and N = curl(M)/k with orthonormal Y_nm "
        "(Condon-Shortley phase), z = j regular, z = h(1) outgoing; C_sca = sum |outgoing|^2/k^2; "
        "for a sphere the diagonal is minus the Mie coefficients b_n (M) and a_n (N)"
    ),
    "averages": (
        "over orientations C_ext = -(2 pi/k^2) Re trace, C_sca = (2 pi/k^2) sum |matrix|^2"
    ),
}
# name in the file: unit and meaning
_NUMBERS = {
    "wavelength": ("nm", "in vacuum"),
    "n_host": ("1", "refractive index of the host"),
    "radius": ("nm", "of a sphere around the origin that holds the particle"),
    "r_eff": ("nm", "radius of the sphere of the particle's volume"),
    "order_error": ("nm^2", "of the averaged cross sections, from multipoles left out"),
    "solver_error": ("nm^2", "of the averaged cross sections, from the iterative solution"),
    "products": ("1", "products with the interaction matrix"),
}
_KINDS = ("magnetic (M)", "electric (N)")


def save_t_matrix(t: TMatrix, path: str | Path) -> None:
    """Write a T-matrix to an HDF5 file, replacing it as a whole if it exists.

    Parameters
    ----------
    t : TMatrix
    path : str or Path

    Examples
    --------
    >>> import tempfile, dda, shapes
    >>> cells = shapes.voxelize(shapes.sphere(diameter=30, material="gold"), cells=6)
    >>> t = dda.t_matrix(dda.system(cells, wavelength=530))
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     save_t_matrix(t, folder + "/sphere.h5")
    ...     again = load_t_matrix(folder + "/sphere.h5")
    >>> again.order, again.wavelength
    (3, 530.0)
    """
    import h5py

    path = Path(path)
    draft = path.with_name(path.name + ".new")
    with h5py.File(draft, "w") as file:
        file.attrs["format"] = FORMAT
        for name, text in _NOTES.items():
            file.attrs[name] = text
        for name, values, unit, about in t_matrix_arrays(t):
            file[name] = values
            file[name].attrs.update(unit=unit, about=about)
    os.replace(draft, path)


def t_matrix_arrays(t: TMatrix) -> list[tuple[str, np.ndarray, str, str]]:
    """All that a T-matrix holds, as arrays with names, units and their meaning."""
    kind, n, m = t.labels.T
    about = " ".join(f"{text}." for text in _NOTES.values())
    arrays = [
        ("matrix", t.matrix, "1", about),
        ("wave_kind", np.array(_KINDS, dtype="S")[kind], "", "of each row and column"),
        ("wave_order_n", n, "", "of each row and column"),
        ("wave_degree_m", m, "", "of each row and column"),
        ("origin", t.origin, "nm", "centre of the waves in the particle's coordinates"),
        ("status", np.array(t.status, dtype="S"), "", "of the solver"),
    ]
    for name, (unit, meaning) in _NUMBERS.items():
        arrays.append((name, np.array(float(getattr(t, name))), unit, meaning))
    return arrays


def load_t_matrix(path: str | Path, group: str | None = None) -> TMatrix:
    """Read a T-matrix from a file of `save_t_matrix`, or from a point's file of a run.

    Parameters
    ----------
    path : str or Path
    group : str, optional
        Where in the file it is: "t_matrix" in the files of a run.

    Raises
    ------
    InputError
        If there is no such file or it holds something else.
    """
    import h5py

    path = Path(path)
    if not path.is_file():
        raise InputError(f"there is no file {path}")
    try:
        with h5py.File(path, "r") as file:
            found = file.attrs.get("format", "none")
            if group is None and found != FORMAT:
                inside = ' (of a run\'s file, load group "t_matrix")' if "t_matrix" in file else ""
                raise InputError(
                    f"{path} is not a T-matrix file: format {found}, not {FORMAT}{inside}"
                )
            place = file if group is None else file[group]
            numbers = {name: float(place[name][()]) for name in _NUMBERS}
            return TMatrix(
                matrix=place["matrix"][()],
                origin=place["origin"][()],
                status=place["status"][()].decode(),
                **numbers,
            )
    except (OSError, KeyError) as error:
        raise InputError(f"{path} cannot be read as a T-matrix file: {error}") from error
