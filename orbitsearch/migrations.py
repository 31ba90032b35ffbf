"""Steps that take a catalogue file from one schema version to the next.

Each step is a plain function of a connection.  It runs inside one transaction together with the new
version number, so a file is never between two versions, whatever kills the process.  Steps are only
ever added at the end: one that has shipped is never edited, since files made by it exist.
"""

import json
import sqlite3
from collections.abc import Callable
from typing import Any

from orbitsearch import symmetry
from orbitsearch.braid_type import BraidType
from orbitsearch.cycles import canonical_cycle, shortest_word, word_of_cycle
from orbitsearch.errors import BadRequest

__all__ = ["APPLICATION_ID", "STEPS", "migrate", "read_version"]

APPLICATION_ID = 0x6F726273
"""Number in the header by which an SQLite file is known as ours (ASCII for "orbs")."""


def step_1(connection: sqlite3.Connection) -> None:
    """Create runs, orbits, their starts, and published rows as sources.

    `orbits` repeats what one filters and sorts by as columns and keeps everything else in
    `record`, the JSON text of the orbit, last, so that browsing does not read it.  Digits live as
    decimal text in `starts`; the doubles beside them only serve to look starts up.

    Parameters
    ----------
    connection : sqlite3.Connection
        Inside a transaction; the file has no tables.
    """
    # One by one: executescript would commit the transaction first.
    for statement in (
        """
        CREATE TABLE runs (
            id INTEGER PRIMARY KEY,
            started TEXT NOT NULL,
            finished TEXT,
            tool_version TEXT NOT NULL,
            request TEXT NOT NULL,
            counts TEXT,
            state TEXT NOT NULL
        )
        """,
        """
        CREATE TABLE orbits (
            id INTEGER PRIMARY KEY,
            start TEXT NOT NULL,
            period REAL NOT NULL,
            scaled_period REAL NOT NULL,
            rotation REAL NOT NULL,
            choreography INTEGER NOT NULL,
            stability_kind TEXT NOT NULL,
            linearly_stable INTEGER NOT NULL,
            status TEXT NOT NULL,
            word_length INTEGER NOT NULL,
            created TEXT NOT NULL,
            tool_version TEXT NOT NULL,
            run_id INTEGER REFERENCES runs (id),
            note TEXT NOT NULL DEFAULT '',
            word TEXT NOT NULL,
            cycle TEXT NOT NULL,
            record TEXT NOT NULL
        )
        """,
        "CREATE INDEX orbits_by_period ON orbits (scaled_period)",
        "CREATE INDEX orbits_by_word ON orbits (word, scaled_period)",
        "CREATE INDEX orbits_by_cycle ON orbits (cycle, scaled_period)",
        """
        CREATE TABLE starts (
            id INTEGER PRIMARY KEY,
            orbit_id INTEGER NOT NULL REFERENCES orbits (id) ON DELETE CASCADE,
            kind TEXT NOT NULL,
            p TEXT NOT NULL,
            q TEXT NOT NULL,
            period TEXT NOT NULL,
            p_real REAL NOT NULL,
            q_real REAL NOT NULL,
            period_real REAL NOT NULL,
            is_primary INTEGER NOT NULL,
            UNIQUE (orbit_id, kind, p, q)
        )
        """,
        "CREATE INDEX starts_by_place ON starts (kind, p_real, q_real)",
        """
        CREATE TABLE sources (
            id INTEGER PRIMARY KEY,
            orbit_id INTEGER REFERENCES orbits (id) ON DELETE SET NULL,
            citation TEXT NOT NULL,
            label TEXT NOT NULL,
            kind TEXT NOT NULL,
            p TEXT NOT NULL,
            q TEXT NOT NULL,
            period TEXT NOT NULL,
            outcome TEXT NOT NULL,
            UNIQUE (citation, label, kind, p, q, period)
        )
        """,
        "CREATE INDEX sources_by_orbit ON sources (orbit_id)",
    ):
        connection.execute(statement)


def step_2(connection: sqlite3.Connection) -> None:
    """Give orbits their braid type and symmetry, words that do not depend on the start, and merges.

    The type goes into `record` and, for browsing, into a table of its own: a column added to
    `orbits` would stand behind the long text of the record.  An orbit without a row there is one of
    version 1 whose type cannot be told from what was stored: between two mirror-symmetric states
    nobody counted how often the bodies wind round each other.  It is filled in when the orbit is
    verified or found again.

    What a type is, is computed by the code of today, not frozen here: a later step that changes it
    has to compute it for all records anyway.

    Parameters
    ----------
    connection : sqlite3.Connection
        Inside a transaction; the file is of version 1.
    """
    for statement in (
        """
        CREATE TABLE kinds (
            orbit_id INTEGER PRIMARY KEY REFERENCES orbits (id) ON DELETE CASCADE,
            braid_kind TEXT NOT NULL,
            braid_cycle TEXT NOT NULL,
            exponent_sum INTEGER NOT NULL,
            symmetry TEXT NOT NULL
        )
        """,
        "CREATE INDEX kinds_by_braid ON kinds (braid_cycle, exponent_sum)",
        """
        CREATE TABLE merged (
            id INTEGER PRIMARY KEY,
            orbit_id INTEGER NOT NULL REFERENCES orbits (id) ON DELETE CASCADE
        )
        """,
        # Words are looked up by their cycle from now on.
        "DROP INDEX orbits_by_word",
    ):
        connection.execute(statement)
    # Numbers first: a cursor over rows that are being changed would promise nothing.
    for (id,) in connection.execute("SELECT id FROM orbits").fetchall():
        start, text = connection.execute(
            "SELECT start, record FROM orbits WHERE id = ?", (id,)
        ).fetchone()
        try:
            record = _typed(start, json.loads(text))
        except (ValueError, KeyError, TypeError, AttributeError, BadRequest):
            # A damaged record must not lock up all others.  It stays as it is, without a type, and
            # whoever reads it is told its number.
            continue
        connection.execute(
            "UPDATE orbits SET word = ?, word_length = ?, record = ? WHERE id = ?",
            (record["word"], len(record["word"]), json.dumps(record, separators=(",", ":")), id),
        )
        if record["braid"] is not None:
            braid, names = record["braid"], record["symmetry"]["names"]
            connection.execute(
                "INSERT INTO kinds VALUES (?, ?, ?, ?, ?)",
                (id, braid["kind"], braid["cycle"], braid["exponent_sum"], f" {' '.join(names)} "),
            )


def _typed(start: str, record: dict[str, Any]) -> dict[str, Any]:
    """Record of version 1 with its word by the rule of version 2, braid type and symmetry.

    The latter are None where they do not follow from what version 1 stored.
    """
    # In standard form a start has body 3 in the special place; the solver noted the other end.
    own = {"collinear": "C3", "isosceles": "I3", "rest": "rest", "perpendicular": "P"}[start]
    end = record.get("solution", {}).get("condition", "")
    ends = (own, end) if end in symmetry.REVERSALS else (own,)
    middles = [label[1] for label in ends if label.startswith("C")]
    syzygies = record["syzygies"]
    record["cycle"] = canonical_cycle(syzygies)
    record["word"] = (
        word_of_cycle(syzygies, int(middles[0])) if middles else shortest_word(syzygies)
    )
    record |= {"braid": None, "symmetry": None, "margins": None}
    if len(ends) == 2 and any(symmetry.REVERSALS[label].plane != "mirror" for label in ends):
        group = symmetry.between(*ends)
        # Which way the first alignment went was not stored; that only picks one of two mirror
        # images.  A reversal that does not mirror forbids winding round: the sum is zero.
        crossings = [(int(body), 1 - 2 * (n % 2)) for n, body in enumerate(syzygies)]
        record["braid"] = BraidType.of(crossings, 0, group).to_json()
        record["symmetry"] = group.to_json()
    return record


STEPS: tuple[Callable[[sqlite3.Connection], None], ...] = (step_1, step_2)
"""The step at index n takes version n to n + 1; their number is the current version."""


def read_version(connection: sqlite3.Connection) -> int:
    """Schema version of a file, 0 for an empty one.

    Parameters
    ----------
    connection : sqlite3.Connection

    Returns
    -------
    int
    """
    return int(connection.execute("PRAGMA user_version").fetchone()[0])


def migrate(connection: sqlite3.Connection) -> int:
    """Bring a file to the current version, one committed step at a time.

    Parameters
    ----------
    connection : sqlite3.Connection
        Writable, in autocommit mode, outside of a transaction.

    Returns
    -------
    int
        How many steps this call made; another process may have made the others meanwhile.

    Raises
    ------
    sqlite3.Error
        When a step fails; the file stays at the version before it.
    """
    # The usual case first: a look needs no lock, so that readers do not wait for a writer.
    if read_version(connection) >= len(STEPS):
        return 0
    made = 0
    while True:
        connection.execute("BEGIN IMMEDIATE")
        try:
            # Read under the lock: another process may have migrated while we waited for it.
            version = read_version(connection)
            if version >= len(STEPS):
                connection.execute("ROLLBACK")
                return made
            STEPS[version](connection)
            connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
            connection.execute(f"PRAGMA user_version = {version + 1}")
            connection.execute("COMMIT")
            made += 1
        except BaseException:
            if connection.in_transaction:
                connection.execute("ROLLBACK")
            raise
