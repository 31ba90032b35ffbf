"""What the braid of an orbit is, free of labels, direction of time and mirror images.

The world lines of the three bodies over a period are a pure braid.  Its conjugacy class does not
depend on the moment the period begins at, nor on the labels; running backwards inverts it, and the
mirror image mirrors it.  So that one of those four classes which comes first in a fixed order is
the same for every description of one orbit.  Where a permutation of the bodies takes part of the
period to the next part, the braid of that part is a root of the whole.

For an orbit that closes only up to a rotation the world lines are taken in the frame that turns
evenly by that rotation in a period, hence closes them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from orbitsearch.braids import Braid
from orbitsearch.symmetry import Symmetry
from orbitsearch.turns import windings_from_crossings

__all__ = ["BraidType"]


@dataclass(frozen=True)
class BraidType:
    """Braid of a period, in canonical form.

    Attributes
    ----------
    braid : Braid
        The class of the period, its inverse, its mirror image or both, whichever comes first
        (`Braid.canonical`).
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
    def of(cls, crossings: Sequence[tuple[int, int]], total: int, symmetry: Symmetry) -> BraidType:
        """Type of a closed motion.

        Parameters
        ----------
        crossings : sequence of (int, int)
            Body in the middle and direction, as for `orbitsearch.words.free_group_word`.
        total : int
            Sum of the windings of the three pairs, counterclockwise.
        symmetry : Symmetry
            Its group.

        Raises
        ------
        BadRequest
            When the crossings do not alternate, or total and symmetry do not fit them.
        """
        braid = Braid.from_crossings(crossings, 2 * total)
        windings = windings_from_crossings(crossings, total)
        # In a frame that makes those turns, the part is closed up to the permutation.
        seen = Braid(braid.cycle, braid.exponent_sum - 6 * symmetry.frame_turns)
        part_braid = (seen if symmetry.part > 1 else braid).root(symmetry.part)
        canonical = braid.canonical()
        return cls(
            braid=canonical,
            windings=_canonical_windings(windings, canonical.exponent_sum),
            part=symmetry.part,
            part_braid=part_braid.canonical(),
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


def _canonical_windings(windings: tuple[int, int, int], exponent_sum: int) -> tuple[int, int, int]:
    """Windings in falling order, signed like the canonical braid, whose exponent sum is given."""
    # The mirror image and the reversed motion wind the other way.
    first, second, third = max(
        tuple(sorted((sign * w for w in windings), reverse=True))
        for sign in (1, -1)
        if 2 * sign * sum(windings) == exponent_sum
    )
    return first, second, third


def _braid_json(braid: Braid) -> dict[str, Any]:
    return {
        "kind": braid.kind,
        "trace": braid.trace,
        "dilatation": braid.dilatation,
        "dilatation_exact": braid.dilatation_text,
        "entropy": braid.entropy,
        "cycle": braid.cycle,
        "exponent_sum": braid.exponent_sum,
    }
