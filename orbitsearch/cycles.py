"""Syzygy cycles: the bodies seen in the middle along one period of a closed motion.

Three bodies come into line again and again (a *syzygy*), with one of them in the middle.  The
middle bodies in order of time, read around the period, are a string over ``1``, ``2``, ``3``.  Two
equal neighbours cancel: the curve on the shape sphere went through an arc of the equator and came
back, which a small change of the motion undoes.

The side of the equator changes with every crossing.  So the cycle of a closed motion has even
length and *every other* crossing goes down: the cycle names the motion up to its mirror image, and
123 run round twice is one motion, not the double of another.  In the language of groups, motions
are the even products of three reflections, one for each arc.  A word of `orbitsearch.words` is the
same curve with directions written down and one arc silent, hence

* a word becomes a cycle when the silent arc is put in wherever two neighbouring letters have the
  same direction;
* a cycle becomes a word, up to the mirror image, when its letters go down and up in turn.

Rotations, the six relabellings, reversal and the mirror image change the name of a motion only;
`canonical_cycle` is the least name.
"""

from functools import cache
from itertools import permutations, product

from orbitsearch._crossings import arcs_heard
from orbitsearch._letters import (
    cancel,
    check_letters,
    least_image,
    primitive_root,
    strip_ends,
)
from orbitsearch.errors import BadRequest
from orbitsearch.words import canonical_word, cyclically_reduce

__all__ = [
    "canonical_cycle",
    "cycle_of_word",
    "reduce_cycle",
    "root_and_power",
    "shortest_word",
    "word_of_cycle",
]

_RELABELLINGS = tuple(str.maketrans("123", "".join(p)) for p in permutations("123"))


def reduce_cycle(cycle: str) -> str:
    """Cancel equal neighbours of a syzygy cycle, also around its end.

    Parameters
    ----------
    cycle : str
        Middle bodies ``1``, ``2``, ``3`` along one period.

    Returns
    -------
    str
        Cyclically reduced word of Z2 * Z2 * Z2 (each body its own inverse).

    Raises
    ------
    BadRequest
        When `cycle` holds any other character.

    Examples
    --------
    >>> reduce_cycle("2133123212")
    '3212'
    """
    check_letters(cycle, "123", "cycle", "write the middle bodies, as in 123123")
    return strip_ends(cancel(cycle, str), str)


def canonical_cycle(cycle: str) -> str:
    """Name shared by all syzygy cycles of one motion: the least one.

    Parameters
    ----------
    cycle : str
        Middle bodies ``1``, ``2``, ``3`` along one period.

    Returns
    -------
    str
        The least string over rotations of the reduced cycle, the six relabellings and reversal.

    Raises
    ------
    BadRequest
        When `cycle` holds any other character.

    Examples
    --------
    >>> canonical_cycle("312312"), canonical_cycle("3221")
    ('123123', '12')
    """
    return _least(reduce_cycle(cycle))


def cycle_of_word(word: str, silent: int = 3) -> str:
    """Canonical cycle of the motion that a free-group word names.

    Parameters
    ----------
    word : str
        Letters ``a``, ``b`` and their inverses ``A``, ``B``.
    silent : int
        Body whose arc the author of the word left silent.  The result does not depend on it, as
        the arcs are relabelled in any case.

    Returns
    -------
    str
        Of even length.

    Raises
    ------
    BadRequest
        When `word` holds any other character, or `silent` is no body.

    Examples
    --------
    >>> cycle_of_word("abAB"), cycle_of_word("a"), cycle_of_word("aBaB")
    ('123123', '12', '1212')
    """
    steps = _steps(silent)
    reduced = cyclically_reduce(word)
    around = zip(reduced, reduced[1:] + reduced[:1], strict=True)
    return _least("".join([steps[pair] for pair in around]))


def word_of_cycle(cycle: str, silent: int = 3) -> str:
    """Canonical word of a closed motion with a given syzygy cycle.

    Parameters
    ----------
    cycle : str
        Middle bodies ``1``, ``2``, ``3`` along one period; an even number of them.
    silent : int
        Body whose arc has no letter.

    Returns
    -------
    str
        The two mirror images that share the cycle share this name.

    Raises
    ------
    BadRequest
        When `cycle` holds any other character or an odd number of bodies, or `silent` is no body.

    Examples
    --------
    >>> word_of_cycle("123123"), word_of_cycle("1213"), word_of_cycle("1213", silent=1)
    ('abAB', 'aaB', 'ab')
    """
    a, b = arcs_heard(silent)
    names = {str(a): "a", str(b): "b", str(silent): ""}
    reduced = _closed(cycle)
    return canonical_word(
        "".join(
            names[down] + names[up].swapcase()
            for down, up in zip(reduced[::2], reduced[1::2], strict=True)
        )
    )


def shortest_word(cycle: str) -> str:
    """Shortest canonical word of a motion over the three choices of the silent arc.

    Parameters
    ----------
    cycle : str
        Middle bodies ``1``, ``2``, ``3`` along one period; an even number of them.

    Returns
    -------
    str
        Among words of equal length the least one, with a < b < A < B.  All relabellings of the
        cycle have the same.

    Raises
    ------
    BadRequest
        When `cycle` holds any other character or an odd number of bodies.

    Examples
    --------
    >>> shortest_word("123123"), shortest_word("1213"), shortest_word("2321")
    ('abAB', 'ab', 'ab')
    """
    every = [word_of_cycle(cycle, silent) for silent in (1, 2, 3)]
    # Capitals come first in ASCII, hence the swap.
    return min(every, key=lambda word: (len(word), word.swapcase()))


def root_and_power(cycle: str) -> tuple[str, int]:
    """The closed motion that a cycle runs round more than once, and how often it does.

    Parameters
    ----------
    cycle : str
        Middle bodies ``1``, ``2``, ``3`` along one period; an even number of them.

    Returns
    -------
    root : str
        Canonical cycle of the motion run round once; its length is even.
    n : int
        ``canonical_cycle(cycle) == root * n``.  The empty cycle has the root ``""`` and n = 1.

    Raises
    ------
    BadRequest
        When `cycle` holds any other character or an odd number of bodies.

    Examples
    --------
    The figure-eight is no double: after 123 the same bodies come with the other direction.

    >>> root_and_power("123123"), root_and_power("12131213")
    (('123123', 1), ('1213', 2))
    """
    root, n = primitive_root(_least(_closed(cycle)))
    return (root, n) if len(root) % 2 == 0 else (root + root, n // 2)


def _least(reduced: str) -> str:
    """Least image of a reduced cycle."""
    return least_image(
        (
            turned.translate(labels)
            for turned, labels in product((reduced, reduced[::-1]), _RELABELLINGS)
        ),
        "123",
    )


def _closed(cycle: str) -> str:
    """Reduced cycle of a closed motion, which has as many crossings down as up."""
    reduced = reduce_cycle(cycle)
    if len(cycle) % 2:
        raise BadRequest(
            f"`cycle` must have even length for a closed motion, got {len(cycle)} bodies: read a "
            "whole period, in which the side of the equator returns"
        )
    return reduced


@cache
def _steps(silent: int) -> dict[tuple[str, str], str]:
    """Arcs crossed from a letter up to the next: its own, then the silent one where needed."""
    a, b = arcs_heard(silent)
    arc = {"a": a, "A": a, "b": b, "B": b}
    return {
        (one, two): f"{arc[one]}{silent}" if one.islower() == two.islower() else f"{arc[one]}"
        for one, two in product("abAB", repeat=2)
    }
