"""What to look for among braids: a kind, a cycle, or one conjugacy class, as it is typed."""

from typing import NamedTuple

from orbitsearch._letters import shown
from orbitsearch.artin import read_artin
from orbitsearch.braids import KINDS, Braid
from orbitsearch.errors import BadRequest
from orbitsearch.turns import exponent_of_turns, read_cycle

__all__ = ["Pattern", "read_braid"]


class Pattern(NamedTuple):
    """What `read_braid` looks for: None where anything will do.

    Cycle and exponent sum are those of `Braid.canonical`.
    """

    kind: str | None = None
    cycle: str | None = None
    exponent_sum: int | None = None

    def fits(self, braid: Braid) -> bool:
        """Whether a braid, its inverse or its mirror image is what is looked for."""
        found = braid.canonical()
        return (
            self.kind in (None, found.kind)
            and self.cycle in (None, found.cycle)
            and self.exponent_sum in (None, found.exponent_sum)
        )


def read_braid(braid: str) -> Pattern:
    """What to look for, from a kind, a cycle or an Artin word.

    Parameters
    ----------
    braid : str
        One of `KINDS` in capitals or not, or what `orbitsearch.turns.read_cycle` or
        `orbitsearch.artin.read_artin` takes.

    Returns
    -------
    Pattern
        A cycle leaves the exponent sum open, and thereby the number of full twists.

    Raises
    ------
    BadRequest
        When the text is none of them.

    Examples
    --------
    >>> read_braid("pseudo-anosov"), read_braid("(LR)^3").cycle, read_braid("1 1").exponent_sum
    (Pattern(kind='pseudo-Anosov', cycle=None, exponent_sum=None), 'LRLRLR', -2)
    """
    for kind in KINDS:
        if braid.strip().lower() == kind.lower():
            return Pattern(kind=kind)
    letters = set(braid) - set(" \t")
    if letters & set("12") and letters <= set("0123456789+-"):
        wanted = Braid.from_artin(read_artin(braid, "braid")).canonical()
        return Pattern(cycle=wanted.cycle, exponent_sum=wanted.exponent_sum)
    if letters & set("LR()") and letters <= set("LR()^0123456789"):
        cycle = read_cycle(braid, "braid")
        return Pattern(cycle=Braid(cycle, exponent_of_turns(cycle)).canonical().cycle)
    raise BadRequest(
        f"`braid` must be a kind ({', '.join(KINDS)}), a cyclic word in L and R, or an Artin word, "
        f"got {shown(braid)}: write for instance periodic, (LR)^3 or '1 -2 1 -2 1 -2'"
    )
