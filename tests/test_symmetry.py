"""Groups from two reversals, against matrices, and what they are called."""

import math
from itertools import permutations, product

import pytest

from orbitsearch.errors import BadRequest
from orbitsearch.starts import CONDITIONS, START_SETS, period_multiple, set_of
from orbitsearch.symmetry import NAMES, REVERSALS, Symmetry, between, check_name, set_of_label

PAIRS = list(product(REVERSALS, REVERSALS))


def test_labels_are_those_of_the_conditions_and_sets():
    assert REVERSALS.keys() == {condition.label for condition in CONDITIONS.values()}
    for condition in CONDITIONS.values():
        assert START_SETS[set_of_label(condition.label)] is set_of(condition)


@pytest.mark.parametrize(("start", "end"), PAIRS)
def test_the_group_has_one_piece_for_each_arc_of_the_period(start, end):
    own, stop = (next(c for c in CONDITIONS.values() if c.label == label) for label in (start, end))
    group = between(start, end)
    assert group.pieces == period_multiple(own, stop)
    assert sum(group.reversals.values()) == group.pieces


@pytest.mark.parametrize(("start", "end"), PAIRS)
def test_the_shift_is_one_reversal_after_the_other(start, end):
    # The piece taken backwards has the inverse shift.
    there, back = between(start, end), between(end, start)
    for i in range(3):
        one = REVERSALS[end].permutation[REVERSALS[start].permutation[i]]
        assert there.permutation[i] == one
        assert back.permutation[one] == i
    assert (there.order, there.mirror, there.names) == (back.order, back.mirror, back.names)


# Which names an orbit has between two states, up to labels; derived by hand from the products of
# the two reversals (half-turn with swap, mirror with swap, time alone, mirror).
BY_HAND = {
    ("C3", "C3"): ("none", 1),
    ("C3", "C1"): ("choreography", 3),
    ("C3", "I3"): ("mirror", 2),
    ("C3", "I1"): ("choreography, mirror", 6),
    ("C3", "rest"): ("exchange", 2),
    ("C3", "P"): ("mirror-exchange", 2),
    ("I3", "I3"): ("none", 1),
    ("I3", "I1"): ("choreography", 3),
    ("I3", "rest"): ("mirror-exchange", 2),
    ("I3", "P"): ("shared-curve", 2),
    ("rest", "rest"): ("none", 1),
    ("rest", "P"): ("mirror", 2),
    ("P", "P"): ("none", 1),
}


@pytest.mark.parametrize(("ends", "expected"), BY_HAND.items(), ids=str)
def test_names_of_every_pair_of_states(ends, expected):
    for pair in (ends, ends[::-1]):
        group = between(*pair)
        assert (group.title, group.order) == expected


@pytest.mark.parametrize("relabelling", [*permutations("123")])
@pytest.mark.parametrize("ends", BY_HAND)
def test_names_do_not_depend_on_labels(ends, relabelling):
    labels = str.maketrans("123", "".join(relabelling))
    changed = between(*(label.translate(labels) for label in ends))
    assert changed.names == between(*ends).names
    assert changed.reversals == between(*ends).reversals


def test_the_figure_eight_is_described_in_words():
    # A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881: dihedral group of order 12.
    group = between("C3", "I1")
    assert group.pieces == 12
    assert group.curves == 1
    assert group.describe() == (
        "all three bodies run along one curve, a third of the period apart; after half a period"
        " the orbit is its own mirror image; reversible through 6 collinear and 6 isosceles states"
    )


def test_two_states_of_one_kind_are_counted_together():
    assert between("C3", "C3").reversals == {"collinear": 2}
    assert between("C3", "C1").reversals == {"collinear": 6}


def test_an_exchange_that_turns_the_plane_says_so():
    group = between("C3", "rest")
    assert group.turn == math.pi
    assert group.curves == 3
    assert "turned by 180 degrees" in group.describe()
    assert between("I3", "P").curves == 2


def test_only_a_permutation_divides_the_braid():
    parts = {ends: between(*ends).part for ends in BY_HAND}
    assert {ends for ends, part in parts.items() if part == 3} == {
        ("C3", "C1"), ("C3", "I1"), ("I3", "I1"),
    }  # fmt: skip
    assert {ends for ends, part in parts.items() if part == 2} == {("C3", "rest"), ("I3", "P")}


def test_an_orbit_without_reversal():
    group = Symmetry(3, (1, 2, 0), False, 0.0, 0, ())
    assert group.title == "choreography"
    assert group.pieces == 3
    assert group.reversals == {}
    assert group.describe().endswith("; not reversible")


@pytest.mark.parametrize(("start", "end"), PAIRS)
def test_json_and_back(start, end):
    group = between(start, end)
    data = group.to_json()
    assert Symmetry.from_json(data) == group
    assert data["fraction"] == f"1/{group.pieces}"
    assert data["names"]


def test_an_unknown_name_is_refused_with_the_names():
    assert [check_name(name) for name in NAMES] == list(NAMES)
    with pytest.raises(BadRequest, match=r"`symmetry` must be one of choreography, .* got 'ring'"):
        check_name("ring")
