"""Braid types of orbits: from alignments, windings and group, free of every choice."""

import json
from itertools import permutations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from orbitsearch.braid_type import BraidType
from orbitsearch.braids import Braid
from orbitsearch.errors import BadRequest
from orbitsearch.symmetry import Symmetry, between

Crossings = list[tuple[int, int]]

NO_SHIFT = between("C3", "C3")
EIGHT: Crossings = [(3, 1), (1, -1), (2, 1), (3, -1), (1, 1), (2, -1)]


def crossings(middles: str) -> Crossings:
    """Alignments of a closed motion that first goes from + to -."""
    return [(int(body), 1 - 2 * (n % 2)) for n, body in enumerate(middles)]


def reversed_in_time(seen: Crossings) -> Crossings:
    return [(body, -direction) for body, direction in reversed(seen)]


def mirrored(seen: Crossings) -> Crossings:
    return [(body, -direction) for body, direction in seen]


def relabelled(seen: Crossings, images: tuple[int, ...]) -> Crossings:
    # An exchange of two labels turns the sign of the area, a cyclic one does not.
    inversions = sum(a > b for n, a in enumerate(images) for b in images[n + 1 :])
    return [(images[body - 1], direction * (-1) ** inversions) for body, direction in seen]


def test_the_figure_eight_over_a_period_and_over_a_third() -> None:
    # A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881; the braid is (s1 s2^-1)^3, common
    # practice, no source.
    kind = BraidType.of(EIGHT, 0, between("C3", "I1"))
    assert kind.braid == Braid.from_artin([1, -2] * 3).canonical()
    assert (kind.braid.kind, kind.braid.trace, kind.windings) == ("pseudo-Anosov", 18, (0, 0, 0))
    assert kind.part == 3
    assert kind.part_braid == Braid.from_artin([1, -2]).canonical()
    assert kind.part_braid.trace == 3


def test_its_twin_has_the_same_braid_and_no_part() -> None:
    # M. Suvakov, CMDA 119 (2014) 369: the same word, no choreography.
    eight = BraidType.of(EIGHT, 0, between("C3", "I1"))
    twin = BraidType.of(EIGHT, 0, between("C3", "I3"))
    assert twin.braid == eight.braid
    assert (twin.part, twin.part_braid) == (1, twin.braid)


def test_the_rigid_rotation_of_a_triangle_is_periodic() -> None:
    # Every pair goes round once and a third of the period later all have moved up one place.
    kind = BraidType.of([], 3, Symmetry(3, (1, 2, 0), False, 0.0, 0, ()))
    assert (kind.braid.kind, kind.windings) == ("periodic", (1, 1, 1))
    assert kind.part_braid.power(3).canonical() == kind.braid
    assert kind.part_braid.trace == 1


def test_an_exchange_through_half_a_turn_is_a_root_in_the_turning_frame() -> None:
    # Rest at one end, in line at the other: nothing winds, yet two bodies have changed places.
    kind = BraidType.of([], 0, between("rest", "C3"))
    assert kind.braid == Braid("", 0)
    assert kind.part == 2
    assert kind.part_braid.trace == 0


@given(
    st.text("123", min_size=2, max_size=24).filter(lambda text: len(text) % 2 == 0),
    st.integers(-4, 4),
    st.sampled_from([*permutations((1, 2, 3))]),
    st.integers(0, 23),
    st.booleans(),
    st.booleans(),
)
def test_the_type_does_not_depend_on_how_the_motion_is_described(
    middles: str, turns: int, images: tuple[int, ...], first: int, backwards: bool, in_mirror: bool
) -> None:
    seen = crossings(middles)
    total = next(t for t in range(3 * turns, 3 * turns + 3) if _fits(seen, t))
    described, sign = relabelled(seen, images), 1
    # A relabelling alone keeps the windings; the moment the period begins at changes nothing.
    first %= len(described)
    described = described[first:] + described[:first]
    for asked, change in ((backwards, reversed_in_time), (in_mirror, mirrored)):
        if asked:
            described, sign = change(described), -sign
    one = BraidType.of(seen, total, NO_SHIFT)
    assert BraidType.of(described, sign * total, NO_SHIFT) == one
    assert 2 * sum(one.windings) == one.braid.exponent_sum


def _fits(seen: Crossings, total: int) -> bool:
    try:
        BraidType.of(seen, total, NO_SHIFT)
    except BadRequest:
        return False
    return True


@pytest.mark.parametrize(
    ("seen", "total", "group"),
    [
        (EIGHT, 0, between("C3", "I1")),
        (crossings("1232" * 3), 3, NO_SHIFT),
        ([], 0, between("rest", "C3")),
    ],
    ids=["eight", "winding", "empty"],
)
def test_json_and_back(seen: Crossings, total: int, group: Symmetry) -> None:
    kind = BraidType.of(seen, total, group)
    data = json.loads(json.dumps(kind.to_json()))
    assert BraidType.from_json(data) == kind
    assert {"kind", "trace", "dilatation", "cycle", "windings"} <= data.keys()


def test_a_total_that_the_alignments_exclude_is_refused() -> None:
    with pytest.raises(BadRequest):
        BraidType.of(EIGHT, 1, NO_SHIFT)


def test_a_choreography_whose_cycle_has_no_third_is_refused() -> None:
    with pytest.raises(BadRequest):
        BraidType.of(crossings("121323"), 0, between("C3", "C1"))


def test_the_descriptions_are_different_classes_before_they_are_brought_together() -> None:
    # The property above would be empty if classes were symmetric anyhow.
    seen = crossings("321312313132")
    changed = [seen, mirrored(seen), reversed_in_time(seen), reversed_in_time(mirrored(seen))]
    assert len({Braid.from_crossings(one, 0) for one in changed}) == 4
    assert len({BraidType.of(one, 0, NO_SHIFT) for one in changed}) == 1
