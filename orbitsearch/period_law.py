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

__all__ = ["MEAN", "SPREAD", "fit", "period_per_letter", "residual"]

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


def fit(orbits: Iterable[tuple[float, int]]) -> tuple[float, float, int]:
    """Mean and standard deviation of T*/L_f over orbits of one's own, and their number.

    Parameters
    ----------
    orbits : iterable of (float, int)
        T* and the length of the word; empty words are left out.

    Returns
    -------
    mean, spread : float
        NaN where there are too few orbits: one for the mean, two for the spread.
    count : int
    """
    ratios = [t / length for t, length in orbits if length]
    mean = statistics.fmean(ratios) if ratios else float("nan")
    spread = statistics.stdev(ratios) if len(ratios) > 1 else float("nan")
    return mean, spread, len(ratios)
