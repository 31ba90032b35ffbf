"""Reading a table of starts, as published or as written by `orbitsearch.tables.to_csv`.

The table is comma-separated with a heading.  Columns ``start, p, q, period`` are needed,
``label`` is optional, others are ignored.  Numbers stay text, so that no digit is lost.
"""

import csv
import io
import math
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from orbitsearch.errors import BadTable

__all__ = ["RowOfStarts", "read_starts_csv"]

NEEDED = ("start", "p", "q", "period")
_DECIMAL = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?")


@dataclass(frozen=True)
class RowOfStarts:
    """One row of a table of starts.

    Attributes
    ----------
    line : int
        Line of the table it begins in, the heading being in line 1.
    start : str
        Name of the start set, as written.
    p, q, period : str
        Decimal text, finite as doubles; the period is positive.
    label : str
        Name or number of the row in its source, empty if there is none.
    """

    line: int
    start: str
    p: str
    q: str
    period: str
    label: str


def read_starts_csv(source: str | Path) -> list[RowOfStarts]:
    r"""Rows of a table of starts.

    Parameters
    ----------
    source : str or Path
        The text of a table, or as a Path the file it is in (UTF-8).

    Returns
    -------
    list of RowOfStarts
        Empty when the table has only a heading.  Blank lines are skipped.

    Raises
    ------
    BadTable
        When the file cannot be read, the table is empty, a needed column is missing or stands
        twice, a row has another number of cells than the heading, a cell is empty or no finite
        decimal number, or a period is not positive; the message names line and column.

    Examples
    --------
    >>> rows = read_starts_csv("start,p,q,period\nrest,0.20538,0.19526,1.68963\n")
    >>> rows[0].line, rows[0].start, rows[0].period
    (2, 'rest', '1.68963')
    """
    lines = _lines(_text(source))
    _, heading = next(lines, (1, []))
    if not heading:
        raise BadTable(
            f"the table is empty: it needs a heading with the columns {', '.join(NEEDED)}"
        )
    names = [name.strip() for name in heading]
    for name in NEEDED:
        if name not in names:
            raise BadTable(
                f"line 1 has no column `{name}`, only {', '.join(names)}: "
                f"add it, the columns {', '.join(NEEDED)} are needed"
            )
    for name in (*NEEDED, "label"):
        if names.count(name) > 1:
            raise BadTable(f"line 1 has column `{name}` more than once: keep one of them")
    return [_row(line, names, cells) for line, cells in lines]


def _text(source: str | Path) -> str:
    if isinstance(source, str):
        return source.removeprefix("\ufeff")
    try:
        # Spreadsheets put a byte order mark in front.
        return source.read_text(encoding="utf-8-sig")
    except OSError as error:
        raise BadTable(
            f"table {source} cannot be read ({error.strerror}): check the path"
        ) from error
    except UnicodeDecodeError as error:
        raise BadTable(
            f"table {source} is no UTF-8 text, byte {error.start} is not: save it as UTF-8"
        ) from error


def _lines(text: str) -> Iterator[tuple[int, list[str]]]:
    """Rows that are not blank, each with the line it begins in."""
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    begin = 1
    try:
        for cells in reader:
            if any(cell.strip() for cell in cells):
                yield begin, cells
            begin = reader.line_num + 1
    except csv.Error as error:
        raise BadTable(
            f"line {begin} is no comma-separated row ({error}): check its quotation marks"
        ) from error


def _row(line: int, names: list[str], cells: list[str]) -> RowOfStarts:
    if len(cells) != len(names):
        raise BadTable(
            f"line {line} has {len(cells)} cells, the heading {len(names)}: "
            "separate cells by commas and write decimal points"
        )
    values = {name: cell.strip() for name, cell in zip(names, cells, strict=True)}
    for name in NEEDED:
        if not values[name]:
            raise BadTable(
                f"line {line} has an empty cell in column `{name}`: fill it or drop the row"
            )
    for name in ("p", "q", "period"):
        _check_number(line, name, values[name])
    return RowOfStarts(
        line, values["start"], values["p"], values["q"], values["period"], values.get("label", "")
    )


def _check_number(line: int, name: str, cell: str) -> None:
    """Raise BadTable unless a cell is a finite decimal number, positive if it is a period."""
    # float() alone would accept nan, inf and 1_000.
    if not _DECIMAL.fullmatch(cell) or not math.isfinite(float(cell)):
        raise BadTable(
            f"line {line} must have a finite decimal number in column `{name}`, got {cell!r}: "
            "write it as in 0.3471168881"
        )
    if name == "period" and not float(cell) > 0:
        raise BadTable(
            f"line {line} must have a positive period in column `period`, got {cell!r}: "
            "correct it or drop the row"
        )
