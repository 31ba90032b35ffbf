"""Opening a catalogue file: create it, bring it up to date, or say in one line why not.

A catalogue is one SQLite file in write-ahead mode, so readers never wait for a writer, and a second
writer waits its turn.  A file or folder without write permission is opened for reading only.
"""

import os
import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import Self

from orbitsearch import migrations
from orbitsearch.errors import BadCatalog

__all__ = ["BUSY_SECONDS", "CatalogFile"]

BUSY_SECONDS = 30.0
"""How long to wait for another writer; one write takes milliseconds."""


class CatalogFile:
    """An open catalogue file: its connection, its lock, and nothing about orbits.

    Made by `open`; closes when the ``with`` block ends.

    Attributes
    ----------
    path : Path
        The file.
    read_only : bool
        Whether file or folder lack write permission, so that nothing can be added.
    """

    def __init__(self, path: Path, connection: sqlite3.Connection, read_only: bool) -> None:
        self.path = path
        self.read_only = read_only
        self._connection = connection

    @classmethod
    def open(cls, path: str | os.PathLike[str], create: bool = True) -> Self:
        """Open a catalogue and bring it to the current version.

        Parameters
        ----------
        path : path-like
            The file.
        create : bool, optional
            Whether to make file and folder where there are none.

        Returns
        -------
        Self
            To be used in a ``with`` block, or closed.

        Raises
        ------
        BadCatalog
            When the path is a folder, nothing is there and `create` is False, the folder cannot be
            made or written, or the file is no SQLite file, not ours, from a newer version, older
            and not writable, damaged, or kept busy by another process.
        """
        place = Path(path)
        _prepare_place(place, create)
        read_only = place.exists() and not (_writable(place) and _writable(place.parent))
        try:
            connection = _connect(place, read_only)
        except sqlite3.Error as error:
            raise BadCatalog(_explain(place, error)) from error
        try:
            _bring_up_to_date(connection, place, read_only)
        except sqlite3.Error as error:
            connection.close()
            raise BadCatalog(_explain(place, error)) from error
        except BaseException:
            connection.close()
            raise
        return cls(place, connection, read_only)

    def close(self) -> None:
        """Close the file; a second time does nothing."""
        self._connection.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    @contextmanager
    def _writing(self) -> Iterator[sqlite3.Connection]:
        """One transaction that holds the write lock from its first line, or leaves no trace."""
        if self.read_only:
            raise BadCatalog(
                f"catalogue {self.path} is open for reading only: "
                "check the permissions of the file and of its folder"
            )
        try:
            self._connection.execute("BEGIN IMMEDIATE")
            try:
                yield self._connection
                self._connection.execute("COMMIT")
            finally:
                # After some errors SQLite has rolled back by itself.
                if self._connection.in_transaction:
                    self._connection.execute("ROLLBACK")
        except sqlite3.DatabaseError as error:
            raise BadCatalog(_explain(self.path, error)) from error

    @contextmanager
    def _reading(self) -> Iterator[sqlite3.Connection]:
        """The connection, with what SQLite may find wrong told in one line."""
        try:
            yield self._connection
        except sqlite3.DatabaseError as error:
            raise BadCatalog(_explain(self.path, error)) from error


def _explain(path: Path, error: sqlite3.Error) -> str:
    """One line on what SQLite found wrong with a catalogue, and the next step."""
    # Low byte: the primary code, without its details.  Errors of the Python layer have none.
    code = getattr(error, "sqlite_errorcode", 0) & 0xFF
    if code == sqlite3.SQLITE_NOTADB:
        return f"`path` must be an SQLite file, {path} is something else: name another file"
    if code == sqlite3.SQLITE_BUSY:
        return (
            f"catalogue {path} was kept busy by another process for {BUSY_SECONDS:.0f} s: "
            "try again when it has finished"
        )
    if code in (sqlite3.SQLITE_READONLY, sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_PERM):
        return (
            f"catalogue {path} cannot be opened or written ({error}): "
            "check the permissions of the file and of its folder"
        )
    if code == sqlite3.SQLITE_FULL:
        return f"catalogue {path} cannot grow ({error}): free some space; what was filed is safe"
    if code == sqlite3.SQLITE_CORRUPT:
        return f"catalogue {path} is damaged ({error}): restore a copy of the file"
    return f"catalogue {path} cannot be used: {error}; check the file, or name another one"


def _prepare_place(path: Path, create: bool) -> None:
    """Refuse what cannot be a file, and make the folder of a new one."""
    if path.is_dir():
        raise BadCatalog(f"`path` must be a file, {path} is a folder: name a file inside of it")
    if path.exists():
        return
    if not create:
        raise BadCatalog(
            f"there is no catalogue {path}: check `path`, or make one by searching or adding"
        )
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise BadCatalog(
            f"the folder of catalogue {path} cannot be made ({error.strerror}): "
            "choose a `path` inside a folder that can be written"
        ) from error
    if not _writable(path.parent):
        raise BadCatalog(
            f"catalogue {path} cannot be made, its folder is not writable: "
            "choose a `path` inside a folder that can be written"
        )


def _writable(path: Path) -> bool:
    # Asking is better than trying here: closing a trial file handle would drop the locks that
    # another connection of this process holds on the same file.
    return os.access(path, os.W_OK, effective_ids=os.access in os.supports_effective_ids)


def _connect(path: Path, read_only: bool) -> sqlite3.Connection:
    """Connection that has read the header, so that what is not a database is known by now."""
    place = path.absolute().as_uri()
    if not read_only:
        return _probe(f"{place}?mode=rwc")
    try:
        return _probe(f"{place}?mode=ro")
    except sqlite3.OperationalError:
        # Write-ahead files need a side file, which cannot be made in a read-only folder.  Without
        # pending changes (an empty or missing -wal) the main file is complete and can be read as
        # it stands.
        pending = path.with_name(path.name + "-wal")
        if pending.exists() and pending.stat().st_size > 0:
            raise
        return _probe(f"{place}?immutable=1")


def _probe(uri: str) -> sqlite3.Connection:
    connection = sqlite3.connect(uri, uri=True, timeout=BUSY_SECONDS, isolation_level=None)
    try:
        connection.execute("PRAGMA foreign_keys = ON")
        connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
    except BaseException:
        connection.close()
        raise
    return connection


def _bring_up_to_date(connection: sqlite3.Connection, path: Path, read_only: bool) -> None:
    """Check whose file it is and which version, and migrate it when it is older."""
    owner = connection.execute("PRAGMA application_id").fetchone()[0]
    tables = connection.execute("SELECT count(*) FROM sqlite_master").fetchone()[0]
    version, current = migrations.read_version(connection), len(migrations.STEPS)
    # An empty database is a catalogue whose making was cut short before the first step.
    if owner != migrations.APPLICATION_ID and (owner or tables or version):
        raise BadCatalog(
            f"`path` must be a catalogue, {path} is an SQLite file of another program: "
            "name another file"
        )
    if version > current:
        raise BadCatalog(
            f"catalogue {path} has schema version {version}, this program knows {current}: "
            "install a newer version of this program"
        )
    if read_only:
        if version < current:
            raise BadCatalog(
                f"catalogue {path} has schema version {version} and must be brought to {current}, "
                "but cannot be written: make it writable, or open a copy"
            )
        return
    migrations.migrate(connection)
    if connection.execute("PRAGMA journal_mode").fetchone()[0] != "wal":
        try:
            connection.execute("PRAGMA journal_mode = WAL")
        except sqlite3.OperationalError as error:
            # The switch does not wait for locks.  If another process has the file open in this very
            # moment, either mode is correct, and the next opening tries again.
            if error.sqlite_errorcode != sqlite3.SQLITE_BUSY:
                raise
