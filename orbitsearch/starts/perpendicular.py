"""Perpendicular starts: three bodies in line that move at right angles to it.

r1 = (-1, 0), r2 = (1, 0), r3 = (s, 0), then shifted to the centre of mass; v3 = (0, v) and, with no
angular momentum, v1 = -(1 - s) v3 / 2, v2 = -(1 + s) v3 / 2.  Fixed by the mirror along the line
with time reversed.  0 <= s < 1 and v >= 0 hold every start once; s = 0 is a collinear start with
a = 0, too.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies
from orbitsearch.starts.base import Array, Condition, StartSet, half_base, product_form

__all__ = ["Perpendicular"]

_A, _B = {0: 1.0}, {1: 1.0}

_CONDITION = Condition(
    label="P",
    kind=8,
    event=0,
    body=0,
    forms=np.array(
        [
            product_form(_A, _B, cross=True),
            product_form(_A, _A, rate=True),
            product_form(_B, _B, rate=True),
        ]
    ),
    degrees=np.array([2.0, 0.5, 0.5]),
)


class Perpendicular(StartSet):
    """Body 3 between bodies 1 and 2, parameters (s, v) its place and its speed across the line."""

    name = "perpendicular"
    letters = ("s", "v")
    window = (0.02, 0.9, 0.02, 2.0)

    def states(self, p: Array, q: Array) -> Array:
        x = np.zeros((len(p), 12))
        x[:, 0] = 2.0
        x[:, 2] = p - 1.0
        x[:, 4] = -1.0 - p
        x[:, 7] = -p * q
        x[:, 9] = 0.5 * q * (3.0 + p)
        x[:, 11] = -0.5 * q * (3.0 - p)
        return x

    def tangents(self, p: Array, q: Array) -> Array:
        d = np.zeros((len(p), 2, 12))
        d[:, 0, 2], d[:, 0, 4] = 1.0, -1.0
        d[:, 0, 7], d[:, 0, 9], d[:, 0, 11] = -q, 0.5 * q, 0.5 * q
        d[:, 1, 7], d[:, 1, 9], d[:, 1, 11] = -p, 0.5 * (3.0 + p), -0.5 * (3.0 - p)
        return d

    def inside(self, p: Array, q: Array) -> NDArray[np.bool_]:
        return np.asarray((p >= 0) & (p < 1) & (q >= 0))

    def conditions(self) -> tuple[Condition, ...]:
        return (_CONDITION,)

    def parameters_of(self, x: Array, body: int) -> tuple[float, float, float]:
        longest = int(np.argmax(np.hypot(x[0:6:2], x[1:6:2])))
        unit, e = half_base(x, longest)
        positions, velocities = bodies.sides_to_bodies(x)
        # The middle body is opposite to the longest side: 3 to A, 1 to B, 2 to C.
        middle = (longest + 2) % 3
        # Its place over the midpoint of the outer two, which is at minus half its own.
        place = 1.5 * float(positions[middle] @ e) / unit
        v = np.sqrt(unit) * velocities[middle]
        return abs(place), abs(float(e[0] * v[1] - e[1] * v[0])), unit
