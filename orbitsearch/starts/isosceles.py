"""Isosceles starts: an isosceles triangle whose apex moves along the base.

r1 = (-1, -η), r2 = (1, -η), r3 = (0, 2η); v1 = (u, w), v2 = (u, -w), v3 = (-2u, 0), with w = 3ηu so
that there is no angular momentum.  Fixed by the mirror that swaps bodies 1 and 2 with time
reversed.  E = 3u²(1 + 3η²) - 1/2 - 2/√(1 + 9η²).  The signs of η and u only mirror or relabel, so
η, u >= 0 holds every start once; η = 0 is motion on a line into a collision.
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

__all__ = ["Isosceles"]


def _condition(body: int) -> Condition:
    # The apex moves along the base.  That it moves at right angles to its own place, r_k·v_k = 0,
    # says the same of a triangle, but holds of every collinear start too, where r_k = 0.
    base, after, before = base_sides(body)
    apex = place_of(body)
    return Condition(
        label=f"I{body}",
        kind=3 + body,
        event=body,
        body=body,
        forms=np.array(
            [
                product_form({after: 1.0}, {after: 1.0})
                - product_form({before: 1.0}, {before: 1.0}),
                product_form({base: 1.0}, apex, rate=True, cross=True),
                product_form({base: 1.0}, {base: 1.0}, rate=True),
            ]
        ),
        degrees=np.array([2.0, 0.5, 0.5]),
    )


_CONDITIONS = tuple(_condition(body) for body in (1, 2, 3))


class Isosceles(StartSet):
    """Body 3 at the apex, parameters (η, u): a third of the height, and minus half its speed."""

    name = "isosceles"
    letters = ("eta", "u")
    window = (0.02, 2.0, 0.02, 0.9)

    def states(self, p: Array, q: Array) -> Array:
        x = np.zeros((len(p), 12))
        w = 3.0 * p * q
        x[:, 0] = 2.0
        x[:, 2], x[:, 3] = -1.0, 3.0 * p
        x[:, 4], x[:, 5] = -1.0, -3.0 * p
        x[:, 7] = -2.0 * w
        x[:, 8], x[:, 9] = -3.0 * q, w
        x[:, 10], x[:, 11] = 3.0 * q, w
        return x

    def tangents(self, p: Array, q: Array) -> Array:
        d = np.zeros((len(p), 2, 12))
        d[:, 0, 3], d[:, 0, 5] = 3.0, -3.0
        for axis, slope in ((0, 3.0 * q), (1, 3.0 * p)):
            d[:, axis, 7] = -2.0 * slope
            d[:, axis, 9] = d[:, axis, 11] = slope
        d[:, 1, 8], d[:, 1, 10] = -3.0, 3.0
        return d

    def inside(self, p: Array, q: Array) -> NDArray[np.bool_]:
        return np.asarray((p > 0) & (q >= 0))

    def conditions(self) -> tuple[Condition, ...]:
        return _CONDITIONS

    def parameters_of(self, x: Array, body: int) -> tuple[float, float, float]:
        unit, e = half_base(x, base_sides(body)[0])
        positions, velocities = bodies.sides_to_bodies(x)
        apex = positions[body - 1]
        height = float(e[0] * apex[1] - e[1] * apex[0])
        speed = np.sqrt(unit) * float(velocities[body - 1] @ e)
        return abs(height) / (2.0 * unit), 0.5 * abs(speed), unit
