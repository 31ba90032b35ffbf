"""Words against sympy's free groups, against motions of points, and against published words."""

from itertools import permutations, product

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray
from sympy.combinatorics.free_groups import (  # type: ignore[import-untyped]
    FreeGroupElement,
    free_group,
)

from orbitsearch.cycles import canonical_cycle, reduce_cycle
from orbitsearch.errors import BadRequest
from orbitsearch.words import (
    canonical_word,
    contains,
    cyclically_reduce,
    free_group_word,
    invert,
    reduce_word,
    root_and_power,
)

# X. Li & S. Liao, Sci. China Phys. Mech. Astron. 60 (2017) 129511, as printed.
PUBLISHED = (
    "BAbabaBA",
    "BaBabAbA",
    "BabaBABabABAbabA",
    "BAbabABAbabaBABabaBA",
    "BabaBAbaBABabABAbaBAbabA",
    "BAbaabABBAbabaBAABabbaBA",
)

F, a, b = free_group("a, b")
ELEMENTS = {"a": a, "b": b, "A": a**-1, "B": b**-1}
words = st.text("abAB", max_size=30)


def element(word: str) -> FreeGroupElement:
    """Element of sympy's group: the oracle does its own cancelling."""
    result = F.identity
    for letter in word:
        result = result * ELEMENTS[letter]
    return result


def conjugate(word: str, other: str) -> bool:
    """Whether sympy finds two words conjugate."""
    # Its test compares lengths first, so it has to be given cyclically reduced elements.
    one = element(word).identity_cyclic_reduction()
    two = element(other).identity_cyclic_reduction()
    return bool(one == two or one.is_cyclic_conjugate(two))


def image(word: str, letters: str) -> str:
    """Word with a, b, A, B replaced in this order."""
    return word.translate(str.maketrans("abAB", letters))


# --- free group ---------------------------------------------------------------------------------


@given(words)
def test_reduction_gives_the_same_element_and_no_shorter_word_exists(word: str) -> None:
    reduced = reduce_word(word)
    assert element(reduced) == element(word)
    assert len(reduced) == len(element(word))
    assert reduce_word(reduced) == reduced


@given(words)
def test_cyclic_reduction_agrees_with_sympy(word: str) -> None:
    reduced = cyclically_reduce(word)
    assert len(reduced) == len(element(word).identity_cyclic_reduction())
    assert conjugate(reduced, word)


@given(words)
def test_inverse_agrees_with_sympy(word: str) -> None:
    assert element(invert(word)) == element(word) ** -1


@given(words, words)
def test_conjugates_have_one_canonical_word(word: str, by: str) -> None:
    assert canonical_word(by + word + invert(by)) == canonical_word(word)


@given(words)
def test_canonical_word_is_one_of_the_eight_images_and_least(word: str) -> None:
    canonical = canonical_word(word)
    assert canonical_word(canonical) == canonical
    reduced = cyclically_reduce(word)
    every = [
        turned[i:] + turned[:i]
        for letters in ("abAB", "ABab", "baBA", "BAba")
        for turned in (image(reduced, letters), invert(image(reduced, letters)))
        for i in range(max(1, len(turned)))
    ]
    assert canonical == min(every, key=lambda w: ["abAB".index(letter) for letter in w])


def classes_agree(one: str, other: str) -> bool:
    """Whether equal canonical words and sympy's conjugacy up to the eight operations coincide."""
    related = any(
        conjugate(one, turned)
        for letters in ("abAB", "ABab", "baBA", "BAba")
        for turned in (image(other, letters), invert(image(other, letters)))
    )
    return related == (canonical_word(one) == canonical_word(other))


def test_short_words_have_equal_canonical_words_exactly_when_related() -> None:
    # Every reduced word of length 4 or less; the oracle is asked about one of each canonical class
    # and about each word against its canonical form, which by transitivity settles all pairs.
    every = {
        reduce_word("".join(letters)) for n in range(5) for letters in product("abAB", repeat=n)
    }
    assert len(every) == 161
    assert all(classes_agree(word, canonical_word(word)) for word in every)
    canonical = sorted({canonical_word(word) for word in every})
    assert all(classes_agree(v, w) for i, v in enumerate(canonical) for w in canonical[:i])


def test_the_figure_eight_is_abAB() -> None:
    forms = ("abAB", "BabA", "baBA", "aBAb", "ABab")
    assert {canonical_word(word) for word in forms} == {"abAB"}


@pytest.mark.parametrize("word", PUBLISHED)
def test_published_words_keep_their_length(word: str) -> None:
    assert len(canonical_word(word)) == len(word)


def test_published_words_stay_apart() -> None:
    assert len({canonical_word(word) for word in PUBLISHED}) == len(PUBLISHED)


def published_class(word: str, other: str) -> bool:
    """Conjugacy up to inversion and exchange of letters, as published, by sympy."""
    return any(
        conjugate(word, turned)
        for exchanged in (other, image(other, "baBA"))
        for turned in (exchanged, invert(exchanged))
    )


def test_on_published_words_the_mirror_image_folds_in_nothing_more() -> None:
    # All are words of collinear starts, whose symmetry makes it a product of the other two.
    for word, other in product(PUBLISHED, repeat=2):
        for letters in ("abAB", "ABab", "baBA", "BAba"):
            changed = image(other, letters)
            assert published_class(word, changed) == (
                canonical_word(word) == canonical_word(changed)
            )


@pytest.mark.parametrize("word", PUBLISHED)
def test_published_words_show_the_symmetry_of_their_start(word: str) -> None:
    assert conjugate(word, image(word, "baBA")[::-1])


# --- powers and silent arcs ---------------------------------------------------------------------


@given(words, st.integers(1, 5))
def test_a_multiple_cover_has_the_root_of_the_motion_and_its_power(word: str, n: int) -> None:
    root, times = root_and_power(word)
    assert canonical_word(root) == root
    assert canonical_word(word) == root * times
    expected = (root, times * n) if root else ("", 1)
    assert root_and_power(word * n) == expected


@given(words)
def test_a_root_is_no_power_itself(word: str) -> None:
    root, _ = root_and_power(word)
    parts = [root[:k] for k in range(1, len(root)) if len(root) % k == 0]
    assert not any(element(part) ** (len(root) // len(part)) == element(root) for part in parts)


@given(st.text("123", max_size=40), st.sampled_from([1, 2, 3]), st.booleans())
def test_bodies_counted_on_around_take_the_silent_arc_along(
    cycle: str, silent: int, up: bool
) -> None:
    crossed = [(int(k), (-1) ** (i + up)) for i, k in enumerate(cycle)]
    moved = [(k % 3 + 1, d) for k, d in crossed]
    assert free_group_word(moved, silent % 3 + 1) == free_group_word(crossed, silent)


@given(st.text("123", max_size=40), st.sampled_from([1, 2, 3]))
def test_every_silent_arc_gives_the_word_of_a_change_of_basis(cycle: str, silent: int) -> None:
    # Each arc is a path from D > 0 to D < 0; followed by the silent one backwards it is a loop, and
    # the three choices are three bases of one free group.  In that of arc 3, with x = arc 1 and
    # y = arc 2, the loops of arcs 1, 2, 3 are x, y and 1.
    crossed = [(int(k), (-1) ** i) for i, k in enumerate(cycle[: len(cycle) // 2 * 2])]
    loop = {1: b, 2: a, 3: F.identity}
    back = loop[silent] ** -1
    new_a, new_b = (loop[(silent + i) % 3 + 1] * back for i in (1, 0))
    total = F.identity
    for letter in free_group_word(crossed, silent):
        total = total * {"a": new_a, "b": new_b, "A": new_a**-1, "B": new_b**-1}[letter]
    assert total == element(free_group_word(crossed))


@pytest.mark.parametrize("silent", [0, 4])
def test_a_silent_arc_must_be_a_body(silent: int) -> None:
    with pytest.raises(BadRequest, match=rf"`silent` must be 1, 2 or 3, got {silent}: name"):
        free_group_word([], silent)


# --- motions of three points --------------------------------------------------------------------


# Motions with words of six letters and more.  Those of CHIRAL would have another name than their
# mirror image if that were not an operation.
SEEDS = (1, 2, 5, 8, 16, 19, 45)
CHIRAL = (1, 8, 16, 19, 45)


def closed_motion(seed: int) -> NDArray[np.float64]:
    """Places of three points at 4000 times on random closed curves, shape (4000, 3, 2)."""
    rng = np.random.default_rng(seed)
    time = np.linspace(0, 2 * np.pi, 4000, endpoint=False)
    waves = np.array([f(k * time) for k in range(1, 9) for f in (np.cos, np.sin)])
    weights = rng.normal(size=(len(waves), 3, 2))
    places: NDArray[np.float64] = np.einsum("wt,wbx->tbx", waves, weights)
    return places


def crossings(places: NDArray[np.float64]) -> list[tuple[int, int]]:
    """Middle bodies and directions round a closed motion, straight from the definition."""
    r1, r2, r3 = places[:, 0], places[:, 1], places[:, 2]
    one, two = r2 - r1, r3 - r1
    area = one[:, 0] * two[:, 1] - one[:, 1] * two[:, 0]
    found = []
    for i in range(len(places)):
        before, after = area[i - 1], area[i]
        if before * after > 0:
            continue
        line = places[i] - places[i].mean(axis=0)
        along = line @ np.linalg.svd(line)[2][0]
        found.append((int(np.argsort(along)[1]) + 1, 1 if before > 0 else -1))
    return found


def names(places: NDArray[np.float64]) -> tuple[str, str]:
    """Canonical word and canonical cycle of a motion."""
    found = crossings(places)
    cycle = "".join(str(middle) for middle, _ in found)
    return canonical_word(free_group_word(found)), canonical_cycle(cycle)


SAME_MOTION = {
    "another first moment": lambda places: np.roll(places, 1234, axis=0),
    "backwards": lambda places: places[::-1],
    "mirror image": lambda places: places * [1, -1],
    "turned": lambda places: places @ [[0.6, 0.8], [-0.8, 0.6]],
    "larger": lambda places: 3 * places,
    "1 and 2 exchanged": lambda places: places[:, [1, 0, 2]],
}


@pytest.mark.parametrize("change", SAME_MOTION)
@pytest.mark.parametrize("seed", SEEDS)
def test_what_leaves_a_motion_the_same_leaves_its_names(change: str, seed: int) -> None:
    places = closed_motion(seed)
    assert len(names(places)[0]) >= 6
    assert names(SAME_MOTION[change](places)) == names(places)


@pytest.mark.parametrize("seed", CHIRAL)
def test_the_mirror_image_is_an_operation_of_its_own(seed: int) -> None:
    places = closed_motion(seed)
    word, mirrored = (free_group_word(crossings(p)) for p in (places, places * [1, -1]))
    assert not published_class(word, mirrored)
    assert canonical_word(word) == canonical_word(mirrored)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_cycle_is_free_of_all_labels(seed: int) -> None:
    places = closed_motion(seed)
    found = {names(places[:, list(order)])[1] for order in permutations(range(3))}
    assert len(found) == 1


def test_the_word_depends_on_which_body_is_third() -> None:
    places = closed_motion(1)
    found = {names(places[:, list(order)])[0] for order in permutations(range(3))}
    assert len(found) == 3


def test_three_points_chasing_each_other_on_a_lemniscate_give_the_figure_eight() -> None:
    time = np.linspace(0.1, 0.1 + 2 * np.pi, 3000, endpoint=False)
    shifts = [time + 2 * np.pi * k / 3 for k in range(3)]
    places = np.stack([np.stack([np.sin(s), np.sin(2 * s)], axis=-1) for s in shifts], axis=1)
    assert names(places) == ("abAB", "123123")


@given(st.text("123", max_size=40).filter(lambda c: len(c) % 2 == 0))
def test_reducing_the_cycle_first_gives_the_same_word(cycle: str) -> None:
    def word(bodies: str) -> str:
        return canonical_word(free_group_word((int(k), (-1) ** i) for i, k in enumerate(bodies)))

    assert word(reduce_cycle(cycle)) == word(cycle)


# --- parts and bad input ------------------------------------------------------------------------


def test_contains_reads_once_round() -> None:
    assert contains("abAB", "Ba")
    assert contains("abAB", "BabA")
    assert contains("aab", "BB") is True  # the exchange of letters, inverted
    assert not contains("aabAB", "aaa")
    assert not contains("ab", "abab")
    assert contains("ab", "")


@given(words, st.integers(0, 30), st.integers(0, 30))
def test_contains_finds_every_piece_of_every_image(word: str, begin: int, length: int) -> None:
    reduced = cyclically_reduce(word)
    piece = (reduced + reduced)[begin : begin + min(length, len(reduced))]
    assert contains(canonical_word(word), piece)


@pytest.mark.parametrize(
    "call", [reduce_word, cyclically_reduce, invert, canonical_word, root_and_power]
)
def test_a_bad_letter_is_named_with_its_place(call: object) -> None:
    with pytest.raises(
        BadRequest, match=r"`word` .* letters a, b, A, B, got 'x' at place 3: write"
    ):
        call("abx")  # type: ignore[operator]


@pytest.mark.parametrize(
    ("crossed", "message"),
    [
        ([(0, 1)], r"`crossings` must name .* 1, 2 or 3, got 0 at crossing 1: number"),
        ([(3, 1), (2, 0)], r"`crossings` must have direction 1 or -1, got 0 at crossing 2: use"),
        ([(3, 1), (2, 1)], r"`crossings` must alternate .* got 1 twice at crossing 2: one in"),
    ],
)
def test_bad_crossings_say_which(crossed: list[tuple[int, int]], message: str) -> None:
    with pytest.raises(BadRequest, match=message):
        free_group_word(crossed)
