"""The verdict: what passes, what fails on which check, and what double precision leaves open."""

import math

import numpy as np
import pytest
from published import (
    EIGHT,
    EIGHT_SEVENTH_POWERS,
    LI_LIAO_2017,
    LI_LIAO_2019,
    SUVAKOV_DMITRASINOVIC_2013,
)
from reference import PAIRS, dop853

from orbitsearch import bodies
from orbitsearch.independent import by_bodies, by_sides
from orbitsearch.orbit import Check, Orbit, Status, Verdict
from orbitsearch.refine import refine, verify_as_given
from orbitsearch.shoot import shoot
from orbitsearch.starts import CONDITIONS, START_SETS
from orbitsearch.verify import BOUNDS, verify

KIND = {condition.label: kind for kind, condition in CONDITIONS.items()}

# One orbit to a set: figure-eight, and three found with this tool, the last two turning.
ORBITS = {
    "collinear": EIGHT[:3],
    "rest": LI_LIAO_2019[0],
    "isosceles": (0.4182429808, 0.0675275946, 2 * 3.3715787110),
    "perpendicular": (0.2286699936, 1.0016690581, 4 * 1.5159912389),
}


def refined(start: str, p: float, q: float, period: float) -> Orbit:
    orbit = refine(start, p, q, period).orbit
    assert orbit is not None
    return orbit


def verified_arc(start: str, end: str, p: float, q: float, time: float) -> Orbit:
    starts = START_SETS[start]
    shots = shoot(starts, *(np.array([v]) for v in (KIND[end], p, q, time)), reach=1e-3)
    assert shots.status == [Status.CONVERGED]
    orbit = verify(starts, shots.p[0], shots.q[0], shots.time[0], KIND[end])
    assert isinstance(orbit, Orbit)
    return orbit


def checks(found: Orbit | Verdict) -> dict[str, Check]:
    verdict = found.verdict if isinstance(found, Orbit) else found
    return {check.name: check for check in verdict.checks}


def path_by_dop853(orbit: Orbit, times: list[float]) -> np.ndarray:
    """Positions and velocities as complex numbers, shape (times, 2, 3), from Newton's law."""
    one = START_SETS[orbit.start.kind]
    x = one.states(np.array([orbit.start.p]), np.array([orbit.start.q]))[0]
    y = dop853(*bodies.sides_to_bodies(x), times[-1], t_eval=times).y.T
    return np.ascontiguousarray(y).view(complex).reshape(len(times), 2, 3)


@pytest.mark.parametrize(("start", "guess"), ORBITS.items())
def test_every_check_is_there_with_its_bound_and_passes(start, guess) -> None:
    orbit = refined(start, *guess)
    assert orbit.status is Status.VERIFIED
    assert orbit.verdict.reason == "every check passed"
    found = checks(orbit)
    assert found.keys() == BOUNDS.keys()
    for name, check in found.items():
        assert check.bound == BOUNDS[name]
        assert check.passed is True
        above = name in ("least period", "least separation")
        assert (check.value > check.bound) is above
    assert orbit.verdict.value("closure") == orbit.closure
    assert orbit.verdict.value("least separation") == orbit.least_separation
    with pytest.raises(KeyError):
        orbit.verdict.value("beauty")


@pytest.mark.parametrize(("start", "guess"), ORBITS.items())
def test_closure_and_rotation_are_those_of_dop853(start, guess) -> None:
    orbit = refined(start, *guess)
    begin, end = path_by_dop853(orbit, [0.0, orbit.period])
    assert np.abs(end - begin * np.exp(1j * orbit.rotation)).max() < 1e-7 * np.abs(begin).max()
    if start in ("isosceles", "perpendicular"):
        assert 0.1 < abs(orbit.rotation) < math.pi
        assert np.abs(end - begin).max() > 0.1
    else:
        assert orbit.rotation == 0.0


def roots_by_dop853(orbit: Orbit, functions: list) -> list[np.ndarray]:
    """States, as complex (n, 2, 3), where functions of positions and velocities change sign.

    Along one period that begins a thousandth of it after the start, which may be such a state.
    """
    (after,) = path_by_dop853(orbit, [1e-3 * orbit.period]).view(float).reshape(1, 2, 3, 2)
    events = [lambda _, y, f=f: f(*y.view(complex).reshape(2, 3)) for f in functions]
    solution = dop853(*after, orbit.period, events=events)
    return [np.ascontiguousarray(y).view(complex).reshape(-1, 2, 3) for y in solution.y_events]


@pytest.mark.parametrize(("start", "guess"), ORBITS.items())
def test_least_separation_is_that_of_dop853(start, guess) -> None:
    orbit = refined(start, *guess)

    def approach(i: int, j: int):
        return lambda r, v: ((r[i] - r[j]).conjugate() * (v[i] - v[j])).real

    passes = roots_by_dop853(orbit, [approach(i, j) for i, j in PAIRS])
    least = min(
        np.abs(states[:, 0, i] - states[:, 0, j]).min()
        for states, (i, j) in zip(passes, PAIRS, strict=True)
        if len(states)
    )
    assert least * abs(orbit.energy) == pytest.approx(orbit.least_separation, rel=1e-7)


@pytest.mark.parametrize(("start", "guess"), ORBITS.items())
def test_syzygies_are_those_of_dop853(start, guess) -> None:
    orbit = refined(start, *guess)
    (states,) = roots_by_dop853(
        orbit, [lambda r, _: ((r[1] - r[0]).conjugate() * (r[2] - r[0])).imag]
    )
    r = states[:, 0]
    opposite = np.abs(np.roll(r, -1, axis=1) - np.roll(r, -2, axis=1))
    middles = "".join(str(k + 1) for k in np.argmax(opposite, axis=1))
    # A start that is in line is the first alignment, and the last of the period that begins later.
    first = 1 if START_SETS[start].own.aligned else 0
    assert middles == orbit.syzygies[first:] + orbit.syzygies[:first]


@pytest.mark.parametrize("row", [EIGHT, *LI_LIAO_2017[:2], SUVAKOV_DMITRASINOVIC_2013[0]])
def test_few_digits_fail_on_closure_and_pass_once_refined(row) -> None:
    given = (round(row.a, 5), round(row.b, 5), round(row.period, 4))
    found = verify_as_given("collinear", *given)
    assert isinstance(found, Orbit)
    assert found.status is Status.REJECTED
    assert found.verdict.reason.startswith("closure is ")
    assert checks(found)["closure"].passed is False
    assert refined("collinear", *given).status is Status.VERIFIED


def test_alignments_of_a_motion_that_does_not_close_are_no_reason() -> None:
    # Its third alignment lies just beyond the half period, so that the reading of the second half
    # from the first counts one too many; that it does not close is what there is to say.
    found = verify_as_given("collinear", 0.34711, 0.53272, 6.3259)
    assert isinstance(found, Orbit)
    assert found.verdict.reason.startswith("closure is 0.000249")


def test_a_start_that_is_on_no_orbit_fails_on_closure() -> None:
    found = verify_as_given("collinear", 0.3, 0.4, 7.0)
    assert found.status is Status.REJECTED
    assert checks(found)["closure"].value > 0.1
    assert checks(found)["independent closure"].value > 0.1


@pytest.mark.parametrize("times", [2, 3, 5])
def test_several_periods_fail_on_the_least_period(times) -> None:
    found = verify_as_given("collinear", EIGHT.a, EIGHT.b, times * EIGHT.period)
    assert found.status is Status.REJECTED
    assert found.verdict.reason.startswith("least period is ")
    assert f"(nearest at T/{times}), bound 1e-05" in found.verdict.reason
    others = [check for name, check in checks(found).items() if name != "least period"]
    assert all(check.passed for check in others)


@pytest.mark.parametrize(
    ("start", "p", "q", "period", "reason"),
    [
        # Bodies 1 and 2 fall into 3, which is at rest between them.
        ("collinear", 0.0, 0.0, 4.0, "cannot be followed over its period: collision"),
        # On the axis of symmetry: 3 falls through the middle, 1 and 2 into each other.
        ("rest", 0.0, 0.5, 4.0, "cannot be followed over its period: collision"),
        ("collinear", 1e-5, 0.3, 8.0, "cannot be followed over its period: escape"),
    ],
)
def test_a_motion_that_ends_early_is_rejected_with_the_reason(start, p, q, period, reason) -> None:
    found = verify_as_given(start, p, q, period)
    assert isinstance(found, Verdict)
    assert (found.status, found.reason) == (Status.REJECTED, reason)


def test_an_orbit_too_unstable_is_neither_verified_nor_rejected() -> None:
    # T* = 31.9: it comes to rest, after which rounding has grown a billionfold in a period.
    orbit = refined("collinear", 0.813351, 0.389952, 2215.8)
    assert orbit.scaled_period == pytest.approx(31.9086, abs=1e-4)
    assert orbit.status is Status.NOT_CONFIRMED
    assert orbit.verdict.reason.startswith("too unstable for double precision to decide: closure")
    found = checks(orbit)
    assert found["closure"].passed is None
    assert found["independent closure"].passed is None
    # What does not suffer is decided all the same.
    assert found["least period"].passed is True
    assert found["energy drift"].passed is True
    assert orbit.stability.max_multiplier > 1e8


def test_energy_beside_a_close_approach_is_left_open_at_most() -> None:
    # Two bodies pass at 1e-5 of the size, where energy is the difference of numbers of 1e5.
    orbit = verified_arc("rest", "C2", 0.1731533, 0.6536318, 1.801174)
    assert orbit.least_separation < 1e-4
    assert checks(orbit)["energy drift"].passed is not False
    assert orbit.status is Status.NOT_CONFIRMED


def test_choreographies_are_seen_by_a_shift_of_a_third() -> None:
    for row, is_one in ((EIGHT, True), *zip(EIGHT_SEVENTH_POWERS, (True, False), strict=True)):
        orbit = refined("collinear", row.a, row.b, row.period)
        assert orbit.choreography is is_one
        begin, third = path_by_dop853(orbit, [0.0, orbit.period / 3])
        gap = min(np.abs(np.roll(third, k, axis=1) - begin).max() for k in (1, 2))
        assert bool(gap < 1e-6) is is_one


def test_a_choreography_in_a_turning_frame_is_one_too() -> None:
    # From an isosceles state to one with another apex; the angle of a third of the period is known
    # from that of the whole up to a third of a turn only.
    orbit = verified_arc("isosceles", "I1", 1.885270, 0.137820, 56.105849)
    assert abs(orbit.rotation) > 3.0
    begin, third = path_by_dop853(orbit, [0.0, orbit.period / 3])
    gaps = []
    for shifted in (np.roll(third, k, axis=1) for k in (1, 2)):
        turn = np.exp(1j * np.angle(np.vdot(begin, shifted)))
        gaps.append(np.abs(shifted - begin * turn).max())
    assert min(gaps) < 1e-6
    assert orbit.choreography


def test_the_second_opinion_is_of_newtons_law() -> None:
    x = START_SETS["collinear"].states(np.array([0.3]), np.array([0.5]))[0]
    positions, velocities = bodies.sides_to_bodies(x)
    y = dop853(positions, velocities, 3.0).y[:, -1].reshape(2, 3, 2)
    for integrate in (by_bodies, by_sides):
        r, v = bodies.sides_to_bodies(integrate(x, 3.0))
        assert np.abs(np.stack([r, v]) - y).max() < 1e-10
