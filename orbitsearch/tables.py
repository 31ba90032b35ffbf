"""Catalogue records as CSV, JSON, LaTeX or terminal text.

CSV and JSON keep every digit and every column; LaTeX keeps the digits of starts and periods and
leaves out what a printed table has no room for; terminal text is rounded.  What `to_csv` writes,
`read_starts_csv` reads.
"""

import csv
import io
import json
import math
import re
from collections.abc import Callable, Iterable
from decimal import Decimal
from typing import Any

from tabulate import tabulate

from orbitsearch.braids import Braid
from orbitsearch.identity import canonical_start
from orbitsearch.orbit import Orbit, Start
from orbitsearch.records import Kind, Record
from orbitsearch.starts_table import RowOfStarts, read_starts_csv
from orbitsearch.turns import cycle_text

__all__ = [
    "COLUMNS",
    "RowOfStarts",
    "finite",
    "kinds_to_text",
    "read_starts_csv",
    "to_csv",
    "to_json",
    "to_latex",
    "to_text",
]

WORD_ROOM = 24
"""Longest word that terminal text shows in full."""


def _angles(orbit: Orbit) -> str:
    return " ".join(map(repr, orbit.stability.angles))


def _braid(orbit: Orbit, column: Callable[[Braid], Any]) -> str:
    """A cell on the braid, empty where it is not known."""
    return "" if orbit.braid is None else _text(column(orbit.braid.braid))


def _text(value: Any) -> str:
    """Every digit of a number, nothing for None."""
    return "" if value is None else value if isinstance(value, str) else repr(value)


def _start(start: Start) -> str:
    return f"{start.kind} {' '.join(start.parameters)}"


def _numbers(values: Iterable[float] | None) -> list[str]:
    return [] if values is None else [*map(repr, values)]


def _reversals(orbit: Orbit) -> str:
    counts = {} if orbit.symmetry is None else orbit.symmetry.reversals
    return " ".join(f"{name}:{count}" for name, count in counts.items())


def _sources(record: Record) -> str:
    return "; ".join(f"{source.citation} {source.label}".strip() for source in record.sources)


COLUMNS: dict[str, Callable[[Record], str]] = {
    "id": lambda record: str(record.id),
    "start": lambda record: record.orbit.start.kind,
    "p": lambda record: record.orbit.start.parameters[0],
    "q": lambda record: record.orbit.start.parameters[1],
    "period": lambda record: record.orbit.start.period,
    "scaled_period": lambda record: repr(record.orbit.scaled_period),
    "energy": lambda record: repr(record.orbit.energy),
    "angular_momentum": lambda record: repr(record.orbit.angular_momentum),
    "rotation": lambda record: repr(record.orbit.rotation),
    "word": lambda record: record.orbit.word,
    "word_length": lambda record: str(len(record.orbit.word)),
    "word_power": lambda record: str(record.orbit.word_power),
    "cycle": lambda record: record.orbit.cycle,
    "braid_kind": lambda record: _braid(record.orbit, lambda braid: braid.kind),
    "braid_cycle": lambda record: _braid(record.orbit, lambda braid: braid.cycle),
    "exponent_sum": lambda record: _braid(record.orbit, lambda braid: braid.exponent_sum),
    "trace": lambda record: _braid(record.orbit, lambda braid: braid.trace_text),
    "dilatation": lambda record: _braid(record.orbit, lambda braid: braid.dilatation),
    "entropy": lambda record: _braid(record.orbit, lambda braid: braid.entropy),
    "windings": lambda record: " ".join(
        _numbers(record.orbit.braid.windings if record.orbit.braid else None)
    ),
    "symmetry": lambda record: record.orbit.symmetry.title if record.orbit.symmetry else "",
    "fraction": lambda record: f"1/{record.orbit.symmetry.pieces}" if record.orbit.symmetry else "",
    "reversals": lambda record: _reversals(record.orbit),
    "period_per_letter": lambda record: _text(record.orbit.period_per_letter),
    "law_residual": lambda record: _text(record.orbit.law_residual),
    "margins": lambda record: " ".join(_numbers(record.orbit.margins)),
    "stability": lambda record: record.orbit.stability.kind,
    "angles": lambda record: _angles(record.orbit),
    "max_multiplier": lambda record: repr(record.orbit.stability.max_multiplier),
    "choreography": lambda record: "yes" if record.orbit.choreography else "no",
    "status": lambda record: str(record.orbit.status),
    "closure": lambda record: repr(record.orbit.closure),
    "least_separation": lambda record: repr(record.orbit.least_separation),
    "sources": _sources,
    "created": lambda record: record.created,
    "tool_version": lambda record: record.tool_version,
    "note": lambda record: record.note,
    "canonical_start": lambda record: _start(canonical_start(record.orbit)),
}
"""Columns of the CSV table in order, and how a record fills them.

`p`, `q` and `period` are the decimal text of the record's own start; the other numbers are doubles
with all of their digits.  `angles` has zero, one or two numbers with blanks between, `windings`
three, `margins` the least angle and the least distance, `reversals` counts of states as in
``collinear:6 isosceles:6``, `sources` the published rows with semicolons between.
`canonical_start` is the same whichever start of an orbit was found.
"""


def to_csv(records: Iterable[Record]) -> str:
    """Table with a heading and one line to each record.

    Parameters
    ----------
    records : iterable of Record

    Returns
    -------
    str
        Comma-separated, cells quoted where needed; only the heading when there are no records.
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(COLUMNS)
    for record in records:
        writer.writerow([cell(record) for cell in COLUMNS.values()])
    return text.getvalue()


def to_json(records: Iterable[Record]) -> str:
    """JSON array with one object to each record.

    Parameters
    ----------
    records : iterable of Record

    Returns
    -------
    str
        Each object has the fields of `Orbit.to_json` and those of the record.  Numbers that are not
        finite are null, since JSON has none.
    """
    values = [
        {
            "id": record.id,
            **record.orbit.to_json(),
            "created": record.created,
            "tool_version": record.tool_version,
            "run_id": record.run_id,
            "note": record.note,
            "sources": [
                {
                    "citation": source.citation,
                    "label": source.label,
                    "start": source.kind,
                    "parameters": [source.p, source.q],
                    "period": source.period,
                    "outcome": source.outcome,
                }
                for source in record.sources
            ],
        }
        for record in records
    ]
    return json.dumps(finite(values), indent=2, allow_nan=False)


def to_latex(records: Iterable[Record]) -> str:
    """Tabular environment in the style of the booktabs package.

    Parameters
    ----------
    records : iterable of Record

    Returns
    -------
    str
        Starts and periods with all of their digits, words in full, T* to ten digits; e is the
        exponent sum, which decides together with the cyclic word in L and R.
    """
    headings = ["id", "start", "p", "q", "T", "T*", "rotation", "word", "braid", "e", "symmetry"]
    headings += ["stability"]
    rows = [
        [
            str(record.id),
            record.orbit.start.kind,
            *record.orbit.start.parameters,
            record.orbit.start.period,
            f"{record.orbit.scaled_period:.10g}",
            f"{record.orbit.rotation:.10g}",
            record.orbit.word,
            _braid(record.orbit, lambda braid: cycle_text(braid.cycle)),
            _braid(record.orbit, lambda braid: braid.exponent_sum),
            record.orbit.symmetry.title if record.orbit.symmetry else "",
            record.orbit.stability.kind,
        ]
        for record in records
    ]
    # The library writes powers as accents that stand alone; they belong above the line.
    return re.sub(r"\\\^{}(\d+)", r"$^{\1}$", _lay_out(headings, rows, "latex_booktabs"))


def to_text(records: Iterable[Record]) -> str:
    """Table for a terminal.

    Parameters
    ----------
    records : iterable of Record

    Returns
    -------
    str
        Numbers rounded to ten digits, words of more than `WORD_ROOM` letters cut short with their
        length behind.
    """
    headings = ["id", "start", "p", "q", "T", "T*", "rotation", "word", "stability"]
    headings += ["symmetry", "status"]
    rows = [
        [
            str(record.id),
            record.orbit.start.kind,
            f"{record.orbit.start.p:.10g}",
            f"{record.orbit.start.q:.10g}",
            f"{record.orbit.period:.10g}",
            f"{record.orbit.scaled_period:.10g}",
            f"{record.orbit.rotation:.6g}",
            _short(record.orbit.word),
            record.orbit.stability.kind,
            record.orbit.symmetry.title if record.orbit.symmetry else "?",
            str(record.orbit.status),
        ]
        for record in records
    ]
    return _lay_out(headings, rows, "simple")


def kinds_to_text(kinds: Iterable[Kind]) -> str:
    """Table of braid types for a terminal.

    Parameters
    ----------
    kinds : iterable of Kind

    Returns
    -------
    str
        Entropies rounded; the last column has the record with the shortest T*.
    """
    headings = ["orbits", "braid", "cycle", "exponent sum", "trace", "entropy"]
    headings += ["choreographies", "stable", "least T*", "orbit"]
    rows = [
        [
            str(kind.count),
            kind.braid.kind,
            _short(cycle_text(kind.braid.cycle)),
            str(kind.braid.exponent_sum),
            _short_number(kind.braid.trace),
            f"{kind.braid.entropy:.8g}",
            str(kind.choreographies),
            str(kind.stable),
            f"{kind.shortest:.10g}",
            str(kind.orbit_id),
        ]
        for kind in kinds
    ]
    return _lay_out(headings, rows, "simple")


def _short_number(number: int) -> str:
    """A whole number in full while it is short, rounded when it is not."""
    return str(number) if number < 10**9 else f"{Decimal(number):.4e}"


def _lay_out(headings: list[str], rows: list[list[str]], style: str) -> str:
    return tabulate(
        # The library counts columns by the rows: without any, LaTeX would be given none.
        rows or [[""] * len(headings)],
        headers=headings,
        tablefmt=style,
        # It would round digits, and read a word of one letter or a label "1e5" as a number.
        disable_numparse=True,
        colalign=("right",) + ("left",) * (len(headings) - 1),
    ).rstrip()


def _short(word: str) -> str:
    if len(word) <= WORD_ROOM:
        return word or "(empty)"
    return f"{word[: WORD_ROOM - 8]}... ({len(word)})"


def finite(value: Any) -> Any:
    """The same JSON value with null for every number that is not finite, since JSON has none."""
    if isinstance(value, dict):
        return {key: finite(item) for key, item in value.items()}
    if isinstance(value, list):
        return [finite(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
