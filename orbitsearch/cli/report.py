"""What is written: results on standard output, complaints and progress on standard error."""

from __future__ import annotations

import io
import json
import os
import sys
from typing import Any

from orbitsearch.orbit import Check, Orbit, Verdict
from orbitsearch.records import Record
from orbitsearch.tables import finite

__all__ = [
    "any_letter",
    "complain",
    "counts_text",
    "orbit_text",
    "record_text",
    "say",
    "say_json",
    "verdict_text",
]

SHOWN_WORD = 200
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


def _check_text(check: Check) -> str:
    outcome = {True: "ok", False: "FAILS", None: "open"}[check.passed]
    note = f"  {check.note}" if check.note else ""
    return f"  {check.name:<20} {check.value:>10.3g}   bound {check.bound:<8.3g} {outcome}{note}"


def verdict_text(verdict: Verdict) -> str:
    """The verdict, one line a check."""
    lines = [f"verdict: {verdict.status} ({verdict.reason})"]
    return "\n".join([*lines, *map(_check_text, verdict.checks)])


def _cut(text: str) -> str:
    return text if len(text) <= SHOWN_WORD else f"{text[:SHOWN_WORD]}... ({len(text)})"


def orbit_text(orbit: Orbit) -> str:
    """Everything about an orbit in readable lines."""
    stability = orbit.stability
    angles = " ".join(f"{angle:.12g}" for angle in stability.angles)
    rotation = f"turns by {orbit.rotation:.12g} rad" if orbit.rotation else "closes"
    choreography = "no"
    if orbit.choreography:
        choreography = "yes, in the frame that turns with it" if orbit.rotation else "yes"
    lines = [
        f"start:            {orbit.start.kind} {' '.join(orbit.start.parameters)}",
        f"period T:         {orbit.start.period}   ({rotation} in the inertial frame)",
        f"scale-free T*:    {orbit.scaled_period:.15g}",
        f"energy:           {orbit.energy:.15g}",
        f"angular momentum: {orbit.angular_momentum:.3g}",
        f"word:             {_cut(orbit.word) or '(empty)'}   length {len(orbit.word)}",
        f"syzygy cycle:     {_cut(orbit.cycle) or '(empty)'}   length {len(orbit.cycle)}",
        f"choreography:     {choreography}",
        f"stability:        {stability.kind}, largest multiplier {stability.max_multiplier:.9g}"
        + (f", angles {angles} (arg λ / 2π)" if angles else ""),
        f"least separation: {orbit.least_separation:.6g} / |E|",
    ]
    lines += [
        f"also starts from: {s.kind} {' '.join(s.parameters)}, T = {s.period}"
        for s in orbit.starts
        if s != orbit.start
    ]
    return "\n".join([*lines, verdict_text(orbit.verdict)])


def record_text(record: Record) -> str:
    """A catalogue record: the orbit and where it comes from."""
    origin = f"run {record.run_id}" if record.run_id is not None else "refined from a guess"
    lines = [
        f"orbit {record.id}, filed {record.created} by orbitsearch {record.tool_version}, {origin}",
        orbit_text(record.orbit),
    ]
    lines += [
        f"published: {source.citation} {source.label} ({source.p}, {source.q}, T = {source.period})"
        for source in record.sources
    ]
    return "\n".join([*lines, f"note: {record.note}"] if record.note else lines)


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
