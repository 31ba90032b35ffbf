"""Braids against their Artin words, against exact eigenvalues, and against known motions."""

import math
from functools import reduce

import mpmath  # type: ignore[import-untyped]
import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from sympy import Matrix, sqrt, sympify  # type: ignore[import-untyped]
from sympy.combinatorics import Permutation  # type: ignore[import-untyped]
from test_artin import artin, backwards, ball, times

from orbitsearch.artin import matrix
from orbitsearch.braid_pattern import Pattern, read_braid
from orbitsearch.braids import KINDS, Braid
from orbitsearch.errors import BadRequest
from orbitsearch.turns import cycle_text, windings_from_crossings

turns = st.text("LR", max_size=30)
TURN = {"L": Matrix([[1, 0], [1, 1]]), "R": Matrix([[1, 1], [0, 1]])}


@st.composite
def braids(draw: st.DrawFn) -> Braid:
    """Classes of all kinds, many with roots."""
    if draw(st.booleans()):
        sums = st.integers(-40, 40).filter(lambda e: e % 6 not in (1, 5))
        return Braid("", draw(sums)).power(draw(st.integers(1, 6)))
    cycle = draw(st.text("LR", min_size=1, max_size=8))
    twists = draw(st.integers(-3, 3))
    braid = Braid(cycle, cycle.count("R") - cycle.count("L") + 6 * twists)
    return braid.power(draw(st.integers(1, 6)))


def images(braid: Braid) -> set[Braid]:
    """The class, run backwards, in the mirror, and both."""
    return {braid, braid.inverse(), braid.mirror(), braid.mirror().inverse()}


# --- powers, roots and images ---------------------------------------------------------------------


@given(braids())
def test_the_artin_word_of_a_class_is_of_the_class(braid: Braid) -> None:
    assert Braid.from_artin(braid.artin) == braid


@given(artin)
def test_inverse_and_mirror_are_those_of_words(word: list[int]) -> None:
    braid = Braid.from_artin(word)
    assert Braid.from_artin(backwards(word)) == braid.inverse()
    assert Braid.from_artin([-letter for letter in word]) == braid.mirror()
    assert Braid.from_artin(word[::-1]) == braid.inverse().mirror() == braid.mirror().inverse()


@given(artin, st.integers(-4, 4))
def test_powers_are_those_of_words(word: list[int], n: int) -> None:
    many = (word if n >= 0 else backwards(word)) * abs(n)
    assert Braid.from_artin(word).power(n) == Braid.from_artin(many)


@given(braids(), st.integers(1, 6))
def test_a_power_has_its_root(braid: Braid, n: int) -> None:
    assert braid.power(n).root(n) == braid


@given(braids())
def test_there_are_no_roots_beyond_the_highest(braid: Braid) -> None:
    root, n = braid.root_and_power()
    assert root.power(n) == braid
    if braid != Braid("", 0):
        size = len(braid.cycle) + abs(braid.exponent_sum)
        have = [k for k in range(1, size + 1) if has_root(braid, k)]
        assert max(have) == n
        assert root.root_and_power() == (root, 1)


def has_root(braid: Braid, n: int) -> bool:
    """Whether a root is given, and then is one."""
    try:
        root = braid.root(n)
    except BadRequest:
        return False
    assert root.power(n) == braid
    return True


def test_roots_of_short_braids_are_all_found() -> None:
    # Brute force: the squares and cubes of all short braids.  No class has two roots, and a class
    # with short words but without a root of its own is the power of none of these.
    short = [Braid.from_artin(word) for word in ball(6).values()]
    for n in (2, 3):
        roots: dict[Braid, set[Braid]] = {}
        for braid in short:
            roots.setdefault(braid.power(n), set()).add(braid)
        assert all(len(found) == 1 for found in roots.values())
        assert all(has_root(braid, n) == (braid in roots) for braid in short)


@pytest.mark.parametrize(
    ("word", "root", "n"),
    [
        ([1, -2] * 3, [1, -2], 3),
        ([1] * 4, [1], 4),
        ([1, 2] * 3, [1, 2], 3),  # the full twist, also the square of 1 2 1
        ([1, 2, 1] * 3, [1, 2, 1], 3),
        ([-2, -1] * 2, [-2, -1], 2),
        ([1, -2] * 2 + [1, 2] * 3, [1, -2] * 2 + [1, 2] * 3, 1),  # one twist is not to be halved
        ([1, -2] * 2 + [1, 2] * 6, [1, -2] + [1, 2] * 3, 2),
        ([], [], 1),
    ],
)
def test_highest_powers(word: list[int], root: list[int], n: int) -> None:
    assert Braid.from_artin(word).root_and_power() == (Braid.from_artin(root), n)


@given(braids())
def test_the_canonical_class_is_shared_by_the_four_images(braid: Braid) -> None:
    canonical = braid.canonical()
    assert canonical.canonical() == canonical
    assert {other.canonical() for other in images(braid)} == {canonical}
    assert canonical == min(images(braid), key=lambda b: (b.cycle, -b.exponent_sum))


@pytest.mark.parametrize("exponent_sum", [6, -6])
def test_a_rigid_rotation_is_canonical_counterclockwise(exponent_sum: int) -> None:
    assert Braid("", exponent_sum).canonical() == Braid("", 6)
    assert Braid("LR", exponent_sum).canonical() == Braid("LR", 6)
    # The cycle comes before the sum: two bodies that circle each other are L, whatever the sense.
    assert Braid.from_artin([1, 1]).canonical() == Braid("LL", -2)


def test_a_chiral_class_has_four_images() -> None:
    assert len(images(Braid("LLRLRR", 6))) == 4
    assert len(images(Braid("LR", 0))) == 1


# --- what a class is like -------------------------------------------------------------------------


@given(braids())
def test_kind_and_trace_agree_with_the_matrix(braid: Braid) -> None:
    m = Matrix(2, 2, matrix(braid.artin))
    trace = abs(m.trace())
    assert braid.trace == trace
    finite = m**12 == Matrix.eye(2)  # the orders in SL(2, Z) are 1, 2, 3, 4, 6
    assert braid.kind == KINDS[0 if finite else 1 if trace == 2 else 2]


@given(braids())
def test_strands_are_permuted_as_by_exchanges(braid: Braid) -> None:
    ends = Permutation(2)
    for letter in braid.artin:
        ends = ends * Permutation(abs(letter) - 1, abs(letter), size=3)
    lengths = sorted((k for k, n in ends.cycle_structure.items() for _ in range(n)), reverse=True)
    assert braid.permutation == tuple(lengths)
    assert braid.is_pure == (ends == Permutation(2))


@given(st.text("LR", min_size=1, max_size=150))
def test_entropy_and_dilatation_are_those_of_the_eigenvalue(cycle: str) -> None:
    braid = Braid(cycle, cycle.count("R") - cycle.count("L"))
    with mpmath.workdps(200):
        t = mpmath.mpf(
            int(reduce(lambda m, letter: m * TURN[letter], cycle, Matrix.eye(2)).trace())
        )
        eigenvalue = (t + mpmath.sqrt(t * t - 4)) / 2
        assert braid.dilatation == pytest.approx(float(eigenvalue), rel=1e-15)
        assert braid.entropy == pytest.approx(float(mpmath.log(eigenvalue)), rel=1e-15)


@given(turns)
def test_the_exact_dilatation_is_an_eigenvalue(cycle: str) -> None:
    assume("L" in cycle and "R" in cycle)
    braid = Braid(cycle, cycle.count("R") - cycle.count("L"))
    text, _, power = braid.dilatation_text.partition(")^")
    if power:
        text = text[1:]
    root, under = read_surd(text)
    assert under > 1
    assert braid.trace > 10**8 or all(under % (k * k) for k in range(2, math.isqrt(under) + 1))
    value = root ** int(power or 1)
    # An algebraic number of degree two: it solves x^2 - t x + 1 = 0 exactly when this vanishes.
    assert (value**2 - braid.trace * value + 1).expand() == 0
    assert value.evalf() > 1


def read_surd(text: str) -> tuple[object, int]:
    """Number that is written out, and the integer under its root."""
    before, _, after = text.partition("√")
    if after.startswith("("):
        inside, _, rest = after[1:].partition(")")
        under, end = int(sympify(inside.replace("^", "**"))), rest
    else:
        digits = after[: len(after) - len(after.lstrip("0123456789"))]
        under, end = int(digits), after[len(digits) :]
    factor = "" if before.endswith(" ") else "*"
    return sympify(f"{before}{factor}r{end}").subs("r", sqrt(under)), under


@pytest.mark.parametrize(
    ("cycle", "text"),
    [
        ("LR", "(3 + √5)/2"),
        ("LLR", "2 + √3"),
        ("LLRR", "3 + 2√2"),
        ("LLLLLRRRRR", "(27 + 5√29)/2"),
        ("LR" * 7, "((3 + √5)/2)^7"),
        ("", "1"),
        ("RRR", "1"),
    ],
)
def test_the_exact_dilatation_as_written(cycle: str, text: str) -> None:
    assert Braid(cycle, cycle.count("R") - cycle.count("L")).dilatation_text == text


def test_dilatations_beyond_factoring_keep_their_squares() -> None:
    braid = Braid("L" * 10**5 + "R" * 10**5, 0)
    assert braid.dilatation_text == "(10000000002 + √(10000000002^2 - 4))/2"


def test_long_words_have_exact_traces_and_finite_entropy() -> None:
    letters = np.random.default_rng(3).integers(2, size=5000)
    cycle = "".join("LR"[i] for i in letters)
    braid = Braid(cycle, cycle.count("R") - cycle.count("L"))
    plain = {"L": (1, 0, 1, 1), "R": (1, 1, 0, 1)}
    blocks = [
        reduce(times, (plain[letter] for letter in cycle[i : i + 50])) for i in range(0, 5000, 50)
    ]
    whole = reduce(times, blocks)
    assert braid.trace == whole[0] + whole[3] > 10**400
    assert braid.dilatation == math.inf
    assert braid.entropy == pytest.approx(float(mpmath.log(braid.trace)), rel=1e-15)
    assert Braid.from_artin(braid.artin) == braid


def test_dilatations_of_any_length_can_be_written() -> None:
    # Python refuses to write integers of more than 4300 digits by `str`.
    text = Braid("LR" * 9000 + "LLR" * 2000, -2000).dilatation_text
    assert len(text) > 2 * 4300
    assert text.endswith("^2 - 4))/2")


def test_traces_of_any_length_can_be_written() -> None:
    # (LR)^n has the trace of the n-th power of (2 1; 1 1), a Lucas number: by its recursion here.
    before, trace = 2, 3
    for _ in range(19999):
        before, trace = trace, 3 * trace - before
    text = Braid("LR" * 20000, 0).trace_text
    assert len(text) == 8360 > 4300
    assert (text[:20], text[-20:]) == (str(trace // 10**8340), f"{trace % 10**20:020d}")
    assert reduce(lambda number, digit: 10 * number + int(digit), text, 0) == trace


@given(braids())
def test_short_traces_are_written_as_usual(braid: Braid) -> None:
    assert braid.trace_text == str(braid.trace)


# --- known braids ---------------------------------------------------------------------------------


def test_the_figure_eight() -> None:
    # C. Moore, PRL 70 (1993) 3675: the braid (s1 s2^-1)^3; from memory.
    crossed = [(k, (-1) ** i) for i, k in enumerate((1, 2, 3, 1, 2, 3))]
    braid = Braid.from_crossings(crossed, 0)
    assert braid.canonical() == Braid.from_artin([1, -2] * 3).canonical()
    assert (braid.trace, braid.kind, braid.is_pure) == (18, "pseudo-Anosov", True)
    assert braid.dilatation_text == "((3 + √5)/2)^3"
    assert windings_from_crossings(crossed, 0) == (0, 0, 0)


def test_the_least_stretching_of_three_strands() -> None:
    # P. L. Boyland, H. Aref & M. A. Stremler, J. Fluid Mech. 403 (2000) 277: stirring by
    # s1 s2^-1 stretches by (3 + √5)/2 each time; from memory.
    braid = Braid.from_artin([1, -2])
    assert braid.trace == 3
    assert braid.dilatation == pytest.approx((3 + math.sqrt(5)) / 2, rel=1e-15)
    assert braid.permutation == (3,)


def test_bodies_that_turn_rigidly_have_a_periodic_braid() -> None:
    # The equilateral triangle never comes into line, and every side turns round once.
    braid = Braid.from_crossings([], 6)
    assert braid == Braid.from_artin([1, 2] * 3)
    assert (braid.kind, braid.entropy, braid.dilatation) == ("periodic", 0.0, 1.0)


def test_two_bodies_circling_far_from_the_third_are_reducible() -> None:
    braid = Braid.from_crossings([(2, 1), (1, -1)], 2)
    assert braid == Braid.from_artin([1, 1])
    assert (braid.kind, braid.trace, braid.entropy) == ("reducible", 2, 0.0)


# --- patterns -------------------------------------------------------------------------------------


def test_a_braid_is_asked_for_by_kind_cycle_or_word() -> None:
    assert [read_braid(kind.upper()) for kind in KINDS] == [Pattern(kind=kind) for kind in KINDS]
    assert read_braid(" R^2L ") == Pattern(cycle="LLR")
    assert read_braid("1 -2 1 -2") == Pattern(cycle="LRLR", exponent_sum=0)
    assert read_braid("1 1") == Pattern(cycle="LL", exponent_sum=-2)


@given(braids(), braids())
def test_a_pattern_fits_the_images_of_what_was_asked_for(braid: Braid, other: Braid) -> None:
    assume(braid.artin)
    word = read_braid(" ".join(map(str, braid.artin)))
    cycle = read_braid(cycle_text(braid.cycle))
    for found in images(other):
        assert word.fits(found) == (other in images(braid))
        assert cycle.fits(found) == (other.cycle in {b.cycle for b in images(braid)})
        assert read_braid(braid.kind).fits(found) == (braid.kind == other.kind)
    assert all(p.fits(b) for p in (word, cycle, Pattern()) for b in images(braid))


@pytest.mark.parametrize("text", ["", "chaotic", "1 x", "Reducibel", "LRX"])
def test_what_is_no_braid_is_refused(text: str) -> None:
    with pytest.raises(BadRequest, match=r"^`braid` must be a kind \(periodic, .* got '.*': write"):
        read_braid(text)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("1 -3", "must be 1, -1, 2 or -2 for three strands, got -3 at place 2: write i for"),
        ("LR2", r"must be turns L and R .* got 'LR2': write LLR or \(LR\)\^3$"),
        ("(LR)^999999", r"must have at most 1000000 turns .* got a power of '999999': write"),
    ],
)
def test_a_braid_with_a_wrong_part_is_refused_by_the_name_it_was_asked_by(
    text: str, message: str
) -> None:
    with pytest.raises(BadRequest, match=f"^`braid` {message}") as caught:
        read_braid(text)
    assert "\n" not in str(caught.value)


# --- bad input ------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("cycle", "exponent_sum", "message"),
    [
        ("LRx", 0, r"`cycle` must use only the letters L, R, got 'x' at place 3: write"),
        ("LLR", 1, r"`exponent_sum` must leave the remainder 5 modulo 6, .* got 1: count"),
        ("", 5, r"`exponent_sum` must be even or a multiple of 3 .* got 5: no power"),
        ("", -7, r"`exponent_sum` must be even or a multiple of 3 .* got -7: no power"),
    ],
)
def test_classes_that_do_not_exist_are_refused(cycle: str, exponent_sum: int, message: str) -> None:
    with pytest.raises(BadRequest, match=message):
        Braid(cycle, exponent_sum)


@pytest.mark.parametrize(
    ("braid", "n", "message"),
    [
        (Braid("LR", 0), 0, r"`n` must be 1 or more, got 0: "),
        (Braid("LR", 0), 2, r"`n` must be one for which .* got 2: `root_and_power` tells"),
        (Braid("LRLR", 6), 2, r"`n` must be one for which .* got 2: `root_and_power` tells"),
        (Braid("", 2), 2, r"`n` must be one for which .* got 2: `root_and_power` tells"),
    ],
)
def test_roots_that_do_not_exist_are_refused(braid: Braid, n: int, message: str) -> None:
    with pytest.raises(BadRequest, match=message):
        braid.root(n)
