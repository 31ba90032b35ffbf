"""Turns and windings against motions of points, whose strands and angles are seen apart."""

from functools import cache, reduce
from itertools import permutations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.typing import NDArray
from sympy import Matrix  # type: ignore[import-untyped]
from sympy.combinatorics import Permutation  # type: ignore[import-untyped]
from test_braids import TURN, images, turns
from test_words import closed_motion, crossings

from orbitsearch.braids import Braid
from orbitsearch.errors import BadRequest
from orbitsearch.turns import (
    cycle_text,
    exponent_of_turns,
    read_cycle,
    trace_of_turns,
    turns_from_crossings,
    windings_from_crossings,
)

# --- motions of three points ----------------------------------------------------------------------

PAIRS = ((0, 1), (1, 2), (2, 0))


def seen_along_y(places: NDArray[np.float64]) -> list[int] | None:
    """Artin word of a closed motion from the order of the points along the x-axis.

    None when two exchanges fall between two times, which leaves their order open.
    """
    word = []
    x, y = places[:, :, 0], places[:, :, 1]
    order = np.argsort(x, axis=1)
    for i in np.flatnonzero((order != np.roll(order, 1, axis=0)).any(axis=1)):
        before = order[i - 1]
        position = int(np.flatnonzero(before != order[i])[0])
        left, right = before[position : position + 2]
        exchanged = before.copy()
        exchanged[position : position + 2] = right, left
        if (exchanged != order[i]).any():
            return None
        # Counterclockwise: the left one goes to the right below the other.
        word.append((position + 1) * (1 if y[i, left] < y[i, right] else -1))
    return word


def sides(places: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Sides 12, 23, 31 as complex numbers, shape (3, times)."""
    points = places @ np.array([1, 1j])
    return np.array([points[:, q] - points[:, p] for p, q in PAIRS])


def turned(places: NDArray[np.float64]) -> NDArray[np.float64]:
    """Angles by which the sides turn from each time to the next, shape (3, times)."""
    side = sides(places)
    angles: NDArray[np.float64] = np.angle(side / np.roll(side, 1, axis=1))
    return angles


@cache
def motions() -> list[NDArray[np.float64]]:
    """A hundred random closed motions without close passages, which would need more times."""
    found = []
    seed = 0
    while len(found) < 100:
        places = closed_motion(seed)
        seed += 1
        if np.abs(turned(places)).max() < 0.5 and seen_along_y(places) is not None:
            found.append(places)
    return found


def braid_of(places: NDArray[np.float64]) -> Braid:
    """Oriented class from crossings and windings."""
    total = round(float(turned(places).sum()) / (2 * np.pi))
    return Braid.from_crossings(crossings(places), 2 * total)


def test_crossings_and_strands_give_the_same_oriented_braid() -> None:
    chiral = 0
    for places in motions():
        word = seen_along_y(places)
        assert word
        braid = Braid.from_artin(word)
        assert braid_of(places) == braid
        assert braid.is_pure
        chiral += len(images(braid)) == 4
    # Otherwise mirror, order and inverse could be mixed up unseen.
    assert chiral >= 10


def test_windings_follow_from_crossings_and_their_sum() -> None:
    for places in motions():
        windings = turned(places).sum(axis=1) / (2 * np.pi)
        found = windings_from_crossings(crossings(places), round(float(windings.sum())))
        assert found == pytest.approx(tuple(windings), abs=1e-6)
    assert any(len(set(np.round(turned(p).sum(axis=1)))) == 3 for p in motions())


@pytest.mark.parametrize("number", range(0, 100, 10))
def test_changes_of_a_motion_change_its_braid_as_they_should(number: int) -> None:
    places = motions()[number]
    braid = braid_of(places)
    assert braid_of(np.roll(places, 1234, axis=0)) == braid
    assert braid_of(places @ [[0.6, 0.8], [-0.8, 0.6]]) == braid
    assert braid_of(places * [1, -1]) == braid.mirror()
    assert braid_of(places[::-1]) == braid.inverse()
    assert {braid_of(places[:, list(order)]) for order in permutations(range(3))} == {braid}


# --- crossings ------------------------------------------------------------------------------------


@st.composite
def closed_crossings(draw: st.DrawFn) -> tuple[list[tuple[int, int]], int]:
    """Crossings of a closed motion, with an exponent sum that goes with them."""
    bodies = draw(st.lists(st.sampled_from([1, 2, 3]), max_size=30))
    first = draw(st.sampled_from([1, -1]))
    crossed = [(k, first * (-1) ** i) for i, k in enumerate(bodies[: len(bodies) // 2 * 2])]
    path = turns_from_crossings(crossed)
    return crossed, path.count("R") - path.count("L") + 6 * draw(st.integers(-3, 3))


@given(closed_crossings(), st.integers(0, 30), st.permutations([1, 2, 3]))
def test_the_braid_is_free_of_labels_and_of_the_first_moment(
    motion: tuple[list[tuple[int, int]], int], shift: int, labels: list[int]
) -> None:
    crossed, exponent_sum = motion
    braid = Braid.from_crossings(crossed, exponent_sum)
    assert Braid.from_crossings(crossed[shift:] + crossed[:shift], exponent_sum) == braid
    # An exchange of two labels turns the sign of the area.
    sign = 1 if Permutation([k - 1 for k in labels]).is_even else -1
    relabelled = [(labels[k - 1], sign * d) for k, d in crossed]
    assert Braid.from_crossings(relabelled, exponent_sum) == braid


@given(closed_crossings())
def test_mirror_and_reversal_of_crossings_are_those_of_the_class(
    motion: tuple[list[tuple[int, int]], int],
) -> None:
    crossed, exponent_sum = motion
    braid = Braid.from_crossings(crossed, exponent_sum)
    mirrored = [(k, -d) for k, d in crossed]
    assert Braid.from_crossings(mirrored, -exponent_sum) == braid.mirror()
    assert Braid.from_crossings(mirrored[::-1], -exponent_sum) == braid.inverse()
    assert Braid.from_crossings(crossed * 3, 3 * exponent_sum) == braid.power(3)


@given(closed_crossings(), st.integers(0, 30), st.sampled_from([1, 2, 3]))
def test_crossings_that_cancel_make_no_difference(
    motion: tuple[list[tuple[int, int]], int], place: int, body: int
) -> None:
    crossed, exponent_sum = motion
    assume(crossed)
    place %= len(crossed)
    there = crossed[place][1]
    longer = [*crossed[:place], (body, there), (body, -there), *crossed[place:]]
    assert Braid.from_crossings(longer, exponent_sum) == Braid.from_crossings(crossed, exponent_sum)
    total = exponent_sum // 2
    assert windings_from_crossings(longer, total) == windings_from_crossings(crossed, total)


@given(closed_crossings())
def test_exponent_sums_that_fit_are_twice_sums_of_windings(
    motion: tuple[list[tuple[int, int]], int],
) -> None:
    crossed, exponent_sum = motion
    assert exponent_sum % 2 == 0
    assert sum(windings_from_crossings(crossed, exponent_sum // 2)) == exponent_sum // 2
    braid = Braid.from_crossings(crossed, exponent_sum)
    assert braid.is_pure


# --- sums and traces ------------------------------------------------------------------------------


@given(turns)
def test_the_trace_is_that_of_the_product(cycle: str) -> None:
    assert trace_of_turns(cycle) == reduce(lambda m, t: m * TURN[t], cycle, Matrix.eye(2)).trace()


@given(turns, turns)
def test_exponent_sums_add_up(one: str, other: str) -> None:
    assert exponent_of_turns("R") == 1 == -exponent_of_turns("L")
    assert exponent_of_turns(one + other) == exponent_of_turns(one) + exponent_of_turns(other)


# --- texts ----------------------------------------------------------------------------------------


@given(turns, st.integers(1, 5))
def test_a_written_cycle_is_read_back(cycle: str, n: int) -> None:
    least = Braid(cycle * n, (cycle.count("R") - cycle.count("L")) * n).cycle
    assert read_cycle(cycle_text(cycle * n)) == least


@pytest.mark.parametrize(
    ("cycle", "text"),
    [
        ("LRLRLR", "(LR)^3"),
        ("LLLLL", "L^5"),
        ("LL", "LL"),
        ("LLRLRLRLRR", "L(LR)^4R"),
        ("LLLRLLLR", "(L^3R)^2"),
        ("LRLRLRRLRLRLRR", "((LR)^3R)^2"),
        ("", "()"),
    ],
)
def test_cycles_as_written(cycle: str, text: str) -> None:
    assert cycle_text(cycle) == text


@pytest.mark.parametrize(
    ("text", "cycle"),
    [
        ("(LR)^3", "LRLRLR"),
        (" R L ^ 2 ", "LLR"),
        ("((LR)^2 R)^2 L", "LLRLRRLRLRR"),
        ("(L(R))", "LR"),
        ("()^4", ""),
    ],
)
def test_cycles_as_read(text: str, cycle: str) -> None:
    assert read_cycle(text) == cycle


@pytest.mark.parametrize(
    "text", ["", " ", "lr", "L^0", "L^", "^2", "(L", "L)", "L^2^2", "(L)2", "L2"]
)
def test_what_is_no_cycle_is_refused(text: str) -> None:
    with pytest.raises(BadRequest, match=r"`text` must be turns L and R .* got '.*': write LLR or"):
        read_cycle(text)


@pytest.mark.parametrize("text", ["(LR)^999999", "((L^9999)^9999)^9999"])
def test_a_cycle_beyond_all_measure_is_refused(text: str) -> None:
    with pytest.raises(BadRequest, match=r"`text` must have at most 1000000 turns .*: write"):
        read_cycle(text)


# --- bad input ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("crossed", "exponent_sum", "message"),
    [
        ([(0, 1)], 0, r"`crossings` must name .* got 0 at crossing 1: number"),
        ([(3, 1), (2, 0)], 0, r"`crossings` must have direction 1 or -1, got 0 at crossing 2: use"),
        ([(3, 1), (2, 1)], 0, r"`crossings` must alternate .* got 1 twice at crossing 2: one in"),
        ([(3, 1)], 0, r"`crossings` must be even in number .* got 1: follow it over a whole"),
        ([(2, 1), (1, -1)], 4, r"`exponent_sum` must leave the remainder 2 modulo 6, .* got 4: "),
        ([(1, 1), (1, -1)], 2, r"`exponent_sum` must be a multiple of 6 when .* got 2: such"),
    ],
)
def test_crossings_of_no_closed_motion_are_refused(
    crossed: list[tuple[int, int]], exponent_sum: int, message: str
) -> None:
    with pytest.raises(BadRequest, match=message):
        Braid.from_crossings(crossed, exponent_sum)


def test_windings_must_go_with_the_crossings() -> None:
    with pytest.raises(BadRequest, match=r"`total` must leave the remainder 1 modulo 3 .* got 2: "):
        windings_from_crossings([(2, 1), (1, -1)], 2)
