"""What comes out of a catalogue: plain values that know nothing of how they are stored."""

from dataclasses import dataclass
from typing import Any, NamedTuple

from orbitsearch.braids import Braid
from orbitsearch.orbit import Orbit

__all__ = ["Added", "Kind", "NearStart", "Record", "Run", "Source", "StartPoint"]


class Added(NamedTuple):
    """Outcome of filing an orbit: the record it is in, and whether that record is new."""

    id: int
    new: bool


class NearStart(NamedTuple):
    """A record with a start nearby, and how far that start is (largest parameter difference)."""

    id: int
    distance: float


class StartPoint(NamedTuple):
    """One catalogued start as numbers, for plots and for recognising known ones."""

    p: float
    q: float
    scaled_period: float
    orbit_id: int


@dataclass(frozen=True)
class Kind:
    """All catalogued orbits of one braid type.

    Attributes
    ----------
    braid : Braid
        In canonical form.
    count, choreographies, stable : int
        Number of orbits, of choreographies and of linearly stable ones among them.
    shortest : float
        Least T*.
    orbit_id : int
        The record that has it.
    """

    braid: Braid
    count: int
    choreographies: int
    stable: int
    shortest: float
    orbit_id: int


@dataclass(frozen=True)
class Source:
    """One row of a published table, and what became of it.

    Attributes
    ----------
    id : int
        Number of the row in this catalogue.
    orbit_id : int or None
        The record it was matched to, if any.
    citation, label : str
        Where it was published and its name or number there (empty if it has none).
    kind, p, q, period : str
        Start set, parameters and period as printed.
    outcome : str
        What refining it gave, in words.
    """

    id: int
    orbit_id: int | None
    citation: str
    label: str
    kind: str
    p: str
    q: str
    period: str
    outcome: str


@dataclass(frozen=True)
class Record:
    """One catalogued orbit and where it comes from.

    Attributes
    ----------
    id : int
        Number of the record in this catalogue.
    orbit : Orbit
        The orbit, with every start that was ever filed for it; `solution` is None.
    created : str
        Date and time of filing (UTC, ISO 8601).
    tool_version : str
        Version of this package that computed it.
    run_id : int or None
        The search run that found it, if one did.
    note : str
        Free text.
    sources : tuple of Source
        Published rows matched to it.
    """

    id: int
    orbit: Orbit
    created: str
    tool_version: str
    run_id: int | None
    note: str
    sources: tuple[Source, ...]


@dataclass(frozen=True)
class Run:
    """One search run.

    Attributes
    ----------
    id : int
        Number of the run in this catalogue.
    started : str
        Date and time (UTC, ISO 8601).
    finished : str or None
        The same; None while it runs, or when it was killed.
    tool_version : str
        Version of this package that ran it.
    request : dict
        What was asked for.
    counts : dict or None
        What came of it.
    state : str
        ``running``, ``finished``, ``stopped`` or ``failed``.
    """

    id: int
    started: str
    finished: str | None
    tool_version: str
    request: dict[str, Any]
    counts: dict[str, Any] | None
    state: str
