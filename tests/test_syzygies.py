"""Syzygies with margins: exact states, published words, half a period against a whole one."""

import math

import numpy as np
import published
import pytest
import reference
from test_events import touching_state
from test_homographic import homographic, period

from orbitsearch import bodies, flow, words
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Status
from orbitsearch.shape import shape_velocity
from orbitsearch.starts import CONDITIONS
from orbitsearch.syzygies import (
    Syzygy,
    crossings,
    least_margins,
    period_syzygies,
    syzygies,
)

EIGHT = reference.sides(*reference.collinear(published.EIGHT.a, published.EIGHT.b))
T_EIGHT = published.EIGHT.period
OWN = {condition.label: condition for condition in CONDITIONS.values()}


def aligned(row):
    """Sides and rates of a published start in line that moves across it."""
    r = np.stack([row.positions, np.zeros(3)], axis=-1)
    return reference.sides(r, np.stack([np.zeros(3), row.velocities], axis=-1))


# ---------------------------------------------------------------- the figure-eight


def test_the_figure_eight_is_in_line_six_times_with_equal_margins():
    # A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881: twelve congruent arcs from an Euler
    # point to an isosceles triangle, so all six crossings are one, at 60 degrees from collisions.
    found = syzygies(flow.track(EIGHT, T_EIGHT))
    assert [s.time for s in found] == pytest.approx(T_EIGHT / 6 * np.arange(6), abs=1e-12)
    assert [s.distance for s in found] == pytest.approx([np.pi / 3] * 6, abs=1e-12)
    assert [s.angle for s in found] == pytest.approx([found[0].angle] * 6, abs=1e-12)
    # In complex numbers ρ = -√2, ρ' = 0, λ = 0, λ' = √6 (a + ib) there: the point moves on as
    # 2ρ'λ, at an angle to the equator that is the one of (a, b) to the line.
    angle = math.atan2(published.EIGHT.b, published.EIGHT.a)
    assert least_margins(found) == pytest.approx((angle, np.pi / 3), abs=1e-12)
    assert "".join(str(s.middle) for s in found) == "312312"
    assert [s.direction for s in found] == [1, -1] * 3
    assert words.canonical_word(words.free_group_word(crossings(found))) == "abAB"


def test_half_a_figure_eight_gives_the_whole_from_either_kind_of_start():
    whole = syzygies(flow.track(EIGHT, T_EIGHT))
    mirrored = period_syzygies(OWN["C3"], flow.track(EIGHT, T_EIGHT / 2))
    assert crossings(mirrored) == crossings(whole)
    assert np.array(mirrored) == pytest.approx(np.array(whole), abs=1e-11)
    # From the isosceles triangle a twelfth of the period later; its apex is body 2.
    start = flow.propagate(EIGHT, T_EIGHT / 12).states[0]
    mirrored = period_syzygies(OWN["I2"], flow.track(start, T_EIGHT / 2))
    assert crossings(mirrored) == crossings(whole)[1:] + crossings(whole)[:1]
    assert [s.time for s in mirrored] == pytest.approx(T_EIGHT / 12 * np.arange(1, 12, 2))


def test_every_crossing_is_told_once_wherever_a_period_begins():
    # The start may be a hair before the line, on it, or a hair after.
    cycle = crossings(syzygies(flow.track(EIGHT, T_EIGHT)))
    for shift in (-1e-3, -1e-8, -1e-12, 0.0, 1e-12, 1e-8, 1e-3, 0.5):
        start = flow.propagate(EIGHT, shift).states[0] if shift else EIGHT
        found = crossings(syzygies(flow.track(start, T_EIGHT)))
        assert found in (cycle, cycle[1:] + cycle[:1]), shift
    for angle in np.linspace(0.0, 2 * np.pi, 41):
        assert crossings(syzygies(flow.track(bodies.turned(EIGHT, angle), T_EIGHT))) == cycle


def test_pieces_of_a_motion_can_be_joined():
    whole = crossings(syzygies(flow.track(EIGHT, T_EIGHT)))
    for cut in (T_EIGHT / 6, T_EIGHT / 2, 2.0):
        first = flow.track(EIGHT, cut)
        second = flow.track(first.last, T_EIGHT - cut)
        assert crossings(syzygies(first)) + crossings(syzygies(second)) == whole


# ---------------------------------------------------------------- margins of exact states


@pytest.mark.parametrize("angle", [np.pi / 2, 1.0, 0.1, 1e-3, 1e-6, 1e-9])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_the_angle_is_that_of_a_middle_body_that_crosses(angle, side):
    # The outer bodies stay, so ρ is fixed and the shape moves as λ does: a body midway that moves
    # at an angle to the line crosses the equator at that angle, downward when it moves down.
    r = np.array([[-1.0, 0.0], [1.0, 0.0], [0.0, 0.0]])
    velocity = 2.0 * np.array([math.cos(angle), side * math.sin(angle)])
    v = np.array([-velocity / 2, -velocity / 2, velocity])
    (found,) = syzygies(flow.track(reference.sides(r, v), 0.05))
    assert found.angle == pytest.approx(angle, rel=1e-14)
    assert found.distance == pytest.approx(np.pi / 3, rel=1e-15)
    assert (found.middle, found.direction, found.time) == (3, -int(side), 0.0)


def test_angle_and_distance_are_found_at_an_event_as_at_a_beginning():
    # The same state, met from 0.1 earlier.
    r = np.array([[-1.0, 0.0], [0.3, 0.0], [1.0, 0.0]])
    v = np.array([[0.1, 0.4], [-0.3, -0.5], [0.2, 0.1]])
    x = reference.sides(r, v)
    (here,) = syzygies(flow.track(x, 0.05))
    (met,) = syzygies(flow.track(flow.propagate(x, -0.1).states[0], 0.15))
    assert (here.middle, here.direction) == (met.middle, met.direction) == (2, -1)
    assert met.time == pytest.approx(0.1, abs=1e-13)
    assert met.angle == pytest.approx(here.angle, abs=1e-12)
    assert met.distance == pytest.approx(here.distance, abs=1e-12)


@pytest.mark.parametrize("gap", [0.6, 0.1, 1e-3, 1e-5])
def test_the_distance_is_that_of_the_nearest_pair(gap):
    # Bodies 2 and 3 at the distance `gap`, body 1 at 1 from their middle: tan(d/2) = |ρ|/|λ| of
    # that pair is (gap/√2)/(2/√6) = gap √3/2.
    r = np.array([[-1.0, 0.0], [-gap / 2, 0.0], [gap / 2, 0.0]])
    v = np.array([[0.0, -0.1], [0.0, 1.0], [0.0, -0.9]])
    (found,) = syzygies(flow.track(reference.sides(r, v), 1e-3 * gap**1.5))
    assert found.middle == 2
    assert found.distance == pytest.approx(2 * math.atan(gap * 3**0.5 / 2), rel=1e-13)


@pytest.mark.parametrize("depth", [1e-3, 1e-5, 1e-7])
def test_grazing_adds_two_crossings_that_cancel(depth):
    # A motion whose area D touches zero with D'' = c (test_events.py), and bent by `depth` across
    # it: rates ±√(2 c depth) at two crossings, and a climb of 2 D'/(√3 I) on the sphere.
    x, curvature = touching_state()
    shift = np.copysign(depth / x[0], curvature) * np.array([0, 0, 0, 1, 0, -1, *(0,) * 6])
    # Labels moved on by one: the arc of body 3 would be silent in any word.
    across, short = (
        syzygies(flow.track(flow.propagate(relabelled, -0.15).states[0], 0.3))
        for relabelled in (
            np.roll(y.reshape(2, 3, 2), 1, axis=1).ravel() for y in (x - shift, x + shift)
        )
    )
    assert short == []
    assert [s.middle for s in across] == [1, 1]
    assert across[0].direction == -across[1].direction
    assert words.free_group_word(crossings(across)) == ""
    climb = 2 / np.sqrt(3) * np.sqrt(2 * abs(curvature) * depth) / (np.sum(x[:6] ** 2) / 3)
    speed = np.linalg.norm(shape_velocity(x))
    angle, distance = least_margins(across)
    assert angle == pytest.approx(climb / speed, rel=10 * np.sqrt(depth))
    assert distance > 0.5


def test_there_are_no_margins_without_crossings():
    # Three bodies that circle at the corners of an equilateral triangle.
    found = syzygies(flow.track(homographic("triangle", 0.3, 0.0), period("triangle") / 2))
    assert found == []
    assert least_margins(found) == (math.inf, math.inf)
    assert crossings(found) == []


# ---------------------------------------------------------------- published orbits


@pytest.mark.parametrize(
    "row", [r for r in published.LI_LIAO_2017 if r.word], ids=lambda r: f"T={r.period:.0f}"
)
def test_published_words_come_out(row):
    # X. Li & S. Liao, Sci. China Phys. Mech. Astron. 60 (2017) 129511.
    start = reference.sides(*reference.collinear(row.a, row.b))
    found = period_syzygies(OWN["C3"], flow.track(start, row.period / 2))
    word = words.free_group_word(crossings(found))
    assert words.canonical_word(word) == words.canonical_word(row.word)
    assert crossings(syzygies(flow.track(start, row.period))) == crossings(found)


COLLINEAR = (
    *published.LI_LIAO_2017[1:4],
    published.EIGHT_TWIN,
    *published.EIGHT_SEVENTH_POWERS,
)
WHOLE = [
    *(("C3", reference.sides(*reference.collinear(r.a, r.b)), r.period) for r in COLLINEAR),
    *(("rest", reference.sides(*reference.at_rest(r.x, r.y)), r.period) for r in
      published.LI_LIAO_2019),
    *(("P", aligned(r), r.period) for r in published.BROUCKE_1975),
]  # fmt: skip


@pytest.mark.parametrize(("label", "start", "period"), WHOLE, ids=lambda v: str(v)[:8])
def test_half_a_period_mirrored_is_the_whole_one(label, start, period):
    # Li & Liao 2017 and 2019, Šuvakov 2014, Broucke 1975: every kind of start but the isosceles,
    # for which see the figure-eight.
    half, track = (flow.track(start, t) for t in (period / 2, period))
    assert track.status is Status.CONVERGED
    mirrored, whole = period_syzygies(OWN[label], half), syzygies(track)
    assert len(whole) >= 2
    assert crossings(mirrored) == crossings(whole)
    # The other half is as far off as rounding and printed digits grow by then.
    assert np.array(mirrored) == pytest.approx(np.array(whole), abs=2e-4)
    assert [s.time for s in mirrored] == sorted(s.time for s in mirrored)
    assert all(0 <= s.time < period for s in mirrored)
    assert all(0 < s.angle <= np.pi / 2 and 0 < s.distance <= np.pi / 3 + 1e-9 for s in mirrored)


def test_margins_at_mirrored_moments_are_the_same():
    row = published.LI_LIAO_2017[3]
    start = reference.sides(*reference.collinear(row.a, row.b))
    found = period_syzygies(OWN["C3"], flow.track(start, row.period / 2))
    assert len(found) == 34
    for one, other in zip(found[1:], found[:0:-1], strict=True):
        assert one.time + other.time == pytest.approx(row.period, abs=1e-9)
        assert one[3:] == other[3:]
        # Reversal with point reflection and labels 1 and 2 exchanged.
        assert other.middle == {1: 2, 2: 1, 3: 3}[one.middle]
        assert one.direction == other.direction


# ---------------------------------------------------------------- bad requests


@pytest.mark.parametrize(
    "start",
    [
        reference.sides(np.array([[-1.0, 0], [1, 0], [0, 0]]), np.zeros((3, 2))),
        reference.sides(*reference.at_rest(0.0, 0.6)),
    ],
    ids=["in line", "isosceles"],
)
def test_motions_into_a_collision_are_refused(start):
    track = flow.track(start, 10.0)
    assert track.status is Status.COLLISION
    with pytest.raises(
        BadRequest, match=r"^`trajectory` must not run into a collision, it does at"
    ):
        syzygies(track)
    with pytest.raises(BadRequest, match=r"^`half` must not run into a collision, it does at time"):
        period_syzygies(OWN["rest"], track)


@pytest.mark.parametrize("name", ["line", "turned line"])
def test_motions_along_the_equator_have_no_crossings_to_tell(name):
    track = flow.track(homographic(name, 0.4, 0.0), 0.25 * period(name))
    with pytest.raises(BadRequest, match="the three bodies stay in line all the time"):
        syzygies(track)
    with pytest.raises(BadRequest, match="the three bodies stay in line all the time"):
        period_syzygies(OWN["C3"], track)


def test_half_a_period_must_be_reached():
    track = flow.track(EIGHT, T_EIGHT / 2, max_steps=10)
    with pytest.raises(
        BadRequest, match=r"`half` must be half a period, it ended as budget at time"
    ):
        period_syzygies(OWN["C3"], track)


def test_a_missed_crossing_is_noticed():
    track = flow.track(EIGHT, T_EIGHT)
    events = track.events
    keep = np.arange(len(events.times)) != np.flatnonzero(events.functions == 0)[2]
    # The cached events of this trajectory, less one.
    track.__dict__["events"] = flow.Events(*(v[keep] for v in vars(events).values()))
    with pytest.raises(
        BadRequest,
        match=r"`trajectory` must cross .* it has \+1 at times 2\.1\d+ and 4\.2\d+: a",
    ):
        syzygies(track)


def test_a_motion_that_does_not_close_is_noticed():
    # Where the area grows at what is not the middle of the period, although it did before.
    half = flow.track(EIGHT, 0.55 * T_EIGHT)
    with pytest.raises(BadRequest, match=r"`half` must cross .* or the motion does not close"):
        period_syzygies(OWN["C3"], half)


def test_margins_are_the_least_of_a_list():
    found = [Syzygy(1, 1, 0.0, 0.5, 0.9), Syzygy(2, -1, 1.0, 0.7, 0.2)]
    assert least_margins(found) == (0.5, 0.2)
    assert least_margins(iter(found)) == (0.5, 0.2)
