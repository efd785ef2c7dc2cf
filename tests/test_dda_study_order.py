"""The order in which points are computed."""

from itertools import pairwise
from pathlib import Path

import pytest

from dda.study.order import chains, coarse_first
from dda.study.points import points_of
from dda.study.reader import study_from_text
from tests.sweeps import SWEEP


def _points(*changes):
    text = SWEEP.replace("TO", "21")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return points_of(study_from_text(text, Path("study.toml")))


@pytest.mark.parametrize("count", [0, 1, 2, 3, 4, 5, 8, 31, 100])
def test_every_wavelength_comes_once_and_what_follows_stands_between_known_ones(count):
    order = coarse_first(count)
    assert sorted(order) == list(range(count))
    first = -(-count // 4) + ((count - 1) % 4 != 0 if count else 0)
    assert order[:first] == sorted(order[:first])
    for place in range(first, count):  # inside, not beyond
        assert min(order[:place]) < order[place] < max(order[:place])


def test_a_chain_is_one_combination():
    points = _points(("wavelengths = [530]", "wavelengths = [500, 510, 520, 530, 540]"))
    found = chains(points)
    assert [sorted(chain) for chain in found] == [
        list(range(5)), list(range(5, 10)), list(range(10, 15)),
    ]  # fmt: skip
    assert found[1] == [5 + number for number in (0, 4, 2, 1, 3)]


def test_wavelengths_follow_one_another_where_solutions_are_too_large_to_keep():
    points = _points(("wavelengths = [530]", "wavelengths = [500, 510, 520, 530, 540]"))
    found = chains(points, [False] * 5 + [True] * 10)
    assert found[0] == [0, 1, 2, 3, 4]
    assert found[1] != sorted(found[1])


def test_combinations_with_the_same_cells_stand_side_by_side():
    # the host changes fastest in the first study, slowest in the second one
    for before in (False, True):
        host = "host.index = [1.0, 1.2, 1.4]\n"
        diameters = "particle.diameter = {from = 20, to = 21, step = 0.5}\n"
        both = host + diameters if before else diameters + host
        points = _points((diameters, both))
        order = [points[number].geometry_key for chain in chains(points) for number in chain]
        assert len(order) == 9
        changes = sum(one != other for one, other in pairwise(order))
        assert changes == 2
