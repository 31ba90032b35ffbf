"""Crossings of the equator of the shape sphere: pairs of numbers, and letters for them."""

from collections.abc import Iterable

from orbitsearch.errors import BadRequest

__all__ = ["arcs_heard", "crossing_letters"]


def crossing_letters(crossings: Iterable[tuple[int, int]]) -> str:
    """Crossings of the equator as letters x, y, z for bodies 1, 2, 3, with inverses X, Y, Z.

    Parameters
    ----------
    crossings : iterable of (int, int)
        Body in the middle (1, 2 or 3) and direction, as in `orbitsearch.words.free_group_word`.

    Returns
    -------
    str
        One letter for each crossing: small for direction 1, capital for direction -1.

    Raises
    ------
    BadRequest
        When a body or a direction is none of these, or when two neighbouring crossings have the
        same direction: between them the curve must have crossed once more, so one was missed, and
        the name of the motion would be wrong without looking so.

    Examples
    --------
    >>> crossing_letters([(3, 1), (1, -1)])
    'zX'
    """
    letters = []
    before = 0
    for place, (middle, direction) in enumerate(crossings, start=1):
        if middle not in (1, 2, 3):
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
        letters.append("xyz"[middle - 1] if direction == 1 else "XYZ"[middle - 1])
    return "".join(letters)


def arcs_heard(silent: int) -> tuple[int, int]:
    """Bodies whose arcs are the letters a and b when one arc is left silent.

    Parameters
    ----------
    silent : int
        Body of the silent arc.

    Returns
    -------
    a, b : int
        The bodies one and two before it, counted around.

    Raises
    ------
    BadRequest
        When `silent` is none of 1, 2 and 3.

    Examples
    --------
    >>> arcs_heard(3), arcs_heard(1), arcs_heard(2)
    ((2, 1), (3, 2), (1, 3))
    """
    if silent not in (1, 2, 3):
        raise BadRequest(
            f"`silent` must be 1, 2 or 3, got {silent!r}: name the body whose crossings the word "
            "leaves out"
        )
    return (silent + 1) % 3 + 1, silent % 3 + 1
