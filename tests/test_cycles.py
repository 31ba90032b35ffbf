"""Cycles against reflections of the hyperbolic plane, against words, and against brute force."""

from itertools import pairwise, permutations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from test_words import PUBLISHED

from orbitsearch import words
from orbitsearch._letters import least_image, least_rotation, primitive_root
from orbitsearch.cycles import (
    canonical_cycle,
    cycle_of_word,
    reduce_cycle,
    root_and_power,
    shortest_word,
    word_of_cycle,
)
from orbitsearch.errors import BadRequest
from orbitsearch.words import canonical_word, free_group_word

BODIES = (1, 2, 3)
cycles = st.text("123", max_size=40)
closed = cycles.filter(lambda cycle: len(cycle) % 2 == 0)
letters = st.text("abAB", max_size=30)
arcs = st.sampled_from(BODIES)


# --- cycles -------------------------------------------------------------------------------------


@given(cycles)
def test_cycles_reduce_to_no_equal_neighbours(cycle: str) -> None:
    reduced = reduce_cycle(cycle)
    assert (len(cycle) - len(reduced)) % 2 == 0
    assert len(reduced) < 2 or all(one != two for one, two in pairwise(reduced + reduced[0]))


@given(cycles)
def test_cycles_reduce_as_products_of_reflections(cycle: str) -> None:
    # Z2 * Z2 * Z2 acts on the hyperbolic plane by reflections in the sides of an ideal triangle,
    # faithfully; conjugate elements have equal traces, here in exact integers.
    reflections = {
        "1": np.array([[1, 0], [0, -1]], dtype=object),
        "2": np.array([[-1, 2], [0, 1]], dtype=object),
        "3": np.array([[1, 0], [2, -1]], dtype=object),
    }

    def trace(bodies: str) -> int:
        total = np.array([[1, 0], [0, 1]], dtype=object)
        for body in bodies:
            total = total @ reflections[body]
        return abs(int(total[0, 0] + total[1, 1]))

    assert trace(reduce_cycle(cycle)) == trace(cycle)


@given(cycles, st.integers(0, 40), st.permutations("123"), st.booleans())
def test_canonical_cycle_folds_in_rotation_labels_and_reversal(
    cycle: str, shift: int, labels: list[str], backwards: bool
) -> None:
    changed = cycle[shift:] + cycle[:shift]
    changed = changed.translate(str.maketrans("123", "".join(labels)))
    assert canonical_cycle(changed[::-1] if backwards else changed) == canonical_cycle(cycle)


@given(cycles)
def test_canonical_cycle_is_the_least_of_all_images(cycle: str) -> None:
    reduced = reduce_cycle(cycle)
    every = [
        (turned[i:] + turned[:i]).translate(str.maketrans("123", "".join(order)))
        for turned in (reduced, reduced[::-1])
        for i in range(max(1, len(reduced)))
        for order in permutations("123")
    ]
    assert canonical_cycle(cycle) == min(every)


# --- cycles and words ---------------------------------------------------------------------------


def crossed(cycle: str) -> list[tuple[int, int]]:
    """Crossings of one of the two motions with this cycle."""
    return [(int(k), (-1) ** i) for i, k in enumerate(cycle)]


@given(closed, arcs)
def test_the_word_of_a_cycle_is_that_of_its_crossings(cycle: str, silent: int) -> None:
    word = canonical_word(free_group_word(crossed(cycle), silent))
    assert word_of_cycle(cycle, silent) == word


@given(closed, arcs)
def test_cycle_word_and_back(cycle: str, silent: int) -> None:
    assert cycle_of_word(word_of_cycle(cycle, silent), silent) == canonical_cycle(cycle)


@given(letters, arcs)
def test_word_cycle_and_back(word: str, silent: int) -> None:
    cycle = cycle_of_word(word, silent)
    assert len(cycle) % 2 == 0
    assert canonical_cycle(cycle) == cycle
    # The arcs may have been relabelled, so another one may be silent now.
    assert canonical_word(word) in {word_of_cycle(cycle, arc) for arc in BODIES}


@given(letters, letters)
def test_the_cycle_of_a_word_is_that_of_all_its_images(word: str, by: str) -> None:
    cycle = cycle_of_word(word)
    changed = (by + word + words.invert(by), words.invert(word), word.swapcase())
    exchanged = word.translate(str.maketrans("abAB", "baBA"))
    assert {cycle_of_word(w, k) for w in (*changed, exchanged) for k in BODIES} == {cycle}


@pytest.mark.parametrize("word", PUBLISHED)
def test_published_words_are_found_whatever_arc_was_silent(word: str) -> None:
    cycle = cycle_of_word(word)
    assert len(cycle) % 2 == 0
    assert len(cycle) >= len(word)
    every = {word_of_cycle(cycle, silent) for silent in BODIES}
    assert canonical_word(word) in every
    assert {cycle_of_word(w, silent) for w in every for silent in BODIES} == {cycle}


def test_published_words_have_cycles_of_their_own() -> None:
    assert len({cycle_of_word(word) for word in PUBLISHED}) == len(PUBLISHED)


def test_the_figure_eight_has_one_word_for_all_arcs() -> None:
    assert {word_of_cycle("123123", silent) for silent in BODIES} == {"abAB"}


@given(closed, st.permutations("123"), st.integers(0, 40), st.booleans())
def test_the_shortest_word_belongs_to_the_motion_and_not_to_its_labels(
    cycle: str, labels: list[str], shift: int, backwards: bool
) -> None:
    changed = cycle[shift:] + cycle[:shift]
    changed = changed.translate(str.maketrans("123", "".join(labels)))
    word = shortest_word(cycle)
    assert shortest_word(changed[::-1] if backwards else changed) == word
    every = [word_of_cycle(cycle, silent) for silent in BODIES]
    assert word in every
    rank = ["abAB".index(letter) for letter in word]
    assert all((len(word), rank) <= (len(w), ["abAB".index(letter) for letter in w]) for w in every)


def test_among_words_of_one_length_the_first_in_the_alphabet_is_taken() -> None:
    # By hand: a < b < A < B, so aabb comes before aabA, although capitals come first in ASCII.
    cycle = "121231232313"
    every = {word_of_cycle(cycle, silent) for silent in BODIES}
    assert {word for word in every if len(word) == 8} == {"aabABBaB", "aabbAbAB"}
    assert min(map(len, every)) == 8
    assert shortest_word(cycle) == "aabbAbAB"


@given(closed, st.integers(1, 4))
def test_a_multiple_cover_has_the_root_of_the_motion(cycle: str, n: int) -> None:
    root, times = root_and_power(cycle)
    assert len(root) % 2 == 0
    assert canonical_cycle(root) == root
    assert root * times == canonical_cycle(cycle)
    assert root_and_power(cycle * n) == ((root, times * n) if root else ("", 1))


@given(closed, st.integers(1, 4), arcs)
def test_cycles_and_words_count_the_same_turns(cycle: str, n: int, silent: int) -> None:
    # The motions are a free group, whichever way they are written.
    word = word_of_cycle(cycle * n, silent)
    assert root_and_power(cycle * n)[1] == words.root_and_power(word)[1]


@pytest.mark.parametrize(
    ("cycle", "root", "n"),
    [
        ("123123", "123123", 1),
        ("123" * 4, "123123", 2),
        ("123" * 6, "123123", 3),
        ("1213" * 3, "1213", 3),
        ("12311231", "12", 2),  # reduces to 2323
        ("33", "", 1),
    ],
)
def test_roots_have_even_length(cycle: str, root: str, n: int) -> None:
    assert root_and_power(cycle) == (root, n)


# --- strings around a circle --------------------------------------------------------------------


@given(st.text("ab", max_size=12), st.integers(1, 5))
def test_the_primitive_root_is_the_shortest_that_repeats(text: str, n: int) -> None:
    root, times = primitive_root(text * n)
    assert root * times == text * n
    whole = text * n
    shorter = [k for k in range(1, len(root)) if len(whole) % k == 0]
    assert not any(whole[:k] * (len(whole) // k) == whole for k in shorter)


@given(st.integers(0, 60), st.integers(1, 40), st.data())
def test_the_least_image_is_the_least_rotation_of_all(
    length: int, n: int, data: st.DataObject
) -> None:
    texts = data.draw(st.lists(st.text("ab", min_size=length, max_size=length), min_size=1))
    images = [text * n for text in texts]
    every = [text[i:] + text[:i] for text in images for i in range(max(1, length))]
    assert least_image(iter(images), "ab") == min(every)


def test_the_least_image_may_stand_behind_many_that_begin_alike() -> None:
    text = ("ab" * 10 + "b") * 40 + "ab" * 11 + "b"
    assert least_image([text], "ab") == min(text[i:] + text[:i] for i in range(len(text)))


@given(st.text("abc", max_size=60))
def test_least_rotation_is_the_least_of_all(text: str) -> None:
    every = [text[i:] + text[:i] for i in range(max(1, len(text)))]
    assert least_rotation(text) == min(every)


class Counted(str):
    """A string that counts how often it is indexed."""

    reads = 0

    def __add__(self, other: str) -> "Counted":
        return Counted(str(self) + str(other))

    def __getitem__(self, key: object) -> str:
        Counted.reads += 1
        return super().__getitem__(key)  # type: ignore[index]


@pytest.mark.parametrize(
    "text", ["1" * 5000 + "2", "12" * 3000, "2" * 4000 + "1" * 4000, "21" * 99]
)
def test_least_rotation_needs_linear_work(text: str) -> None:
    Counted.reads = 0
    least_rotation(Counted(text))
    assert 0 < Counted.reads <= 6 * len(text)


# --- bad input and long cycles ------------------------------------------------------------------


@pytest.mark.parametrize(
    "call", [reduce_cycle, canonical_cycle, word_of_cycle, shortest_word, root_and_power]
)
def test_a_bad_body_is_named_with_its_place(call: object) -> None:
    with pytest.raises(BadRequest, match=r"`cycle` .* letters 1, 2, 3, got '0' at place 2: write"):
        call("10")  # type: ignore[operator]


@pytest.mark.parametrize("call", [word_of_cycle, shortest_word, root_and_power])
def test_a_closed_motion_has_an_even_cycle(call: object) -> None:
    with pytest.raises(BadRequest, match=r"`cycle` must have even length .* got 3 bodies: read a"):
        call("123")  # type: ignore[operator]


def test_the_word_of_a_cycle_is_asked_with_letters_of_words() -> None:
    with pytest.raises(BadRequest, match=r"`word` .* letters a, b, A, B, got '1' at place 2: w"):
        cycle_of_word("a1")


@pytest.mark.parametrize("call", [cycle_of_word, word_of_cycle])
def test_the_silent_arc_must_be_a_body(call: object) -> None:
    with pytest.raises(BadRequest, match=r"`silent` must be 1, 2 or 3, got 5: name"):
        call("", 5)  # type: ignore[operator]


def test_a_long_cycle_is_still_its_own_least_form() -> None:
    rng = np.random.default_rng(7)
    steps = rng.integers(1, 3, size=6000)
    cycle = "".join(str(int(k)) for k in np.cumsum(steps) % 3 + 1)
    reduced = reduce_cycle(cycle)
    assert len(reduced) > 5000
    assert canonical_cycle(cycle[3000:] + cycle[:3000]) == canonical_cycle(cycle)
    assert len(canonical_cycle(cycle)) == len(reduced)
