"""The local store of orbits: one SQLite file, safe with several writers, never half written.

Filing an orbit looks for it, then inserts it or adds its new starts, all in one transaction that
holds the write lock from the beginning; so two processes cannot file one orbit twice.  Reading
never loads a solver.
"""

import math
from collections.abc import Iterator
from typing import Any

from orbitsearch.catalog_provenance import Provenance
from orbitsearch.catalog_query import (
    KINDS,
    PAGE,
    RECORD_BY_ID,
    kind_of_row,
    page_query,
    record_of_row,
)
from orbitsearch.catalog_rows import (
    check,
    fill_in_kind,
    insert_orbit,
    insert_starts,
    merge_records,
    replace_orbit,
)
from orbitsearch.errors import BadRequest
from orbitsearch.identity import (
    PERIOD,
    START_EQUAL,
    all_starts,
    new_starts,
    same_orbit,
    shares_start,
)
from orbitsearch.orbit import Orbit, Status
from orbitsearch.records import Added, Kind, NearStart, Record, StartPoint

__all__ = ["Catalog"]


class Catalog(Provenance):
    """Catalogue of periodic orbits in one SQLite file.

    Open it with ``Catalog.open(path)``, best in a ``with`` block.  Runs and published rows are
    described in `orbitsearch.catalog_provenance`.
    """

    def add(self, orbit: Orbit, run_id: int | None = None, note: str = "") -> Added:
        """File an orbit, unless it is there already.

        An orbit that is there gains the starts it did not list, and its type when a catalogue of
        version 1 left it open.  A record that was not confirmed is replaced by a verified one of
        the same orbit, under its number.  Records that turn out to be one orbit, since this one has
        a start of each, are merged into the oldest of them.  Nothing else ever changes.

        Parameters
        ----------
        orbit : Orbit
            Verified or not confirmed.
        run_id : int, optional
            Run that found it, from `start_run`.
        note : str, optional
            Free text, kept with a new record.

        Returns
        -------
        Added
            Number of the record and whether it is new.

        Raises
        ------
        BadRequest
            When the orbit has another status or a number that is not finite, or there is no such
            run.
        BadCatalog
            When the catalogue cannot be written.
        """
        check(orbit)
        with self._writing() as connection:
            if run_id is not None:
                self._check_run(run_id, "run_id")
            same = self._same(orbit)
            if not same:
                return Added(insert_orbit(connection, orbit, run_id, note), True)
            kept = same[0]
            for other in same[1:]:
                if shares_start(kept.orbit, orbit) and shares_start(other.orbit, orbit):
                    merge_records(connection, kept, other)
                    kept = self.get(kept.id)
            if kept.orbit.status == Status.NOT_CONFIRMED and orbit.status == Status.VERIFIED:
                replace_orbit(connection, kept, orbit, run_id)
            else:
                fresh = new_starts(all_starts(orbit), kept.orbit.starts)
                insert_starts(connection, kept.id, fresh)
                fill_in_kind(connection, kept, orbit)
            return Added(kept.id, False)

    def find_same(self, orbit: Orbit) -> int | None:
        """Number of the record of this orbit, found by `orbitsearch.identity.same_orbit`.

        Parameters
        ----------
        orbit : Orbit

        Returns
        -------
        int or None
            The oldest record with a shared start, else the oldest with the same invariants.
        """
        with self._reading():
            same = self._same(orbit)
        return same[0].id if same else None

    def find_start(self, kind: str, p: float, q: float, tolerance: float) -> list[NearStart]:
        """Records with a start near a given one.

        Parameters
        ----------
        kind : str
            Name of the start set.
        p, q : float
            Parameters in the standard form of the set; mirrored ones are not looked for.
        tolerance : float
            Largest difference of either parameter.

        Returns
        -------
        list of NearStart
            Each record once, the nearest first.

        Raises
        ------
        BadRequest
            When `tolerance` is negative or not finite.
        """
        if not 0 <= tolerance < math.inf:
            raise BadRequest(
                f"`tolerance` must be a finite number from 0 on, got {tolerance}: "
                "1e-6 finds published starts"
            )
        with self._reading() as connection:
            rows = connection.execute(
                "SELECT orbit_id, min(max(abs(p_real - ?), abs(q_real - ?))) AS distance "
                "FROM starts WHERE kind = ? AND p_real BETWEEN ? AND ? AND q_real BETWEEN ? AND ? "
                "GROUP BY orbit_id ORDER BY distance, orbit_id",
                (p, q, kind, p - tolerance, p + tolerance, q - tolerance, q + tolerance),
            ).fetchall()
        return [NearStart(*row) for row in rows]

    def orbits(
        self,
        start: str | None = None,
        stable: bool | None = None,
        max_scaled_period: float | None = None,
        word: str | None = None,
        choreography: bool | None = None,
        status: Status | str | None = None,
        braid: str | None = None,
        symmetry: str | None = None,
    ) -> Iterator[Record]:
        """Records that meet every condition given, in order of T*, then id, read as they are used.

        Parameters
        ----------
        start : str, optional
            Name of a start set that the orbit has a start in.
        stable : bool, optional
            Whether the orbit is linearly stable.
        max_scaled_period : float, optional
            Largest T*.
        word : str, optional
            Free-group word in any of its forms, as published, whichever arc is silent in it.
        choreography : bool, optional
            Whether the three bodies share one curve.
        status : Status or str, optional
            ``verified`` or ``not confirmed``.
        braid : str, optional
            Kind of braid, cyclic word in L and R, or Artin word.
        symmetry : str, optional
            One of `orbitsearch.symmetry.NAMES`.

        Returns
        -------
        iterator of Record
            The catalogue may be added to while it runs.

        Raises
        ------
        BadRequest
            For a bad letter in `word`, a `max_scaled_period` that is not positive, an unknown
            `status` or `symmetry`, a `braid` that is none; at the call, not at the first record.
        """
        query = page_query(
            start, stable, max_scaled_period, word, choreography, status, braid, symmetry
        )
        return self._pages(*query)

    def kinds(self) -> list[Kind]:
        """The braid types of the catalogue.

        Returns
        -------
        list of Kind
            In order of their shortest T*.  Orbits of early versions whose type is not known are
            left out; `untyped` counts them.
        """
        with self._reading() as connection:
            return [kind_of_row(row) for row in connection.execute(KINDS)]

    def untyped(self) -> list[int]:
        """Numbers of the records whose type a catalogue of version 1 left open."""
        with self._reading() as connection:
            rows = connection.execute(
                "SELECT id FROM orbits WHERE id NOT IN (SELECT orbit_id FROM kinds) ORDER BY id"
            ).fetchall()
        return [id for (id,) in rows]

    def word_lengths(self, kind: str) -> list[tuple[int, float, int]]:
        """Number, T* and length of the word of every verified orbit with a start in one set.

        Parameters
        ----------
        kind : str
            Name of the start set.
        """
        with self._reading() as connection:
            return connection.execute(
                "SELECT id, scaled_period, word_length FROM orbits "
                "WHERE id IN (SELECT orbit_id FROM starts WHERE kind = ?) AND status = ? "
                "ORDER BY id",
                (kind, str(Status.VERIFIED)),
            ).fetchall()

    def get(self, id: int) -> Record:
        """Record of a number.

        Parameters
        ----------
        id : int
            Also that of a record which was merged into another one.

        Returns
        -------
        Record

        Raises
        ------
        BadRequest
            When there is none.
        """
        with self._reading() as connection:
            id = self._check_orbit(id, "id")
            return record_of_row(connection.execute(RECORD_BY_ID, (id,)).fetchone())

    def starts(self, kind: str) -> list[StartPoint]:
        """All catalogued starts of one set as numbers.

        Parameters
        ----------
        kind : str
            Name of the start set.

        Returns
        -------
        list of StartPoint
            In order of the first parameter.
        """
        with self._reading() as connection:
            rows = connection.execute(
                "SELECT p_real, q_real, scaled_period, orbit_id FROM starts "
                "JOIN orbits ON orbits.id = orbit_id WHERE kind = ? ORDER BY p_real, q_real",
                (kind,),
            ).fetchall()
        return [StartPoint(*row) for row in rows]

    def _pages(self, statement: str, values: list[Any]) -> Iterator[Record]:
        last: tuple[float, int] = (-math.inf, 0)
        while True:
            with self._reading() as connection:
                rows = connection.execute(statement, (*values, *last, PAGE)).fetchall()
            for row in rows:
                yield record_of_row(row)
            if len(rows) < PAGE:
                return
            id, scaled_period = rows[-1][:2]
            last = (scaled_period, id)

    def _same(self, orbit: Orbit) -> list[Record]:
        """Records of the same orbit: those with a shared start, then by their invariants."""
        candidates: set[tuple[int]] = set()
        for start in all_starts(orbit):
            near_p, near_q = (2 * START_EQUAL * max(1.0, abs(x)) for x in (start.p, start.q))
            candidates.update(
                self._connection.execute(
                    "SELECT orbit_id FROM starts WHERE kind = ? "
                    "AND p_real BETWEEN ? AND ? AND q_real BETWEEN ? AND ?",
                    (
                        start.kind,
                        start.p - near_p,
                        start.p + near_p,
                        start.q - near_q,
                        start.q + near_q,
                    ),
                )
            )
        near = 2 * PERIOD * max(1.0, orbit.scaled_period)
        candidates.update(
            self._connection.execute(
                "SELECT id FROM orbits WHERE cycle = ? AND scaled_period BETWEEN ? AND ?",
                (orbit.cycle, orbit.scaled_period - near, orbit.scaled_period + near),
            )
        )
        records = (self.get(id) for (id,) in sorted(candidates))
        same = [record for record in records if same_orbit(record.orbit, orbit)]
        return sorted(same, key=lambda record: not shares_start(record.orbit, orbit))
