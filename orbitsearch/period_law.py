"""Scale-free period against the length of the free-group word: nearly proportional, orbit by orbit.

Over 695 families from the collinear start T*/L_f has the mean 2.433 and the standard deviation
0.075 (X. Li & S. Liao, Sci. China Phys. Mech. Astron. 60 (2017) 129511; first seen by
V. Dmitrašinović & M. Šuvakov, Phys. Lett. A 379 (2015) 1939, volume and page from memory).  Nothing
is derived from it here: an orbit far from it deserves a second look at its word, no more.  The
statement is about words in which the arc of the body midway at the collinear start is silent.
"""

from __future__ import annotations

import statistics
from collections.abc import Iterable
from dataclasses import dataclass

__all__ = ["MEAN", "SPREAD", "Summary", "period_per_letter", "residual", "summary"]

MEAN = 2.433
"""Published mean of T*/L_f."""

SPREAD = 0.075
"""Published standard deviation of T*/L_f."""


def period_per_letter(scaled_period: float, length: int) -> float | None:
    """T*/L_f, or None for an empty word.

    Examples
    --------
    >>> round(period_per_letter(9.237681250724550, 4), 6)
    2.30942
    """
    return scaled_period / length if length else None


def residual(scaled_period: float, length: int) -> float | None:
    """T*/L_f less the published mean, or None for an empty word."""
    ratio = period_per_letter(scaled_period, length)
    return None if ratio is None else ratio - MEAN


@dataclass(frozen=True)
class Summary:
    """How orbits keep to the law.

    Attributes
    ----------
    median : float
        Of T*/L_f; NaN when there are none.
    inside : int
        How many lie within `SPREAD` of `MEAN`.
    count : int
        How many have a word.
    farthest : int or None
        Number of the orbit whose T*/L_f is farthest from `MEAN`.
    """

    median: float
    inside: int
    count: int
    farthest: int | None


def summary(orbits: Iterable[tuple[int, float, int]]) -> Summary:
    """How orbits of one's own keep to the law.

    Parameters
    ----------
    orbits : iterable of (int, float, int)
        Number, T* and length of the word of each; empty words are left out.

    Returns
    -------
    Summary
        With the median and not the mean: one short word would spoil that.
    """
    ratios = {id: t / length for id, t, length in orbits if length}
    if not ratios:
        return Summary(float("nan"), 0, 0, None)
    return Summary(
        median=statistics.median(ratios.values()),
        inside=sum(abs(ratio - MEAN) <= SPREAD for ratio in ratios.values()),
        count=len(ratios),
        farthest=max(ratios, key=lambda id: abs(ratios[id] - MEAN)),
    )
