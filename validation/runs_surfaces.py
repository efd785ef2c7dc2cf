"""Surface treatments, kernels, damping and window widths beside each other: what was tried."""

from __future__ import annotations

from dataclasses import dataclass

import shapes
from validation.compare import percent
from validation.levels import settled
from validation.results import Table, group
from validation.runs_mie import SOURCE, mie

# Metal, diameter, wavelength, nm.
SPHERES = (("gold", 80, 600), ("gold", 80, 785), ("silver", 40, 400), ("silver", 60, 450))
ACROSS = (16, 24, 32)
LIMIT = 1500


@dataclass(frozen=True)
class Way:
    """One way to treat the surface."""

    surface: str
    kernel: str = "fcd-corners"
    damping: float | None = None
    width: float = 2.2

    @property
    def asked(self) -> dict:
        """Arguments of `dda.system` and of `shapes.voxelize`."""
        damping = {} if self.damping is None else {"layer_damping": self.damping}
        return {
            "surface": self.surface, "polarizability": self.kernel, "window": self.width, **damping
        }  # fmt: skip


WAYS = (
    Way("whole", "ldr"),
    Way("whole", "fcd"),
    Way("whole"),
    Way("cell", "fcd"),
    Way("cell"),
    Way("window", "fcd", 0.0),
    Way("window", "fcd", 0.5),
    Way("window", damping=0.0),
    Way("window", damping=0.25),
    Way("window", damping=0.5),
    Way("window", damping=1.0),
    Way("window", damping=0.5, width=1.8),
    Way("window", damping=0.5, width=2.6),
    Way("window", damping=0.5, width=3.0),
)


@group("surfaces", rank=15)
def surfaces(quick: bool) -> Table:
    """What was tried: surfaces, kernels, damping of the layer, widths of the window."""
    text = f"""
Errors of C_ext / C_abs in % against the Mie series with {", ".join(map(str, ACROSS))} cells across,
host 1.33, and the products until the cross sections had settled to 1e-3 (an eighth of a whole
product each; "limit": not within {LIMIT} steps). "whole" is the staircase, "cell" mixes by the
fraction of the cell itself, "window" by that of a ball so many spacings wide. The default is
window, fcd-corners, damping 0.5, width 2.2. Nothing here passes or fails.
"""
    columns = (
        "sphere", "source", "surface", "kernel", "damping", "width",
        *(f"{n} across: error, % (products)" for n in ACROSS), "time, s",
    )  # fmt: skip
    rows = []
    for metal, diameter, wavelength in SPHERES[:1] if quick else SPHERES:
        exact = mie(metal, diameter, wavelength, 1.33)
        for way in WAYS[::6] if quick else WAYS:
            found, seconds = [], 0.0
            for across in ACROSS[:1] if quick else ACROSS:
                text_of, spent = _tried(
                    shapes.sphere(diameter, metal), wavelength, across, way, exact
                )
                found.append(text_of)
                seconds += spent
            found += ["-"] * (len(ACROSS) - len(found))
            rows.append(
                [f"{metal} {diameter} nm, {wavelength} nm", SOURCE, way.surface, way.kernel,
                 "-" if way.damping is None else f"{way.damping:g}",
                 f"{way.width:g}" if way.surface == "window" else "-", *found, f"{seconds:.1f}"]
            )  # fmt: skip
    return Table("Surfaces, kernels and windows that were tried", text, columns, rows)


def _tried(particle, wavelength: float, across: int, way: Way, exact) -> tuple[str, float]:
    _, rung = settled(particle, wavelength, across, limit=LIMIT, **way.asked)
    errors = " / ".join(percent(a / b - 1) for a, b in zip(rung.sections[:2], exact, strict=True))
    state = "" if rung.status == "converged" else f", {rung.status}"
    return f"{errors} ({rung.products}{state})", rung.seconds
