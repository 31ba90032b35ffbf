"""Artin words against matrices, and their classes against conjugation by brute force."""

from collections.abc import Iterable
from functools import cache, reduce
from itertools import product

import pytest
from hypothesis import given
from hypothesis import strategies as st
from sympy import Matrix  # type: ignore[import-untyped]
from sympy.combinatorics import Permutation  # type: ignore[import-untyped]

from orbitsearch.artin import exponent_of_artin, matrix, read_artin, same_braid, turns_of_artin
from orbitsearch.braids import Braid
from orbitsearch.errors import BadRequest

GENERATORS = (1, -1, 2, -2)
artin = st.lists(st.sampled_from(GENERATORS), max_size=30)
SIGMA = {1: Matrix([[1, 1], [0, 1]]), 2: Matrix([[1, 0], [-1, 1]])}
SIGMA |= {-i: m.inv() for i, m in SIGMA.items()}


def backwards(word: Iterable[int]) -> list[int]:
    """Inverse of an Artin word."""
    return [-letter for letter in reversed(list(word))]


def sign_sum(word: Iterable[int]) -> int:
    """Exponent sum of an Artin word."""
    return sum(1 if letter > 0 else -1 for letter in word)


# --- the group ------------------------------------------------------------------------------------


@given(artin)
def test_the_matrix_of_a_word_agrees_with_sympy(word: list[int]) -> None:
    expected = reduce(lambda m, letter: m * SIGMA[letter], word, Matrix.eye(2))
    assert matrix(word) == tuple(expected)


@given(artin, artin)
def test_the_defining_relation_may_be_used_anywhere(left: list[int], right: list[int]) -> None:
    one, other = [*left, 1, 2, 1, *right], [*left, 2, 1, 2, *right]
    assert same_braid(one, other)
    assert Braid.from_artin(one) == Braid.from_artin(other)


@given(artin)
def test_the_full_twist_commutes_with_everything(word: list[int]) -> None:
    twist = [1, 2] * 3
    assert same_braid([*word, *twist], [*twist, *word])
    assert same_braid(twist, [1, 2, 1, 1, 2, 1])


def test_braids_with_one_matrix_may_differ_by_twists() -> None:
    assert matrix([1, 2] * 6) == matrix([])
    assert not same_braid([1, 2] * 6, [])
    assert not same_braid([1, 2], [2, 1])
    assert not same_braid([1], [1, 1])


@given(artin, artin)
def test_conjugates_are_equal(word: list[int], by: list[int]) -> None:
    assert Braid.from_artin([*by, *word, *backwards(by)]) == Braid.from_artin(word)


# Two permutations that satisfy the defining relation, hence a finite image of the group.  It tells
# the chiral words of six turns apart, whose matrices are conjugate modulo every small number.
PERMUTATIONS = {1: (0, 2, 4, 5, 3, 6, 1), 2: (2, 6, 5, 0, 4, 1, 3)}

Element = tuple[tuple[int, int, int, int], int]  # matrix in SL(2, Z) and exponent sum
ONE: Element = ((1, 0, 0, 1), 0)
PLAIN = {i: tuple(int(x) for x in SIGMA[i]) for i in GENERATORS}


def times(m: tuple[int, ...], n: tuple[int, ...]) -> tuple[int, int, int, int]:
    """Product of two matrices of two rows."""
    (a, b, c, d), (p, q, r, s) = m, n
    return a * p + b * r, a * q + b * s, c * p + d * r, c * q + d * s


def conjugated(m: tuple[int, ...], by: tuple[int, ...]) -> tuple[int, int, int, int]:
    """Matrix conjugated by another one of determinant 1."""
    a, b, c, d = by
    return times(times(by, m), (d, -b, -c, a))


def ball(radius: int) -> dict[Element, tuple[int, ...]]:
    """All elements with words of some length at most, each with a shortest word."""
    known: dict[Element, tuple[int, ...]] = {ONE: ()}
    layer = dict(known)
    for _ in range(radius):
        grown = {}
        for (m, exponent), word in layer.items():
            for letter in GENERATORS:
                new = times(m, PLAIN[letter]), exponent + sign_sum([letter])
                if new not in known:
                    known[new] = grown[new] = (*word, letter)
        layer = grown
    return known


def seen_to_be_conjugate(
    elements: dict[Element, tuple[int, ...]], reach: int
) -> dict[Element, int]:
    """Number of a class for each element, by conjugation with all short elements."""
    parent = {element: element for element in elements}

    def find(element: Element) -> Element:
        while parent[element] != element:
            element = parent[element]
        return element

    for by, _ in ball(reach):
        for m, exponent in elements:
            other = conjugated(m, by), exponent
            if other in parent:
                parent[find(other)] = find((m, exponent))
    numbers = {head: i for i, head in enumerate(sorted({find(e) for e in elements}))}
    return {element: numbers[find(element)] for element in elements}


@cache
def classes_modulo(n: int) -> dict[tuple[int, ...], int]:
    """Number of the conjugacy class of each element of SL(2, Z/n)."""
    group = [m for m in product(range(n), repeat=4) if (m[0] * m[3] - m[1] * m[2]) % n == 1]
    numbers: dict[tuple[int, ...], int] = {}
    for i, m in enumerate(group):
        if m not in numbers:
            for by in group:
                numbers[tuple(x % n for x in conjugated(m, by))] = i
    return numbers


def seen_to_differ(element: Element, word: tuple[int, ...]) -> tuple[object, ...]:
    """What conjugate elements have in common: sums, traces, classes of finite images."""
    m, exponent = element
    permuted = reduce(
        lambda p, letter: p * Permutation(PERMUTATIONS[abs(letter)]) ** sign_sum([letter]),
        word,
        Permutation(6),
    )
    modulo = [classes_modulo(n)[tuple(x % n for x in m)] for n in (2, 3, 4)]
    return exponent, m[0] + m[3], *modulo, tuple(sorted(permuted.cycle_structure.items()))


def test_the_permutations_satisfy_the_relation() -> None:
    one, two = (Permutation(PERMUTATIONS[i]) for i in (1, 2))
    assert one * two * one == two * one * two
    assert one * two != two * one


def test_all_short_braids_are_equal_exactly_when_conjugate() -> None:
    # Found conjugate by trying, or found different by an invariant: together these two decide
    # every pair of the 577 braids with words of six letters and less, and neither knows of L and R.
    elements = ball(6)
    assert len(elements) == 577
    merged = seen_to_be_conjugate(elements, reach=3)
    apart = {element: seen_to_differ(element, word) for element, word in elements.items()}
    found = {element: Braid.from_artin(word) for element, word in elements.items()}
    assert len(set(merged.values())) == len(set(apart.values())) == len(set(found.values()))
    assert len(set(merged.values())) == len({(merged[e], apart[e], found[e]) for e in elements})


def test_equal_matrices_and_sums_mean_equal_braids() -> None:
    # Two words of one element have one class; here all words of five letters and less.
    classes: dict[Element, set[Braid]] = {}
    for n in range(6):
        for word in product(GENERATORS, repeat=n):
            classes.setdefault((matrix(word), sign_sum(word)), set()).add(Braid.from_artin(word))
    assert len(classes) == len(ball(5)) == 263
    assert all(len(found) == 1 for found in classes.values())


# --- letters, sums and turns ----------------------------------------------------------------------


@given(artin)
def test_a_written_word_is_read_back(word: list[int]) -> None:
    assert read_artin(" ".join(map(str, word))) == word


@given(artin, artin)
def test_exponent_sums_add_up(one: list[int], other: list[int]) -> None:
    assert exponent_of_artin([*one, *other]) == sign_sum(one) + sign_sum(other)


@given(st.text("LR", max_size=30))
def test_turns_are_found_in_the_word_they_stand_for(turns: str) -> None:
    found = turns_of_artin([1 if letter == "R" else -2 for letter in turns])
    if {"L", "R"} <= set(turns):
        assert len(found) == len(turns)
        assert found in turns + turns
    else:
        assert found == turns


# --- bad input ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "call",
    [
        Braid.from_artin,
        matrix,
        lambda w: same_braid([], w),
        exponent_of_artin,
        turns_of_artin,
        lambda w: read_artin(" ".join(map(str, w)), "letters"),
    ],
)
@pytest.mark.parametrize("letter", [0, 3, -3])
def test_other_numbers_of_strands_are_refused(call: object, letter: int) -> None:
    message = (
        rf"`letters` must be 1, -1, 2 or -2 for three strands, got {letter} at place 2: write i"
    )
    with pytest.raises(BadRequest, match=message):
        call([1, letter])  # type: ignore[operator]


def test_an_artin_word_has_numbers() -> None:
    with pytest.raises(BadRequest, match=r"`text` must be whole numbers .* got 'b' at place 2: w"):
        read_artin("1 b")
