"""Rows as a file and as printed lines."""

import csv
import math

import pytest

from dda.errors import ComputationError
from dda.files import write_aside
from dda.report.table import peak_sentence, spectrum_text, write_csv
from dda.study.rows import Row
from dda.study.spectrum import Peak

ASKED = [
    "wavelength_nm",
    "c_ext_nm2",
    "c_abs_nm2",
    "c_sca_nm2",
    "q_ext",
    "q_abs",
    "q_sca",
    "cells",
    "spacing_nm",
    "iterations",
    "residual",
    "status",
]


def _row(wavelength, **changes):
    c = 1000 / (1 + ((wavelength - 550) / 40) ** 2)
    known = {
        "c_ext_nm2": c,
        "c_abs_nm2": 0.7 * c,
        "c_sca_nm2": 0.3 * c,
        "q_ext": c / 500,
        "cells": 100,
        "status": "converged",
    }
    return Row(wavelength, **(known | changes))


def test_the_file_has_the_columns_and_one_row_a_point(tmp_path):
    path = tmp_path / "spectrum.csv"
    rows = [_row(500.0), Row(510.0, message="why, in words"), _row(520.0)]
    write_csv(path, rows)
    with path.open(newline="") as file:
        read = list(csv.DictReader(file))
    assert set(ASKED) <= set(read[0])
    assert [float(r["wavelength_nm"]) for r in read] == [500, 510, 520]
    assert float(read[0]["c_ext_nm2"]) == pytest.approx(rows[0].c_ext_nm2, rel=1e-8)
    assert read[1]["c_ext_nm2"] == ""
    assert read[1]["status"] == "failed"
    assert read[1]["message"] == "why, in words"
    assert [p.name for p in tmp_path.iterdir()] == ["spectrum.csv"]


def test_a_file_that_cannot_be_written_leaves_the_old_one(tmp_path, monkeypatch):
    path = tmp_path / "spectrum.csv"
    path.write_text("old")

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full)
    with pytest.raises(ComputationError, match="the disk is full"):
        write_aside(path, b"new")
    assert path.read_text() == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["spectrum.csv"]


def test_the_printed_table_is_short_and_keeps_what_matters():
    rows = [_row(400.0 + 2 * i) for i in range(200)]
    rows[33] = _row(466.0, status="stalled")
    text = spectrum_text(rows)
    lines = text.splitlines()
    assert len(lines) < 25
    assert any("466" in line and "stalled" in line for line in lines)
    assert any(line.split()[:1] == ["550"] for line in lines)
    assert "extinction  peak at 550.0 nm" in text
    assert "full width at half maximum 80." in text


def test_a_peak_without_a_width_says_which_side_is_known():
    assert "red side 20.0 nm" in peak_sentence(Peak(500.0, 1.0, None, 520.0))
    assert "blue side 20.0 nm" in peak_sentence(Peak(500.0, 1.0, 480.0, None))
    assert "wider than the spectrum" in peak_sentence(Peak(500.0, 1.0, None, None))
    assert "no peak" in peak_sentence(None)


def test_a_row_without_numbers_is_not_answered():
    assert not Row(500.0).answered
    assert not Row(500.0).converged
    assert math.isnan(Row(500.0).c_abs_nm2)
