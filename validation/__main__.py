"""Run the validation and write its page: ``python -m validation [--only NAME] [--quick] [--list]``.

Run it from the root of the repository.
"""

from __future__ import annotations

import argparse
import sys
import time
from pathlib import Path

from dda.lattice.workers import available_threads
from validation.results import PAGE, all_groups, footnote, write_section


def main(arguments: list[str] | None = None) -> int:
    """Run groups; the exit code is 1 if a comparison failed."""
    groups = all_groups()
    options = _parser(list(groups)).parse_args(arguments)
    if options.list:
        for g in groups.values():
            print(f"{g.name:14} {g.summary}")
        return 0
    page = options.out or (None if options.quick else PAGE)
    failures = 0
    for name in options.only or groups:
        begin = time.perf_counter()
        table = groups[name].runs(options.quick)
        section = table.markdown() + footnote(time.perf_counter() - begin, available_threads())
        failures += table.failures
        print(section, flush=True)
        if page is not None:
            write_section(name, section, list(groups), page)
    print(f"{failures} comparisons failed" if failures else "all comparisons hold", file=sys.stderr)
    return 1 if failures else 0


def _parser(names: list[str]) -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="python -m validation", description=__doc__)
    parser.add_argument(
        "--only", action="append", choices=names, metavar="NAME", help="run this group (repeatable)"
    )
    parser.add_argument("--list", action="store_true", help="name the groups and stop")
    parser.add_argument(
        "--quick", action="store_true", help="a few small cases of each; writes no page by itself"
    )
    parser.add_argument("--out", type=Path, help=f"the page to write, instead of {PAGE.name}")
    return parser


if __name__ == "__main__":
    sys.exit(main())
