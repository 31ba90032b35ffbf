"""From an orbit to the rows that store it.

The functions that take a connection run inside the caller's transaction.
"""

import json
import math
import sqlite3
from collections.abc import Iterable
from dataclasses import replace
from datetime import UTC, datetime
from typing import Any

import orbitsearch
from orbitsearch.errors import BadRequest
from orbitsearch.identity import all_starts, new_starts
from orbitsearch.orbit import Orbit, Start, Status
from orbitsearch.records import Record

__all__ = [
    "check",
    "fill_in_kind",
    "insert_orbit",
    "insert_starts",
    "lacks_kind",
    "merge_records",
    "now",
    "replace_orbit",
    "tool_version",
]


def check(orbit: Orbit) -> None:
    """Refuse an orbit that must not be filed.

    Parameters
    ----------
    orbit : Orbit

    Raises
    ------
    BadRequest
        When it is neither verified nor not confirmed, or has a start, T*, energy or rotation that
        is not a finite number.
    """
    if orbit.status not in (Status.VERIFIED, Status.NOT_CONFIRMED):
        raise BadRequest(
            "`orbit` must be verified or not confirmed to be filed, got status "
            f"{str(orbit.status)!r}: see the reason in its verdict"
        )
    numbers = [
        ("scaled period", orbit.scaled_period),
        ("energy", orbit.energy),
        ("rotation", orbit.rotation),
    ]
    for start in all_starts(orbit):
        name = f"{start.kind} start"
        numbers += [(name, start.p), (name, start.q), (name, float(start.period))]
    for name, value in numbers:
        if not math.isfinite(value):
            raise BadRequest(
                f"`orbit` must have finite numbers to be filed, got {value} for its {name}: "
                "refine it again"
            )


def insert_orbit(
    connection: sqlite3.Connection, orbit: Orbit, run_id: int | None, note: str
) -> int:
    """Insert a new record with all of its starts.

    Parameters
    ----------
    connection : sqlite3.Connection
    orbit : Orbit
    run_id : int or None
    note : str

    Returns
    -------
    int
        Number of the record.
    """
    # The number of a record that was merged into another one stays taken.
    (last,) = connection.execute(
        "SELECT max((SELECT coalesce(max(id), 0) FROM orbits),"
        " (SELECT coalesce(max(id), 0) FROM merged))"
    ).fetchone()
    values = {**_columns(orbit), "created": now(), "run_id": run_id, "note": note}
    id = _insert(connection, "orbits", {"id": last + 1, **values})
    insert_starts(connection, id, all_starts(orbit), primary=orbit.start)
    _insert_kind(connection, id, orbit)
    return id


def replace_orbit(
    connection: sqlite3.Connection, old: Record, orbit: Orbit, run_id: int | None
) -> None:
    """Put a verified orbit in the place of the same one that was not confirmed.

    Number, date of filing, note and sources stay.  The verified starts replace the old ones, since
    period and energy of a record are at the scale of its own start, and the digits are better.

    Parameters
    ----------
    connection : sqlite3.Connection
    old : Record
    orbit : Orbit
    run_id : int or None
    """
    values = {**_columns(orbit), "run_id": run_id}
    assignments = ", ".join(f"{name} = ?" for name in values)
    connection.execute(f"UPDATE orbits SET {assignments} WHERE id = ?", (*values.values(), old.id))
    connection.execute("DELETE FROM starts WHERE orbit_id = ?", (old.id,))
    verified = all_starts(orbit)
    kept = new_starts(old.orbit.starts, verified)
    insert_starts(connection, old.id, (*verified, *kept), primary=orbit.start)
    _insert_kind(connection, old.id, orbit)


def lacks_kind(orbit: Orbit) -> bool:
    """Whether a record of version 1 left open what kind of orbit it is, or how certainly.

    Parameters
    ----------
    orbit : Orbit

    Returns
    -------
    bool
    """
    return None in (orbit.braid, orbit.symmetry, orbit.margins)


def fill_in_kind(connection: sqlite3.Connection, old: Record, orbit: Orbit) -> None:
    """Give a record the type that it lacks, and change nothing else of it.

    Parameters
    ----------
    connection : sqlite3.Connection
    old : Record
        Nothing happens when it lacks nothing.
    orbit : Orbit
        The same orbit; nothing happens when it knows no more.
    """
    if not lacks_kind(old.orbit) or orbit.braid is None:
        return
    filled = replace(
        old.orbit,
        cycle=orbit.cycle,
        word=orbit.word,
        braid=orbit.braid,
        symmetry=orbit.symmetry,
        margins=orbit.margins,
    )
    columns = _columns(filled)
    values = {name: columns[name] for name in ("cycle", "word", "word_length", "record")}
    assignments = ", ".join(f"{name} = ?" for name in values)
    connection.execute(f"UPDATE orbits SET {assignments} WHERE id = ?", (*values.values(), old.id))
    _insert_kind(connection, old.id, orbit)


def merge_records(connection: sqlite3.Connection, kept: Record, other: Record) -> None:
    """Fuse a record with an older one of the same orbit, and let its number lead there.

    Starts, published rows and notes go over, and so does all of a verified orbit when the kept one
    was not confirmed, and what was known of its type when the kept one lacked it.

    Parameters
    ----------
    connection : sqlite3.Connection
    kept, other : Record
        `other` is gone afterwards.
    """
    if kept.orbit.status == Status.NOT_CONFIRMED and other.orbit.status == Status.VERIFIED:
        replace_orbit(connection, kept, other.orbit, other.run_id)
    else:
        fill_in_kind(connection, kept, other.orbit)
        insert_starts(connection, kept.id, new_starts(other.orbit.starts, kept.orbit.starts))
    connection.execute("UPDATE sources SET orbit_id = ? WHERE orbit_id = ?", (kept.id, other.id))
    connection.execute("UPDATE merged SET orbit_id = ? WHERE orbit_id = ?", (kept.id, other.id))
    origin = "" if other.run_id is None else f", found by run {other.run_id}"
    said = f"merged with orbit {other.id}, filed {other.created}{origin}"
    parts = [part for part in (kept.note, said, other.note) if part]
    connection.execute("UPDATE orbits SET note = ? WHERE id = ?", ("; ".join(parts), kept.id))
    connection.execute("DELETE FROM orbits WHERE id = ?", (other.id,))
    _insert(connection, "merged", {"id": other.id, "orbit_id": kept.id})


def insert_starts(
    connection: sqlite3.Connection,
    orbit_id: int,
    starts: Iterable[Start],
    primary: Start | None = None,
) -> None:
    """Insert starts of a record in their order.

    Parameters
    ----------
    connection : sqlite3.Connection
    orbit_id : int
    starts : iterable of Start
        Where two have the same set and parameters to the letter, the primary one or else the first
        is taken.
    primary : Start, optional
        The one among them that period and energy of the record belong to.
    """
    by_place: dict[tuple[str, tuple[str, str]], Start] = {}
    for start in starts:
        place = (start.kind, start.parameters)
        if start == primary:
            by_place[place] = start
        by_place.setdefault(place, start)
    for start in by_place.values():
        values = {
            "orbit_id": orbit_id,
            "kind": start.kind,
            "p": start.parameters[0],
            "q": start.parameters[1],
            "period": start.period,
            "p_real": start.p,
            "q_real": start.q,
            "period_real": float(start.period),
            "is_primary": int(start == primary),
        }
        _insert(connection, "starts", values)


def now() -> str:
    """Date and time as text.

    Returns
    -------
    str
        UTC, ISO 8601, whole seconds.
    """
    return datetime.now(UTC).isoformat(timespec="seconds")


def tool_version() -> str:
    """Version of this package.

    Returns
    -------
    str
    """
    # Asked for late: the package may itself import this module before it knows its version.
    return orbitsearch.__version__


def _columns(orbit: Orbit) -> dict[str, Any]:
    """Values of the columns that follow from the orbit alone."""
    # Starts live in their own table; listing them here too would let the two diverge.
    record = json.dumps(orbit.with_starts(()).to_json(), separators=(",", ":"))
    return {
        "start": orbit.start.kind,
        "period": orbit.period,
        "scaled_period": orbit.scaled_period,
        "rotation": orbit.rotation,
        "choreography": int(orbit.choreography),
        "stability_kind": orbit.stability.kind,
        "linearly_stable": int(orbit.stability.stable),
        "status": str(orbit.status),
        "word_length": len(orbit.word),
        "tool_version": tool_version(),
        "word": orbit.word,
        "cycle": orbit.cycle,
        "record": record,
    }


def _insert_kind(connection: sqlite3.Connection, id: int, orbit: Orbit) -> None:
    """File what an orbit is grouped and filtered by, in the place of what was there."""
    connection.execute("DELETE FROM kinds WHERE orbit_id = ?", (id,))
    if orbit.braid is None or orbit.symmetry is None:
        return
    # Types are looked up and grouped whichever way they turn.
    braid = orbit.braid.braid.canonical()
    values = {
        "orbit_id": id,
        "braid_kind": braid.kind,
        "braid_cycle": braid.cycle,
        "exponent_sum": braid.exponent_sum,
        # Blanks around each, so that "mirror" does not find "mirror-exchange".
        "symmetry": f" {' '.join(orbit.symmetry.names)} ",
    }
    _insert(connection, "kinds", values)


def _insert(connection: sqlite3.Connection, table: str, values: dict[str, Any]) -> int:
    names, places = ", ".join(values), ", ".join("?" * len(values))
    cursor = connection.execute(
        f"INSERT INTO {table} ({names}) VALUES ({places})", tuple(values.values())
    )
    return int(cursor.lastrowid or 0)
