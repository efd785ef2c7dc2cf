"""The commands that read a run: ``dda status``, ``dda export``, ``dda watch``."""

from __future__ import annotations

import argparse
from collections.abc import Callable
from pathlib import Path

Command = Callable[[argparse.Namespace], int]
#: Doubtful points that are listed unless more are asked for.
LISTED = 10


def add_commands(add: Callable[[str, Command, str], argparse.ArgumentParser]) -> None:
    """Add the commands to the parser, each by a call of ``add(name, command, text)``."""
    sub = add("status", status, "say how far a run is, what failed and how to go on")
    sub.add_argument("run", type=Path, metavar="RUN", help="the folder of a run")
    sub.add_argument("--json", action="store_true", help="for scripts")
    sub.add_argument(
        "--list", type=int, default=LISTED, metavar="N", help="doubtful points to list at most"
    )

    sub = add("export", export, "write a run in the format of other programs")
    sub.add_argument("run", type=Path, metavar="RUN", help="the folder of a run")
    sub.add_argument("--to", required=True, metavar="csv|netcdf|vtk")
    sub.add_argument("--out", type=Path, metavar="FILE", help="default: named after the run")
    sub.add_argument("--replace", action="store_true", help="replace what is there")
    sub.add_argument(
        "--point", type=int, metavar="N", help="for vtk: the point whose particle is written"
    )

    sub = add("watch", watch, "show a run in the browser while it goes on")
    sub.add_argument("run", type=Path, metavar="RUN", help="the folder of a run")
    sub.add_argument("--port", type=int, default=0, metavar="N", help="default: any free one")


def status(options: argparse.Namespace) -> int:
    """``dda status``: how far a run is."""
    from dda.report.status import read_status
    from dda.report.status_text import status_json, status_text

    found = read_status(options.run, max(0, options.list))
    print(status_json(found) if options.json else status_text(found))
    return 0


def export(options: argparse.Namespace) -> int:
    """``dda export``: a run in another format."""
    from dda.report.export import export
    from dda.report.progress import working

    with working("writing"):
        path = export(options.run, options.to, options.out, options.replace, options.point)
    print(f"written to {path}")
    return 0


def watch(options: argparse.Namespace) -> int:
    """``dda watch``: a page of the run, until Ctrl-C."""
    from dda.report.live import serve

    serve(options.run, options.port)
    return 0
