"""The start sets, by name, and what follows from pairs of them.

A new set is one file beside these: derive from `StartSet`, describe its states and conditions, and
list it in `START_SETS`; period multiples, solver, search, commands and catalogue follow.  (A set
that needs an event the compiled scan does not look for also needs it there.)
"""

from __future__ import annotations

from orbitsearch.errors import BadRequest
from orbitsearch.starts.base import Condition, StartSet
from orbitsearch.starts.collinear import Collinear
from orbitsearch.starts.isosceles import Isosceles
from orbitsearch.starts.perpendicular import Perpendicular
from orbitsearch.starts.rest import Rest

__all__ = [
    "CONDITIONS",
    "START_SETS",
    "Condition",
    "StartSet",
    "period_multiple",
    "set_of",
    "start_set",
]

START_SETS: dict[str, StartSet] = {
    s.name: s for s in (Collinear(), Isosceles(), Rest(), Perpendicular())
}

CONDITIONS: dict[int, Condition] = {
    condition.kind: condition for s in START_SETS.values() for condition in s.conditions()
}
"""Every end condition, by the number of its event."""


def set_of(condition: Condition) -> StartSet:
    """The start set that a condition belongs to."""
    return next(s for s in START_SETS.values() if condition in s.conditions())


def start_set(name: str) -> StartSet:
    """Start set of that name; BadRequest lists the names when there is none.

    Examples
    --------
    >>> start_set("rest").letters
    ('x', 'y')
    """
    if name not in START_SETS:
        raise BadRequest(f"`start` must be one of {', '.join(START_SETS)}: {name!r}")
    return START_SETS[name]


def period_multiple(start: Condition, end: Condition) -> int:
    """Number of arcs from one condition to the other in a period: T = multiple times t.

    Derived from the order n of the product of the two reversals, T = 2 n t (J. S. W. Lamb &
    J. A. G. Roberts, Physica D 112 (1998) 1-39, on orbits symmetric under two reversals; from
    memory).

    Examples
    --------
    >>> c3 = START_SETS["collinear"].own
    >>> {end.label: period_multiple(c3, end) for end in CONDITIONS.values()}
    {'C1': 6, 'C2': 6, 'C3': 2, 'I1': 12, 'I2': 12, 'I3': 4, 'rest': 4, 'P': 4}
    """
    return 2 * start.reversal.order_with(end.reversal)
