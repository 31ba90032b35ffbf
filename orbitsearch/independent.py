"""A second opinion: the same motion by scipy's DOP853.

Nothing of the compiled kernels is used: another method (E. Hairer, S. Nørsett, G. Wanner, Solving
Ordinary Differential Equations I, section II.5), another implementation, forces written out anew.
The unknowns are the three sides and their rates.  With positions and velocities, the difference of
two nearby bodies loses the digits that a close passage needs: closures of orbits from rest came
out ten times larger, all of it rounding.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

__all__ = ["TOLERANCE", "reintegrate"]

Array = NDArray[np.float64]

TOLERANCE = 2.5e-14
"""Relative tolerance; scipy does not go below 100 units in the last place, 2.2e-14."""

# Absolute tolerance over the relative one: the short side of a close pair must keep its digits.
SMALLEST = 1e-2


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


def reintegrate(x: Array, time: float, tolerance: float = TOLERANCE) -> Array:
    """State x, shape (12,), carried over `time` by DOP853; sides as in `orbitsearch.bodies`.

    NaN when the integration fails.
    """
    solution = solve_ivp(
        _forces,
        (0.0, time),
        x,
        method="DOP853",
        rtol=tolerance,
        atol=SMALLEST * tolerance * float(np.abs(x[:6]).max()),
        t_eval=[time],
    )
    return np.asarray(solution.y[:, -1]) if solution.success else np.full(12, np.nan)
