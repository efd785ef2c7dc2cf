"""A plan in words."""

from __future__ import annotations

import textwrap

from dda.report.progress import duration_text
from dda.study.estimate import POINT_BYTES
from dda.study.geometry import Geometry
from dda.study.lights import beam_text
from dda.study.memory import bytes_text
from dda.study.near_plan import NearPlan
from dda.study.particle import notes_of
from dda.study.plan import Plan
from dda.study.prepare import Prepared

#: Characters in a printed line.
LINE = 100


def plan_text(plan: Plan) -> str:
    """Return what ``dda plan`` prints."""
    prepared = plan.prepared
    low, high = plan.cost.seconds_between
    target = prepared.points[0].accuracy.target
    least = "" if target is None else " for the first three spacings, more for finer ones"
    lines = [*study_lines(prepared), ""]
    lines += _aligned(
        [
            (
                "memory",
                f"{bytes_text(plan.memory)} at the peak, {bytes_text(plan.available)} available",
            ),
            (
                "time",
                f"about {duration_text(plan.cost.seconds)}, between {duration_text(low)} and "
                f"{duration_text(high)}{least}",
            ),
            (
                "",
                f"(a step of the solver takes {1e3 * plan.cost.step_seconds:.3g} ms here, measured "
                f"now; {sum(plan.cost.steps):.0f} steps expected, known to a factor of three)",
            ),
        ]
    )
    lines += _aligned([("disk", bytes_text(len(prepared.points) * POINT_BYTES) + " at least")])
    if plan.near is not None:
        lines += _aligned([("near field", _near_text(plan, plan.near))])
    lines += ["", "validity"]
    lines += _aligned(
        [
            (f"  {f.name}", f"{f.value}: {'' if f.good else 'CAUTION, '}{f.remark}")
            for f in plan.figures
        ]
    )
    return "\n".join(lines)


def _near_text(plan: Plan, near: NearPlan) -> str:
    """Return what the near field takes beside the spectrum, in words."""
    seconds = near.steps * plan.cost.step_seconds + near.evaluation
    combinations = len({id(point.tables) for point in plan.prepared.points})
    each = f", for each of {combinations} combinations" if combinations > 1 else ""
    return (
        f"{near.solves} solves more on two lattices and {near.points} points{each}: about "
        f"{duration_text(seconds)}, known to a factor of three; {bytes_text(near.memory)} of "
        f"memory, {bytes_text(near.disk)} of files"
    )


def study_lines(prepared: Prepared) -> list[str]:
    """Return the study, its particle and its cells in a few lines."""
    points = prepared.points
    first, last = points[0].wavelength, points[-1].wavelength
    span = f"{first:g} nm" if len(points) == 1 else f"{first:g} to {last:g} nm"
    sources = [(name, material.source) for name, material in prepared.media.particle.items()] + [
        (f"host {prepared.media.host.name}", prepared.media.host.source)
    ]
    return [
        prepared.study.name,
        *_aligned(
            [
                ("particle", extent_text(prepared.geometry)),
                *sources,
                *_points(prepared, span),
                *_light(prepared),
                *[("note", note) for note in notes_of(prepared.geometry.particle)],
                ("cells", _cells(prepared)),
            ]
        ),
    ]


def _points(prepared: Prepared, span: str) -> list[tuple[str, str]]:
    """Return the wavelengths, and what else varies, in words."""
    vary, total = prepared.study.vary, len(prepared.points)
    if not vary.axes:
        return [("wavelengths", f"{total}, {span}")]
    axes = [f"{axis.name} ({len(axis.values)})" for axis in vary.axes]
    joined = " beside ".join(axes) if vary.zipped else " x ".join(axes)
    lines = [
        ("varied", f"{joined}: {len(vary)} combinations"),
        ("points", f"{total}, {span}"),
    ]
    if prepared.checked < len(vary):
        lines.append(
            ("note", f"{prepared.checked} combinations were checked; the others as they come")
        )
    return lines


def extent_text(geometry: Geometry) -> str:
    """Return a particle's name and its extent along x, y and z."""
    x, y, z = geometry.extent
    return f"{geometry.particle.name}, {x:.4g} x {y:.4g} x {z:.4g} nm"


def _cells(prepared: Prepared) -> str:
    """Return the cells, and the coarser ones that tell the error bar, in words."""
    target = prepared.points[0].accuracy.target
    numbers = [f"{across:.0f}" for across in prepared.levels]
    if target is not None:
        return (
            f"{', '.join(numbers)} across, then finer ones until the error bar is below "
            f"{100 * target:g} %"
        )
    cells = prepared.cells
    nx, ny, nz = cells.shape
    text = f"{cells.n} of {cells.spacing:.4g} nm in a box of {nx} x {ny} x {nz}"
    if len(numbers) > 1:
        text += f"; {' and '.join(numbers[:-1])} across for the error bar"
    return text


def _light(prepared: Prepared) -> list[tuple[str, str]]:
    """Return the lines of the light: what it is, and its polarization where it has one."""
    point = prepared.points[0]
    text = beam_text(point)
    if point.tables.light.beam is not None and not point.tables.light.beam.gaussian:
        return [("light", text)]
    kind = [("light", text)] if text else []
    return [*kind, ("polarization", _polarization(prepared))]


def _polarization(prepared: Prepared) -> str:
    point = prepared.points[0]
    if point.averaged:
        return "averaged over all orientations of the particle"
    if isinstance(point.polarization, str):
        kind = point.polarization
    else:
        kind = "[" + ", ".join(_number(c) for c in point.polarization) + "]"
    direction = ", ".join(f"{c:g}" for c in point.direction)
    return f"{kind}, light along [{direction}]"


def _number(value: complex) -> str:
    return f"{value.real:g}" if value.imag == 0 else f"[{value.real:g}, {value.imag:g}]"


def _aligned(pairs: list[tuple[str, str]]) -> list[str]:
    """Return lines with the names in a column of their own and long values wrapped beside it."""
    width = max(len(name) for name, _ in pairs) + 2
    lines = []
    for name, value in pairs:
        first, *others = textwrap.wrap(value, LINE - width) or [""]
        lines += [f"{name:<{width}}{first}", *(" " * width + other for other in others)]
    return lines
