"""Cyclic words in L and R: the turns of a closed motion on the shape sphere.

Without its three collision points the shape sphere is tiled by two ideal triangles, D > 0 and
D < 0, and a curve that crosses the arcs of the equator turns left or right in each triangle, which
is the cutting sequence of a geodesic in the Farey tessellation (C. Series, J. London Math. Soc. 31
(1985) 69, from memory).  So L and R can be read off the crossings.

The turns stand for the matrices L = (1 0; 1 1) and R = (1 1; 0 1).  Read around a circle they name
a conjugacy class of PSL(2, Z), which is unique up to rotation; it is empty for the elements of
finite order.  So they are the braid of the motion but for full twists, in which all bodies turn
round once: a rotation of the whole is not seen on the shape sphere.  How often it happens is known
from the sum of the three winding numbers, and with the sum each of them follows from the crossings.
"""

import re
from collections.abc import Iterable
from itertools import permutations

from orbitsearch._crossings import crossing_letters
from orbitsearch._letters import (
    cancel,
    check_letters,
    least_image,
    primitive_root,
    shown,
    strip_ends,
)
from orbitsearch.errors import BadRequest

__all__ = [
    "cycle_text",
    "exponent_of_turns",
    "read_cycle",
    "trace_of_turns",
    "turns_from_crossings",
    "windings_from_crossings",
]

# After a crossing down, the body before (counted around) is a turn to the right, and the body after
# it one to the left; after a crossing up it is the other way round.
_TURN_BETWEEN = {
    pair: "R" if (one - two) % 3 == step else "L"
    for one, two in permutations(range(3), 2)
    for pair, step in ((("xyz"[one], "XYZ"[two]), 1), (("XYZ"[one], "xyz"[two]), 2))
}

_LONGEST_CYCLE = 10**6
"""Powers are written out up to this length; no motion has so many syzygies in a period."""

# Anything that fits nowhere is a token, too, so that nothing is skipped.
_TOKEN = re.compile(r"\^[1-9][0-9]*|.", re.DOTALL)
_REPEATED = re.compile(r"(LR|L|R)\1\1+")


def turns_from_crossings(crossings: Iterable[tuple[int, int]]) -> str:
    """Left and right turns of a closed motion in the two triangles of the shape sphere.

    Parameters
    ----------
    crossings : iterable of (int, int)
        Middle bodies and directions over one period; they need not be reduced.

    Returns
    -------
    str
        L or R from each crossing of the reduced cycle to the next.

    Raises
    ------
    BadRequest
        When the crossings are not those of a closed motion.

    Examples
    --------
    >>> turns_from_crossings([(1, 1), (2, -1), (3, 1), (1, -1), (2, 1), (3, -1)])
    'LRLRLR'
    """
    reduced = cancel(_closed(crossings), str.swapcase)
    reduced = strip_ends(reduced, str.swapcase)
    around = zip(reduced, reduced[1:] + reduced[:1], strict=True)
    return "".join([_TURN_BETWEEN[pair] for pair in around])


def windings_from_crossings(
    crossings: Iterable[tuple[int, int]], total: int
) -> tuple[int, int, int]:
    """Winding numbers of the three pairs from their sum and the crossings.

    While body k is in the middle, the sides that meet in it point the same way, and the direction
    of the crossing says which is overtaking.  So signed crossings are differences of windings.

    Parameters
    ----------
    crossings : iterable of (int, int)
        Middle bodies and directions over one period; they need not be reduced.
    total : int
        Sum of the three winding numbers, counterclockwise positive.

    Returns
    -------
    tuple of int
        Windings of the pairs 12, 23 and 31.

    Raises
    ------
    BadRequest
        When the crossings are not those of a closed motion, or do not go with the sum.

    Examples
    --------
    >>> windings_from_crossings([(2, 1), (1, -1)], 1)
    (1, 0, 0)
    """
    letters = _closed(crossings)
    second, third = (letters.count(k) - letters.count(k.swapcase()) for k in "yz")
    first_pair, rest = divmod(total + 2 * second + third, 3)
    if rest:
        raise BadRequest(
            f"`total` must leave the remainder {-(2 * second + third) % 3} modulo 3 for these "
            f"crossings, got {total}: count the windings again, or the crossings"
        )
    return first_pair, first_pair - second, first_pair - second - third


def exponent_of_turns(cycle: str) -> int:
    """Exponent sum of the turns themselves, without full twists.

    Parameters
    ----------
    cycle : str
        Turns L and R.

    Returns
    -------
    int
        R less L, as they stand for sigma_1 and for the inverse of sigma_2.

    Examples
    --------
    >>> exponent_of_turns("LLR"), exponent_of_turns("RR")
    (-1, 2)
    """
    return cycle.count("R") - cycle.count("L")


def trace_of_turns(cycle: str) -> int:
    """Trace of the product of the matrices L and R, exact at any size.

    Parameters
    ----------
    cycle : str
        Turns L and R, in any rotation.

    Returns
    -------
    int
        2 when only one letter occurs, or none; 3 or more otherwise.

    Examples
    --------
    >>> trace_of_turns("LRLRLR"), trace_of_turns("LLL")
    (18, 2)
    """
    a, b, c, d = 1, 0, 0, 1
    for letter in cycle:
        if letter == "L":
            a, c = a + b, c + d
        else:
            b, d = a + b, c + d
    return a + d


def cycle_text(cycle: str) -> str:
    """Cyclic word in L and R with what repeats three times or more written as a power.

    Parameters
    ----------
    cycle : str
        Any rotation, which is kept.

    Returns
    -------
    str
        Read back by `read_cycle`; ``()`` for the empty cycle.

    Raises
    ------
    BadRequest
        When `cycle` holds any other character.

    Examples
    --------
    >>> cycle_text("LRLRLR"), cycle_text("LLRRRR"), cycle_text("LLRLLR")
    ('(LR)^3', 'LLR^4', '(LLR)^2')
    """
    check_letters(cycle, "LR", "cycle", "write the turns, as in LRLRLR")
    root, n = primitive_root(cycle)
    if n == 1 or len(root) == 1:
        return _REPEATED.sub(_power_text, cycle) or "()"
    return f"({_REPEATED.sub(_power_text, root)})^{n}"


def read_cycle(text: str, name: str = "text") -> str:
    """Cyclic word from letters L and R, parentheses and powers.

    Parameters
    ----------
    text : str
        Such as ``LLR``, ``LR^3`` (one L, three R) or ``(LR)^3``; blanks do not matter.
    name : str
        Name of the argument that the text was given as, for the message.

    Returns
    -------
    str
        The least rotation.

    Raises
    ------
    BadRequest
        When the text is no such word, or too long when written out.

    Examples
    --------
    >>> read_cycle("(RL)^3"), read_cycle("R (LR^2)^2"), read_cycle("()")
    ('LRLRLR', 'LRRLRRR', '')
    """
    plain = "".join(text.split())
    open_pieces: list[list[str]] = [[]]
    before = ""
    for token in _TOKEN.findall(plain):
        here = open_pieces[-1]
        if token == "(":
            open_pieces.append([])
        elif token == ")" and len(open_pieces) > 1:
            open_pieces.pop()
            open_pieces[-1].append("".join(here))
        elif token in ("L", "R"):
            here.append(token)
        elif len(token) > 1 and before in ("L", "R", ")"):
            here.append(_written_out(here.pop(), token[1:], name))
        else:
            break
        before = token
    else:
        if plain and len(open_pieces) == 1:
            return least_image(["".join(open_pieces[0])], "LR")
    raise BadRequest(
        f"`{name}` must be turns L and R with powers from 1 on, got {shown(text)}: write LLR or "
        "(LR)^3"
    )


def _closed(crossings: Iterable[tuple[int, int]]) -> str:
    """Letters of the crossings of a closed motion, which go down as often as up."""
    letters = crossing_letters(crossings)
    if len(letters) % 2:
        raise BadRequest(
            f"`crossings` must be even in number for a closed motion, got {len(letters)}: follow "
            "it over a whole period"
        )
    return letters


def _power_text(repeated: re.Match[str]) -> str:
    """Power for a piece that repeats."""
    piece = repeated[1]
    base = piece if len(piece) == 1 else f"({piece})"
    return f"{base}^{len(repeated[0]) // len(piece)}"


def _written_out(piece: str, times: str, name: str) -> str:
    """Repeated piece for a power."""
    if len(times) > len(str(_LONGEST_CYCLE)) or len(piece) * int(times) > _LONGEST_CYCLE:
        raise BadRequest(
            f"`{name}` must have at most {_LONGEST_CYCLE} turns when written out, got a power of "
            f"{shown(times)}: write smaller powers"
        )
    return piece * int(times)
