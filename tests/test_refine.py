"""From printed digits to orbits: what the literature lists is found, to its digits, and said so."""

import itertools
import math

import numpy as np
import pytest
from published import (
    EIGHT,
    EIGHT_ANGLES,
    EIGHT_SEVENTH_POWERS,
    EIGHT_TWIN,
    LI_LIAO_2017,
    LI_LIAO_2017_SCALED_PERIOD_PER_LETTER,
    LI_LIAO_2019,
    SUVAKOV_DMITRASINOVIC_2013,
    SUVAKOV_DMITRASINOVIC_2013_TENTH_PERIOD,
)

from orbitsearch.errors import BadRequest
from orbitsearch.identity import same_orbit
from orbitsearch.orbit import Orbit, Status
from orbitsearch.refine import Refinement, refine
from orbitsearch.words import canonical_word

KEPT = (Status.VERIFIED, Status.NOT_CONFIRMED)
SOURCES = {
    "Li & Liao 2017": LI_LIAO_2017,
    "Suvakov & Dmitrasinovic 2013": SUVAKOV_DMITRASINOVIC_2013,
    "Suvakov 2014": (EIGHT_TWIN, *EIGHT_SEVENTH_POWERS),
}
COLLINEAR = [
    pytest.param(row, id=f"{source}, {number}")
    for source, rows in SOURCES.items()
    for number, row in enumerate(rows, start=1)
]
WITH_WORD = [row for row in (EIGHT, EIGHT_TWIN, *LI_LIAO_2017) if row.word]


def refined(start: str, p: float, q: float, period: float) -> Orbit:
    """The orbit of a guess that has to be answered by what was asked for."""
    answer = refine(start, p, q, period)
    assert answer.orbit is not None, answer.message
    assert answer.status in KEPT
    assert not answer.elsewhere
    assert answer.message.endswith("of itself")
    return answer.orbit


@pytest.mark.parametrize("row", COLLINEAR)
def test_published_collinear_starts_are_refined_to_what_is_printed(row) -> None:
    orbit = refined("collinear", row.a, row.b, row.period)
    if row in SUVAKOV_DMITRASINOVIC_2013:
        # Five digits, some of them cut; their periods are right to three.
        assert (orbit.start.p, orbit.start.q) == pytest.approx((row.a, row.b), abs=1e-5)
        assert orbit.period == pytest.approx(row.period, rel=5e-4)
        return
    # Their parameters are right to the last place.  Periods of Li & Liao are off by up to 8e-11 of
    # themselves; the one recomputed with many digits, below, says that it is theirs.
    digit, share = (1e-10, 1e-10) if row in LI_LIAO_2017 else (1e-12, 1e-11)
    assert (orbit.start.p, orbit.start.q) == pytest.approx((row.a, row.b), abs=digit)
    assert orbit.period == pytest.approx(row.period, rel=share)
    if row in LI_LIAO_2017:
        assert orbit.scaled_period == pytest.approx(row.scaled_period, abs=1e-3)


def test_the_figure_eight_has_its_digits() -> None:
    orbit = refined("collinear", 0.3471, 0.5327, 6.326)
    assert (orbit.start.p, orbit.start.q) == pytest.approx((EIGHT.a, EIGHT.b), abs=1e-14)
    assert orbit.period == pytest.approx(EIGHT.period, rel=1e-14)
    assert orbit.energy == pytest.approx(EIGHT.energy, rel=1e-14)
    assert orbit.scaled_period == pytest.approx(EIGHT.scaled_period, rel=1e-14)
    assert orbit.stability.angles == pytest.approx(EIGHT_ANGLES, abs=1e-10)
    assert orbit.stability.stable
    assert orbit.cycle == "123123"


def test_its_twin_has_its_own_period() -> None:
    orbit = refined("collinear", EIGHT_TWIN.a, EIGHT_TWIN.b, EIGHT_TWIN.period)
    assert orbit.scaled_period == pytest.approx(EIGHT_TWIN.scaled_period, abs=1e-9)
    eight = refined("collinear", EIGHT.a, EIGHT.b, EIGHT.period)
    assert (orbit.word, orbit.cycle) == (eight.word, eight.cycle)
    assert not same_orbit(orbit, eight)


def test_the_tenth_of_2013_has_the_period_computed_with_many_digits() -> None:
    row = SUVAKOV_DMITRASINOVIC_2013[9]
    orbit = refined("collinear", row.a, row.b, row.period)
    # Of condition 1e3: 13 digits of the period's 24.
    assert orbit.period == pytest.approx(SUVAKOV_DMITRASINOVIC_2013_TENTH_PERIOD, rel=1e-12)


# λ + 1/λ of the larger pair of two orbits, recomputed for this project with more than 40 digits
# from the starts of X. Li & S. Liao (2017) and M. Suvakov & V. Dmitrasinovic (2013).
TRACES = [
    (LI_LIAO_2017[0], 2.33889854),
    (SUVAKOV_DMITRASINOVIC_2013[9], 5.193409755),
]


@pytest.mark.parametrize(("row", "trace"), TRACES)
def test_traces_of_two_orbits_are_those_of_many_digits(row, trace) -> None:
    stability = refined("collinear", row.a, row.b, row.period).stability
    assert stability.traces[0].real == pytest.approx(trace, rel=5e-9)
    assert stability.traces[0].imag == 0.0
    assert stability.max_multiplier == pytest.approx(trace / 2 + math.sqrt(trace**2 / 4 - 1))


@pytest.mark.parametrize("row", WITH_WORD, ids=lambda row: row.word)
def test_words_are_the_published_ones(row) -> None:
    assert refined("collinear", row.a, row.b, row.period).word == canonical_word(row.word)


def test_seventh_powers_of_the_figure_eight_have_its_word_seven_times() -> None:
    orbits = [refined("collinear", row.a, row.b, row.period) for row in EIGHT_SEVENTH_POWERS]
    assert [orbit.word for orbit in orbits] == ["abAB" * 7] * 2
    # M. Suvakov (2014): one of the two is a choreography, and it is linearly stable.
    assert [orbit.choreography for orbit in orbits] == [True, False]
    assert orbits[0].stability.stable


def test_only_the_figure_eight_and_its_power_are_choreographies() -> None:
    found = [
        row
        for row in (EIGHT, EIGHT_TWIN, *LI_LIAO_2017, *EIGHT_SEVENTH_POWERS)
        if refined("collinear", row.a, row.b, row.period).choreography
    ]
    assert found == [EIGHT, EIGHT_SEVENTH_POWERS[0]]


def test_scaled_period_grows_with_the_length_of_the_word() -> None:
    mean, deviation = LI_LIAO_2017_SCALED_PERIOD_PER_LETTER
    for row in LI_LIAO_2017:
        orbit = refined("collinear", row.a, row.b, row.period)
        assert abs(orbit.scaled_period / len(orbit.word) - mean) < 9 * deviation


def test_the_last_two_pairs_of_2013_are_one_orbit_each() -> None:
    rows = SUVAKOV_DMITRASINOVIC_2013
    orbits = [refined("collinear", row.a, row.b, row.period) for row in rows[10:]]
    assert same_orbit(orbits[0], orbits[1])
    assert same_orbit(orbits[2], orbits[3])
    assert not same_orbit(orbits[1], orbits[2])


@pytest.mark.parametrize("row", LI_LIAO_2019, ids=lambda row: f"T={row.period}")
def test_published_rest_starts_are_refined_to_what_is_printed(row) -> None:
    orbit = refined("rest", row.x, row.y, row.period)
    assert (orbit.start.p, orbit.start.q) == pytest.approx((row.x, row.y), abs=1e-10)
    assert orbit.period == pytest.approx(row.period, abs=2e-10)
    assert orbit.rotation == 0.0


BOTH_STARTS = [
    ("collinear", *EIGHT[:3], {"collinear", "isosceles"}),
    ("collinear", *EIGHT_SEVENTH_POWERS[0][:3], {"collinear"}),
    ("collinear", *LI_LIAO_2017[3][:3], {"collinear", "isosceles"}),
    ("collinear", *SUVAKOV_DMITRASINOVIC_2013[3][:3], {"collinear", "perpendicular"}),
    ("rest", *LI_LIAO_2019[0], {"rest"}),
    ("rest", *LI_LIAO_2019[3], {"rest", "isosceles"}),
    ("rest", *LI_LIAO_2019[4], {"rest", "perpendicular"}),
]


@pytest.mark.parametrize(("start", "p", "q", "period", "kinds"), BOTH_STARTS)
def test_both_starts_of_an_orbit_lead_to_it(start, p, q, period, kinds) -> None:
    orbit = refined(start, p, q, period)
    assert len(orbit.starts) == 2
    assert {one.kind for one in orbit.starts} == kinds
    again = [refined(one.kind, one.p, one.q, float(one.period)) for one in orbit.starts]
    for one, other in itertools.product(again, repeat=2):
        assert same_orbit(one, other)
        # The most unstable of them, with a multiplier of 1e8, keeps ten digits.
        assert one.scaled_period == pytest.approx(other.scaled_period, rel=1e-9)
        # Words change with the body that is silent, cycles with nothing.
        assert one.cycle == other.cycle


def test_newton_needs_few_iterations_from_published_digits() -> None:
    # Measured 3 to 7 from ten digits and from five.
    for row in (*LI_LIAO_2017, *SUVAKOV_DMITRASINOVIC_2013):
        solution = refine("collinear", row.a, row.b, row.period).solution
        assert solution.status is Status.CONVERGED
        assert solution.iterations <= 8
        # The arc is at most half a period of about 30 steps to a unit of T*, plus its events.
        unit = 2.5 - 3.0 * (row.a**2 + row.b**2)
        assert solution.steps <= solution.iterations * 30 * row.period * unit**1.5


def test_landing_on_another_orbit_is_said() -> None:
    answer = refine("collinear", 0.3, 0.1, 6.0)
    assert answer.elsewhere
    assert answer.orbit is not None
    assert answer.orbit.start.p == pytest.approx(LI_LIAO_2017[0].a, abs=1e-9)
    assert answer.message == (
        "landed on a different orbit than asked: a parameter moved by 0.0255, the period by +3.911%"
    )
    # So is a start that stays where it was, with a period that does not.
    row = SUVAKOV_DMITRASINOVIC_2013[0]
    assert refine("collinear", row.a, row.b, 0.94 * row.period).elsewhere


@pytest.mark.parametrize("times", [2, 3, 4])
def test_a_multiple_of_the_least_period_is_said(times) -> None:
    answer = refine("collinear", 0.3471, 0.5327, times * 6.3259)
    assert answer.message == f"the least period is 1/{times} of the period given"
    assert answer.orbit is not None
    assert answer.orbit.period == pytest.approx(EIGHT.period, rel=1e-13)
    assert answer.status is Status.VERIFIED


@pytest.mark.parametrize(
    ("start", "p", "q", "period", "status"),
    [
        ("collinear", 0.347, 0.533, 7.0, Status.DIVERGED),
        ("collinear", 0.347, 0.533, 10.0, Status.ESCAPE),
        ("collinear", 0.0, 0.5, 8.0, Status.COLLISION),
    ],
)
def test_finding_nothing_is_a_result_with_a_reason(start, p, q, period, status) -> None:
    answer = refine(start, p, q, period)
    assert answer == Refinement(answer.solution, None, False, answer.message)
    assert answer.status is status
    assert answer.message == f"no orbit found: {answer.solution.reason}"


@pytest.mark.parametrize(
    ("guess", "message"),
    [
        (("square", 0.3, 0.5, 6.0), r"`start` must be one of collinear, .*: 'square'"),
        (("collinear", math.nan, 0.5, 6.0), r"`a` must be a finite number: nan"),
        (("isosceles", 0.5, math.inf, 6.0), r"`u` must be a finite number: inf"),
        (("rest", -math.inf, 0.5, 6.0), r"`x` must be a finite number: -inf"),
        (("collinear", 0.3, 0.5, math.nan), r"`period` must be a finite number: nan"),
        (("collinear", 0.3, 0.5, 0.0), r"`period` must be positive: 0.0; give the period at"),
        (("collinear", 0.3, 0.5, -6.3), r"`period` must be positive: -6.3; give the period at"),
        (("rest", 0.3, 0.0, 6.3), r"`x`, `y` = 0.3, 0.0 lie .*`orbitsearch starts`"),
        (("isosceles", 0.0, 0.1, 6.3), r"`eta`, `u` = 0.0, 0.1 lie outside the domain"),
        (("perpendicular", 1.0, 0.1, 6.3), r"`s`, `v` = 1.0, 0.1 lie outside the domain"),
        (("collinear", 0.9, 0.2, 6.3), r"must be bound, E < 0: E = 0.05; choose smaller"),
    ],
)  # fmt: skip
def test_a_guess_that_breaks_a_rule_says_which(guess, message) -> None:
    with pytest.raises(BadRequest, match=message) as raised:
        refine(*guess)
    assert "\n" not in str(raised.value)


@pytest.mark.parametrize(
    ("start", "p", "q", "period"),
    [
        ("collinear", -0.3471, 0.5327, 6.3259),
        ("collinear", 0.3471, -0.5327, 6.3259),
        ("rest", -0.0207067154, -0.3133550361, 2.1740969264),
    ],
)
def test_signs_of_other_conventions_are_brought_to_standard_form(start, p, q, period) -> None:
    usual = refine(start, abs(p), abs(q), period)
    answer = refine(start, p, q, period)
    assert answer.orbit is not None
    assert usual.orbit is not None
    assert same_orbit(answer.orbit, usual.orbit)
    assert answer.message.startswith("in standard form ")
    assert "in standard form" not in usual.message


def test_a_rest_start_over_a_shorter_side_is_scaled_to_the_longest() -> None:
    # The same triangle with corners 1 and 3 exchanged: its base was the shorter side.
    known = refine("rest", 0.2053886532, 0.1952668419, 1.6896364928)
    assert known.orbit is not None
    r = np.array([[-0.5, 0.0], [0.5, 0.0], [known.orbit.start.p, known.orbit.start.q]])
    base = r[2] - r[1]
    unit = np.hypot(*base)
    place = r[0] - 0.5 * (r[1] + r[2])
    along, across = place @ base / unit**2, (base[0] * place[1] - base[1] * place[0]) / unit**2
    answer = refine("rest", along, across, known.orbit.period / unit**1.5)
    assert answer.orbit is not None
    assert same_orbit(answer.orbit, known.orbit)
    assert abs(answer.solution.period_moved) < 1e-9
