"""Words of closed motions in the free group on a and b.

A closed motion of three bodies that never meet is a closed curve on the shape sphere without its
three collision points.  The equator (three bodies in line) falls into three arcs named after the
body in the middle.  The arcs that the curve crosses, each with the direction of the crossing, and
the arc of one body left silent, give a word of the free group on a and b, the *free-group word*.
Words are plain strings: ``A`` is the inverse of ``a`` and ``B`` that of ``b``.  The arcs alone,
without directions, are the subject of `orbitsearch.cycles`.

Which words name the same motion
--------------------------------
Twice the signed area D = (r2 - r1) x (r3 - r1) orients a crossing.  With the arc of body 3 silent,
body 2 in the middle while D goes from + to - is a, body 1 is b, and from - to + are the inverses;
with another arc silent the bodies move up around, and D stays as it is.  Then

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

Relabellings that move the silent body are *not* folded in: they change which arc is silent, hence
the length of the word, and a word would no longer look like the published one.  A cycle has no
silent arc, and `orbitsearch.cycles.cycle_of_word` finds it whatever arc an author left out.
"""

from collections.abc import Iterable, Iterator

from orbitsearch._crossings import arcs_heard, crossing_letters
from orbitsearch._letters import (
    cancel,
    check_letters,
    least_image,
    primitive_root,
    strip_ends,
)

__all__ = [
    "canonical_word",
    "contains",
    "cyclically_reduce",
    "free_group_word",
    "invert",
    "reduce_word",
    "root_and_power",
]

_EXCHANGE = str.maketrans("abAB", "baBA")


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
    check_letters(word, "abAB", "word", "write a, b and their inverses A, B, as in abAB")
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
    check_letters(word, "abAB", "word", "write a, b and their inverses A, B, as in abAB")
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
    # In ASCII capitals come first, so letters with their case swapped sort as a < b < A < B; the
    # variants as a whole do not change under that swap.
    return least_image(_variants(reduced), "ABab").swapcase()


def free_group_word(crossings: Iterable[tuple[int, int]], silent: int = 3) -> str:
    """Freely reduced word of a motion from its crossings of the equator, in order of time.

    Parameters
    ----------
    crossings : iterable of (int, int)
        Body in the middle (1, 2 or 3) and direction: +1 when twice the signed area
        (r2 - r1) x (r3 - r1) goes from + to -, and -1 when it goes from - to +.
    silent : int
        Body whose arc has no letter.

    Returns
    -------
    str
        Letters ``a`` and ``b`` for the bodies one and two before the silent one, counted around
        (bodies 2 and 1 when 3 is silent), inverses for direction -1.

    Raises
    ------
    BadRequest
        When a body or a direction is none of these, or when two neighbouring crossings have the
        same direction: between them the curve must have crossed once more, so one was missed, and
        the word would be wrong without looking so.

    Examples
    --------
    >>> eight = [(3, 1), (1, -1), (2, 1), (3, -1), (1, 1), (2, -1)]
    >>> free_group_word(eight), free_group_word(eight, silent=1)
    ('BabA', 'abAB')
    """
    a, b = arcs_heard(silent)
    letters = crossing_letters(crossings)
    names = dict.fromkeys("xyzXYZ", "")
    for body, letter in ((a, "a"), (b, "b")):
        names["xyz"[body - 1]] = letter
        names["XYZ"[body - 1]] = letter.swapcase()
    return cancel("".join([names[letter] for letter in letters]), str.swapcase)


def root_and_power(word: str) -> tuple[str, int]:
    """The motion that a word runs round more than once, and how often it does.

    Parameters
    ----------
    word : str
        Letters ``a``, ``b``, ``A``, ``B``.

    Returns
    -------
    root : str
        Canonical word of the motion run round once; it is no proper power itself.
    n : int
        The motion of `word` is n turns of `root`: ``canonical_word(word) == root * n``.  The
        trivial word has the root ``""`` and n = 1.

    Raises
    ------
    BadRequest
        When `word` holds any other character.

    Examples
    --------
    >>> root_and_power("BabABabA"), root_and_power("abAB"), root_and_power("aA")
    (('abAB', 2), ('abAB', 1), ('', 1))
    """
    # In a free group a cyclically reduced word is a power exactly when its letters repeat, and the
    # least of all images repeats the least of the images of the root.
    return primitive_root(canonical_word(word))


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
