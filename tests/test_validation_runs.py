"""The machinery of the validation runs and benchmarks, on tiny cases."""

import numpy as np
import pytest

import shapes
from validation import __main__ as command
from validation import bench as bench_command
from validation import measure, results
from validation.bench_memory import in_a_child
from validation.bench_product import WholeGrid, box_system, check, growth
from validation.compare import percent, row, run
from validation.measure import Figure, full_box, medians, random_dipoles
from validation.mie import sphere
from validation.results import Table, all_groups, read_sections, write_section
from validation.runs_identities import rotation
from validation.runs_mie import extrapolated
from validation.runs_trends import maximum

TABLE = Table("Two numbers", "Some text.", ("case", "verdict"), (("a|b", "ok"), ("c", "FAILS")))


def test_table_as_markdown():
    lines = TABLE.markdown().splitlines()
    assert lines[0] == "## Two numbers"
    assert lines[-4:] == ["| case | verdict |", "| --- | --- |", "| a\\|b | ok |", "| c | FAILS |"]
    assert TABLE.failures == 1


def test_a_row_of_another_length_is_refused():
    with pytest.raises(ValueError, match="2 columns"):
        Table("", "", ("a", "b"), (("1",),)).markdown()


def test_a_section_replaces_itself_and_no_other(tmp_path):
    page = tmp_path / "page.md"
    order = ["one", "two", "three"]
    for name in ("three", "one", "two"):
        write_section(name, f"## {name}\n\nold text of {name}", order, page)
    write_section("two", "## two\n\nnew", order, page)
    found = read_sections(page)
    assert list(found) == order
    assert "old text of one" in found["one"]
    assert found["two"].strip().endswith("new")
    assert "old text of three" in found["three"]
    assert page.read_text().startswith("# Validation")
    write_section("one", "## one", ["one", "three"], page)
    assert list(read_sections(page)) == ["one", "three"]  # the group "two" is gone


def test_names_of_groups_are_checked():
    with pytest.raises(ValueError, match="taken"):
        results.group("Not A Name", 1)(lambda quick: TABLE)
    name = next(iter(all_groups()))
    with pytest.raises(ValueError, match="taken"):
        results.group(name, 1)(lambda quick: TABLE)


def test_groups_register_themselves_and_are_listed(capsys):
    assert command.main(["--list"]) == 0
    listed = capsys.readouterr().out
    for name in ("mie", "refinement", "cube", "gans", "spheroids", "core-shell", "pair"):
        assert f"{name} " in listed
    for found in all_groups().values():
        assert len(found.summary) > 10


def test_command_runs_a_group_and_writes_its_section(tmp_path, monkeypatch, capsys):
    groups = {"tiny": results.Group("tiny", 1, lambda quick: TABLE)}
    monkeypatch.setattr(command, "all_groups", lambda: groups)
    page = tmp_path / "page.md"
    assert command.main(["--only", "tiny", "--out", str(page)]) == 1  # a row failed
    assert "a\\|b" in page.read_text()
    assert "1 comparisons failed" in capsys.readouterr().err
    with pytest.raises(SystemExit):
        command.main(["--only", "other"])


def test_quick_run_of_a_real_group_writes_no_page(monkeypatch, capsys):
    def refused(*args):
        raise AssertionError("a quick run must not touch the page")

    monkeypatch.setattr(command, "write_section", refused)
    assert command.main(["--only", "core-shell", "--quick"]) == 0
    assert "Core-shell spheres" in capsys.readouterr().out


def test_row_of_a_comparison():
    exact = sphere(20, 500, 4.0, 1.33).c_ext
    solved = run(shapes.sphere(20, "2.0"), 500, 8)
    good = row("a sphere", "Mie", solved, [exact], 0.2)
    assert good[-1] == "ok"
    assert abs(float(good[4])) < 20
    bad = row("a sphere", "Mie", solved, [1.5 * exact], 0.2)
    assert bad[-1] == "FAILS"
    assert float(bad[4]) == pytest.approx(-33, abs=10)


@pytest.mark.parametrize(
    ("value", "text"), [(0.0, "0"), (1.5, "1.5"), (123456.7, "123457"), (2e-7, "2.000e-07")]
)
def test_numbers_as_text(value, text):
    assert results.number(value) == text


def test_errors_as_text():
    assert [percent(v) for v in (0.01234, -0.5, 0.0)] == ["+1.23", "-50.0", "+0.00"]


def test_straight_line_in_the_square_of_the_spacing():
    across = [16, 20, 29]
    values = np.array([[3 + 5 / n**2, 1 - 2 / n**2] for n in across])
    assert extrapolated(across, values) == pytest.approx([3, 1], rel=1e-12)


def test_place_of_a_maximum():
    places = np.arange(500, 560, 10)
    assert maximum(places, 7 - (places - 533.3) ** 2) == pytest.approx(533.3)
    with pytest.raises(ArithmeticError, match="end"):
        maximum(places, places)


def test_rotation_matrix():
    turn = rotation(120, (1, 1, 1))
    assert turn @ [1, 0, 0] == pytest.approx([0, 1, 0], abs=1e-15)
    assert rotation(90, (0, 0, 2)) @ [1, 0, 0] == pytest.approx([0, 1, 0], abs=1e-15)


def test_whole_grid_product_is_the_same_product():
    """The baseline of the benchmark must compute what ours does; `check` allows 1e-11."""
    system = box_system(7)
    p = random_dipoles(system.n, complex)
    whole = WholeGrid(system.cells.shape, system.table, 1)
    check(whole, system, p)
    wrong = box_system(7)
    wrong.table.isotropic[1] *= 1.001
    with pytest.raises(ArithmeticError, match="differ"):
        check(WholeGrid(system.cells.shape, wrong.table, 1), system, p)


def test_full_box_is_bulk():
    cells = full_box(3, 2.0)
    assert (cells.n, cells.shape, cells.volume) == (27, (3, 3, 3), 216)
    assert cells.positions.mean(axis=0) == pytest.approx([0, 0, 0])
    assert np.array_equal(cells.rows().ravel(), np.arange(27))  # C order


def test_actions_take_turns():
    seen = []
    found = medians({"a": lambda: seen.append("a"), "b": lambda: seen.append("b")}, repeats=3)
    assert "".join(seen) == "abababab"  # one round more than is counted
    assert set(found) == {"a", "b"}


def test_figures_know_their_targets():
    assert Figure("gain", 2.0, "x", least=1.7).met
    assert not Figure("gain", 1.6, "x", least=1.7).met
    assert not Figure("memory", 701, "B", most=700).met
    assert "MISSED" in str(Figure("memory", 701, "B", most=700))
    assert Figure("time", 1.0, "s").met


def test_growth_holds_all_sizes():
    figures = growth(8)
    sizes = [figure.name.split("^")[0] for figure in figures[:-1]]
    assert sizes == ["4", "6", "8", "10", "12", "16", "20"]
    assert all(f.value > 0 for f in figures[:-1])


def test_memory_of_a_child():
    """A box of 28^3 in double precision holds at least its kernel octant and columns."""
    found = in_a_child(28, "double", "full box")
    assert found["box"] == 28**3
    least = 6 * 29**3 * 16 + 3 * 56 * 28 * 28 * 16
    assert found["solving"] > 0.8 * least
    assert found["solving"] < 20 * least


def test_benchmark_command(monkeypatch, capsys):
    benches = {"one": lambda cells: [Figure("cells", cells, least=10)]}
    monkeypatch.setattr(bench_command, "all_benches", lambda: benches)
    assert bench_command.main(["--cells", "12"]) == 0
    assert bench_command.main(["--cells", "3", "--only", "one"]) == 1
    assert "1 targets missed" in capsys.readouterr().out


def test_benchmarks_register_themselves():
    assert {"product", "threads", "precision", "growth", "memory", "voxelizer"} <= set(
        measure.all_benches()
    )
