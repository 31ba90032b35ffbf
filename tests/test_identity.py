"""Which descriptions are of one orbit.  The close pairs are published ones."""

import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_orbits import (
    EIGHT,
    EIGHT_ANGLES,
    EIGHT_SCALED_PERIOD,
    TWIN,
    TWIN_SCALED_PERIOD,
    elliptic,
    figure_eight,
    hyperbolic,
    twin,
)

from orbitsearch.identity import (
    PERIOD,
    SHARED_PERIOD,
    START_APART,
    START_EQUAL,
    all_starts,
    new_starts,
    same_orbit,
    same_start,
    shares_start,
    start_distance,
)
from orbitsearch.orbit import Orbit, Start

# M. Suvakov & V. Dmitrasinovic, PRL 110, 114301 (2013): two starts of one orbit, as printed.
ONE_START = Start("collinear", ("0.41682", "0.33033"), "55.7898")
OTHER_START = Start("collinear", ("0.41734", "0.31310"), "54.2076")
REST = Start("rest", ("0.2053886532", "0.1952668419"), "1.6896364928")
ISOSCELES = Start("isosceles", ("0.25", "0.5"), "7.0")


def with_starts(*starts: Start) -> Orbit:
    """An orbit of fixed invariants found from the given starts."""
    return replace(
        figure_eight(), start=starts[0], starts=starts, stability=hyperbolic(9.5, 4.5), rotation=0.0
    )


def moved(start: Start, by: float) -> Start:
    """Start with its first parameter moved."""
    return Start.from_floats(start.kind, start.p + by, start.q, float(start.period))


def both_ways(one: Orbit, other: Orbit) -> bool:
    """Identity, which must not depend on the order."""
    result = same_orbit(one, other)
    assert same_orbit(other, one) == result
    return result


def test_the_figure_eight_is_not_its_twin() -> None:
    assert abs(EIGHT_SCALED_PERIOD / TWIN_SCALED_PERIOD - 1) < 2e-7
    assert not both_ways(figure_eight(), twin())


def test_the_twin_differs_by_start_and_by_period_each_alone() -> None:
    near = replace(twin(), choreography=True, stability=elliptic(*EIGHT_ANGLES))
    assert not both_ways(figure_eight(), near)
    assert start_distance(EIGHT, TWIN) > 500 * START_APART
    assert abs(EIGHT_SCALED_PERIOD - TWIN_SCALED_PERIOD) > 100 * PERIOD * EIGHT_SCALED_PERIOD


def test_digits_of_a_published_row_do_not_make_another_orbit() -> None:
    # The figure-eight with the ten digits that tables print.
    row = Start("collinear", ("0.3471168882", "0.5327249454"), "6.3259139829")
    printed = replace(
        figure_eight(),
        start=row,
        starts=(row,),
        scaled_period=9.2376812507,
        cycle="",
        choreography=False,
    )
    assert both_ways(figure_eight(), printed)


@given(st.floats(-3e-7, 3e-7))
def test_a_shared_start_decides_within_its_tolerance(by: float) -> None:
    other = replace(figure_eight(), start=moved(EIGHT, by), starts=(moved(EIGHT, by),))
    distance = start_distance(EIGHT, other.start)
    assert math.isclose(distance, abs(by), abs_tol=1e-15)
    assert shares_start(figure_eight(), other) == (distance <= START_EQUAL)


def test_two_rounds_from_a_start_are_not_one() -> None:
    eight = figure_eight()
    twice = replace(eight, scaled_period=2 * eight.scaled_period, cycle="123123" * 2)
    assert not both_ways(eight, twice)


def test_a_shared_start_allows_digits_of_the_period_to_differ() -> None:
    eight = figure_eight()
    other = replace(eight, scaled_period=eight.scaled_period * (1 + SHARED_PERIOD / 2))
    assert both_ways(eight, other)
    assert not shares_start(eight, replace(eight, scaled_period=eight.scaled_period * 1.000001))


def test_starts_of_different_sets_are_never_shared() -> None:
    assert start_distance(EIGHT, replace(EIGHT, kind="rest")) == math.inf
    assert not same_start(EIGHT, replace(EIGHT, kind="rest"))


def test_large_parameters_are_compared_by_their_size() -> None:
    one = Start.from_floats("isosceles", 1e3, 0.5, 7.0)
    assert same_start(one, moved(one, 0.9e-4))
    assert not same_start(one, moved(one, 1.1e-4))


def test_two_starts_found_apart_are_joined_by_the_invariants() -> None:
    one, other = with_starts(ONE_START), with_starts(OTHER_START)
    assert not shares_start(one, other)
    assert both_ways(one, other)
    assert both_ways(one, with_starts(REST))


@pytest.mark.parametrize(
    "change",
    [
        {"scaled_period": EIGHT_SCALED_PERIOD * (1 + 3e-9)},
        {"cycle": "1213"},
        {"choreography": False},
        {"rotation": 1e-4},
        {"stability": hyperbolic(9.5001, 4.5)},
        {"stability": hyperbolic(9.5, 4.5001)},
        {"stability": hyperbolic(9.5, 4.5, error=1.0)},
        {"stability": hyperbolic(9.5, 4.5, error=math.nan)},
    ],
    ids=str,
)
def test_each_invariant_can_keep_two_orbits_apart(change: dict[str, object]) -> None:
    other = replace(with_starts(OTHER_START), **change)  # type: ignore[arg-type]
    assert not both_ways(with_starts(ONE_START), other)


def test_a_word_of_other_labels_keeps_nothing_apart() -> None:
    assert both_ways(with_starts(ONE_START), replace(with_starts(OTHER_START), word="aab"))


def test_the_mirror_image_turns_the_other_way() -> None:
    one = replace(with_starts(ONE_START), rotation=0.75)
    assert both_ways(one, replace(with_starts(OTHER_START), rotation=-0.75))


def test_traces_of_equal_modulus_may_come_in_either_order() -> None:
    pair = (2 + 1j, 2 - 1j)
    stability = replace(hyperbolic(9.5, 4.5), kind="complex quadruple", traces=pair)
    one = replace(with_starts(ONE_START), stability=stability)
    turned = replace(stability, traces=pair[::-1])
    assert both_ways(one, replace(with_starts(OTHER_START), stability=turned))


def test_traces_are_held_to_the_accuracy_they_claim() -> None:
    one, other = with_starts(ONE_START), with_starts(OTHER_START)
    rough = hyperbolic(9.5 + 5e-4, 4.5, error=1e-4)
    assert both_ways(one, replace(other, stability=rough))
    assert not both_ways(one, replace(other, stability=replace(rough, error=1e-7)))


def test_a_start_outside_a_complete_list_forbids_joining() -> None:
    complete = with_starts(ONE_START, OTHER_START)
    assert not both_ways(complete, with_starts(TWIN))
    assert not both_ways(complete, with_starts(moved(ONE_START, 1e-3)))
    assert not both_ways(complete, with_starts(moved(ONE_START, 1e-3), moved(OTHER_START, 1e-3)))


def test_a_start_of_a_set_that_the_list_leaves_out_forbids_nothing() -> None:
    assert both_ways(with_starts(ONE_START, REST), with_starts(ISOSCELES))


def test_a_start_that_is_merely_known_badly_forbids_nothing() -> None:
    badly = moved(ONE_START, 3e-6)
    assert START_EQUAL < start_distance(ONE_START, badly) < START_APART
    assert both_ways(with_starts(ONE_START, OTHER_START), with_starts(badly))


def test_one_start_listed_twice_is_no_complete_list() -> None:
    assert both_ways(with_starts(ONE_START, moved(ONE_START, 1e-9)), with_starts(OTHER_START))


def test_the_own_start_counts_when_the_list_leaves_it_out() -> None:
    eight = figure_eight()
    assert all_starts(eight) == (EIGHT,)
    assert all_starts(eight.with_starts(())) == (EIGHT,)
    assert all_starts(eight.with_starts((REST,))) == (EIGHT, REST)
    assert both_ways(eight.with_starts((REST,)), replace(eight, cycle="12"))


def test_new_starts_are_apart_from_the_list_and_from_each_other() -> None:
    found = [moved(ONE_START, 1e-6), OTHER_START, moved(OTHER_START, 1e-6), REST]
    assert new_starts(found, [ONE_START]) == [OTHER_START, REST]
    assert new_starts(found, found) == []
