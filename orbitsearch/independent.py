"""A second opinion: the same motion by scipy's DOP853, in two sets of coordinates.

Nothing of the compiled kernels is used: another method (E. Hairer, S. Nørsett, G. Wanner, Solving
Ordinary Differential Equations I, section II.5), another implementation, forces written out anew.

In the inertial frame, as anyone would check an orbit, the difference of two nearby bodies loses the
digits that a close passage needs: closures of orbits from rest come out ten times larger than in
the sides and their rates, all of it rounding.  So both are integrated.  They are rounded so
differently that their difference tells how much of either is noise.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from orbitsearch import bodies

__all__ = ["by_bodies", "by_sides"]

Array = NDArray[np.float64]

SIDES_TOLERANCE = (2.5e-14, 2.5e-16)
"""Relative and absolute; scipy's least relative one is 100 units in the last place, 2.2e-14."""

BODIES_TOLERANCE = (1e-13, 1e-13)
"""Positions of two bodies that nearly touch have no more digits: steps would shrink to nothing."""


def _pulls(_: float, y: Array) -> list[float]:
    """Newton's law, pair by pair, for y = (x1, y1, x2, y2, x3, y3, and their rates)."""
    x1, y1, x2, y2, x3, y3, *rates = y.tolist()
    ax, ay, bx, by, cx, cy = x2 - x1, y2 - y1, x3 - x2, y3 - y2, x1 - x3, y1 - y3
    a = (ax * ax + ay * ay) ** -1.5
    b = (bx * bx + by * by) ** -1.5
    c = (cx * cx + cy * cy) ** -1.5
    return [
        *rates,
        ax * a - cx * c, ay * a - cy * c,
        bx * b - ax * a, by * b - ay * a,
        cx * c - bx * b, cy * c - by * b,
    ]  # fmt: skip


def _forces(_: float, y: Array) -> list[float]:
    """Rates of y = (A, B, C, A', B', C'): X'' = S - 3 X |X|^-3, S the sum of X |X|^-3."""
    # Plain floats: at twelve numbers they are several times faster than small numpy arrays.
    ax, ay, bx, by, cx, cy, *rates = y.tolist()
    a = (ax * ax + ay * ay) ** -1.5
    b = (bx * bx + by * by) ** -1.5
    c = (cx * cx + cy * cy) ** -1.5
    sx = ax * a + bx * b + cx * c
    sy = ay * a + by * b + cy * c
    return [
        *rates,
        sx - 3.0 * ax * a, sy - 3.0 * ay * a,
        sx - 3.0 * bx * b, sy - 3.0 * by * b,
        sx - 3.0 * cx * c, sy - 3.0 * cy * c,
    ]  # fmt: skip


def by_sides(x: Array, time: float) -> Array:
    """State x, shape (12,), carried over `time`, in sides; NaN when the integration fails."""
    return _integrate(_forces, x, time, SIDES_TOLERANCE)


def by_bodies(x: Array, time: float) -> Array:
    """State x, shape (12,), carried over `time` in the inertial frame; NaN when that fails."""
    r, v = bodies.sides_to_bodies(x)
    y = _integrate(_pulls, np.concatenate([r.ravel(), v.ravel()]), time, BODIES_TOLERANCE)
    return bodies.bodies_to_sides(y[:6].reshape(3, 2), y[6:].reshape(3, 2))


def _integrate(
    rates: Callable[[float, Array], list[float]],
    y: Array,
    time: float,
    tolerance: tuple[float, float],
) -> Array:
    solution = solve_ivp(
        rates,
        (0.0, time),
        y,
        method="DOP853",
        rtol=tolerance[0],
        atol=tolerance[1] * float(np.abs(y[:6]).max()),
        t_eval=[time],
    )
    return np.asarray(solution.y[:, -1]) if solution.success else np.full(12, np.nan)
