"""Rest starts: three bodies let go at rest.

r1 = (-1/2, 0), r2 = (1/2, 0), r3 = (x, y), then shifted to the centre of mass.  Fixed by time
reversal alone.  x, y >= 0 and (x + 1/2)² + y² <= 1 holds every shape once: the base is the longest
side and body 2 the nearer of its ends (common practice, no source).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from orbitsearch.starts.base import Array, Condition, StartSet, product_form

__all__ = ["Rest"]

# Jacobi vectors in terms of the sides; the rates of |ρ|² - |λ|², 2 ρ·λ and 2 ρ x λ, the coordinates
# of the sphere of shapes, vanish together only for rest and for rigid rotation, which no angular
# momentum excludes.  The rates of the three sides would not do: they also vanish for three bodies
# in line that move at right angles to it, a start set of its own.
_RHO = {0: -np.sqrt(1.0 / 2.0)}
_LAMBDA = {1: -np.sqrt(1.0 / 6.0), 2: np.sqrt(1.0 / 6.0)}

_CONDITION = Condition(
    label="rest",
    kind=7,
    event=4,
    body=0,
    forms=np.array(
        [
            product_form(_RHO, _RHO, rate=True) - product_form(_LAMBDA, _LAMBDA, rate=True),
            product_form(_RHO, _LAMBDA, rate=True) + product_form(_LAMBDA, _RHO, rate=True),
            product_form(_RHO, _LAMBDA, rate=True, cross=True)
            - product_form(_LAMBDA, _RHO, rate=True, cross=True),
        ]
    ),
    degrees=np.array([0.5, 0.5, 0.5]),
)


class Rest(StartSet):
    """All velocities zero, parameters (x, y) the place of body 3 over a base of length 1."""

    name = "rest"
    letters = ("x", "y")
    window = (0.0, 0.5, 0.02, 0.87)

    def states(self, p: Array, q: Array) -> Array:
        x = np.zeros((len(p), 12))
        x[:, 0] = 1.0
        x[:, 2], x[:, 3] = p - 0.5, q
        x[:, 4], x[:, 5] = -0.5 - p, -q
        return x

    def tangents(self, p: Array, q: Array) -> Array:
        d = np.zeros((len(p), 2, 12))
        d[:, 0, 2] = d[:, 1, 3] = 1.0
        d[:, 0, 4] = d[:, 1, 5] = -1.0
        return d

    def inside(self, p: Array, q: Array) -> NDArray[np.bool_]:
        # y = 0 collapses on a line into a collision; the bound on the longest side has a little
        # slack so that a grid that ends on the circle keeps its last starts.
        return np.asarray((p >= 0) & (q > 0) & ((p + 0.5) ** 2 + q**2 <= 1.0 + 1e-9))

    def conditions(self) -> tuple[Condition, ...]:
        return (_CONDITION,)

    def parameters_of(self, x: Array, body: int) -> tuple[float, float, float]:
        sides = np.hypot(x[0:6:2], x[1:6:2])
        unit = float(sides.max())
        a, b = np.sort(sides)[:2] / unit
        # Third corner from the two shorter sides: distance a from (1/2, 0) and b from (-1/2, 0).
        along = float(b * b - a * a) / 2.0
        return along, float(np.sqrt(max(b * b - (along + 0.5) ** 2, 0.0))), unit
