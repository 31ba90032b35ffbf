"""Collinear starts: one body midway between the others, which move alike.

r1 = (-1, 0), r2 = (1, 0), r3 = 0; v1 = v2 = (a, b), v3 = -2 (a, b).  Fixed by the half-turn that
swaps bodies 1 and 2 with time reversed; E = 3 (a² + b²) - 5/2.  The signs of a and b only mirror,
turn or reverse the motion, so a, b >= 0 holds every start once.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies
from orbitsearch.starts.base import (
    Array,
    Condition,
    StartSet,
    base_sides,
    half_base,
    place_of,
    product_form,
)

__all__ = ["Collinear"]


def _condition(body: int) -> Condition:
    outer = {base_sides(body)[0]: 1.0}
    middle = place_of(body)
    return Condition(
        label=f"C{body}",
        kind=body,
        event=0,
        body=body,
        forms=np.array(
            [
                product_form(middle, outer),
                product_form(middle, outer, cross=True),
                product_form(outer, outer, rate=True),
            ]
        ),
        degrees=np.array([2.0, 2.0, 0.5]),
    )


_CONDITIONS = tuple(_condition(body) for body in (1, 2, 3))


class Collinear(StartSet):
    """Body 3 midway between bodies 1 and 2, parameters (a, b) their common velocity."""

    name = "collinear"
    letters = ("a", "b")
    # E < 0 inside the quarter circle of radius sqrt(5/6) = 0.9129.
    window = (0.0, 0.6, 0.0, 0.6)

    def states(self, p: Array, q: Array) -> Array:
        x = np.zeros((len(p), 12))
        x[:, 0] = 2.0
        x[:, 2] = x[:, 4] = -1.0
        x[:, 10], x[:, 11] = 3.0 * p, 3.0 * q
        x[:, 8], x[:, 9] = -x[:, 10], -x[:, 11]
        return x

    def tangents(self, p: Array, q: Array) -> Array:
        d = np.zeros((len(p), 2, 12))
        d[:, 0, 8] = d[:, 1, 9] = -3.0
        d[:, 0, 10] = d[:, 1, 11] = 3.0
        return d

    def inside(self, p: Array, q: Array) -> NDArray[np.bool_]:
        return np.asarray((p >= 0) & (q >= 0))

    def conditions(self) -> tuple[Condition, ...]:
        return _CONDITIONS

    def parameters_of(self, x: Array, body: int) -> tuple[float, float, float]:
        unit, e = half_base(x, base_sides(body)[0])
        _, velocities = bodies.sides_to_bodies(x)
        # The outer bodies share the velocity (a, b), the middle one has -2 (a, b).
        v = -0.5 * np.sqrt(unit) * velocities[body - 1]
        return abs(float(v @ e)), abs(float(e[0] * v[1] - e[1] * v[0])), unit
