"""The command line for tests: inside this process, or as a program of its own."""

import json
import os
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any, NamedTuple

from orbitsearch.cli import main
from orbitsearch.starts import START_SETS

ROOT = Path(__file__).resolve().parents[1]

# Two orbits of one word in one window, the figure-eight and its twin: a search of half a second.
EIGHT_WINDOW = ("--window", "0.3", "0.4", "0.5", "0.6", "--grid", "8", "--scaled-period", "12")

# C. Moore, PRL 70 (1993) 3675, to six digits.
EIGHT_GUESS = ("--start", "collinear", "--at", "0.347117", "0.532725", "--period", "6.3259")


ORBIT_FIELDS = {
    "status", "start", "parameters", "period", "energy", "angular_momentum", "rotation",
    "scaled_period", "closure", "least_separation", "syzygies", "word", "stability",
    "choreography", "braid", "symmetry", "margins", "period_per_letter", "law_residual",
    "word_power",
}  # fmt: skip


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


def program(*arguments: object, cwd: Path, **more: Any) -> subprocess.Popen[str]:
    """``python -m orbitsearch`` started in a process of its own, its output in pipes."""
    paths = [str(ROOT), *filter(None, [os.environ.get("PYTHONPATH")])]
    pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE} | more
    return subprocess.Popen(
        command_line(*arguments), text=True, cwd=cwd,
        env={**os.environ, "PYTHONPATH": os.pathsep.join(paths)}, **pipes,
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


def check_orbit(value: dict[str, Any]) -> None:
    """Assert that a JSON value has every field of an orbit, each of its kind."""
    assert value.keys() >= ORBIT_FIELDS
    assert value["start"] in START_SETS
    first, second = value["parameters"]
    assert isinstance(first, str)
    assert repr(float(first)) == first
    assert repr(float(second)) == second
    for field in ("period", "energy", "angular_momentum", "rotation", "scaled_period", "closure"):
        assert isinstance(value[field], float), field
    assert set(value["syzygies"]) <= set("123")
    assert set(value["word"]) <= set("abAB")
    assert isinstance(value["choreography"], bool)
    if value["braid"] is None:
        # A motion that does not close has no kind.
        assert value["status"] == "rejected"
    else:
        assert value["braid"].keys() >= {"kind", "trace", "dilatation", "cycle", "windings"}
        assert isinstance(value["braid"]["trace"], int)
        assert value["choreography"] == ("choreography" in value["symmetry"]["names"])
    assert value["stability"].keys() >= {"kind", "angles", "max_multiplier"}
    assert value["energy"] < 0 < value["least_separation"]
