"""A second opinion: the same motion by scipy's DOP853 in the inertial frame.

Nothing is shared with the compiled kernels: other coordinates (positions and velocities of the
bodies), another method (E. Hairer, S. Nørsett, G. Wanner, Solving Ordinary Differential Equations
I, section II.5), another implementation.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from orbitsearch import bodies

__all__ = ["TOLERANCE", "reintegrate"]

Array = NDArray[np.float64]

TOLERANCE = 1e-13
"""Relative tolerance; smaller ones are below what DOP853 can hold in double precision."""

_PAIRS = ((0, 1), (0, 2), (1, 2))


def _forces(_: float, y: Array) -> Array:
    """Newton's law, pair by pair, for y = (x1, y1, x2, y2, x3, y3, and their rates)."""
    # Plain floats: at three bodies they are several times faster than small numpy arrays.
    r = y.tolist()
    a = [0.0] * 6
    for i, j in _PAIRS:
        dx = r[2 * j] - r[2 * i]
        dy = r[2 * j + 1] - r[2 * i + 1]
        d2 = dx * dx + dy * dy
        q = 1.0 / (d2 * d2**0.5)
        a[2 * i] += dx * q
        a[2 * i + 1] += dy * q
        a[2 * j] -= dx * q
        a[2 * j + 1] -= dy * q
    return np.array(r[6:] + a)


def reintegrate(x: Array, time: float, tolerance: float = TOLERANCE) -> Array:
    """State x, shape (12,), carried over `time` by DOP853; sides as in `orbitsearch.bodies`."""
    r, v = bodies.sides_to_bodies(x)
    solution = solve_ivp(
        _forces,
        (0.0, time),
        np.concatenate([r.ravel(), v.ravel()]),
        method="DOP853",
        rtol=tolerance,
        atol=tolerance * float(np.abs(r).max()),
        t_eval=[time],
    )
    if not solution.success:
        return np.full(12, np.nan)
    y = solution.y[:, -1]
    return bodies.bodies_to_sides(y[:6].reshape(3, 2), y[6:].reshape(3, 2))
