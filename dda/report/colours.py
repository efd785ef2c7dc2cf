"""Colours for materials that can be told apart without colour vision."""

from __future__ import annotations

from collections.abc import Sequence

#: Every two differ in lightness L* by 12 or more, the first ones by much more, so that they are
#: told apart in grey; the hues help those who see them.
PALETTE = ("#F2C14E", "#15407A", "#2FA38A", "#F4EAF8", "#1A1A1A", "#A9477A")
BACKGROUND = "#FFFFFF"
INK = "#202020"


def material_colours(materials: Sequence[str]) -> dict[str, str]:
    """Return a colour for each material, in the order given; past six they repeat.

    >>> material_colours(["gold", "silica"])
    {'gold': '#F2C14E', 'silica': '#15407A'}
    """
    return {name: PALETTE[i % len(PALETTE)] for i, name in enumerate(materials)}


def rgb(colour: str) -> tuple[float, float, float]:
    """Return red, green and blue from 0 to 1 of a colour like "#F2C14E"."""
    red, green, blue = (int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5))
    return red, green, blue


def lightness(colour: str) -> float:
    """Return the CIE 1976 lightness L* (0 black, 100 white) of an sRGB colour.

    >>> round(lightness("#FFFFFF"), 3), round(lightness("#000000"), 3)
    (100.0, 0.0)
    """
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in rgb(colour)]
    luminance = sum(w * c for w, c in zip((0.2126, 0.7152, 0.0722), linear, strict=True))
    if luminance > (6 / 29) ** 3:
        return 116 * luminance ** (1 / 3) - 16
    return luminance * (29 / 3) ** 3
