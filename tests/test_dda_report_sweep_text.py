"""A sweep in words: its combinations, their peaks, no more lines than one reads."""

from dda.report.sweep_text import PRINTED_LINES, sweep_text
from dda.study.rows import Row


def _rows(edges, wavelengths=range(500, 610, 10), key="particle.edge", **changes):
    """Spectra whose peaks lie at 500 nm plus the edge."""
    rows = []
    for edge in edges:
        for wavelength in wavelengths:
            c = 1000 / (1 + ((wavelength - 500 - edge) / 20) ** 2)
            known = {"c_ext_nm2": c, "status": "converged", "varied": {key: edge}}
            rows.append(Row(float(wavelength), **(known | changes)))
    return rows


def _cells(text):
    return [line.split() for line in text.splitlines()]


def test_every_combination_has_its_peak_in_a_line():
    header, *lines = _cells(sweep_text(_rows([40, 50.5])))
    assert header[:3] == ["particle.edge", "points", "good"]
    assert [line[0] for line in lines] == ["40", "50.5"]
    assert [line[1:3] for line in lines] == [["11", "11"]] * 2
    # the peak of a Lorentzian through points 10 nm apart, by a parabola: within 1 nm
    assert abs(float(lines[0][3]) - 540) < 1
    assert abs(float(lines[1][3]) - 550.5) < 1
    assert abs(float(lines[0][4]) - 1000) < 20
    # its full width at half height is 40 nm; straight lines between points 10 nm apart
    assert abs(float(lines[0][5]) - 40) < 4


def test_the_columns_stand_under_one_another():
    lines = sweep_text(_rows([40, 50], key="particle.parts[1].diameter")).splitlines()
    assert len({len(line) for line in lines}) == 1


def test_points_that_failed_or_did_not_converge_are_not_good():
    rows = _rows([40])
    bad = Row(540.0, varied=rows[0].varied)
    rows[4] = bad
    rows[5] = Row(550.0, c_ext_nm2=800.0, status="stalled", varied=rows[0].varied)
    line = _cells(sweep_text(rows))[1]
    assert line[1:3] == ["11", "9"]


def test_few_wavelengths_have_a_value_instead_of_a_peak():
    line = _cells(sweep_text(_rows([40], wavelengths=[540])))[1]
    assert line == ["40", "1", "1", "-", "1000", "-"]


def test_no_answer_at_all_is_a_dash():
    line = _cells(sweep_text([Row(540.0, varied={"host.index": 1.33})]))[1]
    assert line == ["1.33", "1", "0", "-", "-", "-"]


def test_many_combinations_are_thinned_out_and_it_says_so():
    few = sweep_text(_rows(range(1, PRINTED_LINES + 1), [540]))
    assert len(few.splitlines()) == PRINTED_LINES + 1
    many = sweep_text(_rows(range(95), [540]))
    assert len(many.splitlines()) <= PRINTED_LINES + 2
    assert many.splitlines()[-1] == "(19 of 95 combinations; the table has all)"
    assert _cells(many)[1][0] == "0"
