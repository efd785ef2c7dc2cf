"""The command ``dda``.

Exit codes: 0 all is well; 1 a computation did not succeed (or not at every wavelength); 2 the
input is wrong; 130 interrupted from the keyboard.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Callable, Sequence
from importlib.metadata import version
from pathlib import Path

from dda import cli_run
from dda.cli_read import add_commands
from dda.errors import ComputationError, InputError

OK, FAILED, WRONG_INPUT, INTERRUPTED = 0, 1, 2, 130


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return its exit code.

    Parameters
    ----------
    arguments : sequence of str, optional
        Without the name of the program; ``sys.argv[1:]`` by default.
    """
    parser = _parser()
    options = parser.parse_args(arguments)
    if options.command is None:
        parser.print_help()
        return WRONG_INPUT
    try:
        return options.command(options)
    except KeyboardInterrupt:
        return _complain("interrupted", INTERRUPTED)
    except BrokenPipeError:
        # The reader of a pipe has gone; keep Python from complaining about it once more at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return FAILED
    except Exception as error:
        if options.debug:
            raise
        return report_error(error)


def plan(options: argparse.Namespace) -> int:
    """``dda plan``: say what would run."""
    from dda.report.plan_text import plan_text
    from dda.report.progress import working
    from dda.study.plan import make_plan
    from dda.study.reader import read_study

    with working("checking the study and measuring"):
        made = make_plan(read_study(options.study))
    print(plan_text(made))
    return OK


def look(options: argparse.Namespace) -> int:
    """``dda look``: draw the particle and its cells, or the hot spots of a run."""
    from dda.report.progress import working

    if options.study.is_dir():
        return _look_at_run(options)
    from dda.report.scene import draw_particle, show_particle
    from dda.study.prepare import prepare_shape
    from dda.study.reader import read_study

    study = read_study(options.study)
    with working("making the cells"):
        geometry = prepare_shape(study)
        cells = geometry.cells
    if options.window:
        show_particle(geometry.particle, cells, study.name)
        return OK
    path = options.out or Path(f"{options.study.stem}.png")
    with working("drawing"):
        draw_particle(path, geometry.particle, cells, study.name)
    print(f"written to {path}")
    return OK


def _look_at_run(options: argparse.Namespace) -> int:
    """Draw the hot spots of a run's near field."""
    from dda.report.hot_scene import draw_hot_spots
    from dda.report.progress import working

    if options.window:
        raise InputError("--window shows a study's particle; hot spots are drawn into a file")
    with working("drawing"):
        written = draw_hot_spots(options.study, options.out)
    print(f"written to {', '.join(map(str, written))}")
    return OK


def material(options: argparse.Namespace) -> int:
    """``dda material``: list the names, or print and plot one material."""
    from dda.materials import find, show

    if options.name is None:
        print(show.listing())
        return OK
    found = find(options.name)
    print(show.describe(found, options.wavelengths))
    path = options.out or Path(f"{Path(options.name).stem}.png")
    show.plot(found, path, options.wavelengths)
    print(f"\nwritten to {path}")
    return OK


def list_shapes(options: argparse.Namespace) -> int:
    """``dda shapes``: list the catalogue, or draw one of its shapes."""
    from dda.report.catalogue import catalogue_text, draw_shape, shape_text

    if options.sheet:
        return _sheet(options)
    if options.name is None:
        print(catalogue_text())
        return OK
    print(shape_text(options.name))
    path = options.out or Path(f"{options.name}.png")
    draw_shape(options.name, path)
    print(f"\nwritten to {path}")
    return OK


def _sheet(options: argparse.Namespace) -> int:
    """Draw the whole catalogue."""
    from dda.report.catalogue_sheet import draw_sheet
    from dda.report.progress import working

    if options.name is not None:
        raise InputError("--sheet draws all shapes; leave out the name or --sheet")
    path = options.out or Path("shapes.png")
    with working("drawing"):
        draw_sheet(path)
    print(f"written to {path}")
    return OK


def report_error(error: Exception) -> int:
    """Tell the user of an error, and return the exit code."""
    from shapes import ShapeError

    if isinstance(error, InputError | ShapeError):
        return _complain(str(error), WRONG_INPUT)
    if isinstance(error, ComputationError):
        return _complain(str(error), FAILED)
    if isinstance(error, MemoryError):
        return _complain("out of memory; use larger cells", FAILED)
    return _complain(
        f"a mistake in the program, not in your study: {type(error).__name__}: {error}\n"
        "run it again with `dda --debug ...` to see where, and please report it",
        FAILED,
    )


def _complain(message: str, code: int) -> int:
    print(f"dda: {message}", file=sys.stderr)
    return code


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="dda",
        description="Predict how nanoparticles absorb and scatter light.",
        epilog="A study is a TOML file; the README shows one.",
    )
    parser.add_argument("--version", action="version", version=f"motelight {version('motelight')}")
    parser.add_argument("--debug", action="store_true", help="show where the program failed")
    parser.set_defaults(command=None)
    commands = parser.add_subparsers(title="commands", metavar="COMMAND")

    def add(name: str, command: Callable[[argparse.Namespace], int], text: str):
        sub = commands.add_parser(name, help=text, description=text)
        sub.set_defaults(command=command)
        return sub

    cli_run.add_command(add)

    sub = add("plan", plan, "say what a study would run, and how long; solve nothing")
    sub.add_argument("study", type=Path, metavar="STUDY.toml")

    add_commands(add)

    sub = add("look", look, "draw a study's particle and its cells, or a run's hot spots")
    sub.add_argument("study", type=Path, metavar="STUDY.toml|RUN")
    sub.add_argument("--out", type=Path, metavar="PNG", help="default: named after the study")
    sub.add_argument("--window", action="store_true", help="open a window instead")

    sub = add("material", material, "print and plot a material; without a name, list the names")
    sub.add_argument("name", nargs="?", metavar="NAME", help="a name, a page or a CSV file")
    sub.add_argument("--out", type=Path, metavar="PNG", help="default: named after the material")
    sub.add_argument(
        "--wavelengths", type=float, nargs="+", metavar="NM", help="where, in nm (vacuum)"
    )

    sub = add("shapes", list_shapes, "list the shapes; with a name, describe and draw one")
    sub.add_argument("name", nargs="?", metavar="NAME")
    sub.add_argument("--out", type=Path, metavar="PNG", help="default: named after the shape")
    sub.add_argument("--sheet", action="store_true", help="draw the whole catalogue, in shapes.png")
    return parser


if __name__ == "__main__":
    sys.exit(main())
