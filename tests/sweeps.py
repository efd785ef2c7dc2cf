"""Small sweeps for the tests of what runs them, and what must hold of a run folder at all times."""

import csv
import math

from dda.errors import InputError
from dda.study.ledger import Ledger
from dda.study.point_file import damaged

#: One point takes some hundredths of a second. One wavelength: no solution is a first guess for
#: another one, so that the answers do not depend on the order.
SWEEP = """\
name = "gold spheres"
[particle]
shape = "sphere"
diameter = 20.0
material = "gold"
[host]
index = 1.33
[light]
wavelengths = [530]
[accuracy]
cells = 6
[solver]
threads = 1
[vary]
particle.diameter = {from = 20, to = TO, step = 0.5}
"""


def sweep(path, points, *changes):
    """Write the study of a sweep over as many diameters, with replacements."""
    text = SWEEP.replace("TO", f"{20 + 0.5 * (points - 1):g}")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    path.write_text(text)
    return path


def table(folder):
    """The rows of spectrum.csv; none of them is cut off."""
    with (folder / "spectrum.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    for row in rows:
        assert None not in row
        assert None not in row.values()
    return rows


def finished(folder):
    """The fingerprints of the finished points: readable, and their files whole."""
    if not (folder / "ledger.sqlite").exists():
        return set()
    try:
        ledger = Ledger(folder)
    except InputError as error:
        if "no study was begun in it yet" not in str(error):
            raise
        return set()
    with ledger:
        known = {key for key, status in ledger.known().items() if status != "failed"}
        assert damaged(folder, ledger.files()) == []
        assert {key for key, _, _ in ledger.files()} >= known
    return known


def same_tables(one, other, tolerance=1e-10):
    """Whether two tables hold the same, but for the times and what failed in between."""
    assert [*one[0]] == [*other[0]]
    assert len(one) == len(other)
    for a, b in zip(one, other, strict=True):
        for column, value in a.items():
            if column == "seconds":
                continue
            if value == b[column]:
                continue
            assert math.isclose(float(value), float(b[column]), rel_tol=tolerance), (column, a, b)
