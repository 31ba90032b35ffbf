"""Run the benchmarks: `python -m tests.bench [--repeats N] [name ...]`."""

import argparse
import platform

import numba
import numpy as np
from tabulate import tabulate

from orbitsearch import __version__
from tests.bench import integrator, searching, typing_words
from tests.bench.measure import measure

# Name on the command line: function that builds its tables.  A new subject is a file beside
# integrator.py with such a function, and a line here.
GROUPS = {
    "integrator": integrator.sections,
    "searching": searching.sections,
    "words": typing_words.sections,
}


def main() -> None:
    """Parse the command line, measure, print."""
    parser = argparse.ArgumentParser(prog="python -m tests.bench", description=__doc__)
    parser.add_argument("groups", nargs="*", help=f"any of: {', '.join(GROUPS)} (default: all)")
    parser.add_argument("--repeats", type=int, default=5, help="turns of which the median is taken")
    options = parser.parse_args()
    unknown = set(options.groups) - GROUPS.keys()
    if unknown:
        parser.error(f"unknown {sorted(unknown)}; choose from {sorted(GROUPS)}")
    print(f"orbitsearch {__version__}, Python {platform.python_version()}, ", end="")
    print(f"numpy {np.__version__}, numba {numba.__version__}, {platform.machine()}")
    if not integrator.HAS_HEYOKA:
        print("heyoka is not installed here: pip install -e '.[bench]' (Linux)")
    ratios = []
    for name in options.groups or GROUPS:
        for section in GROUPS[name]():
            table, rows = measure(section, options.repeats)
            print(f"\n{table}")
            ratios += rows
    print()
    print(tabulate(ratios, ("", "times the time of", ""), disable_numparse=True))


if __name__ == "__main__":
    main()
