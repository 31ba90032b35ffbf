"""Words of closed motions: free-group words in a, b and cycles of the bodies seen in the middle.

A closed motion of three bodies that never meet is a closed curve on the shape sphere without its
three collision points.  The equator (three bodies in line) falls into three arcs named after the
body in the middle.  Written down as the curve crosses them, the arcs alone give the *syzygy cycle*;
with the direction of each crossing, and the arc of body 3 left silent, they give a word of the free
group on a and b, the *free-group word*.  Words are plain strings: ``A`` is the inverse of ``a`` and
``B`` that of ``b``; cycles are strings over ``1``, ``2``, ``3``.

Which words name the same motion
--------------------------------
Twice the signed area D = (r2 - r1) x (r3 - r1) orients a crossing: body 2 in the middle while D
goes from + to - is a, body 1 is b, and from - to + are the inverses.  Then

* another first moment on the curve rotates the cyclically reduced word (conjugation);
* running backwards reverses the order *and* turns every crossing: the inverse word;
* the mirror image turns the sign of D and keeps the order: a -> A, b -> B;
* exchanging the labels 1 and 2 exchanges the arcs *and* turns the sign of D: a -> B, b -> A.

The last three commute and square to one, so they generate a group of eight: inversion, the mirror
a -> A, b -> B, and (mirror after relabelling) the exchange a <-> b, with all products.
`canonical_word` folds in exactly these eight and rotation.  Published lists fold in conjugation,
inversion and exchange only.  On orbits from a collinear start both agree: such a start is fixed by
point reflection, exchange of 1 and 2, and reversal, so its word read backwards with a and b
exchanged is conjugate to itself, which makes the mirror the product of inversion and exchange.

Relabellings that move body 3 are *not* folded in: they change which arc is silent, hence the length
of the word, and a word would no longer look like the published one.  The syzygy cycle carries no
directions, so `canonical_cycle` folds in all six relabellings, and the mirror image for free.
"""

from collections.abc import Iterable, Iterator
from itertools import permutations, product

from orbitsearch._letters import cancel, least_rotation, strip_ends
from orbitsearch.errors import BadRequest

__all__ = [
    "canonical_cycle",
    "canonical_word",
    "contains",
    "cyclically_reduce",
    "free_group_word",
    "invert",
    "reduce_cycle",
    "reduce_word",
]

_EXCHANGE = str.maketrans("abAB", "baBA")
_LETTER_OF_MIDDLE = {1: "b", 2: "a", 3: ""}
_RELABELLINGS = tuple(str.maketrans("123", "".join(p)) for p in permutations("123"))


def reduce_word(word: str) -> str:
    """Cancel neighbouring inverse letters until none are left.

    Parameters
    ----------
    word : str
        Letters ``a``, ``b`` and their inverses ``A``, ``B``.

    Returns
    -------
    str
        The only freely reduced word of the same group element.

    Raises
    ------
    BadRequest
        When `word` holds any other character.

    Examples
    --------
    >>> reduce_word("abBA"), reduce_word("abAAb")
    ('', 'abAAb')
    """
    _check(word, "abAB", "word", "write a, b and their inverses A, B, as in abAB")
    return cancel(word, str.swapcase)


def cyclically_reduce(word: str) -> str:
    """Reduce also around the end, as fits a loop without a marked beginning.

    Parameters
    ----------
    word : str
        Letters ``a``, ``b``, ``A``, ``B``.

    Returns
    -------
    str
        A shortest word of the conjugacy class; its rotations are the other ones.

    Raises
    ------
    BadRequest
        When `word` holds any other character.

    Examples
    --------
    >>> cyclically_reduce("BabAb")
    'b'
    """
    return strip_ends(reduce_word(word), str.swapcase)


def invert(word: str) -> str:
    """Word of the inverse: the order reversed and every letter inverted.

    Parameters
    ----------
    word : str
        Letters ``a``, ``b``, ``A``, ``B``; need not be reduced.

    Returns
    -------
    str
        As long as `word`.

    Raises
    ------
    BadRequest
        When `word` holds any other character.

    Examples
    --------
    >>> invert("abA")
    'aBA'
    """
    _check(word, "abAB", "word", "write a, b and their inverses A, B, as in abAB")
    return word[::-1].swapcase()


def canonical_word(word: str) -> str:
    """Name shared by all words of one motion: the least one, with a < b < A < B.

    Parameters
    ----------
    word : str
        Letters ``a``, ``b``, ``A``, ``B``.

    Returns
    -------
    str
        The least word over rotations of the cyclically reduced word, inversion, mirror image and
        exchange of a and b (see the head of this module for why these and no others).

    Raises
    ------
    BadRequest
        When `word` holds any other character.

    Examples
    --------
    >>> canonical_word("BAba"), canonical_word("aBBA")
    ('abAB', 'aa')
    """
    reduced = cyclically_reduce(word)
    # In ASCII capitals come first, so letters with their case swapped sort as a < b < A < B.
    return min(least_rotation(w.swapcase()) for w in _variants(reduced)).swapcase()


def free_group_word(crossings: Iterable[tuple[int, int]]) -> str:
    """Freely reduced word of a motion from its crossings of the equator, in order of time.

    Parameters
    ----------
    crossings : iterable of (int, int)
        Body in the middle (1, 2 or 3) and direction: +1 when twice the signed area
        (r2 - r1) x (r3 - r1) goes from + to -, and -1 when it goes from - to +.

    Returns
    -------
    str
        Letters ``a`` (body 2), ``b`` (body 1), inverses for direction -1, nothing for body 3.

    Raises
    ------
    BadRequest
        When a body or a direction is none of these, or when two neighbouring crossings have the
        same direction: between them the curve must have crossed once more, so one was missed, and
        the word would be wrong without looking so.

    Examples
    --------
    >>> free_group_word([(3, 1), (1, -1), (2, 1), (3, -1), (1, 1), (2, -1)])
    'BabA'
    """
    letters = []
    before = 0
    for place, (middle, direction) in enumerate(crossings, start=1):
        if middle not in _LETTER_OF_MIDDLE:
            raise BadRequest(
                f"`crossings` must name the middle body as 1, 2 or 3, got {middle!r} at crossing "
                f"{place}: number the bodies from 1"
            )
        if direction not in (1, -1):
            raise BadRequest(
                f"`crossings` must have direction 1 or -1, got {direction!r} at crossing {place}: "
                "use 1 where the signed area goes from + to -"
            )
        if direction == before:
            raise BadRequest(
                f"`crossings` must alternate in direction, got {direction} twice at crossing "
                f"{place}: one in between was missed, follow the motion with smaller steps"
            )
        before = direction
        letter = _LETTER_OF_MIDDLE[middle]
        letters.append(letter if direction == 1 else letter.swapcase())
    return cancel("".join(letters), str.swapcase)


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
    _check(cycle, "123", "cycle", "write the middle bodies, as in 123123")
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
    reduced = reduce_cycle(cycle)
    return min(
        least_rotation(turned.translate(labels))
        for turned, labels in product((reduced, reduced[::-1]), _RELABELLINGS)
    )


def contains(word: str, part: str) -> bool:
    """Whether a motion runs through `part` somewhere on its way round.

    Parameters
    ----------
    word, part : str
        Letters ``a``, ``b``, ``A``, ``B``.

    Returns
    -------
    bool
        True when `part`, freely reduced, stands in the cyclically reduced `word` read once round
        from any letter, or does so after the operations that `canonical_word` folds in.

    Raises
    ------
    BadRequest
        When either holds any other character.

    Examples
    --------
    >>> contains("abAB", "Ba"), contains("abAB", "aa"), contains("ab", "abab")
    (True, False, False)
    """
    reduced, wanted = cyclically_reduce(word), reduce_word(part)
    if len(wanted) > len(reduced):
        return False
    around = reduced + reduced
    return any(variant in around for variant in _variants(wanted))


def _variants(word: str) -> Iterator[str]:
    """The eight words that inversion, mirror image and exchange make of one."""
    for turned in (word, word[::-1]):  # reversal alone is inversion after the mirror
        for mirrored in (turned, turned.swapcase()):
            yield mirrored
            yield mirrored.translate(_EXCHANGE)


def _check(text: str, alphabet: str, name: str, advice: str) -> None:
    """Raise BadRequest at the first character that is no letter of the alphabet."""
    for place, letter in enumerate(text, start=1):
        if letter not in alphabet:
            raise BadRequest(
                f"`{name}` must use only the letters {', '.join(alphabet)}, got {letter!r} at "
                f"place {place}: {advice}"
            )
