"""What kind of orbit a motion from a start set is: syzygies, word, braid, symmetry.

Everything is read from half a period.  The other half is the first one under the reversal of the
start, so nothing is lost, and errors grow with the square root of the multiplier only.

The winding numbers are computed twice: from the angles that the sides sweep, and, but for their
sum, from the alignments alone.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from orbitsearch.braid_type import BraidType
from orbitsearch.cycles import canonical_cycle, shortest_word
from orbitsearch.errors import BadRequest
from orbitsearch.find_symmetry import find_symmetry
from orbitsearch.flow import Trajectory
from orbitsearch.starts import Condition
from orbitsearch.strands import swept
from orbitsearch.symmetry import Symmetry
from orbitsearch.syzygies import crossings, least_margins, period_syzygies
from orbitsearch.turns import windings_from_crossings
from orbitsearch.words import canonical_word, free_group_word

__all__ = ["Classification", "classify"]

_SIDES = (frozenset({0, 1}), frozenset({1, 2}), frozenset({2, 0}))


@dataclass(frozen=True)
class Classification:
    """The kind of an orbit; fields of the same name are those of `orbitsearch.orbit.Orbit`.

    Attributes
    ----------
    winding_error : float
        Largest departure of a winding number from an integer; infinite when the integers are not
        those that the alignments ask for, and then `braid` is None.
    """

    syzygies: str
    cycle: str
    word: str
    symmetry: Symmetry
    braid: BraidType | None
    margins: tuple[float, float]
    winding_error: float


def classify(own: Condition, half: Trajectory, rotation: float) -> Classification:
    """Kind of the orbit that starts in a start set.

    Parameters
    ----------
    own : Condition
        The condition that the orbit starts in.
    half : Trajectory
        Its first half period.
    rotation : float
        Angle by which it has turned after a period, 0 when it closes.

    Returns
    -------
    Classification

    Raises
    ------
    BadRequest
        When the half period runs into a collision, or its alignments do not alternate.
    """
    seen = period_syzygies(own, half)
    crossed = crossings(seen)
    syzygies = "".join(str(body) for body, _ in crossed)
    symmetry = find_symmetry(own, half, rotation)
    measured = _windings(own, half, rotation)
    rounded = np.round(measured)
    error = float(np.abs(measured - rounded).max())
    braid = _braid(crossed, rounded.astype(int), symmetry, rotation)
    return Classification(
        syzygies=syzygies,
        cycle=canonical_cycle(syzygies),
        word=_word(crossed, syzygies, symmetry),
        symmetry=symmetry,
        braid=braid,
        margins=least_margins(seen),
        winding_error=error if braid else math.inf,
    )


def _braid(
    crossed: list[tuple[int, int]],
    windings: NDArray[np.int64],
    symmetry: Symmetry,
    rotation: float,
) -> BraidType | None:
    """Braid type, or None where windings, alignments and symmetry contradict each other."""
    total = int(windings.sum())
    try:
        if windings_from_crossings(crossed, total) != tuple(windings):
            return None
        return BraidType.of(crossed, total, symmetry, rotation)
    except BadRequest:
        return None


def _word(crossed: list[tuple[int, int]], syzygies: str, symmetry: Symmetry) -> str:
    """Word as published for collinear starts: the arc of the body that is midway is silent."""
    # A choreography may pass with each body midway; its three words are the same.
    middles = [int(label[1]) for label in symmetry.ends if label.startswith("C")]
    if middles:
        return canonical_word(free_group_word(crossed, silent=middles[0]))
    return shortest_word(syzygies)


def _windings(own: Condition, half: Trajectory, rotation: float) -> NDArray[np.float64]:
    """Turns of each side in a period, in the frame that turns by `rotation` meanwhile."""
    first = swept(half)
    to = own.reversal.permutation
    images = [_SIDES.index(frozenset(to[body] for body in side)) for side in _SIDES]
    # Run backwards a side turns the other way, and the right way again in the mirror.
    sign = 1.0 if own.reversal.plane == "mirror" else -1.0
    return np.asarray((first + sign * first[images] - rotation) / (2.0 * math.pi))
