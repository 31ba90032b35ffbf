"""What can be wrong with a request, as one small tree.

A search that finds nothing, a guess that does not converge or a triple that flies apart is a result
with a status (`orbitsearch.orbit.Status`), never an exception.  These classes are for requests that
cannot be carried out at all; commands turn them into one line and exit code 2.
"""

__all__ = ["BadCatalog", "BadRequest", "BadTable", "OrbitsearchError"]


class OrbitsearchError(Exception):
    """Base of everything this package raises on purpose."""


class BadRequest(OrbitsearchError, ValueError):
    """An argument breaks a rule; the message names argument, rule, value and next step."""


class BadCatalog(OrbitsearchError):
    """The catalogue file cannot be used: not a catalogue, from a newer version, or not writable."""


class BadTable(OrbitsearchError, ValueError):
    """A table of starts cannot be read; the message names the line and the column."""
