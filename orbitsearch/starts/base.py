"""What a start set is: states left fixed by a reversing symmetry, and how to tell and name them.

A reversing symmetry permutes the bodies, applies a rotation or reflection of the plane about the
centre of mass and turns time round.  A motion that is fixed by one at time 0 and by another (or the
same) at time t is symmetric about both moments; the two together shift time by 2t and are of finite
order n, so the motion is periodic with T = 2 n t, up to a rotation when both are reflections.

Being fixed is three equations free of rotation, each a quadratic form in the state: that is all a
solver needs to know of a set.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies
from orbitsearch.symmetry import REVERSALS, Reversal

__all__ = [
    "Array",
    "Condition",
    "StartSet",
    "base_sides",
    "half_base",
    "place_of",
    "product_form",
]

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Condition:
    """Being in a start set with a given body in the special place.

    Attributes
    ----------
    label : str
        ``C1`` .. ``C3``, ``I1`` .. ``I3``, ``rest`` or ``P``.
    kind : int
        Number under which the compiled scan records it (`orbitsearch._kernels`).
    event : int
        Event function at whose roots it is looked for, as numbered in `orbitsearch.flow.Events`.
    body : int
        The special body 1..3, or 0 when there is none.
    forms : ndarray, shape (3, 12, 12)
        Symmetric matrices Q; a state x is in the set when x·Q x / 2 vanishes for all three.
    degrees : ndarray, shape (3,)
        Power of length that each form scales with: 2 for products of sides, 1/2 for sides times
        rates (velocity scales as length to the -1/2).
    """

    label: str
    kind: int
    event: int
    body: int
    forms: Array
    degrees: Array

    @property
    def reversal(self) -> Reversal:
        """The reversing symmetry that fixes states which fulfil the condition."""
        return REVERSALS[self.label]

    @property
    def aligned(self) -> bool:
        """Whether the three bodies are in line when it holds."""
        return self.event == 0

    def plane_matrix(self, x: Array) -> Array:
        """What the reversal that fixes state x, shape (12,), does to the plane, shape (2, 2).

        A mirror's axis depends on the state: the altitude on the base of an isosceles triangle, or
        the line that holds all three bodies.
        """
        if self.reversal.plane == "identity":
            return np.eye(2)
        if self.reversal.plane == "half-turn":
            return -np.eye(2)
        side = 2 * (self.body % 3)
        e = x[side : side + 2] / np.hypot(*x[side : side + 2])
        along_the_side = 2.0 * np.outer(e, e) - np.eye(2)
        return along_the_side if self.aligned else -along_the_side

    def residuals(self, x: Array) -> Array:
        """Three residuals free of scale, shape (..., 3), of states x, shape (..., 12)."""
        values = 0.5 * np.einsum("...i,mij,...j->...m", x, self.forms, x)
        return np.asarray(values / bodies.size(x)[..., None] ** self.degrees)


class StartSet(ABC):
    """A two-parameter family of starts with no angular momentum, in standard form.

    Class attributes
    ----------------
    name : name used in commands and records
    letters : names of the two parameters
    window : default search window (p0, p1, q0, q1)
    """

    name: ClassVar[str]
    letters: ClassVar[tuple[str, str]]
    window: ClassVar[tuple[float, float, float, float]]

    @abstractmethod
    def states(self, p: Array, q: Array) -> Array:
        """Standard states, shape (n, 12), for parameters of shape (n,)."""

    @abstractmethod
    def tangents(self, p: Array, q: Array) -> Array:
        """Derivatives of `states` by p and q, shape (n, 2, 12)."""

    @abstractmethod
    def inside(self, p: Array, q: Array) -> NDArray[np.bool_]:
        """Whether the parameters lie in the domain that holds every start once."""

    @abstractmethod
    def conditions(self) -> tuple[Condition, ...]:
        """The conditions of being in this set, one for each place of the special body."""

    @abstractmethod
    def parameters_of(self, x: Array, body: int) -> tuple[float, float, float]:
        """Parameters and length unit of a state in the set.

        Parameters
        ----------
        x : ndarray, shape (12,)
        body : int
            The special body, as in `Condition`.

        Returns
        -------
        p, q : float
            Parameters in the domain.
        unit : float
            Length in x of what has length 1 in standard form; times go with ``unit ** 1.5``.
        """

    def energies(self, p: Array, q: Array) -> Array:
        """Energy of each start, shape (n,)."""
        # A request may hold any numbers; what overflows is not bound, and says so as inf or NaN.
        with np.errstate(over="ignore", invalid="ignore"):
            return bodies.energy(self.states(p, q))

    @property
    def own(self) -> Condition:
        """The condition that standard states of this set fulfil."""
        return self.conditions()[-1]


def base_sides(body: int) -> tuple[int, int, int]:
    """Indices in (A, B, C) of the side opposite to a body and of the two sides that follow it."""
    base = body % 3
    return base, (base + 1) % 3, (base + 2) % 3


def place_of(body: int) -> dict[int, float]:
    """Position of a body as a combination of sides: r_k = (side after - side before) / 3."""
    _, after, before = base_sides(body)
    return {after: 1.0 / 3.0, before: -1.0 / 3.0}


def half_base(x: Array, side: int) -> tuple[float, Array]:
    """Half the length and the direction of one side (0, 1, 2 for A, B, C) of a state."""
    base = x[2 * side : 2 * side + 2]
    length = float(np.hypot(*base))
    return 0.5 * length, base / length


def product_form(
    left: dict[int, float], right: dict[int, float], *, cross: bool = False, rate: bool = False
) -> Array:
    """Matrix Q with x·Q x / 2 = L·R, or L x R, for two combinations of sides.

    Parameters
    ----------
    left, right : dict
        Coefficient of each side (0, 1, 2 for A, B, C).
    cross : bool
        Cross instead of inner product.
    rate : bool
        The rate of R instead of R; with `left` and `right` equal in meaning L·R'.
    """
    form = np.zeros((12, 12))
    offset = 6 if rate else 0
    for i, a in left.items():
        for j, b in right.items():
            if cross:
                form[2 * i, offset + 2 * j + 1] += a * b
                form[2 * i + 1, offset + 2 * j] -= a * b
            else:
                form[2 * i, offset + 2 * j] += a * b
                form[2 * i + 1, offset + 2 * j + 1] += a * b
    return form + form.T
