"""The command line for tests: inside this process with what it wrote, or as a program of its own."""

import json
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any, NamedTuple

from orbitsearch.cli import main

ROOT = Path(__file__).resolve().parents[1]

# Two orbits of one word in one window, the figure-eight and its twin: a search of half a second.
EIGHT_WINDOW = ("--window", "0.3", "0.4", "0.5", "0.6", "--grid", "8", "--scaled-period", "12")

# C. Moore, PRL 70 (1993) 3675, to six digits.
EIGHT_GUESS = ("--start", "collinear", "--at", "0.347117", "0.532725", "--period", "6.3259")


class Ran(NamedTuple):
    """What a command left behind."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> Any:
        """The JSON value that standard output is, and is nothing but."""
        return json.loads(self.out, parse_constant=_no_constants)


def _no_constants(name: str) -> None:
    raise AssertionError(f"{name} is no JSON")


def run(capsys: Any, *arguments: object) -> Ran:
    """One command through `orbitsearch.cli.main`, as the program would end."""
    capsys.readouterr()
    try:
        code = main([str(argument) for argument in arguments])
    except SystemExit as ending:
        code = int(ending.code or 0)
    return Ran(code, *capsys.readouterr())


def program(*arguments: object, **more: Any) -> subprocess.Popen[str]:
    """``python -m orbitsearch`` started in a process of its own, its output in pipes."""
    return subprocess.Popen(
        command_line(*arguments), text=True, cwd=more.pop("cwd", ROOT),
        stdout=more.pop("stdout", subprocess.PIPE), stderr=subprocess.PIPE, **more,
    )  # fmt: skip


def command_line(*arguments: object) -> Sequence[str]:
    """Command line of the program, every warning an error."""
    return [sys.executable, "-W", "error", "-m", "orbitsearch", *map(str, arguments)]


def complaint(ran: Ran) -> str:
    """The one line of a refused request: exit code 2, nothing on standard output, no traceback."""
    assert ran.code == 2, ran
    assert ran.out == ""
    assert ran.err.startswith("orbitsearch: "), ran.err
    assert ran.err.endswith("\n")
    assert ran.err.count("\n") == 1, ran.err
    return ran.err
