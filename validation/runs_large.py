"""The largest box: 256^3 cells solved once, with the memory it took."""

from __future__ import annotations

import json
import subprocess
import sys
import time

from validation.results import FAILS, Table, group

# The cube is a little smaller than the box: its surface window reaches a cell further out.
_CUBE = {"edge": 500.0, "rounding": 0.0}
_WAVELENGTH, _N_HOST, _EPS = 600.0, 1.33, 1.2
_ALLOWED_GIB = 20.0


@group("large-box", rank=95)
def large_box(quick: bool) -> Table:
    """A dielectric cube that fills a box of 256^3 cells: time and memory."""
    rows = []
    for across in (30, 62) if quick else (62, 126, 254):
        # a process of its own, so that its peak memory is that of this solve alone
        done = subprocess.run(
            [sys.executable, "-m", "validation.runs_large", str(across)],
            capture_output=True,
            text=True,
            check=False,
        )
        if done.returncode:
            rows.append([str(across), *["-"] * 7, f"{FAILS}: {done.stderr.strip()[-200:]}"])
            continue
        found = json.loads(done.stdout.splitlines()[-1])
        fine = found["gib"] <= _ALLOWED_GIB and found["status"] == "converged"
        rows.append(
            [
                " x ".join(str(n) for n in found["shape"]),
                str(found["cells"]),
                f"{found['c_ext']:.0f}",
                f"{found['balance']:.1e}",
                str(found["products"]),
                f"{found['voxel_seconds']:.0f}",
                f"{found['solve_seconds']:.0f}",
                f"{found['gib']:.2f}",
                "ok" if fine else FAILS,
            ]
        )
    return Table(
        "The largest box",
        f"A cube of edge {_CUBE['edge']:g} nm with the relative permittivity {_EPS}, light of "
        f"{_WAVELENGTH:g} nm along an axis, double precision, mirror sectors. There is no exact "
        "solution: the coarser boxes show that the value settles. Peak memory is the kernel's own "
        f"figure for the process, voxelizer included; {_ALLOWED_GIB:g} GiB are allowed.",
        ("box", "cells", "C_ext, nm²", "energy balance", "products in sectors", "cells made in, s",
         "solved in, s", "peak memory, GiB", "verdict"),
        rows,
    )  # fmt: skip


def _solve(across: int) -> dict:
    import dda
    import shapes
    from dda.lattice import relative_system

    started = time.perf_counter()
    cells = shapes.voxelize(shapes.cube(**_CUBE, material="glass"), cells=across)
    made = time.perf_counter()
    system = relative_system(cells, _WAVELENGTH, _N_HOST, [_EPS])
    polarization = dda.solve(system, dda.plane_wave(), tolerance=1e-4, limit=100)
    solved = time.perf_counter()
    response = dda.cross_sections(polarization)
    return {
        "shape": cells.shape,
        "cells": cells.n,
        "c_ext": response.c_ext,
        "balance": response.balance,
        "products": polarization.products,
        "status": polarization.status,
        "voxel_seconds": made - started,
        "solve_seconds": solved - made,
        "gib": _peak_gib(),
    }


def _peak_gib() -> float:
    """Peak resident memory of this process (Linux: VmHWM, which forgets the parent's)."""
    with open("/proc/self/status") as status:
        line = next(row for row in status if row.startswith("VmHWM"))
    return int(line.split()[1]) / 2**20


if __name__ == "__main__":
    print(json.dumps(_solve(int(sys.argv[1]))))
