"""Strings read around a circle: cancelling, trimming, roots and least rotations.

Words, cycles and braids share this, and the check of the letters that come in.  Syzygy sequences
run to thousands of letters, so nothing here looks at all rotations; and searches name thousands of
motions, so the inner loops are those of `str`.
"""

from collections.abc import Callable, Iterable
from operator import eq

from orbitsearch.errors import BadRequest

__all__ = [
    "cancel",
    "check_letters",
    "least_image",
    "least_rotation",
    "primitive_root",
    "shown",
    "strip_ends",
]

_GLANCE = 12
"""Letters by which `least_image` tells beginnings apart before it compares whole strings."""

_SHOWN = 40
"""Letters of a text that a message repeats."""

_FEW = 32
"""So many whole rotations are compared as they stand; more would no longer be linear work."""


def cancel(text: str, inverse: Callable[[str], str]) -> str:
    """Drop neighbours that are inverse to each other until none are left.

    Parameters
    ----------
    text : str
        Letters of a group.
    inverse : callable
        Takes each letter of a string to its inverse, and keeps their order.

    Returns
    -------
    str
        Reduced text; in a free product it does not depend on the order of cancelling.
    """
    if not any(map(eq, text[1:], inverse(text))):
        return text
    kept: list[str] = []
    for letter, opposite in zip(text, inverse(text), strict=True):
        if kept and kept[-1] == opposite:
            kept.pop()
        else:
            kept.append(letter)
    return "".join(kept)


def strip_ends(reduced: str, inverse: Callable[[str], str]) -> str:
    """Drop letters from both ends while the first is the inverse of the last.

    Parameters
    ----------
    reduced : str
        Text without inverse neighbours.
    inverse : callable
        Takes a letter to its inverse.

    Returns
    -------
    str
        Text without inverse neighbours around its end either.  A single letter stays, also one
        that is its own inverse.
    """
    begin, end = 0, len(reduced)
    while end - begin >= 2 and reduced[begin] == inverse(reduced[end - 1]):
        begin, end = begin + 1, end - 1
    return reduced[begin:end]


def primitive_root(text: str) -> tuple[str, int]:
    """Shortest string that `text` repeats, and how often.

    Parameters
    ----------
    text : str
        Any string.

    Returns
    -------
    root : str
        As short as possible; empty when `text` is.
    n : int
        ``root * n == text``; 1 for the empty string.

    Examples
    --------
    >>> primitive_root("abab"), primitive_root("aba"), primitive_root("")
    (('ab', 2), ('aba', 1), ('', 1))
    """
    if not text:
        return "", 1
    # A string stands inside its own double, ends aside, exactly where a period of it begins.
    period = (text + text).find(text, 1)
    return text[:period], len(text) // period


def least_rotation(text: str) -> str:
    """Least of all rotations of a string in linear time.

    Two first places race: when they differ after `same` equal characters, none of the places
    passed by the loser can begin the least rotation, so it jumps beyond them.

    Parameters
    ----------
    text : str
        Any string, compared by code points.

    Returns
    -------
    str
        As long as `text`.

    Examples
    --------
    >>> least_rotation("cabcab")
    'abcabc'
    """
    length, twice = len(text), text + text
    first, rival, same = 0, 1, 0
    while rival < length and first < length and same < length:
        left, right = twice[first + same], twice[rival + same]
        if left == right:
            same += 1
            continue
        if left > right:
            first += same + 1
        else:
            rival += same + 1
        if first == rival:
            rival += 1
        same = 0
    begin = min(first, rival)
    return twice[begin : begin + length]


def least_image(images: Iterable[str], alphabet: str) -> str:
    """Least among all rotations of a few strings of one length, in linear time.

    Most images are out after a few letters, and most places of the others: the first letters of
    the least rotation are found by searching for each continuation in turn.  What is left, mostly
    one rotation for each symmetry of the motion, is compared outright, or by `least_rotation` when
    the strings repeat themselves too often for that.

    Parameters
    ----------
    images : iterable of str
        One or more strings of equal length.
    alphabet : str
        All letters that occur, in the order of their code points.

    Returns
    -------
    str
        As long as each image.

    Examples
    --------
    >>> least_image(["baa", "bba"], "ab")
    'aab'
    """
    left = set(images)
    length = len(next(iter(left)))
    glance = min(_GLANCE, length)
    around = [text + text[: glance - 1] for text in left]
    prefix = ""
    for _ in range(glance):
        for letter in alphabet:
            longer = prefix + letter
            found = [text for text in around if longer in text]
            if found:
                prefix, around = longer, found
                break
    beginnings = [(text, place) for text in around for place in _places(prefix, text)]
    if len(beginnings) > _FEW:
        roots = [primitive_root(text[:length]) for text in around]
        return min(least_rotation(root) * n for root, n in roots)
    return min(text[place:length] + text[:place] for text, place in beginnings)


def _places(part: str, text: str) -> list[int]:
    """Places where `part` begins in `text`, at most a few more than `_FEW`."""
    found: list[int] = []
    place = text.find(part)
    while place >= 0 and len(found) <= _FEW:
        found.append(place)
        place = text.find(part, place + 1)
    return found


def shown(text: str) -> str:
    """A text for a message: in quotes, and cut short when it is long.

    Examples
    --------
    >>> shown("LRX"), shown("L" * 100)
    ("'LRX'", "'LLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLL...'")
    """
    return repr(text if len(text) <= _SHOWN else f"{text[:_SHOWN]}...")


def check_letters(text: str, alphabet: str, name: str, advice: str) -> None:
    """Refuse a text at its first character that is no letter of the alphabet.

    Parameters
    ----------
    text, alphabet : str
        What was given, and all letters it may use.
    name : str
        Name of the argument, for the message.
    advice : str
        What to write instead, for the message.

    Raises
    ------
    BadRequest
        Naming the character and its place, counted from 1.
    """
    if not isinstance(text, str):
        raise BadRequest(f"`{name}` must be a string, got {text!r}: {advice}")
    if set(text).issubset(alphabet):
        return
    place, letter = next((i, c) for i, c in enumerate(text, start=1) if c not in alphabet)
    raise BadRequest(
        f"`{name}` must use only the letters {', '.join(alphabet)}, got {letter!r} at "
        f"place {place}: {advice}"
    )
