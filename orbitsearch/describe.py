"""Orbits, braid types and verdicts in readable lines, for commands, panels and pages."""

from __future__ import annotations

from typing import Any

from orbitsearch import period_law
from orbitsearch.braid_type import BraidType, whole_number
from orbitsearch.braids import Braid
from orbitsearch.orbit import Check, Orbit, Status, Verdict
from orbitsearch.records import Kind, Record
from orbitsearch.turns import cycle_text
from orbitsearch.words import root_and_power

__all__ = ["kind_json", "law_text", "orbit_text", "record_text", "verdict_text"]

SHOWN_WORD = 200
PUBLISHED = f"{period_law.MEAN:g} ± {period_law.SPREAD:g}"


def verdict_text(verdict: Verdict) -> str:
    """The verdict, one line a check."""
    lines = [f"verdict: {verdict.status} ({verdict.reason})"]
    return "\n".join([*lines, *map(_check_text, verdict.checks)])


def _check_text(check: Check) -> str:
    outcome = {True: "ok", False: "FAILS", None: "open"}[check.passed]
    note = f"  {check.note}" if check.note else ""
    return f"  {check.name:<20} {check.value:>10.3g}   bound {check.bound:<8.3g} {outcome}{note}"


def _line(name: str, text: str) -> str:
    return f"{name + ':':<18}{text}"


def _more(name: str, text: str) -> str:
    """A line that belongs to the one above it."""
    return f"  {name:<16}{text}"


def _cut(text: str, empty: str = "(empty)") -> str:
    if len(text) <= SHOWN_WORD:
        return text or empty
    return f"{text[:SHOWN_WORD]}... ({len(text)})"


def orbit_text(orbit: Orbit) -> str:
    """Everything about an orbit in readable lines."""
    stability = orbit.stability
    angles = " ".join(f"{angle:.12g}" for angle in stability.angles)
    angles = f", angles {angles} (arg λ / 2π)" if angles else ""
    largest = f"largest multiplier {stability.max_multiplier:.9g}"
    rotation = f"turns by {orbit.rotation:.12g} rad" if orbit.rotation else "closes"
    lines = [
        _line("start", f"{orbit.start.kind} {' '.join(orbit.start.parameters)}"),
        _line("period T", f"{orbit.start.period}   ({rotation} in the inertial frame)"),
        _line("scale-free T*", f"{orbit.scaled_period:.15g}"),
        _line("energy", f"{orbit.energy:.15g}"),
        _line("angular momentum", f"{orbit.angular_momentum:.3g}"),
        *_kind_lines(orbit),
        _line("stability", f"{stability.kind}, {largest}{angles}"),
        _line("least separation", f"{orbit.least_separation:.6g} / |E|"),
    ]
    lines += [
        _line("also starts from", f"{s.kind} {' '.join(s.parameters)}, T = {s.period}")
        for s in orbit.starts
        if s != orbit.start
    ]
    return "\n".join([*lines, verdict_text(orbit.verdict)])


def _kind_lines(orbit: Orbit) -> list[str]:
    if orbit.status is Status.REJECTED and orbit.symmetry is None:
        return [_line("kind", "none is told of a motion that does not close")]
    return [*_word_lines(orbit), *_braid_lines(orbit.braid), *_symmetry_lines(orbit)]


def _word_lines(orbit: Orbit) -> list[str]:
    ratio, residual = orbit.period_per_letter, orbit.law_residual
    root, power = root_and_power(orbit.word)
    repeated = f", power {power} of {_cut(root)}" if power > 1 else ""
    lines = [_line("word", f"{_cut(orbit.word)}   length {len(orbit.word)}{repeated}")]
    if ratio is not None:
        law = "" if residual is None else f", {residual:+.4f} from the published mean {PUBLISHED}"
        lines.append(_more("T* over length", f"{ratio:.4f}{law}"))
    counts = f"length {len(orbit.cycle)}, of {len(orbit.syzygies)} alignments"
    lines.append(_line("syzygy cycle", f"{_cut(orbit.cycle)}   {counts}"))
    if orbit.margins is not None:
        angle, distance = (f"{margin:.4g}" for margin in orbit.margins)
        text = f"least angle {angle}, least distance from a collision {distance}"
        lines.append(_more("margins", text))
    return lines


def _braid_lines(kind: BraidType | None) -> list[str]:
    """The braid of a period and of its part."""
    if kind is None:
        return [_line("braid", "not known; `orbitsearch verify` with the orbit's number finds it")]
    braid = kind.braid
    lines = [
        _line("braid", _turns(braid)),
        _more("Artin word", _cut(" ".join(map(str, braid.artin)))),
        _more("trace", _cut(braid.trace_text)),
        *_stretching(braid),
        _more("windings", " ".join(map(str, kind.windings))),
    ]
    if kind.part > 1:
        part = kind.part_braid
        lines.append(_more(f"over T/{kind.part}", f"{_turns(part)}, trace {_cut(part.trace_text)}"))
    return lines


def _stretching(braid: Braid) -> list[str]:
    if braid.kind != "pseudo-Anosov":
        return []
    return [
        _more("dilatation", f"{_cut(braid.dilatation_text)} = {braid.dilatation:.12g}"),
        _more("entropy", f"{braid.entropy:.12g}"),
    ]


def _turns(braid: Braid) -> str:
    return f"{braid.kind}, {_cut(cycle_text(braid.cycle))}, exponent sum {braid.exponent_sum}"


def _symmetry_lines(orbit: Orbit) -> list[str]:
    symmetry = orbit.symmetry
    if symmetry is None:
        return [_line("symmetry", "not known")]
    turning = orbit.rotation and symmetry.names != ("none",)
    frame = " in a frame that turns with it" if turning else ""
    lines = [
        _line("symmetry", f"{symmetry.title}{frame}"),
        *(_more("", clause) for clause in symmetry.describe().split("; ")),
        _more("", f"1/{symmetry.pieces} of the period generates the whole orbit"),
    ]
    if symmetry.deviation is not None:
        lines.append(_more("holds to", f"{symmetry.deviation:.1g}"))
    return lines


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


def kind_json(kind: Kind) -> dict[str, Any]:
    """JSON value of one braid type."""
    braid = kind.braid
    return {
        "kind": braid.kind,
        "cycle": braid.cycle,
        "exponent_sum": braid.exponent_sum,
        "trace": whole_number(braid),
        "dilatation": braid.dilatation,
        "entropy": braid.entropy,
        "count": kind.count,
        "choreographies": kind.choreographies,
        "stable": kind.stable,
        "shortest_scaled_period": kind.shortest,
        "id": kind.orbit_id,
    }


def law_text(summary: period_law.Summary) -> str:
    """How the words of orbits with a collinear start keep to the law of periods."""
    if summary.farthest is None:
        return "no verified orbit with a collinear start has a word"
    return (
        f"T* over word length, verified orbits with a collinear start: median {summary.median:.4g};"
        f" {summary.inside} of {summary.count} within {PUBLISHED} (published);"
        f" farthest: orbit {summary.farthest}"
    )
