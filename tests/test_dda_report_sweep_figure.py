"""The picture of a sweep: what it draws for few and many combinations, numbers and words."""

import math

import pytest
from matplotlib.figure import Figure

from dda.report import sweep_figure
from dda.report.sweep_figure import draw_sweep
from dda.study.rows import Row

WAVELENGTHS = range(500, 610, 10)


def _rows(values, wavelengths=WAVELENGTHS, key="particle.edge", **changes):
    rows = []
    for number, value in enumerate(values):
        for wavelength in wavelengths:
            c = 1000 / (1 + ((wavelength - 530 - 2 * number) / 20) ** 2)
            known = {"c_ext_nm2": c, "c_ext_error_nm2": 0.02 * c, "status": "converged"}
            known["varied"] = {key: value, "host.index": 1.33}
            rows.append(Row(float(wavelength), **(known | changes)))
    return rows


@pytest.fixture
def drawn(monkeypatch, tmp_path):
    """Draw rows; the figure, saved as well."""
    found = []
    save = sweep_figure.save
    monkeypatch.setattr(sweep_figure, "save", lambda f, p: (found.append(f), save(f, p)))

    def draw(rows) -> Figure:
        path = tmp_path / "spectrum.png"
        draw_sweep(path, rows, "a title")
        assert path.read_bytes().startswith(b"\x89PNG")
        return found[-1]

    return draw


def test_few_combinations_are_named_and_have_their_error_bands(drawn):
    left, right = drawn(_rows([40, 50, 60])).axes
    assert [t.get_text() for t in left.get_legend().get_texts()] == [
        "edge 40, index 1.33", "edge 50, index 1.33", "edge 60, index 1.33",
    ]  # fmt: skip
    assert len(left.collections) == 3
    assert left.get_xlabel() == "vacuum wavelength (nm)"
    assert "nm²" in left.get_ylabel()
    assert left.get_title(loc="left") == "a title"
    places = [line.get_xdata()[0] for line in right.lines]
    peaks = [line.get_ydata()[0] for line in right.lines]
    assert places == [40, 50, 60]
    assert right.get_xlabel() == "particle.edge"
    for peak, expected in zip(peaks, (530, 532, 534), strict=True):
        assert abs(peak - expected) < 1  # a parabola through points 10 nm apart


def test_many_combinations_have_a_colour_bar(drawn):
    figure = drawn(_rows(range(200)))
    left, _, bar = figure.axes
    assert left.get_legend() is None
    assert len(left.lines) <= 80
    assert bar.get_xlabel() == "particle.edge"


def test_words_have_no_colour_bar(drawn):
    figure = drawn(_rows([f"metal {n}" for n in range(20)], key="particle.material"))
    assert len(figure.axes) == 2
    assert figure.axes[1].get_xlabel() == "combination"


def test_few_wavelengths_are_drawn_over_the_key(drawn):
    (axes,) = drawn(_rows([40, 50, 60], [520, 560])).axes
    assert axes.get_xlabel() == "particle.edge"
    assert [t.get_text() for t in axes.get_legend().get_texts()] == ["520 nm", "560 nm"]


@pytest.mark.parametrize("wavelengths", [WAVELENGTHS, [530]])
def test_what_failed_is_left_out(drawn, wavelengths):
    unknown = {"c_ext_nm2": math.nan, "c_ext_error_nm2": math.nan, "status": "failed"}
    figure = drawn(_rows([40, 50], wavelengths) + _rows([60], wavelengths, **unknown))
    assert figure.axes
    drawn(_rows([40, 50], wavelengths, **unknown))


def test_points_that_are_missing_yet_do_not_hinder(drawn):
    drawn(_rows([40, 50])[:13])
    drawn(_rows([40])[:1])
