"""Whole numbers and quadratic surds in full, as text."""

import math
from decimal import Decimal

__all__ = ["digits", "eigenvalue_text"]

_LARGEST_TO_FACTOR = 10**8
"""Traces up to this are searched for square factors, in at most 10^4 divisions."""


def eigenvalue_text(trace: int) -> str:
    """Larger eigenvalue (t + √(t² - 4))/2 of a matrix with determinant 1 and trace t > 2."""
    if trace > _LARGEST_TO_FACTOR:
        whole = digits(trace)
        return f"({whole} + √({whole}^2 - 4))/2"
    (one, below), (two, above) = _square_part(trace - 2), _square_part(trace + 2)
    shared = math.gcd(below, above)
    factor, under = one * two * shared, (below // shared) * (above // shared)
    halves = trace % 2
    if not halves:
        trace, factor = trace // 2, factor // 2
    text = f"{trace} + {'' if factor == 1 else factor}√{under}"
    return f"({text})/2" if halves else text


def _square_part(number: int) -> tuple[int, int]:
    """Largest factor whose square divides a number, and what is left of the number then."""
    factor, by = 1, 2
    while by * by <= number:
        while number % (by * by) == 0:
            number //= by * by
            factor *= by
        by += 1
    return factor, number


def digits(number: int) -> str:
    """All digits of an integer."""
    # Decimal writes integers of any length; str stops at 4300 digits.
    return f"{Decimal(number):f}"
