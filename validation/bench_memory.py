"""Peak memory of a whole job, measured from outside in a process of its own."""

from __future__ import annotations

import json
import re
import resource
import subprocess
import sys
from pathlib import Path

from validation.measure import Figure, bench, full_box

# name of a body and the most bytes per cell of its box that a job in double precision may take
BODIES = {"full box": 700, "sphere": 700}


@bench("memory")
def memory(cells: int) -> list[Figure]:
    """Bytes per cell of the box at the peak of a whole job."""
    figures = []
    for body, most in BODIES.items():
        for precision in ("double", "mixed", "single"):
            found = in_a_child(cells, precision, body)
            name = f"{body}, {found['shape'][0]}^3 cells, {precision}: "
            both = max(found["describing"], found["solving"])
            limit = most if precision == "double" else None
            figures.append(
                Figure(f"{name}peak of the job", both / found["box"], "B/cell", most=limit)
            )
            for stage in ("describing", "solving"):
                part = found[stage] / found["box"]
                figures.append(Figure(f"{name}peak while {stage}", part, "B/cell"))
            estimate = found["solving"] / found["estimate"]
            figures.append(Figure(f"{name}solving / the program's own estimate", estimate, "x"))
    return figures


def in_a_child(cells: int, precision: str, body: str) -> dict:
    """Run `job` in a fresh interpreter and return what it printed."""
    command = [sys.executable, "-m", "validation.bench_memory", str(cells), precision, body]
    root = Path(__file__).parents[1]
    done = subprocess.run(command, cwd=root, check=True, capture_output=True, text=True)
    return json.loads(done.stdout.splitlines()[-1])


def job(cells: int, precision: str, body: str) -> dict:
    """Cells, system, solution and cross sections of glass in air, and the memory they took.

    Returns
    -------
    dict
        "describing" and "solving", peaks in bytes above what the imports and a small job left
        behind, the cells included in both; "box" (its cells), "shape", and "estimate" in bytes by
        `dda.lattice.memory_estimate`.
    """
    import dda
    import shapes
    from dda.lattice import memory_estimate

    def describe(n: int) -> shapes.Cells:
        if body == "full box":
            return full_box(n)
        return shapes.voxelize(shapes.sphere(n - 2.0, "1.5"), spacing=1.0)

    def solve(described: shapes.Cells) -> dda.System:
        wavelength = 20.0 * max(described.shape)
        system = dda.system(described, wavelength, "vacuum", precision=precision)
        dda.cross_sections(dda.solve(system, dda.plane_wave(), tolerance=1e-4))
        return system

    solve(describe(8))  # so that imports and compilation are not counted
    before = forget_peak()
    described = describe(cells)
    describing = peak() - before
    forget_peak()
    system = solve(described)
    nx, ny, nz = described.shape
    return {
        "describing": describing,
        "solving": peak() - before,
        "box": nx * ny * nz,
        "shape": [nx, ny, nz],
        "estimate": memory_estimate((nx, ny, nz), system.n, precision),
    }


def peak() -> int:
    """Most bytes this process ever held, or since `forget_peak`.

    Linux hands a process the peak of its parent on in `ru_maxrss`, hence its own account.
    """
    if sys.platform == "linux":
        status = Path("/proc/self/status").read_text()
        (kib,) = re.findall(r"VmHWM:\s*(\d+) kB", status)
        return 1024 * int(kib)
    unit = 1 if sys.platform == "darwin" else 1024
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit


def forget_peak() -> int:
    """Let `peak` start anew from the bytes held now, where the system can, and return them.

    Elsewhere the peak so far is returned, and what is measured from it may be a little low.
    """
    if sys.platform == "linux":
        try:
            Path("/proc/self/clear_refs").write_text("5")
        except OSError as error:
            print(f"the peak of the imports stays in: {error}", file=sys.stderr)
    return peak()


if __name__ == "__main__":
    print(json.dumps(job(int(sys.argv[1]), sys.argv[2], sys.argv[3])))
