"""The SQL with which records are read, and the way from a row back to a record.

One page of records is one statement: starts and sources come along as JSON arrays, whose strings
keep every digit.  Filtering and order are left to SQLite and its indices.
"""

import json
from dataclasses import replace
from typing import Any

from orbitsearch.braid_pattern import read_braid
from orbitsearch.braids import Braid
from orbitsearch.cycles import cycle_of_word
from orbitsearch.errors import BadCatalog, BadRequest
from orbitsearch.orbit import Orbit, Start, Status
from orbitsearch.records import Kind, Record, Source
from orbitsearch.symmetry import check_name
from orbitsearch.turns import exponent_of_turns

__all__ = ["KINDS", "PAGE", "RECORD_BY_ID", "kind_of_row", "page_query", "record_of_row"]

PAGE = 500
"""Records to a page: a few megabytes at most."""

_COLUMNS = """
    SELECT id, scaled_period, created, tool_version, run_id, note, record,
        (SELECT json_group_array(json_array(id, is_primary, kind, p, q, period))
            FROM starts WHERE orbit_id = orbits.id) AS starts,
        (SELECT json_group_array(
                json_array(id, orbit_id, citation, label, kind, p, q, period, outcome))
            FROM sources WHERE orbit_id = orbits.id) AS sources
    FROM orbits
"""

RECORD_BY_ID = _COLUMNS + " WHERE id = ?"
"""Statement that reads the record of one id."""


KINDS = """
    SELECT braid_cycle, exponent_sum, count(*), sum(choreography), sum(linearly_stable),
        min(scaled_period), id
    FROM kinds JOIN orbits ON id = orbit_id
    GROUP BY braid_cycle, exponent_sum ORDER BY min(scaled_period), braid_cycle, exponent_sum
"""
"""Statement that groups the records by braid type.

Beside min(), SQLite takes a bare column, here the number, from the row that has the minimum.
"""


def kind_of_row(row: tuple[Any, ...]) -> Kind:
    """Kind of one row of `KINDS`."""
    cycle, exponent_sum, *rest = row
    return Kind(Braid(cycle, exponent_sum), *rest)


def page_query(
    start: str | None = None,
    stable: bool | None = None,
    max_scaled_period: float | None = None,
    word: str | None = None,
    choreography: bool | None = None,
    status: Status | str | None = None,
    braid: str | None = None,
    symmetry: str | None = None,
) -> tuple[str, list[Any]]:
    """Statement for one page of the records that meet every condition, in order of T*, then id.

    Parameters
    ----------
    start : str, optional
        Name of a start set that the orbit has a start in.
    stable : bool, optional
        Whether the orbit is linearly stable.
    max_scaled_period : float, optional
        Largest T*.
    word : str, optional
        Free-group word of the same motion, in any form and with any arc silent.
    choreography : bool, optional
        Whether the three bodies share one curve.
    status : Status or str, optional
        ``verified`` or ``not confirmed``.
    braid : str, optional
        Kind of braid, cyclic word in L and R, or Artin word, as `orbitsearch.braids` reads them.
    symmetry : str, optional
        One of `orbitsearch.symmetry.NAMES`.

    Returns
    -------
    statement : str
        Its last three places are T* and id of the record before the page, and the page's length.
    values : list
        For all places before those.

    Raises
    ------
    BadRequest
        For a bad letter in `word`, a `max_scaled_period` that is not positive, an unknown `status`
        or `symmetry`, a `braid` that is none.
    """
    conditions: list[str] = []
    values: list[Any] = []
    if max_scaled_period is not None:
        if not max_scaled_period > 0:
            raise BadRequest(
                f"`max_scaled_period` must be positive, got {max_scaled_period}: "
                "the figure-eight has 9.24, for instance"
            )
        conditions.append("scaled_period <= ?")
        values.append(max_scaled_period)
    if word is not None:
        # Not the word itself: a published one may have another arc silent than ours.
        conditions.append("cycle = ?")
        values.append(cycle_of_word(word))
    if stable is not None:
        conditions.append("linearly_stable = ?")
        values.append(int(stable))
    if choreography is not None:
        conditions.append("choreography = ?")
        values.append(int(choreography))
    if status is not None:
        conditions.append("status = ?")
        values.append(_known_status(status))
    if start is not None:
        # The unary plus keeps the planner on the order it is asked for, instead of sorting.
        conditions.append(
            "EXISTS (SELECT 1 FROM starts WHERE starts.orbit_id = orbits.id AND +kind = ?)"
        )
        values.append(start)
    for column, value in (*_braid_columns(braid), *_symmetry_columns(symmetry)):
        # The plus again: a type may be that of nearly all orbits, and sorting them for each page
        # would cost more than looking at each once.
        conditions.append(
            f"EXISTS (SELECT 1 FROM kinds WHERE orbit_id = orbits.id AND +{column} ?)"
        )
        values.append(value)
    # Pages, not one long cursor: an open cursor would pin an old state of the file, and whoever
    # adds an orbit while listing would be refused as soon as a second process has written.
    conditions.append("(scaled_period, id) > (?, ?)")
    where = " AND ".join(conditions)
    return f"{_COLUMNS} WHERE {where} ORDER BY scaled_period, id LIMIT ?", values


def _braid_columns(text: str | None) -> list[tuple[str, str | int]]:
    """What a wanted braid asks of the columns of `kinds`."""
    if text is None:
        return []
    wanted = read_braid(text)
    if wanted.cycle is not None:
        _refuse_exchanges(wanted.cycle, wanted.exponent_sum)
    asked = {
        "braid_kind =": wanted.kind,
        "braid_cycle =": wanted.cycle,
        "exponent_sum =": wanted.exponent_sum,
    }
    return [(column, value) for column, value in asked.items() if value is not None]


def _refuse_exchanges(cycle: str, exponent_sum: int | None) -> None:
    """Tell that no whole period has a braid whose strands do not return."""
    if exponent_sum is None:
        exponent_sum = exponent_of_turns(cycle)
    places = Braid(cycle, exponent_sum).permutation
    if max(places) > 1:
        raise BadRequest(
            "`braid` must return each body to its place over a period, and this one exchanges "
            f"{max(places)}: ask for its power {max(places)}"
        )


def _symmetry_columns(name: str | None) -> list[tuple[str, str]]:
    """What a wanted symmetry asks of the columns of `kinds`."""
    return [] if name is None else [("symmetry LIKE", f"% {check_name(name.lower())} %")]


def _known_status(status: Status | str) -> str:
    """Text of a status that a record can have."""
    known = (Status.VERIFIED, Status.NOT_CONFIRMED)
    if status not in known:
        raise BadRequest(
            f"`status` must be 'verified' or 'not confirmed', got {str(status)!r}: "
            "other outcomes are not catalogued"
        )
    return str(Status(status))


def record_of_row(row: tuple[Any, ...]) -> Record:
    """Record of one row of these statements.

    Parameters
    ----------
    row : tuple
        As selected.

    Returns
    -------
    Record
        Its starts have the digits they were filed with.

    Raises
    ------
    BadCatalog
        When the stored text is not that of a record.
    """
    try:
        return _record(row)
    except (ValueError, KeyError, TypeError, IndexError, StopIteration) as problem:
        raise BadCatalog(
            f"record {row[0]} of the catalogue is damaged ({type(problem).__name__}): restore the"
            " file from a copy, or delete that record"
        ) from None


def _record(row: tuple[Any, ...]) -> Record:
    id_, _, created, tool_version, run_id, note, record, starts, sources = row
    # Aggregates promise no order; the ids in front restore that of filing.
    rows = sorted(json.loads(starts))
    orbit = Orbit.from_json(json.loads(record)).with_starts(
        tuple(Start(kind, (p, q), period) for _, _, kind, p, q, period in rows)
    )
    primary = next(index for index, start in enumerate(rows) if start[1])
    return Record(
        id=id_,
        # The JSON has the period as a double; the table has all of its digits.
        orbit=replace(orbit, start=orbit.starts[primary]),
        created=created,
        tool_version=tool_version,
        run_id=run_id,
        note=note,
        sources=tuple(Source(*source) for source in sorted(json.loads(sources))),
    )
