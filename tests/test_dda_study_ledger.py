"""The ledger keeps what it is given, and says what is wrong with a file it cannot use."""

import math
import sqlite3

import pytest

from dda.errors import ComputationError, InputError
from dda.study.ledger import FORMAT, LEDGER, Ledger
from dda.study.ledger_records import Answered, Entry
from dda.study.rows import Row
from tests.runs import answer, begin, grid


def _equal(one, other):
    """Whether two rows are the same, unknown numbers included."""
    pairs = [(value, vars(other)[name]) for name, value in vars(one).items()]
    return all(a == b or (a != a and b != b) for a, b in pairs)


@pytest.fixture
def ledger(tmp_path):
    with begin(tmp_path, grid()) as opened:
        yield opened


def test_an_answer_comes_back_with_every_digit_and_what_is_unknown(ledger):
    entry = grid()[0]
    row = Row(
        500.0,
        c_ext_nm2=1 / 3,
        c_abs_nm2=1e-300,
        c_sca_nm2=math.nan,
        c_ext_error_nm2=math.inf,
        cells=4096,
        status="coarse",
        seconds=0.1,
        message="Größe: 3 %; 'quoted' \"twice\"\nand a line",
        varied=dict(entry.varied),
        more={"asymmetry": 0.1, "pressure_nm2": math.nan},
    )
    ledger.record(entry.identity, Answered(row, 2, "process 7", "points/ab/x.h5", "cd"))
    ((number, found),) = ledger.rows()
    assert number == 0
    assert found.more.pop("pressure_nm2") != row.more.pop("pressure_nm2")  # NaN, both of them
    assert _equal(found, row)
    answered = ledger.answer(entry.identity)
    assert (answered.tries, answered.worker) == (2, "process 7")
    assert (answered.file, answered.checksum) == ("points/ab/x.h5", "cd")
    assert answered.finished > 1e9
    assert ledger.answer("nobody") is None


def test_a_failed_point_comes_back(ledger):
    entry = grid()[0]
    ledger.record(entry.identity, Answered(Row(500.0, message="it broke down")))
    ((_, found),) = ledger.rows()
    assert (found.status, found.message, found.answered) == ("failed", "it broke down", False)


def test_what_is_recorded_is_there_when_another_opens_it(ledger, tmp_path):
    entry = grid()[3]
    ledger.record(entry.identity, answer(entry))
    with Ledger(tmp_path) as other:
        assert other.known() == {entry.identity: "converged"}
        with pytest.raises(ComputationError, match="readonly"):
            other.note("key", "value")


def test_a_second_answer_replaces_the_first(ledger):
    entry = grid()[0]
    ledger.record(entry.identity, answer(entry, "failed", "no"))
    ledger.record(entry.identity, answer(entry))
    assert ledger.known() == {entry.identity: "converged"}
    ledger.forget([entry.identity])
    assert ledger.known() == {}


def test_points_that_are_the_same_share_an_answer(tmp_path):
    one = grid()[0]
    twice = [one, Entry(1, one.identity, None, 500.0, {"particle.edge": 41.0}, 1.0)]
    with begin(tmp_path, twice) as ledger:
        ledger.record(one.identity, answer(one))
        assert [(n, row.varied) for n, row in ledger.rows()] == [
            (0, {"particle.edge": 40.0}),
            (1, {"particle.edge": 41.0}),
        ]


def test_answers_outlive_another_list_of_points(ledger):
    first, *others = grid()
    ledger.record(first.identity, answer(first))
    ledger.set_points([Entry(0, others[0].identity, None, 520.0, {}, 1.0)])
    assert list(ledger.rows()) == []
    assert ledger.counts() == {"waiting": 1}
    assert ledger.known() == {first.identity: "converged"}


def test_a_coarse_answer_stands_for_a_point_until_its_own_is_there(tmp_path):
    entries = [Entry(0, "fine", "coarse", 500.0, {}, 1.0)]
    with begin(tmp_path, entries) as ledger:
        ledger.record("coarse", answer(entries[0]))
        ((_, row),) = ledger.rows()
        assert row.status == "preview"
        assert ledger.previews() == (1, 1)
        ledger.record("fine", answer(entries[0]))
        assert [row.status for _, row in ledger.rows()] == ["converged"]


def test_what_runs_is_listed_until_it_is_done_dropped_or_begun_anew(ledger):
    one, other, *_ = grid()
    ledger.start(one.identity, "process 1")
    ledger.start(other.identity, "process 2")
    assert [(e.number, worker) for e, worker, _ in ledger.running()] == [
        (0, "process 1"),
        (1, "process 2"),
    ]
    ledger.record(one.identity, answer(one))
    assert [e.number for e, _, _ in ledger.running()] == [1]
    ledger.drop(other.identity)
    assert ledger.running() == []
    ledger.start(other.identity, "process 3")
    ledger.begin("", {}, {})
    assert ledger.running() == []


def test_a_study_is_noted_when_it_is_another(ledger):
    ledger.begin("x = 1", {"x": 1}, {"motelight": "1"})
    begun = ledger.study()[3]
    ledger.begin("x = 1", {"x": 1}, {"motelight": "1"})
    assert ledger.study() == ("x = 1", {"x": 1}, {"motelight": "1"}, begun)
    ledger.begin("x = 2", {"x": 2}, {"motelight": "1"})
    assert ledger.study()[1] == {"x": 2}


def test_a_change_that_fails_halfway_leaves_nothing(ledger):
    before = list(ledger.entries())

    def entries():
        yield Entry(0, "a", None, 1.0, {}, 1.0)
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        ledger.set_points(entries())
    assert list(ledger.entries()) == before
    ledger.note("and", "it goes on")


def _set_format(folder, value):
    base = sqlite3.connect(folder / LEDGER)
    with base:
        base.execute("UPDATE about SET value = ? WHERE key = 'format'", (str(value),))
    base.close()


@pytest.mark.parametrize("write", [False, True])
@pytest.mark.parametrize(
    ("change", "said"),
    [(1, "a newer version of the program; update it"), (-1, "an older version of the program")],
)
def test_another_format_says_what_to_do(tmp_path, write, change, said):
    begin(tmp_path, grid()).close()
    _set_format(tmp_path, FORMAT + change)
    with pytest.raises(InputError, match=said) as caught:
        Ledger(tmp_path, write=write)
    assert "in another folder" in str(caught.value)
    assert LEDGER in str(caught.value)


@pytest.mark.parametrize("write", [False, True])
def test_a_damaged_file_says_what_to_do(tmp_path, write):
    with begin(tmp_path, grid()) as ledger:
        for entry in grid():
            ledger.record(entry.identity, answer(entry))
    path = tmp_path / LEDGER
    content = path.read_bytes()
    path.write_bytes(b"\xff" * 4096 + content[4096:])
    with pytest.raises(InputError, match="damaged, or no ledger") as caught:
        Ledger(tmp_path, write=write)
    assert "move it away" in str(caught.value)


def test_another_database_is_no_ledger(tmp_path):
    base = sqlite3.connect(tmp_path / LEDGER)
    base.execute("CREATE TABLE cats (name TEXT)")
    base.close()
    with pytest.raises(InputError, match="damaged, or no ledger"):
        Ledger(tmp_path, write=True)


def test_an_empty_file_is_begun_by_who_may_write_only(tmp_path):
    (tmp_path / LEDGER).touch()
    with pytest.raises(InputError, match="no study was begun in it yet"):
        Ledger(tmp_path)
    begin(tmp_path, grid()).close()
    with Ledger(tmp_path) as ledger:
        assert ledger.counts() == {"waiting": 6}


def test_a_folder_without_a_ledger_is_no_run(tmp_path):
    with pytest.raises(InputError, match=r"no run of a study \(ledger\.sqlite is not there\)"):
        Ledger(tmp_path)
    assert not (tmp_path / LEDGER).exists()
