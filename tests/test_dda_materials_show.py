"""The text and the figure of a material."""

import numpy as np
import pytest

from dda.errors import InputError
from dda.materials import SHORT_NAMES, find
from dda.materials.show import default_wavelengths, describe, listing, plot


def test_description_holds_source_range_and_values():
    text = describe(find("gold"), [500.0, 659.5])
    assert text.startswith("gold\n")
    assert "Johnson" in text
    assert "187.9 to 1937 nm" in text
    row = next(line for line in text.splitlines() if line.split()[:1] == ["659.5"])
    n, k, real, imag = map(float, row.split()[1:])
    assert (n, k) == pytest.approx((0.14, 3.697), abs=2e-4)
    assert complex(real, imag) == pytest.approx((n + 1j * k) ** 2, abs=2e-3)


def test_description_tells_notes_and_small_k():
    assert "k is taken as 0" in describe(find("silica"))
    assert "e-09" in describe(find("water"), [500.0])


def test_description_out_of_range_is_refused():
    with pytest.raises(InputError, match=r"187\.9 to 1937"):
        describe(find("gold"), [3000.0])


def test_default_wavelengths_stay_in_the_range():
    assert default_wavelengths(find("gold"), 3).tolist() == [400.0, 600.0, 800.0]
    assert default_wavelengths(find("glycerol"), 2).tolist() == [589.3, 800.0]
    beyond = find("main/Ru/Windt")  # ends at 122 nm
    assert default_wavelengths(beyond, 2).tolist() == list(beyond.range_nm)


def test_listing_has_a_line_for_every_name_with_its_range():
    lines = listing().splitlines()
    assert [line.split()[0] for line in lines[1:]] == [*SHORT_NAMES, "vacuum"]
    water = next(line for line in lines if line.startswith("water "))
    assert "200 - 1129" in water


@pytest.mark.parametrize("spec", ["gold", "water", "silica", {"eps": -10}])
def test_figure_is_drawn(spec, tmp_path):
    """A picture with a good deal of ink of both colours, or of one where there is no absorption."""
    import matplotlib.image

    file = plot(find(spec), tmp_path / "figure.png")
    pixels = matplotlib.image.imread(file)[..., :3]
    blue = np.all(np.abs(pixels - (0, 0.447, 0.698)) < 0.05, axis=2).sum()
    orange = np.all(np.abs(pixels - (0.835, 0.369, 0)) < 0.05, axis=2).sum()
    assert blue > 500
    assert (orange > 300) == (spec != "silica")


def test_figure_over_chosen_wavelengths_and_in_another_format(tmp_path):
    file = plot(find("gold"), tmp_path / "figure.svg", wavelengths=(500, 900))
    assert "<svg" in file.read_text()


def test_figure_that_cannot_be_written(tmp_path):
    with pytest.raises(InputError, match="cannot write the figure"):
        plot(find("gold"), tmp_path / "none" / "figure.png")
    with pytest.raises(InputError, match="cannot write the figure"):
        plot(find("gold"), tmp_path / "figure.nonsense")
