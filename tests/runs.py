"""Runs for the tests of what reads them: a ledger with made-up answers."""

import hashlib

from dda.study.ledger import Ledger
from dda.study.ledger_records import Answered, Entry
from dda.study.point_file import write_point
from dda.study.rows import Row

TABLES = {"name": "gold cubes", "particle": {"shape": "cube", "material": "gold"}}
EDGES = (40.0, 50.0)
WAVELENGTHS = (500.0, 520.0, 540.0)


def identity_of(text):
    """A fingerprint such as a run has."""
    return hashlib.sha256(str(text).encode()).hexdigest()[:32]


def grid(edges=EDGES, wavelengths=WAVELENGTHS, key="particle.edge"):
    """Entries of a sweep over one key; no sweep if there are no edges."""
    sets = [{key: edge} for edge in edges] or [{}]
    pairs = [(varied, wave) for varied in sets for wave in wavelengths]
    return [
        Entry(n, identity_of((varied, wave)), None, wave, varied, 1.0)
        for n, (varied, wave) in enumerate(pairs)
    ]


def section(entry):
    """The made-up extinction of a point, nm^2."""
    edge = float(entry.varied.get("particle.edge", 60.0))
    return edge**2 * 3 / (1 + ((entry.wavelength_nm - 520) / 30) ** 2)


def answer(entry, status="converged", message="", **changes):
    """The made-up answer of a point."""
    if status == "failed":
        row = Row(entry.wavelength_nm, status=status, message=message, seconds=2.0)
        return Answered(row)
    c = section(entry)
    numbers = {"c_ext_nm2": c, "c_abs_nm2": 0.7 * c, "c_sca_nm2": 0.3 * c, "q_ext": 2.0}
    numbers |= {"c_ext_error_nm2": 0.02 * c, "c_abs_error_nm2": 0.02 * c, "cells": 4096}
    numbers |= {"c_sca_error_nm2": 0.01 * c, "spacing_nm": 2.5, "seconds": 2.0}
    row = Row(entry.wavelength_nm, status=status, message=message, **(numbers | changes))
    return Answered(row)


def begin(folder, entries, tables=TABLES, text=""):
    """A ledger with the points and no answer, open to be written."""
    folder.mkdir(parents=True, exist_ok=True)
    ledger = Ledger(folder, write=True)
    ledger.begin(text, tables, {"motelight": "0.1.0"})
    ledger.set_points(entries)
    return ledger


def finished(folder, entries, **options):
    """A run with all its answers."""
    with begin(folder, entries, **options) as ledger:
        for entry in entries:
            ledger.record(entry.identity, answer(entry))
    return folder


def with_file(folder, ledger, entry, levels, arrays=()):
    """Record an answer that has a file."""
    file, checksum = write_point(folder, entry.identity, {"study": "gold cubes"}, levels, arrays)
    row = answer(entry).row
    ledger.record(entry.identity, Answered(row, file=file, checksum=checksum))
    return file
