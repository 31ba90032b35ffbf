"""Where records come from: search runs, and rows of published tables."""

import json
from dataclasses import replace
from typing import Any

from orbitsearch.catalog_file import CatalogFile
from orbitsearch.catalog_rows import now, tool_version
from orbitsearch.errors import BadCatalog, BadRequest
from orbitsearch.records import Run, Source

__all__ = ["END_STATES", "TILES", "Provenance"]

END_STATES = ("finished", "stopped", "failed")
"""How a run can end: by itself, because it was asked to, because of an error.  A run that was
killed stays ``running``."""
TILES = "tiles_"
"""How the keys of counts begin that say which tiles of a search are done, to resume it."""

_SELECT_RUNS = "SELECT id, started, finished, tool_version, request, counts, state FROM runs"


class Provenance(CatalogFile):
    """The part of a catalogue that says where its records come from."""

    def start_run(self, request: dict[str, Any]) -> int:
        """Note that a search begins.

        Parameters
        ----------
        request : dict
            What is asked for, as JSON values.

        Returns
        -------
        int
            Number of the run, for `add` and `finish_run`.

        Raises
        ------
        BadCatalog
            When the catalogue cannot be written.
        """
        with self._writing() as connection:
            cursor = connection.execute(
                "INSERT INTO runs (started, tool_version, request, state) "
                "VALUES (?, ?, ?, 'running')",
                (now(), tool_version(), json.dumps(request)),
            )
            return int(cursor.lastrowid or 0)

    def finish_run(self, id: int, counts: dict[str, Any], state: str = "finished") -> None:
        """Note how a search ended.

        Parameters
        ----------
        id : int
            Number of the run.
        counts : dict
            What came of it, as JSON values.
        state : str, optional
            One of `END_STATES`.

        Raises
        ------
        BadRequest
            When there is no such run or state.
        BadCatalog
            When the catalogue cannot be written.
        """
        if state not in END_STATES:
            raise BadRequest(
                f"`state` must be one of {', '.join(END_STATES)}, got {state!r}: choose one"
            )
        with self._writing() as connection:
            self._check_run(id, "id")
            connection.execute(
                "UPDATE runs SET finished = ?, counts = ?, state = ? WHERE id = ?",
                (now(), json.dumps(counts), state, id),
            )

    def note_progress(self, id: int, counts: dict[str, Any]) -> None:
        """Note how far a search came that is still running.

        Parameters
        ----------
        id : int
            Number of the run.
        counts : dict
            What came of it until now, as JSON values.

        Raises
        ------
        BadRequest
            When there is no such run.
        BadCatalog
            When the catalogue cannot be written.
        """
        with self._writing() as connection:
            self._check_run(id, "id")
            connection.execute("UPDATE runs SET counts = ? WHERE id = ?", (json.dumps(counts), id))

    def unfinished_run(self, id: int) -> Run:
        """A run that may be resumed, with everything that was noted of its progress.

        Parameters
        ----------
        id : int
            Number of the run.

        Returns
        -------
        Run
            Its counts include the lists of tiles that `runs` leaves out.

        Raises
        ------
        BadRequest
            When there is no such run, or it is finished.
        """
        with self._reading() as connection:
            self._check_run(id, "resume")
            row = connection.execute(f"{_SELECT_RUNS} WHERE id = ?", (id,)).fetchone()
        run = _run(row)
        if run.state == "finished":
            raise BadRequest(
                f"`resume` must name a run that was stopped or killed, run {id} is finished: "
                "search anew"
            )
        return run

    def reopen_run(self, id: int) -> int:
        """Note that a run that did not finish goes on.

        Parameters
        ----------
        id : int
            Number of the run.

        Returns
        -------
        int
            How many records it has filed.

        Raises
        ------
        BadRequest
            When there is no such run, or it is finished.
        BadCatalog
            When the catalogue cannot be written.
        """
        with self._writing() as connection:
            self.unfinished_run(id)
            connection.execute(
                "UPDATE runs SET finished = NULL, state = 'running' WHERE id = ?", (id,)
            )
            filed = connection.execute("SELECT count(*) FROM orbits WHERE run_id = ?", (id,))
            return int(filed.fetchone()[0])

    def runs(self) -> list[Run]:
        """All search runs, oldest first.

        Returns
        -------
        list of Run
            Their counts are without the lists of tiles, which only `unfinished_run` needs.
        """
        with self._reading() as connection:
            rows = connection.execute(f"{_SELECT_RUNS} ORDER BY id").fetchall()
        found = [_run(row) for row in rows]
        return [replace(run, counts=_without_tiles(run.counts)) for run in found]

    def add_source(
        self,
        orbit_id: int | None,
        citation: str,
        label: str,
        kind: str,
        p: str,
        q: str,
        period: str,
        outcome: str,
    ) -> int:
        """File a row of a published table; filing it again changes nothing.

        A row that could not be matched may be filed again with its record and new outcome.  A match
        once made stays when a later attempt fails.

        Parameters
        ----------
        orbit_id : int or None
            The record it was matched to.
        citation, label : str
            Where it was published, and its name or number there.
        kind, p, q, period : str
            Start set, parameters and period as printed.
        outcome : str
            What refining it gave, in words.

        Returns
        -------
        int
            Number of the row.

        Raises
        ------
        BadRequest
            When there is no such record.
        BadCatalog
            When the catalogue cannot be written.
        """
        key = (citation, label, kind, p, q, period)
        with self._writing() as connection:
            if orbit_id is not None:
                orbit_id = self._check_orbit(orbit_id, "orbit_id")
            connection.execute(
                "INSERT INTO sources (orbit_id, citation, label, kind, p, q, period, outcome) "
                "VALUES (?, ?, ?, ?, ?, ?, ?, ?) "
                "ON CONFLICT DO UPDATE SET orbit_id = excluded.orbit_id, "
                "outcome = excluded.outcome "
                "WHERE excluded.orbit_id IS NOT NULL OR sources.orbit_id IS NULL",
                (orbit_id, *key, outcome),
            )
            # Not lastrowid: it means nothing when the row was there.
            row = connection.execute(
                "SELECT id FROM sources WHERE (citation, label, kind, p, q, period) "
                "= (?, ?, ?, ?, ?, ?)",
                key,
            ).fetchone()
            return int(row[0])

    def sources(self, orbit_id: int | None) -> list[Source]:
        """Published rows that were matched to a record.

        Parameters
        ----------
        orbit_id : int or None
            Number of the record; None for the rows that were matched to none.

        Returns
        -------
        list of Source
            In order of filing.
        """
        with self._reading() as connection:
            rows = connection.execute(
                "SELECT id, orbit_id, citation, label, kind, p, q, period, outcome "
                "FROM sources WHERE orbit_id IS ? ORDER BY id",
                (orbit_id,),
            ).fetchall()
        return [Source(*row) for row in rows]

    def _check_run(self, id: int, name: str) -> None:
        found = None
        # SQLite's integers end at 64 bits; a number beyond them names nothing either.
        if abs(id) < 2**63:
            found = self._connection.execute("SELECT 1 FROM runs WHERE id = ?", (id,)).fetchone()
        if found is None:
            raise BadRequest(
                f"`{name}` must name a run of this catalogue, got {id}: "
                "list the runs for the others"
            )

    def _check_orbit(self, id: int, name: str) -> int:
        """The number itself, or that of the record it was merged into."""
        found = None
        # SQLite's integers end at 64 bits; a number beyond them names nothing either.
        if abs(id) < 2**63:
            found = self._connection.execute(
                "SELECT id FROM orbits WHERE id = ?1 "
                "UNION ALL SELECT orbit_id FROM merged WHERE id = ?1",
                (id,),
            ).fetchone()
        if found is None:
            raise BadRequest(
                f"`{name}` must name a record of this catalogue, got {id}: "
                "list the catalogue for the others"
            )
        return int(found[0])


def _without_tiles(counts: dict[str, Any] | None) -> dict[str, Any] | None:
    if counts is None:
        return None
    return {key: value for key, value in counts.items() if not key.startswith(TILES)}


def _run(row: tuple[Any, ...]) -> Run:
    id, started, finished, version, request, counts, state = row
    try:
        asked, counted = json.loads(request), None if counts is None else json.loads(counts)
    except ValueError:
        raise BadCatalog(
            f"run {id} of the catalogue is damaged: restore the file from a copy"
        ) from None
    return Run(id, started, finished, version, asked, counted, state)
