"""What kind of orbit it is must not depend on how, or from where, one looks at it."""

import math
from collections import Counter
from dataclasses import replace

import numpy as np
import published
import pytest

from orbitsearch import bodies, flow, period_law
from orbitsearch.braid_type import BraidType
from orbitsearch.braids import Braid
from orbitsearch.classify import classify
from orbitsearch.cycles import canonical_cycle, cycle_of_word
from orbitsearch.errors import BadRequest
from orbitsearch.identity import canonical_start, same_orbit
from orbitsearch.orbit import Orbit, Status
from orbitsearch.refine import refine, verify_as_given
from orbitsearch.search import Found, SearchRequest, search
from orbitsearch.starts import START_SETS
from orbitsearch.strands import swept
from orbitsearch.syzygies import crossings, syzygies
from orbitsearch.words import canonical_word

# Follows a whole period in double precision, from anywhere, without losing an alignment.
TAME = 1e6


def refined(row: published.Collinear) -> Orbit:
    answer = refine("collinear", row.a, row.b, row.period)
    assert answer.orbit is not None
    return answer.orbit


def kind_from_anywhere(
    orbit: Orbit, moment: float, backwards: bool, images: tuple[int, int, int], mirror: bool
) -> tuple[str, BraidType]:
    """Cycle and braid of a whole period from some moment, run, labelled and mirrored as asked."""
    starts = START_SETS[orbit.start.kind]
    x = starts.states(np.array([orbit.start.p]), np.array([orbit.start.q]))[0]
    x = flow.propagate(x[None, :], moment * orbit.period).states[0]
    x = bodies.relabelled(x, images, mirror)
    if backwards:
        x = np.concatenate([x[:6], -x[6:]])
    trajectory = flow.track(x, orbit.period)
    seen = crossings(syzygies(trajectory))
    rotation = bodies.turn_between(x, trajectory.last) if orbit.rotation else 0.0
    windings = (swept(trajectory) - rotation) / (2 * math.pi)
    total = round(float(windings.sum()))
    assert np.abs(windings - np.round(windings)).max() < 1e-3
    # Looked at backwards or in the mirror, the frame of a shared curve turns the other way.
    sense = 1 if rotation * orbit.rotation >= 0 else -1
    group = replace(orbit.symmetry, frame_turns=sense * orbit.symmetry.frame_turns)
    cycle = "".join(str(body) for body, _ in seen)
    return canonical_cycle(cycle), BraidType.of(seen, total, group, rotation)


def check_kind(orbit: Orbit) -> None:
    """One type from any start, any moment, either direction, any labels, and in the mirror."""
    assert orbit.braid is not None
    assert orbit.symmetry is not None
    assert 1 <= len(orbit.starts) <= 2
    for start in orbit.starts:
        # An alternative start comes from symmetry; refined by itself it gives the same orbit.
        found = refine(start.kind, start.p, start.q, float(start.period)).orbit
        assert found is not None
        assert not found.solution.moved > 1e-6
        assert same_orbit(found, orbit)
        for other in (found, verify_as_given(start.kind, start.p, start.q, float(start.period))):
            assert isinstance(other, Orbit)
            assert (other.cycle, other.word, other.braid) == (orbit.cycle, orbit.word, orbit.braid)
            assert other.symmetry.names == orbit.symmetry.names
            assert other.symmetry.reversals == orbit.symmetry.reversals
        chosen = canonical_start(found)
        assert chosen.kind == canonical_start(orbit).kind
        assert math.isclose(chosen.p, canonical_start(orbit).p, abs_tol=1e-7)
    if orbit.stability.max_multiplier > TAME:
        return
    looks = [
        (0.123, False, (0, 1, 2), False),
        (0.123, True, (0, 1, 2), False),
        (0.371, False, (1, 2, 0), False),
        (0.371, True, (1, 0, 2), True),
        (0.713, False, (2, 1, 0), True),
    ]
    for look in looks:
        cycle, kind = kind_from_anywhere(orbit, *look)
        assert cycle == orbit.cycle
        assert kind == orbit.braid


def check_window(window: tuple[float, float, float, float], grid: int) -> Counter[str]:
    """Kinds of every orbit that a search of collinear starts finds, checked one by one."""
    request = SearchRequest("collinear", window, (grid, grid), 40.0)
    orbits = [event.orbit for event in search(request, workers=1) if isinstance(event, Found)]
    for orbit in orbits:
        check_kind(orbit)
        assert orbit.symmetry.ends[0] == "C3"
    tame = sum(orbit.stability.max_multiplier <= TAME for orbit in orbits)
    assert tame >= len(orbits) / 2
    return Counter(orbit.symmetry.title for orbit in orbits)


def test_every_orbit_of_the_default_window_has_one_kind() -> None:
    # The default of the command: `orbitsearch search`.
    titles = check_window(START_SETS["collinear"].window, 80)
    assert titles.total() >= 20
    assert titles["choreography, mirror"] >= 1
    assert len(titles) >= 3


@pytest.mark.slow
def test_every_orbit_of_the_acceptance_window_has_one_kind() -> None:
    # As in tests/test_search.py, where X. Li & S. Liao (2017) list 12 orbits.
    assert check_window((0.0, 0.913, 0.0, 0.913), 200).total() >= 60


@pytest.mark.parametrize("kind", ["isosceles", "rest", "perpendicular"])
def test_orbits_of_the_other_sets_have_one_kind(kind: str) -> None:
    request = SearchRequest(kind, START_SETS[kind].window, (16, 16), 21.0)
    orbits = [event.orbit for event in search(request, workers=1) if isinstance(event, Found)]
    assert orbits
    for orbit in orbits:
        check_kind(orbit)


def test_the_figure_eight() -> None:
    # A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881; trace and dilatation follow from
    # its braid (s1 s2^-1)^3, common practice, no source.
    eight = refined(published.EIGHT)
    assert (eight.cycle, eight.word) == ("123123", "abAB")
    assert eight.braid.braid.trace == 18
    assert math.isclose(eight.braid.braid.dilatation, ((3 + math.sqrt(5)) / 2) ** 3, rel_tol=1e-14)
    assert (eight.braid.part, eight.braid.part_braid.trace) == (3, 3)
    assert eight.choreography
    assert eight.symmetry.reversals == {"collinear": 6, "isosceles": 6}
    # All six alignments are one, seen six times: an Euler shape, 60 degrees from two collisions.
    assert math.isclose(eight.margins[1], math.pi / 3, rel_tol=1e-9)


def test_its_twin_has_the_same_braid_and_is_no_choreography() -> None:
    # M. Suvakov, CMDA 119 (2014) 369.
    eight, twin = refined(published.EIGHT), refined(published.EIGHT_TWIN)
    assert (twin.cycle, twin.word, twin.braid.braid) == (eight.cycle, eight.word, eight.braid.braid)
    assert twin.braid.part == 1
    assert not twin.choreography
    assert twin.symmetry.deviation < 1e-9
    assert not same_orbit(eight, twin)


def test_of_two_seventh_powers_one_is_a_choreography() -> None:
    # The same source.
    orbits = [refined(row) for row in published.EIGHT_SEVENTH_POWERS]
    eight = Braid.from_artin([1, -2]).canonical()
    for orbit in orbits:
        assert orbit.braid.braid == eight.power(21).canonical()
        assert (orbit.word, orbit.word_power) == ("abAB" * 7, 7)
    assert sorted(orbit.choreography for orbit in orbits) == [False, True]


@pytest.mark.parametrize("row", published.LI_LIAO_2017, ids=lambda row: f"{row.a}")
def test_words_of_published_rows(row: published.Collinear) -> None:
    orbit = refined(row)
    assert orbit.braid is not None
    if row.word is not None:
        assert orbit.word == canonical_word(row.word)
        assert orbit.cycle == cycle_of_word(row.word)


# The second printed row lies 7 standard deviations below the mean of the paper's own table; so it
# does with the printed T* and the printed word.
OUTLIER = "BaBabAbA"


@pytest.mark.parametrize("row", published.LI_LIAO_2017, ids=lambda row: f"{row.a}")
def test_period_over_word_length_of_published_rows(row: published.Collinear) -> None:
    orbit = refined(row)
    assert (period_law.MEAN, period_law.SPREAD) == published.LI_LIAO_2017_SCALED_PERIOD_PER_LETTER
    if row.word == OUTLIER:
        assert orbit.law_residual < -7 * period_law.SPREAD
        printed = row.scaled_period / len(row.word)
        assert math.isclose(orbit.period_per_letter, printed, rel_tol=1e-4)
    else:
        assert abs(orbit.law_residual) <= period_law.SPREAD


@pytest.mark.parametrize("row", published.SUVAKOV_DMITRASINOVIC_2013, ids=lambda row: f"{row.a}")
def test_orbits_of_guesses_have_a_kind(row: published.Collinear) -> None:
    orbit = refined(row)
    assert orbit.braid is not None
    assert orbit.symmetry is not None
    assert orbit.status in (Status.VERIFIED, Status.NOT_CONFIRMED)


def test_twice_round_is_once() -> None:
    row = published.EIGHT
    answer = refine("collinear", row.a, row.b, 2 * row.period)
    assert "1/2 of the period given" in answer.message
    assert answer.orbit is not None
    assert same_orbit(answer.orbit, refined(row))
    assert answer.orbit.braid == refined(row).braid


def test_orbits_of_ones_own_are_held_against_the_law() -> None:
    found = period_law.summary([(4, 20.0, 8), (5, 24.4, 10), (6, 5.0, 0), (7, 17.7, 2)])
    assert (found.median, found.inside, found.count, found.farthest) == (2.5, 2, 3, 7)
    nothing = period_law.summary([])
    assert math.isnan(nothing.median)
    assert (nothing.inside, nothing.count, nothing.farthest) == (0, 0, None)


def test_the_law_is_not_applied_without_a_collinear_start() -> None:
    orbit = refine("perpendicular", 0.7174839841, 1.712197665, 5.917596568).orbit
    assert orbit.word
    assert orbit.period_per_letter is not None
    assert orbit.law_residual is None


# Found by this program: they turn, and bodies take each other's places in a part of the period.
TURNING = [
    ("isosceles", 0.3249286291, 0.3542218585, 8.597643533),
    ("isosceles", 0.4182429808, 0.06752759452, 6.743157422),
    ("isosceles", 2.261217026, 0.1130824478, 226.9961832),
    ("perpendicular", 0.4406315915, 1.033960556, 6.437871478),
]


@pytest.mark.parametrize("guess", TURNING, ids=str)
def test_the_braid_of_a_turning_orbit_is_a_power_of_that_of_its_part(guess) -> None:
    orbit = refine(*guess).orbit
    assert orbit.rotation != 0
    assert orbit.braid.part == 2
    power = orbit.braid.part_braid.power(2)
    assert power.canonical(keep_sense=True) == orbit.braid.braid
    assert 2 * sum(orbit.braid.windings) == orbit.braid.braid.exponent_sum


@pytest.mark.parametrize("guess", TURNING, ids=str)
def test_windings_are_those_of_the_description_that_turns_counterclockwise(guess) -> None:
    # Rotation and windings together are what the sides sweep, in the inertial frame, in a period.
    orbit = refine(*guess).orbit
    for start in orbit.starts:
        found = verify_as_given(start.kind, start.p, start.q, float(start.period))
        x = START_SETS[start.kind].states(np.array([start.p]), np.array([start.q]))[0]
        angles = swept(flow.track(x, float(start.period))) * math.copysign(1.0, found.rotation)
        frame = abs(found.rotation)
        turns = found.symmetry.frame_turns * math.copysign(1.0, found.rotation)
        windings = (angles - frame) / (2 * math.pi) - turns
        assert np.allclose(sorted(windings, reverse=True), orbit.braid.windings, atol=1e-5)
        assert found.braid == orbit.braid


def test_a_half_period_through_a_collision_has_no_kind() -> None:
    # An equilateral triangle let go at rest falls into its middle.
    rest = START_SETS["rest"]
    x = rest.states(np.array([0.0]), np.array([math.sqrt(0.75)]))[0]
    trajectory = flow.track(x, 10.0)
    assert trajectory.status is Status.COLLISION
    with pytest.raises(BadRequest, match="collision"):
        classify(rest.own, trajectory, 0.0)
