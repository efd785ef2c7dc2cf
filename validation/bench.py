"""Benchmarks: ``python -m validation.bench [--only NAME] [--cells N] [--list]``.

All comparisons are ratios measured in this one run, the things compared taking turns; figures with
a target say whether they meet it. Run it from the root of the repository, on a quiet machine.
"""

from __future__ import annotations

import argparse
import sys
import time

from dda.lattice.workers import available_threads
from validation.measure import all_benches


def main(arguments: list[str] | None = None) -> int:
    """Run benchmarks; the exit code is 1 if a target is missed."""
    benches = all_benches()
    parser = argparse.ArgumentParser(prog="python -m validation.bench", description=__doc__)
    parser.add_argument("--only", action="append", choices=list(benches), metavar="NAME")
    parser.add_argument("--cells", type=int, default=64, help="along the edge of the standard box")
    parser.add_argument("--list", action="store_true", help="name the benchmarks and stop")
    options = parser.parse_args(arguments)
    if options.list:
        for name, function in benches.items():
            print(f"{name:12} {(function.__doc__ or '').splitlines()[0]}")
        return 0
    print(f"{available_threads()} threads; medians of interleaved repetitions")
    missed = 0
    for name in options.only or benches:
        begin = time.perf_counter()
        print(f"\n{name}", flush=True)
        for figure in benches[name](options.cells):
            missed += not figure.met
            print(f"  {figure}", flush=True)
        print(f"  ({time.perf_counter() - begin:.0f} s)", flush=True)
    print(f"\n{missed} targets missed" if missed else "\nall targets met")
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
