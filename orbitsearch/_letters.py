"""Strings read around a circle: cancelling, trimming and the least rotation, in linear time.

Syzygy sequences run to thousands of letters, so nothing here looks at all rotations.
"""

from collections.abc import Callable

__all__ = ["cancel", "least_rotation", "strip_ends"]


def cancel(text: str, inverse: Callable[[str], str]) -> str:
    """Drop neighbours that are inverse to each other until none are left.

    Parameters
    ----------
    text : str
        Letters of a group.
    inverse : callable
        Takes a letter to its inverse.

    Returns
    -------
    str
        Reduced text; in a free product it does not depend on the order of cancelling.
    """
    kept: list[str] = []
    for letter in text:
        if kept and kept[-1] == inverse(letter):
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
