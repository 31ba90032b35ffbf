"""When two descriptions are of one and the same orbit.

Orbits are found from several states, at several scales, mirrored, reversed and relabelled.  Two
rules decide, both on numbers that none of these change.

*A shared start.*  The state decides the motion, so equal parameters in one start set mean one
orbit, except that one of the two may run round it several times; the scale-free period T* rules
that out.  It could merge wrongly two orbits whose starts and T* both agree to seven digits, which
happens only beside a bifurcation, and masses here are fixed.  It could split wrongly a start
known to fewer than seven digits; the second rule then still has its say.

*No shared start, but equal invariants*: T*, syzygy cycle, braid, symmetry group, rotation and
stability traces.  It is needed because an orbit passes through two symmetric states (all others are
their images under its own symmetries), and two searches may each have found one.  It could merge
wrongly two orbits of one family that are about to meet; they start close together but not at the
same place, so a start that contradicts a complete list forbids it.  Where the traces are too
uncertain to compare, it does not merge: an orbit filed twice is seen and can be put right, a lost
one cannot.

Scale, mirror image, direction and labels are gone from a start in standard form, and several turns
round an orbit from every record, which is over the least period.  What is left to choose is which
of its two starts stands for the orbit: `canonical_start`.
"""

import math
from collections.abc import Iterable
from itertools import product

from orbitsearch.orbit import Orbit, Start

__all__ = [
    "PERIOD",
    "SETS_IN_ORDER",
    "SHARED_PERIOD",
    "START_APART",
    "START_EQUAL",
    "all_starts",
    "canonical_start",
    "new_starts",
    "same_orbit",
    "same_start",
    "shares_start",
    "start_distance",
]

SETS_IN_ORDER = ("collinear", "isosceles", "rest", "perpendicular")
"""Start sets by how widely orbits are published from them (common practice, no source)."""

START_EQUAL = 1e-7
"""Largest difference of a parameter, over max(1, its size), of two equal starts: published rows
have ten digits, refined ones more.  The figure-eight and its non-choreographic twin differ by
8e-3."""

START_APART = 1e-5
"""Difference from which two starts are certainly different.  In between, one of the two may
merely be known badly, and the invariants decide."""

SHARED_PERIOD = 1e-7
"""Relative agreement of T* for orbits with a shared start: loose, since it has only to tell one
turn from two; near zero energy T* loses digits that the parameters still have."""

PERIOD = 1e-9
"""Relative agreement of T* without a shared start.  The figure-eight and its twin differ by
1.6e-7."""

TRACE = 1e-6
"""Relative agreement of the stability traces, unless the records themselves claim less."""

TRACE_USELESS = 1e-3
"""Claimed error of the traces from which they say nothing about identity."""

ROTATION = 1e-6
"""Agreement of the angle by which an orbit turns over a period, in radians."""


def same_orbit(one: Orbit, other: Orbit) -> bool:
    """Whether two records describe one orbit, by either rule of this module.

    Parameters
    ----------
    one, other : Orbit
        Both over their least period, cycles in canonical form.

    Returns
    -------
    bool
        Symmetric in its arguments.  Not transitive in the strict sense, as no rule with a
        tolerance is.
    """
    if shares_start(one, other):
        return True
    return _invariants_agree(one, other) and not (
        _contradicts(all_starts(one), all_starts(other))
        or _contradicts(all_starts(other), all_starts(one))
    )


def shares_start(one: Orbit, other: Orbit) -> bool:
    """Whether two orbits list an equal start and go round once in the same time.

    Parameters
    ----------
    one, other : Orbit

    Returns
    -------
    bool
    """
    return _close(one.scaled_period, other.scaled_period, SHARED_PERIOD) and any(
        same_start(s, t) for s, t in product(all_starts(one), all_starts(other))
    )


def same_start(one: Start, other: Start) -> bool:
    """Whether two starts are in one set with parameters equal to `START_EQUAL`.

    Parameters
    ----------
    one, other : Start

    Returns
    -------
    bool
    """
    return start_distance(one, other) <= START_EQUAL


def start_distance(one: Start, other: Start) -> float:
    """Larger difference of the two parameters, each over max(1, its size).

    Parameters
    ----------
    one, other : Start

    Returns
    -------
    float
        Infinite for starts of different sets.
    """
    if one.kind != other.kind:
        return math.inf
    pairs = ((one.p, other.p), (one.q, other.q))
    return max(abs(x - y) / max(1.0, abs(x), abs(y)) for x, y in pairs)


def all_starts(orbit: Orbit) -> tuple[Start, ...]:
    """Starts of an orbit, its own first when the list leaves it out.

    Parameters
    ----------
    orbit : Orbit

    Returns
    -------
    tuple of Start
        At least one.
    """
    return orbit.starts if orbit.start in orbit.starts else (orbit.start, *orbit.starts)


def canonical_start(orbit: Orbit) -> Start:
    """The start that stands for an orbit whichever of its starts it was found from.

    Parameters
    ----------
    orbit : Orbit
        With its complete list of starts.

    Returns
    -------
    Start
        Of its starts in the first set of `SETS_IN_ORDER` that it has any in, the one with the least
        first parameter; where those agree to `START_EQUAL`, with the least second.
    """
    starts = all_starts(orbit)
    kind = min((start.kind for start in starts), key=SETS_IN_ORDER.index)
    least, *others = (start for start in starts if start.kind == kind)
    for start in others:
        equal = abs(start.p - least.p) <= START_EQUAL
        if (start.q < least.q) if equal else (start.p < least.p):
            least = start
    return least


def new_starts(found: Iterable[Start], listed: Iterable[Start]) -> list[Start]:
    """Those of the starts found that are apart from every listed one and from each other.

    Parameters
    ----------
    found, listed : iterable of Start
        Starts of one and the same orbit, so that a small difference is an error of one of them.

    Returns
    -------
    list of Start
        In the order found.
    """
    known = list(listed)
    fresh: list[Start] = []
    for start in found:
        if all(start_distance(start, old) > START_APART for old in known):
            known.append(start)
            fresh.append(start)
    return fresh


def _contradicts(starts: tuple[Start, ...], listed: tuple[Start, ...]) -> bool:
    """Whether a start is in a set of the list, yet apart from all of the list, which is complete.

    A list of one is no evidence: the second symmetric state may just not have been looked for.
    Sets that the list does not name are left alone: a motion that keeps the triangle isosceles
    passes three sets, since where it comes to rest it is also an isosceles start.
    """
    if len(new_starts(listed, ())) < 2:
        return False
    kinds = {start.kind for start in listed}
    return any(
        start.kind in kinds and all(start_distance(start, old) > START_APART for old in listed)
        for start in starts
    )


def _invariants_agree(one: Orbit, other: Orbit) -> bool:
    """Agreement of everything that scale, mirror image, reversal and labels leave alone."""
    return (
        _close(one.scaled_period, other.scaled_period, PERIOD)
        and one.cycle == other.cycle
        and one.choreography == other.choreography
        and _braids_agree(one, other)
        and _groups_agree(one, other)
        # The mirror image turns the other way, and -π is the same turn as π.
        and abs(abs(one.rotation) - abs(other.rotation)) <= ROTATION
        and _traces_agree(one, other)
    )


def _braids_agree(one: Orbit, other: Orbit) -> bool:
    """Whether both orbits have the same braid, as far as it is known and certain."""
    if one.braid is None or other.braid is None:
        # Catalogues of version 1 lack the type of some orbits; that is no difference.
        return True
    if math.pi - abs(one.rotation) <= ROTATION:
        # Half a turn of the whole is the same both ways, and its braid is one of two.
        return True
    return one.braid == other.braid


def _groups_agree(one: Orbit, other: Orbit) -> bool:
    """Whether both orbits have the same shifts and run through the same kinds of states."""
    if one.symmetry is None or other.symmetry is None:
        return True
    return (
        one.symmetry.names == other.symmetry.names
        and one.symmetry.reversals == other.symmetry.reversals
    )


def _traces_agree(one: Orbit, other: Orbit) -> bool:
    """Agreement of both traces, in either order, to the accuracy that both records claim."""
    tolerance = max(TRACE, one.stability.error, other.stability.error)
    # Written so that a NaN among the errors also counts as useless.
    if not (one.stability.error <= TRACE_USELESS and other.stability.error <= TRACE_USELESS):
        return False
    first, second = one.stability.traces
    # Two traces of equal modulus may come in either order, and a complex pair does.
    return any(
        _close(first, third, tolerance) and _close(second, fourth, tolerance)
        for third, fourth in (other.stability.traces, other.stability.traces[::-1])
    )


def _close(one: complex, other: complex, tolerance: float) -> bool:
    """Whether two numbers differ by at most `tolerance` times max(1, their size)."""
    return abs(one - other) <= tolerance * max(1.0, abs(one), abs(other))
