"""What the braid of an orbit is, free of labels, direction of time and mirror images.

The world lines of the three bodies over a period are a pure braid.  Its conjugacy class does not
depend on the moment the period begins at, nor on the labels; running backwards inverts it, and the
mirror image mirrors it.  So that one of those four classes which comes first in a fixed order is
the same for every description of one orbit.

An orbit that closes only up to a rotation closes in a frame that turns evenly.  That frame is known
up to whole turns a period: it is the one in which bodies share a curve, where they do in any, and
else the one that turns by less than half a turn a period.  Backwards and in the mirror the frame
turns the other way; the braid is that of the description in which the angle of less than half a
turn is counterclockwise, which leaves two classes to choose from.

Where a permutation of the bodies takes part of the period to the next part, the braid of the period
is a power of that of the part.  In an orbit that closes, the part may be turned: then it is taken
in the frame that undoes this, and its power is the braid of the period less that frame's twists.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from orbitsearch.braids import Braid
from orbitsearch.symmetry import Symmetry
from orbitsearch.turns import windings_from_crossings

__all__ = ["BraidType", "whole_number"]

_LONGEST_NUMBER = 4000
"""Digits of a number in JSON; Python writes and reads 4300, others fewer."""

Windings = tuple[int, int, int]


@dataclass(frozen=True)
class BraidType:
    """Braid of a period, in canonical form.

    Attributes
    ----------
    braid : Braid
        The class of the period, its inverse, its mirror image or both, whichever comes first
        (`Braid.canonical`), among those that turn counterclockwise.
    windings : tuple of int
        How often each pair winds round, counterclockwise, in falling order.
    part : int
        In how many parts a permutation of the bodies divides the period: 1, 2 or 3.
    part_braid : Braid
        The braid of one part, chosen alike; that of the period when `part` is 1.
    """

    braid: Braid
    windings: tuple[int, int, int]
    part: int
    part_braid: Braid

    @classmethod
    def of(
        cls,
        crossings: Sequence[tuple[int, int]],
        total: int,
        symmetry: Symmetry,
        rotation: float = 0.0,
    ) -> BraidType:
        """Type of a closed motion.

        Parameters
        ----------
        crossings : sequence of (int, int)
            Body in the middle and direction, as for `orbitsearch.words.free_group_word`.
        total : int
            Sum of the windings of the three pairs, counterclockwise, in the frame that turns by
            `rotation` in a period.
        symmetry : Symmetry
            Its group.
        rotation : float
            Angle in (-π, π] by which the motion has turned after a period.

        Raises
        ------
        BadRequest
            When the crossings do not alternate, or total and symmetry do not fit them.
        """
        # Each turn of the frame takes a full twist out of the braid: a turn out of each winding.
        inside = Braid.from_crossings(crossings, 2 * total - 6 * symmetry.frame_turns)
        part = inside.root(symmetry.part)
        if rotation:
            total -= 3 * symmetry.frame_turns
        braid = Braid(inside.cycle, 2 * total)
        windings = windings_from_crossings(crossings, total)
        if rotation < 0:
            braid, part, windings = braid.mirror(), part.mirror(), _negative(windings)
        canonical = braid.canonical(keep_sense=rotation != 0)
        if not rotation:
            signed = (windings, _negative(windings))
            fitting = (w for w in signed if 2 * sum(w) == canonical.exponent_sum)
            windings = max(fitting, key=_falling)
        return cls(
            braid=canonical,
            windings=_falling(windings),
            part=symmetry.part,
            part_braid=part.canonical(keep_sense=rotation != 0),
        )

    def to_json(self) -> dict[str, Any]:
        """Plain JSON value, with what follows from the attributes spelled out."""
        part = {"of": self.part, **_braid_json(self.part_braid)} if self.part > 1 else None
        return {**_braid_json(self.braid), "windings": list(self.windings), "part": part}

    @classmethod
    def from_json(cls, data: dict[str, Any]) -> BraidType:
        """Inverse of `to_json`."""
        first, second, third = data["windings"]
        part = data["part"] or {"of": 1, **data}
        return cls(
            braid=Braid(data["cycle"], data["exponent_sum"]),
            windings=(first, second, third),
            part=part["of"],
            part_braid=Braid(part["cycle"], part["exponent_sum"]),
        )


def _negative(windings: Windings) -> Windings:
    """What the mirror image has, or the motion run backwards."""
    first, second, third = windings
    return -first, -second, -third


def _falling(windings: Windings) -> Windings:
    first, second, third = sorted(windings, reverse=True)
    return first, second, third


def whole_number(braid: Braid) -> int | str:
    """The trace for JSON: its digits as text where `json` would refuse to write the number."""
    digits = braid.trace_text
    return braid.trace if len(digits) <= _LONGEST_NUMBER else digits


def _braid_json(braid: Braid) -> dict[str, Any]:
    return {
        "kind": braid.kind,
        "trace": whole_number(braid),
        "dilatation": braid.dilatation,
        "dilatation_exact": braid.dilatation_text,
        "entropy": braid.entropy,
        "cycle": braid.cycle,
        "exponent_sum": braid.exponent_sum,
    }
