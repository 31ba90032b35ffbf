"""What is written: results on standard output, complaints and progress on standard error."""

from __future__ import annotations

import io
import json
import os
import sys
from typing import Any

from orbitsearch.tables import finite

__all__ = [
    "any_letter",
    "complain",
    "counts_text",
    "say",
    "say_json",
]

# Counts of starts that led to orbits, said in more words than their keys have.
ORBIT_COUNTS = {
    "known": "starts known already",
    "repeated": "starts repeated",
    "filed": "new",
}


def say(text: str) -> None:
    """Write a line of the result; work goes on when its reader has gone (``| head``)."""
    try:
        sys.stdout.write(f"{text}\n")
        sys.stdout.flush()
    except BrokenPipeError:
        # As the documentation of Python has it: nothing may be flushed into the pipe at the end.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def any_letter() -> None:
    """Let streams of a narrow encoding write η as an escape instead of failing."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")


def say_json(value: Any) -> None:
    """Write the one JSON value."""
    say(json.dumps(finite(value), indent=2, allow_nan=False))


def complain(text: str) -> None:
    """Write one line on standard error."""
    sys.stderr.write(f"orbitsearch: {' '.join(text.split())}\n")


def counts_text(counts: dict[str, int]) -> str:
    """Counts of a search in a few lines: work first, then what became of starts and candidates."""
    groups = {
        "starts": ("starts", "skipped", "steps"),
        "refined": ("candidates", "newton_iterations", "newton_steps"),
    }
    named = {key for keys in groups.values() for key in keys}
    lines = [
        f"{title + ':':<10}"
        + ", ".join(f"{counts.get(key, 0):,} {key.replace('_', ' ')}" for key in keys)
        for title, keys in groups.items()
    ]
    for title, prefix in (("ended by:", "starts ended by "), ("outcome:", "candidates ")):
        parts = [
            f"{n:,} {key.removeprefix(prefix)}"
            for key, n in sorted(counts.items(), key=lambda item: -item[1])
            if key.startswith(prefix)
        ]
        named |= {key for key in counts if key.startswith(prefix)}
        lines.append(f"{title:<10}{', '.join(parts) or 'none'}")
    if any(key.startswith("rejected: ") for key in counts):
        named.add("rejected")
    rest = [
        f"{n:,} {ORBIT_COUNTS.get(key, key)}"
        for key, n in sorted(counts.items())
        if key not in named
    ]
    return "\n".join([*lines, f"{'orbits:':<10}{', '.join(rest) or 'none'}"])
