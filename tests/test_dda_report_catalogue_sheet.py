"""The sheet of the catalogue shows each shape in its place."""

import numpy as np

from dda.cli import WRONG_INPUT, main
from dda.report.catalogue_sheet import COLUMNS, draw_sheet
from dda.report.colours import PALETTE, rgb
from shapes import catalogue


def _near(picture, colour):
    """Pixels of a colour, whatever the light on it."""
    hue = np.array(rgb(colour))
    size = np.linalg.norm(picture, axis=2) * np.linalg.norm(hue)
    return (picture @ hue > 0.985 * size) & (np.ptp(picture, axis=2) > 0.2)


def test_each_shape_has_its_place_and_a_second_material_is_seen(tmp_path):
    from matplotlib.image import imread

    draw_sheet(tmp_path / "sheet.png", ["sphere", "core_shell"])
    picture = imread(tmp_path / "sheet.png")[:, :, :3]
    body = picture[picture.shape[0] // 3 :]  # below the legend
    width = picture.shape[1] // COLUMNS
    gold, silica = (_near(body, colour) for colour in PALETTE[:2])
    places = [slice(i * width, (i + 1) * width) for i in range(COLUMNS)]
    shown = [(gold[:, p].mean() > 0.1, silica[:, p].mean() > 0.02) for p in places]
    assert shown == [(True, False), (True, True), *[(False, False)] * (COLUMNS - 2)]


def test_the_examples_need_no_more_colours_than_there_are():
    names = {m for name in catalogue.entries for m in catalogue.example(name).materials}
    assert len(names) <= len(PALETTE)


def test_a_sheet_of_one_shape_is_refused(capsys):
    assert main(["shapes", "cube", "--sheet"]) == WRONG_INPUT
    assert "leave out the name" in capsys.readouterr().err
