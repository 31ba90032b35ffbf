"""What leaves a periodic orbit unchanged: shifts of time and reversals, with labels and mirrors.

A *shift* of an orbit of period T is a permutation of the bodies and a motion of the plane that take
the orbit to itself T/n later.  The plane is turned, or mirrored and turned.  Shapes tell all of
it: what a shift does to the labels and whether it mirrors is faithful, so shifts form a cyclic
group of order n = 1, 2, 3 or 6, and one of them, over the n-th part of the period, generates it.
A *reversal* runs the orbit backwards about a moment; where there is one, there are n, which fix 2n
moments, evenly spaced, and the piece between two neighbours, T/2n long, generates the whole orbit.
At a fixed moment the state is in a start set.  The 2n states are alternately of the kinds that the
ends of the piece have, so these two ends name the group of a reversible orbit in full.

The figure-eight has the largest group: n = 6, with ends in collinear and isosceles states
(A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881: the dihedral group of order 12).
"""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import asdict, dataclass
from typing import Any

from orbitsearch.errors import BadRequest

__all__ = ["NAMES", "REVERSALS", "Reversal", "Symmetry", "between", "check_name", "set_of_label"]

NAMES = {
    "choreography": "all three bodies run along one curve, a third of the period apart",
    "cyclic": "the bodies take each other's places in turn every third of the period",
    "shared-curve": "two bodies run along one curve, half a period apart",
    "exchange": "two bodies have taken each other's places after half a period",
    "mirror-exchange": "two bodies have exchanged places, in the mirror, after half a period",
    "mirror": "after half a period the orbit is its own mirror image",
    "none": "nothing short of a whole period takes the orbit to itself",
}
"""Names of what shifts do, and what they mean.  An orbit can have several: each choreography is
cyclic, and a shared curve needs an exchange."""


@dataclass(frozen=True)
class Reversal:
    """A reversing symmetry of the equations of motion.

    Attributes
    ----------
    permutation : tuple of int
        Body i takes the place of body ``permutation[i]`` (numbered from 0).
    plane : str
        What is done to the plane: ``identity``, ``half-turn`` or ``mirror``.
    """

    permutation: tuple[int, int, int]
    plane: str

    def order_with(self, other: Reversal) -> int:
        """Order n of the product with `other`, rotations of the plane by any angle left aside.

        Two mirrors make a rotation, by twice the angle between their axes: relative periodic
        orbits are periodic in the frame that turns with them.  A half-turn and the identity make a
        half-turn, which closes in the inertial frame after twice the time.

        Examples
        --------
        >>> middle3 = Reversal((1, 0, 2), "half-turn")
        >>> middle1 = Reversal((0, 2, 1), "half-turn")
        >>> apex1 = Reversal((0, 2, 1), "mirror")
        >>> [middle3.order_with(end) for end in (middle3, middle1, apex1)]
        [1, 3, 6]
        """
        plane = 1 if self.plane == other.plane else 2
        return math.lcm(_order(_then(self.permutation, other.permutation)), plane)


def _then(first: tuple[int, int, int], second: tuple[int, int, int]) -> tuple[int, int, int]:
    """The permutation that does `first`, then `second`."""
    a, b, c = (second[image] for image in first)
    return a, b, c


def _order(permutation: tuple[int, int, int]) -> int:
    fixed = sum(i == image for i, image in enumerate(permutation))
    return {3: 1, 1: 2, 0: 3}[fixed]


_SWAPS = {1: (0, 2, 1), 2: (2, 1, 0), 3: (1, 0, 2)}

REVERSALS: dict[str, Reversal] = {
    **{f"C{body}": Reversal(swap, "half-turn") for body, swap in _SWAPS.items()},
    **{f"I{body}": Reversal(swap, "mirror") for body, swap in _SWAPS.items()},
    "rest": Reversal((0, 1, 2), "identity"),
    "P": Reversal((0, 1, 2), "mirror"),
}
"""The reversal that fixes a state, by the label of its condition: C and I with the number of the
body midway or at the apex, rest, and P for three bodies in line that move across it."""

_SETS = {"C": "collinear", "I": "isosceles", "r": "rest", "P": "perpendicular"}


def set_of_label(label: str) -> str:
    """Name of the start set of a condition.

    Examples
    --------
    >>> set_of_label("I2")
    'isosceles'
    """
    return _SETS[label[0]]


@dataclass(frozen=True)
class Symmetry:
    """Symmetry group of one orbit.

    Attributes
    ----------
    order : int
        Number n of shifts, the identity included: 1, 2, 3 or 6.
    permutation : tuple of int
        What the shift by T/n does to the bodies (numbered from 0): body ``permutation[i]`` is then
        where body i was, up to the plane.
    mirror : bool
        Whether the shift by T/n mirrors the plane.
    turn : float
        Angle in (-π, π] by which the shift by T/n turns the plane, 0 for one that mirrors.  For an
        orbit that closes only up to a rotation it is taken in the frame that turns with it, which
        can be chosen so that nothing is left of it: 0.
    frame_turns : int
        Turns by which a frame must rotate over a period, beyond the rotation of the orbit, for
        `turn` to vanish in it.
    ends : tuple of str
        Labels (keys of `REVERSALS`) of the two ends of the piece of T/2n; empty when the orbit is
        not reversible.
    deviation : float or None
        Largest departure from any of this that was measured, over the size of the orbit; None when
        it follows from the ends alone.
    """

    order: int
    permutation: tuple[int, int, int]
    mirror: bool
    turn: float
    frame_turns: int
    ends: tuple[str, ...]
    deviation: float | None = None

    @property
    def names(self) -> tuple[str, ...]:
        """Which of `NAMES` apply, in their order."""
        found = set()
        if _order(self.permutation) == 3:
            found.add("cyclic")
            if not self.turn:
                found.add("choreography")
        if _order(self.permutation) == 2:
            found.add("mirror-exchange" if self.mirror else "exchange")
            if not (self.mirror or self.turn):
                found.add("shared-curve")
        elif self.mirror:
            found.add("mirror")
        return tuple(name for name in NAMES if name in (found or {"none"}))

    @property
    def title(self) -> str:
        """The names that say most, as text: a choreography is not called cyclic as well."""
        implied = {"choreography": "cyclic", "shared-curve": "exchange"}
        left_out = {implied.get(name) for name in self.names}
        return ", ".join(name for name in self.names if name not in left_out)

    @property
    def curves(self) -> int:
        """Number of different curves that the three bodies run along."""
        if "choreography" in self.names:
            return 1
        return 2 if "shared-curve" in self.names else 3

    @property
    def pieces(self) -> int:
        """Number of pieces of the period each of which generates the whole orbit."""
        return self.order * (2 if self.ends else 1)

    @property
    def reversals(self) -> dict[str, int]:
        """How many states of each start set the orbit runs through in a period.

        Examples
        --------
        >>> between("C3", "I1").reversals
        {'collinear': 6, 'isosceles': 6}
        """
        counts = Counter(set_of_label(label) for label in self.ends)
        return {name: self.order * count for name, count in counts.items()}

    @property
    def part(self) -> int:
        """In how many parts the period falls that a permutation alone takes to each other.

        3 for cyclic orbits, 2 for an exchange, 1 otherwise: world lines over such a part make a
        braid whose power is that of the period.  A mirror image turns a braid into another one.
        """
        order = _order(self.permutation)
        return 1 if order == 2 and self.mirror else order

    def describe(self) -> str:
        """The group in words."""
        clauses = [NAMES[name] for name in self.title.split(", ")]
        if self.turn:
            clauses[0] += f", turned by {abs(math.degrees(self.turn)):.0f} degrees"
        if self.ends:
            states = " and ".join(f"{count} {name}" for name, count in self.reversals.items())
            clauses.append(f"reversible through {states} states")
        else:
            clauses.append("not reversible")
        return "; ".join(clauses)

    def to_json(self) -> dict[str, Any]:
        """Plain JSON value, with what follows from the attributes spelled out."""
        return {
            "names": list(self.names),
            "description": self.describe(),
            "curves": self.curves,
            "fraction": f"1/{self.pieces}",
            "reversals": self.reversals,
            **asdict(self),
        }

    @classmethod
    def from_json(cls, data: dict[str, Any]) -> Symmetry:
        """Inverse of `to_json`."""
        first, second, third = data["permutation"]
        return cls(
            order=data["order"],
            permutation=(first, second, third),
            mirror=data["mirror"],
            turn=data["turn"],
            frame_turns=data["frame_turns"],
            ends=tuple(data["ends"]),
            deviation=data["deviation"],
        )


def between(start: str, end: str) -> Symmetry:
    """Least group of an orbit with a piece from one fixed state to the next.

    Parameters
    ----------
    start, end : str
        Labels of the two, keys of `REVERSALS`.

    Returns
    -------
    Symmetry
        Generated by the two reversals: the shift by twice the piece is one after the other.

    Examples
    --------
    >>> between("C3", "I1").names, between("rest", "C2").title
    (('choreography', 'cyclic', 'mirror'), 'exchange')
    """
    first, second = REVERSALS[start], REVERSALS[end]
    planes = {first.plane, second.plane}
    half_turn = planes == {"half-turn", "identity"}
    return Symmetry(
        order=first.order_with(second),
        permutation=_then(first.permutation, second.permutation),
        mirror="mirror" in planes and len(planes) == 2,
        turn=math.pi if half_turn else 0.0,
        frame_turns=int(half_turn),
        ends=(start, end),
    )


def check_name(name: str) -> str:
    """The name, if it is one of `NAMES`.

    Raises
    ------
    BadRequest
        When it is not.
    """
    if name not in NAMES:
        raise BadRequest(f"`symmetry` must be one of {', '.join(NAMES)}, got {name!r}: choose one")
    return name
