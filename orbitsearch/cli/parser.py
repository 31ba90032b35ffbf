"""What can be typed: commands, options, and their help."""

from __future__ import annotations

import argparse
import re
from pathlib import Path
from typing import Any, NoReturn

from orbitsearch import __version__
from orbitsearch.cli.commands import COMMANDS
from orbitsearch.cli.report import complain
from orbitsearch.symmetry import NAMES

__all__ = ["make_parser"]

DEFAULT_CATALOG = Path("catalog") / "orbits.db"
SETS = "collinear, isosceles, rest or perpendicular"


class _OneLineParser(argparse.ArgumentParser):
    """Parser whose complaints are one line that ends with the next step."""

    def __init__(self, **options: Any) -> None:
        super().__init__(**options)
        # Python before 3.14 takes -1e-3 and -inf for options; there is no public way to say more.
        self._negative_number_matcher = re.compile(
            r"-((\d+\.?\d*|\.\d+)(e[-+]?\d+)?|inf|nan)$", re.IGNORECASE
        )

    def error(self, message: str) -> NoReturn:
        complain(f"{message}; see `{self.prog} --help`")
        self.exit(2)


def make_parser() -> argparse.ArgumentParser:
    """Parser of the whole command line; each command leaves its function in ``run``."""
    parser = _OneLineParser(
        prog="orbitsearch",
        description="Periodic orbits of three equal masses in the plane: search, refine, verify,"
        " catalogue. Units: G = m1 = m2 = m3 = 1.",
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"orbitsearch {__version__}")
    add = parser.add_subparsers(metavar="COMMAND", required=True, parser_class=_OneLineParser)

    def command(name: str, text: str, *, catalog: bool = True) -> argparse.ArgumentParser:
        one: argparse.ArgumentParser = add.add_parser(
            name, help=text, description=text, allow_abbrev=False
        )
        one.set_defaults(run=COMMANDS[name])
        one.add_argument("--json", action="store_true", help="one JSON value instead of text")
        if catalog:
            one.add_argument(
                "--catalog", type=Path, default=DEFAULT_CATALOG, metavar="FILE",
                help=f"catalogue file (default: {DEFAULT_CATALOG})",
            )  # fmt: skip
        return one

    one = command("search", "Search a window of starts and file the periodic orbits found.")
    one.add_argument("--start", default="collinear", metavar="SET", help=f"start set: {SETS}")
    one.add_argument(
        "--window", nargs=4, type=float, metavar=("A0", "A1", "B0", "B1"),
        help="ranges of the two parameters (default: the set's own, see `orbitsearch starts`)",
    )  # fmt: skip
    one.add_argument(
        "--grid", nargs="+", type=int, default=[80], metavar="N",
        help="starts along each parameter, one number or two (default: 80)",
    )  # fmt: skip
    one.add_argument(
        "--scaled-period", type=float, default=40.0, metavar="S",
        help="bound on T* = T |E|^(3/2) of the orbits looked for (default: 40)",
    )  # fmt: skip
    one.add_argument("--workers", type=int, metavar="N", help="processes (default: all cores)")

    one = command("refine", "Refine a guess, such as a row of a published table, and verify it.")
    _add_guess(one, required=True)
    one.add_argument("--keep", action="store_true", help="file the orbit in the catalogue")

    one = command("verify", "Verify a filed orbit, or a start and period as given, unrefined.")
    one.add_argument("id", nargs="?", type=int, metavar="ID", help="number in the catalogue")
    _add_guess(one, required=False)

    one = command("list", "List filed orbits by scale-free period.")
    one.add_argument("--start", metavar="SET", help=f"with a start in this set: {SETS}")
    one.add_argument("--stable", action="store_true", help="linearly stable ones")
    one.add_argument("--max-scaled-period", type=float, metavar="S", help="with T* up to S")
    one.add_argument("--word", metavar="W", help="with this free-group word, in any form")
    one.add_argument(
        "--braid", metavar="B",
        help="with this braid: its kind, a cyclic word such as (LR)^3, or an Artin word such as"
        " '1 -2 1 -2 1 -2'",
    )  # fmt: skip
    one.add_argument(
        "--symmetry", metavar="NAME",
        help=f"with this symmetry, one of {len(NAMES)} names such as choreography or mirror",
    )  # fmt: skip

    command("kinds", "Group the filed orbits by braid type.")

    one = command("show", "Show everything about one filed orbit.")
    one.add_argument("id", type=int, metavar="ID", help="number in the catalogue")

    one = command("export", "Write the catalogue as a table.")
    one.add_argument(
        "--format", choices=("csv", "json", "latex"), required=True,
        help="csv and json keep every digit, and `import` reads csv",
    )  # fmt: skip
    one.add_argument("--output", type=Path, metavar="FILE", help="default: standard output")

    one = command("import", "Refine the rows of a published table and match them to the catalogue.")
    one.add_argument("file", type=Path, metavar="FILE.csv", help="columns: start, p, q, period")
    one.add_argument("--source", required=True, metavar="TEXT", help="citation, kept with each row")

    one = command("figure", "Write the figures and numbers of one filed orbit as an HTML page.")
    one.add_argument("id", type=int, metavar="ID", help="number in the catalogue")
    one.add_argument(
        "--output", type=Path, metavar="FILE.html", required=True,
        help="one file that needs no network",
    )  # fmt: skip

    one = command("lab", "Open the notebooks in JupyterLab.", catalog=False)
    one.add_argument(
        "--folder", type=Path, default=DEFAULT_CATALOG.parent, metavar="DIR",
        help="where the notebooks are copied to, beside their catalogue orbits.db"
        f" (default: {DEFAULT_CATALOG.parent})",
    )  # fmt: skip
    one.add_argument("--port", type=int, metavar="N", help="port of the server (default: a free)")
    one.add_argument("--no-browser", action="store_true", help="only print the address")

    command("runs", "List the searches that were run into the catalogue.")
    command("starts", "Describe the start sets and their parameters.", catalog=False)
    return parser


def _add_guess(one: argparse.ArgumentParser, *, required: bool) -> None:
    one.add_argument("--start", required=required, metavar="SET", help=f"start set: {SETS}")
    one.add_argument(
        "--at", nargs=2, type=float, required=required, metavar=("A", "B"), help="its parameters"
    )
    one.add_argument("--period", type=float, required=required, metavar="T", help="its period")
