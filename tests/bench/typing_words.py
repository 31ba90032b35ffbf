"""How fast the type of a word is found: word, cycle and braid in canonical form."""

import random

from sympy.combinatorics.free_groups import free_group

from orbitsearch.braids import Braid
from orbitsearch.cycles import cycle_of_word
from orbitsearch.turns import turns_from_crossings
from orbitsearch.words import canonical_word, cyclically_reduce
from tests.bench.measure import Contestant, Section

__all__ = ["sections"]

_random = random.Random(20)
WORDS = ["".join(_random.choices("abAB", k=_random.randint(1, 200))) for _ in range(1000)]


def ours() -> float:
    """All three canonical forms of each word."""
    for word in WORDS:
        canonical_word(word)
        cycle = cycle_of_word(word)
        turns = turns_from_crossings([(int(k), 1 - 2 * (n % 2)) for n, k in enumerate(cycle)])
        Braid(turns, turns.count("R") - turns.count("L")).canonical()
    return len(WORDS)


def all_rotations() -> float:
    """The canonical word alone, by looking at every rotation of every variant."""
    for word in WORDS[:100]:
        reduced = cyclically_reduce(word).swapcase()
        min(
            (turned[k:] + turned[:k]).translate(exchange)
            for turned in (reduced, reduced[::-1], reduced.swapcase(), reduced[::-1].swapcase())
            for exchange in ({}, str.maketrans("abAB", "baBA"))
            for k in range(max(len(turned), 1))
        )
    return 100


def by_sympy() -> float:
    """Cyclic reduction alone, in sympy's free group."""
    group, a, b = free_group("a, b")
    letters = {"a": a, "b": b, "A": a**-1, "B": b**-1}
    for word in WORDS[:20]:
        element = group.identity
        for letter in word:
            element = element * letters[letter]
        element.identity_cyclic_reduction()
    return 20


def sections() -> list[Section]:
    """Tables of this group."""
    return [
        Section(
            "types of random words of up to 200 letters",
            "word",
            [
                Contestant("word, cycle and braid", ours),
                Contestant("word alone, by all rotations", all_rotations),
                Contestant("cyclic reduction alone, sympy", by_sympy),
            ],
        )
    ]
