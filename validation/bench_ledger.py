"""How quickly a large run is looked at: the status, the page's answers, the labelled arrays."""

from __future__ import annotations

import hashlib
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from dda.report.dataset import open_run
from dda.report.live import LiveServer
from dda.study.ledger import Ledger
from dda.study.ledger_records import Answered, Entry
from dda.study.rows import Row
from validation.measure import Figure, bench, medians

SETS, WAVELENGTHS = 2000, 50
#: The most seconds that `dda status` may take, the start of the program included.
MOST = 1.0


@bench("ledger")
def ledger(_: int) -> list[Figure]:
    """Seconds to look at a run of 100,000 points, two thirds of them done."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        writing = _fill(folder)
        command = [sys.executable, "-m", "dda.cli", "status", name]
        server = LiveServer(folder)
        found = medians(
            {
                "dda status, the whole command": lambda: subprocess.run(
                    command, check=True, capture_output=True
                ),
                "the page's state": server.state,
                "the page's six curves": lambda: server.curves(list(range(6))),
            },
            repeats=5,
        )
        server.server_close()
        begun = time.perf_counter()
        open_run(folder)
        found["dda.open_run"] = time.perf_counter() - begun
    count = f"{SETS * WAVELENGTHS} points: "
    return [
        *(
            Figure(count + what, seconds, "s", most=MOST if "command" in what else None)
            for what, seconds in found.items()
        ),
        Figure("an answer, on disk when recorded", 1e3 * writing, "ms"),
    ]


def _fill(folder: Path) -> float:
    """Make a run with made-up answers, and return the seconds of recording one as a run does."""
    entries = [
        Entry(
            i * WAVELENGTHS + j,
            hashlib.sha256(f"{i} {j}".encode()).hexdigest()[:32],
            None,
            400.0 + 10 * j,
            {"particle.edge": 40 + i / 100, "particle.rounding": 5},
            1.0,
        )
        for i in range(SETS)
        for j in range(WAVELENGTHS)
    ]
    one = 50
    with Ledger(folder, write=True) as made:
        made.begin("", {"name": "many sizes", "particle": {"shape": "cube"}}, {})
        made.set_points(entries)
        done = [entry for entry in entries if entry.number % 3]
        begun = time.perf_counter()
        for entry in done[:one]:
            made.record(entry.identity, _answer(entry))
        writing = (time.perf_counter() - begun) / one
        made.record_all((entry.identity, _answer(entry)) for entry in done[one:])
    return writing


def _answer(entry: Entry) -> Answered:
    status = "failed" if entry.number % 100 == 1 else "converged"
    numbers = dict.fromkeys(("c_ext_nm2", "c_abs_nm2", "c_sca_nm2", "residual"), 1234.56789)
    errors = {f"c_{n}_error_nm2": 12.3456789 for n in ("ext", "abs", "sca")}
    row = Row(entry.wavelength_nm, status=status, seconds=2.0, cells=4096, **numbers, **errors)
    return Answered(row, file=f"points/{entry.identity}.h5", checksum=64 * "c")
