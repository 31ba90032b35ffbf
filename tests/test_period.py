"""A period from half of it, against integration of the whole and against the orbit's symmetry."""

from dataclasses import replace

import numpy as np
import pytest

from orbitsearch import bodies, flow
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Orbit, Start, Status
from orbitsearch.period import (
    follow,
    frame_angle,
    motion_from,
    period_states,
    spread_times,
    start_state,
    turned_back,
)
from orbitsearch.refine import refine

# One of each start set, of all kinds of stability; found with this tool but for the first.
GUESSES = {
    "eight": ("collinear", 0.3471168881, 0.5327249454, 6.3259139829),
    "turning": ("isosceles", 0.3249286291, 0.3542218585, 8.597643533),
    "turning far": ("perpendicular", 0.4406315915, 1.033960556, 6.4378714777),
    "from rest": ("rest", 0.2127428845, 0.1773665538, 1.9915034464),
}


@pytest.fixture(scope="module", params=GUESSES)
def orbit(request) -> Orbit:
    found = refine(*GUESSES[request.param]).orbit
    assert found is not None
    return found


@pytest.fixture(scope="module")
def turning() -> Orbit:
    found = refine(*GUESSES["turning"]).orbit
    assert found is not None
    return found


def test_a_period_ends_where_it_began_but_for_the_rotation(orbit):
    period = follow(orbit)
    begin, end = period.states([0.0, orbit.period])
    assert np.allclose(begin, start_state(orbit.start), rtol=0, atol=0)
    assert bodies.distance(bodies.turned(begin, orbit.rotation), end, orbit.energy) < 1e-14


def test_the_two_halves_meet(orbit):
    # Half a period is the one place where the second half could show that it is not the motion.
    period = follow(orbit)
    middle = 0.5 * orbit.period
    before, after = period.states([middle, np.nextafter(middle, np.inf)])
    # What integration of half multiplies the error of the start by, and a margin.
    assert (
        bodies.distance(before, after, orbit.energy) < 1e-12 * orbit.stability.max_multiplier**0.5
    )


def test_the_second_half_is_the_motion_itself(orbit):
    times = np.linspace(0.55, 1.0, 10) * orbit.period
    x = follow(orbit).states(times)
    direct = flow.propagate(np.tile(start_state(orbit.start), (10, 1)), times).states
    apart = max(bodies.distance(a, b, orbit.energy) for a, b in zip(x, direct, strict=True))
    # What integration of the whole multiplies the error of the start by, and a margin.
    assert apart < 1e-12 * max(orbit.stability.max_multiplier, 10.0)


def test_states_of_a_period_keep_energy_and_momentum(orbit):
    _, x = period_states(orbit, 301)
    assert np.allclose(bodies.energy(x), orbit.energy, rtol=1e-10)
    assert np.abs(bodies.angular_momentum(x)).max() < 1e-10


@pytest.mark.parametrize("count", [3, 4, 100, 101])
def test_times_are_as_many_as_asked_and_the_same_from_both_ends(orbit, count):
    times, x = period_states(orbit, count)
    assert len(times) == len(x) == count + 1 - count % 2
    assert (times[0], times[-1]) == (0.0, orbit.period)
    assert (np.diff(times) > 0).all()
    assert np.allclose(times + times[::-1], orbit.period, rtol=1e-15)


def test_samples_are_dense_in_close_passages(turning):
    times, x = period_states(turning, 400)
    gaps = np.diff(times)
    least = np.hypot(x[:, 0:6:2], x[:, 1:6:2]).min(axis=1)
    close, wide = gaps[least[:-1] < 0.2].mean(), gaps[least[:-1] > 0.8].mean()
    assert close < 0.2 * wide


def test_in_the_turning_frame_the_curves_close(turning):
    times, x = period_states(turning, 400)
    assert bodies.distance(x[0], x[-1], turning.energy) > 0.1
    seen = turned_back(times, x, frame_angle(turning) / turning.period)
    assert bodies.distance(seen[0], seen[-1], turning.energy) < 1e-13
    assert np.allclose(bodies.size(seen), bodies.size(x))


def test_in_the_turning_frame_two_bodies_share_a_curve(turning):
    # The symmetry says that 1 is half a period later where 2 was, in this frame and in no other.
    assert turning.symmetry.names == ("shared-curve", "exchange")
    times = np.array([0.0, 0.5]) * turning.period + 0.07
    x = follow(turning).states(times)
    for angle, shared in ((frame_angle(turning), True), (turning.rotation, False)):
        r, _ = bodies.sides_to_bodies(turned_back(times, x, angle / turning.period))
        assert np.allclose(r[1, 0], r[0, 1], atol=1e-10) == shared


def test_only_an_orbit_that_comes_back_turned_needs_a_frame(turning):
    assert frame_angle(turning) == turning.rotation + 2 * np.pi
    assert frame_angle(replace(turning, symmetry=None)) == turning.rotation
    other = replace(turning, symmetry=replace(turning.symmetry, frame_turns=-2))
    assert frame_angle(other) == turning.rotation - 4 * np.pi
    # One that closes may need a frame for bodies to share a curve, but is drawn as it is.
    assert frame_angle(replace(turning, rotation=0.0)) == 0.0


def test_a_start_that_falls_together_is_refused(turning):
    falling = replace(turning, start=Start("isosceles", ("0.3", "0.0"), "10.0"))
    with pytest.raises(BadRequest, match=r"ended as collision at time 1\.28"):
        follow(falling)


def test_too_few_samples_are_refused(turning):
    with pytest.raises(BadRequest, match="`count` must be 2 or more"):
        period_states(turning, 1)


@pytest.mark.parametrize(
    ("start", "ending"),
    [
        (("collinear", 0.34, 0.53, 20.0), Status.CONVERGED),
        (("isosceles", 0.3, 0.0, 10.0), Status.COLLISION),
        (("rest", 0.1, 0.2, 50.0), Status.ESCAPE),
    ],
)
def test_a_motion_is_followed_to_its_end(start, ending):
    motion = motion_from(*start)
    assert motion.status is ending
    times = spread_times(motion, 50)
    assert len(times) == 50
    assert times[-1] == motion.times[-1] <= start[-1]
    assert (times[-1] == start[-1]) == (ending is Status.CONVERGED)


@pytest.mark.parametrize(
    ("start", "message"),
    [
        (("circle", 0.3, 0.5, 1.0), "`start` must be one of collinear"),
        (("isosceles", 0.3, np.nan, 1.0), "`u` must be a finite number: nan"),
        (("isosceles", 0.3, 0.1, np.inf), "`time` must be a finite number: inf"),
        (("isosceles", 0.3, 0.1, 0.0), "`time` must be positive, got 0.0"),
    ],
)
def test_a_motion_that_cannot_be_asked_for(start, message):
    with pytest.raises(BadRequest, match=message):
        motion_from(*start)
