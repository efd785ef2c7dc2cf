"""Short names of common materials, each with the page of the data set it stands for.

The choice is deliberate and printed with the material: measured bulk values where there are any
that cover the visible, the sources most used in the field for the noble metals, smooth values for
hosts, since noise in a host's index becomes noise in a spectrum.
"""

import difflib
from dataclasses import dataclass, replace

from dda.errors import InputError
from dda.materials.database import NO_K, from_page, nearest_pages
from dda.materials.interpolation import ExtinctionOf, IndexPermittivity
from dda.materials.material import Material
from dda.materials.models import Constant


@dataclass(frozen=True)
class ShortName:
    """A name, the `page` it stands for, other names for it, and why that page.

    `k_page` names a second page that supplies k where the first has only n.
    """

    name: str
    page: str
    aliases: tuple[str, ...] = ()
    note: str = ""
    k_page: str | None = None


_JC72 = "bulk values of Johnson & Christy 1972"
_JC74 = "bulk values of Johnson & Christy 1974"
_ORDINARY = "ordinary ray of a birefringent crystal, used as if isotropic"

_ENTRIES = (
    ShortName("gold", "main/Au/Johnson", ("au",), _JC72),
    ShortName("silver", "main/Ag/Johnson", ("ag",), _JC72),
    ShortName("copper", "main/Cu/Johnson", ("cu",), _JC72),
    ShortName(
        "aluminium", "main/Al/Rakic", ("al", "aluminum"), "bulk, many sources made consistent"
    ),
    ShortName("platinum", "main/Pt/Rakic-BB", ("pt",), "Brendel-Bormann model of bulk values"),
    ShortName("palladium", "main/Pd/Johnson", ("pd",), _JC74),
    ShortName("nickel", "main/Ni/Johnson", ("ni",), _JC74),
    ShortName("chromium", "main/Cr/Johnson", ("cr",), _JC74),
    ShortName("cobalt", "main/Co/Johnson", ("co",), _JC74),
    ShortName("iron", "main/Fe/Johnson", ("fe",), _JC74),
    ShortName("titanium", "main/Ti/Johnson", ("ti",), _JC74),
    ShortName("rhodium", "main/Rh/Weaver", ("rh",)),
    ShortName("magnesium", "main/Mg/Palm", ("mg",)),
    ShortName(
        "titanium-nitride",
        "main/TiN/Beliaev-sputtering",
        ("tin",),
        "sputtered film; films differ much, choose the page that matches yours",
    ),
    ShortName("ito", "other/In2O3-SnO2/Konig", ("indium-tin-oxide",), "film; films differ much"),
    ShortName("silicon", "main/Si/Green-2008", ("si",), "crystalline"),
    ShortName("silicon-amorphous", "main/Si/Franta", ("a-si",)),
    ShortName("germanium", "main/Ge/Nunley", ("ge",)),
    ShortName("gallium-arsenide", "main/GaAs/Papatryfonos", ("gaas",)),
    ShortName("gallium-phosphide", "main/GaP/Aspnes", ("gap",)),
    ShortName("diamond", "main/C/Phillip"),
    ShortName("silica", "main/SiO2/Malitson", ("sio2", "fused-silica"), "fused silica"),
    ShortName(
        "titania", "main/TiO2/Siefke", ("tio2",), "amorphous film; rutile has a higher index"
    ),
    ShortName("titania-rutile", "main/TiO2/Devore-o", ("rutile",), _ORDINARY),
    ShortName("titania-anatase", "main/TiO2/Jolivet-anatase", ("anatase",)),
    ShortName("sapphire", "main/Al2O3/Malitson-o", (), _ORDINARY),
    ShortName("alumina", "main/Al2O3/Boidin", ("al2o3",), "amorphous film; see also sapphire"),
    ShortName("hematite", "main/Fe2O3/Querry-o", ("fe2o3", "iron-oxide"), _ORDINARY),
    ShortName("magnetite", "main/Fe3O4/Querry", ("fe3o4",)),
    ShortName("zinc-oxide", "main/ZnO/Stelling", ("zno",)),
    ShortName("silicon-nitride", "main/Si3N4/Philipp", ("si3n4",)),
    ShortName("magnesium-fluoride", "main/MgF2/Dodge-o", ("mgf2",), _ORDINARY),
    ShortName("calcium-fluoride", "main/CaF2/Malitson", ("caf2",)),
    ShortName(
        "water",
        "main/H2O/Daimon-20.0C",
        ("h2o",),
        "n at 20 C; k at 25 C of Hale & Querry 1973, whose n has only four digits",
        k_page="main/H2O/Hale",
    ),
    ShortName(
        "water-infrared",
        "main/H2O/Hale",
        (),
        "for wavelengths that 'water' does not reach; n has only four digits",
    ),
    ShortName("ice", "main/H2O/Warren-2008"),
    ShortName("ethanol", "organic/ethanol/Sani-formula"),
    ShortName("methanol", "organic/methanol/Chang"),
    ShortName("isopropanol", "organic/propanol/Sani-formula", ("2-propanol",)),
    ShortName("acetone", "organic/acetone/Chang"),
    ShortName("toluene", "organic/toluene/Chang"),
    ShortName("hexane", "organic/hexane/Chang"),
    ShortName("cyclohexane", "organic/cyclohexane/Chang"),
    ShortName("chloroform", "organic/chloroform/Chang"),
    ShortName("dimethyl-sulfoxide", "organic/dimethyl_sulfoxide/Li", ("dmso",)),
    ShortName("ethylene-glycol", "organic/ethylene_glycol/Sani-formula"),
    ShortName("glycerol", "organic/glycerol/Rheims", ("glycerin",)),
    ShortName("bk7", "specs/SCHOTT-optical/N-BK7", ("n-bk7", "glass"), "borosilicate crown"),
    ShortName("sf10", "specs/SCHOTT-optical/N-SF10", ("n-sf10",), "dense flint"),
    ShortName("sf11", "specs/SCHOTT-optical/N-SF11", ("n-sf11",), "dense flint"),
    ShortName("lasf9", "specs/SCHOTT-optical/N-LASF9", ("n-lasf9",), "dense lanthanum flint"),
    ShortName("soda-lime", "glass/soda-lime/Rubin-clear", (), "window and slide glass"),
    ShortName("polystyrene", "organic/polystyrene/Zhang", ("ps",)),
    ShortName("pmma", "organic/poly_methyl_methacrylate/Zhang-Mitsubishi"),
    ShortName("pdms", "organic/polydimethylsiloxane/Zhang-10-1", (), "10 : 1"),
    ShortName("pvp", "organic/polyvinylpyrrolidone/Konig", ("polyvinylpyrrolidone",)),
    ShortName("polycarbonate", "organic/polycarbonate/Zhang"),
    ShortName("air", "other/air/Ciddor", (), "15 C, 101325 Pa, dry"),
)
SHORT_NAMES: dict[str, ShortName] = {entry.name: entry for entry in _ENTRIES}
"""Short names in the order of a listing: metals, semiconductors, oxides, liquids, glasses, ...

"vacuum" is a name too; it stands for no page.
"""

_LOOKUP = {key: entry for entry in _ENTRIES for key in (entry.name, *entry.aliases)}


def from_short_name(name: str) -> Material | None:
    """Material of a short name or one of its aliases, in any case; None if there is none such.

    >>> from_short_name("Au").name
    'gold'
    """
    key = "-".join(name.strip().lower().replace("_", " ").split())
    if key == "vacuum":
        return Material("vacuum", Constant(1.0 + 0j), "by definition")
    entry = _LOOKUP.get(key)
    if entry is None:
        return None
    material = from_page(entry.page)
    if entry.k_page is not None:
        material = _with_k_of(material, from_page(entry.k_page))
    notes = (entry.note, *material.notes) if entry.note else material.notes
    return replace(material, name=entry.name, notes=notes)


def unknown_name(text: str) -> InputError:
    """The error for a name that means nothing: what is near it, and how to list what there is."""
    near = difflib.get_close_matches(text.strip().lower(), [*_LOOKUP, "vacuum"], n=3, cutoff=0.7)
    proposals = []
    if near:
        proposals.append("did you mean " + " or ".join(f"'{name}'" for name in near) + "?")
    pages = nearest_pages(text)
    if pages:
        proposals.append("Pages of the data set: " + ", ".join(map(str, pages)) + ".")
    proposals.append(
        "A material is a short name (`dda material` lists them), a page such as main/Au/Johnson, "
        'a CSV file, a number (the refractive index) or a table such as {model = "drude", ...}'
    )
    return InputError(f"unknown material '{text}': " + " ".join(proposals))


def _with_k_of(material: Material, absorber: Material) -> Material:
    """`material` (n only) with the k of `absorber`, over the wavelengths both have."""
    n_model = material.model
    if not isinstance(n_model, IndexPermittivity) or n_model.k is not None:
        raise TypeError(f"page '{material.name}' already has k")
    low, high = zip(*(m.range_nm for m in (material, absorber) if m.range_nm), strict=True)
    return Material(
        material.name,
        IndexPermittivity(n_model.n, ExtinctionOf(absorber.model)),
        f"n: {material.source}; k: {absorber.source}",
        (max(low), min(high)),
        tuple(note for note in material.notes if note != NO_K),
    )
