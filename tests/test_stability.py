"""Stability: two computations that agree, matrices that are symplectic, and every border named."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from published import EIGHT, EIGHT_ANGLES, EIGHT_TWIN, LI_LIAO_2017

from orbitsearch import bodies, flow
from orbitsearch.orbit import Orbit, Status
from orbitsearch.refine import refine
from orbitsearch.shoot import shoot
from orbitsearch.stability import (
    Arc,
    classify,
    direct_traces,
    flow_derivative,
    power_traces,
    reversal_matrix,
    rotation_matrix,
    symmetric_traces,
)
from orbitsearch.starts import CONDITIONS, START_SETS, period_multiple

KIND = {condition.label: kind for kind, condition in CONDITIONS.items()}
J = np.block([[np.zeros((4, 4)), np.eye(4)], [-np.eye(4), np.zeros((4, 4))]])
TINY = (1e-12, 1e-12)

# Arcs of moderately unstable orbits, found with this tool (tests/test_multiples.py), one or more
# from each set; the last three turn in a period.
ARCS = [
    ("collinear", "I2", 0.347117, 0.532725, 0.527159),
    ("collinear", "C3", 0.306893, 0.125507, 3.117337),
    ("collinear", "I1", 0.568991, 0.449429, 4.330378),
    ("isosceles", "C3", 0.108597, 0.487662, 2.323732),
    ("rest", "rest", 0.0207067, 0.3133550, 1.087048),
    ("perpendicular", "C3", 0.522859, 1.287579, 1.703912),
    ("isosceles", "I3", 0.324929, 0.354222, 4.298822),
    ("isosceles", "P", 0.324929, 0.354222, 2.149411),
    ("perpendicular", "I3", 0.440632, 1.033961, 1.609467),
]


def arc_of(start: str, end: str, p: float, q: float, time: float) -> tuple[Arc, float]:
    """A refined arc and the period that it makes."""
    starts, stop = START_SETS[start], CONDITIONS[KIND[end]]
    shots = shoot(starts, *(np.array([v]) for v in (stop.kind, p, q, time)), reach=1e-3)
    assert shots.status == [Status.CONVERGED]
    x = starts.states(shots.p, shots.q)
    last = flow.propagate(x, shots.time).states[0]
    arc = Arc(x[0], last, float(shots.time[0]), starts.own, stop)
    return arc, arc.time * period_multiple(starts.own, stop)


def orbit_of(row) -> Orbit:
    orbit = refine("collinear", row.a, row.b, row.period).orbit
    assert orbit is not None
    return orbit


@pytest.mark.parametrize("seed", ARCS, ids=lambda seed: f"{seed[0]} to {seed[1]}")
def test_traces_from_one_arc_are_those_of_the_whole_period(seed) -> None:
    arc, period = arc_of(*seed)
    end = flow.propagate(arc.begin[None], period).states[0]
    one, other = (x.view(complex) for x in (arc.begin, end))
    rotation = float(np.angle(np.vdot(one, other)))
    whole, blur, growth = direct_traces(arc.begin, period, rotation)
    traces, errors = symmetric_traces(arc)
    size = max(1.0, abs(traces[0]))
    allowed = 10 * max(blur, growth * 1e-13, max(errors) / size)
    assert allowed < 1e-3
    for ours, theirs in zip(sorted(traces, key=by_value), sorted(whole, key=by_value), strict=True):
        assert abs(ours - theirs) < allowed * size


def by_value(trace: complex) -> tuple[float, float]:
    return trace.real, trace.imag


@pytest.mark.parametrize("seed", ARCS, ids=lambda seed: f"{seed[0]} to {seed[1]}")
def test_flow_derivatives_are_symplectic(seed) -> None:
    arc, _ = arc_of(*seed)
    b = flow_derivative(arc.begin, arc.time)
    # Turned, it is the same matrix but for rounding, which close approaches on the way enlarge.
    turned = flow_derivative(bodies.turned(arc.begin, 1.0), arc.time)
    rounding = np.abs(rotation_matrix(-1.0) @ turned @ rotation_matrix(1.0) - b).max()
    norm = np.linalg.norm(b, 2)
    assert rounding < 1e-7 * norm
    assert np.abs(b.T @ J @ b - J).max() < (30 * rounding + 1e-13 * norm) * norm


def test_flow_derivative_is_the_derivative_of_the_flow() -> None:
    x = START_SETS["collinear"].states(np.array([0.3]), np.array([0.5]))[0]
    z = bodies.jacobi_from_sides(x)
    h = 1e-6
    columns = []
    for e in np.eye(8) * h:
        ends = flow.propagate(bodies.sides_from_jacobi(np.array([z + e, z - e])), 2.0).states
        columns.append(bodies.jacobi_from_sides(ends[0]) - bodies.jacobi_from_sides(ends[1]))
    difference = np.array(columns).T / (2 * h)
    derivative = flow_derivative(x, 2.0)
    assert np.abs(derivative - difference).max() < 1e-6 * np.abs(derivative).max()


def test_energy_time_rotation_and_momentum_have_multiplier_one() -> None:
    x = START_SETS["collinear"].states(np.array([EIGHT.a]), np.array([EIGHT.b]))[0]
    m = flow_derivative(x, EIGHT.period)
    eigenvalues = np.linalg.eigvals(m)
    # Two blocks of size two: rounding splits them by its root.
    assert np.sort(np.abs(eigenvalues - 1.0))[3] < 1e-4
    along = bodies.jacobi_from_sides(bodies.flow_direction(x))
    assert m @ along == pytest.approx(along, abs=1e-11)
    turn = np.kron(np.eye(4), np.array([[0.0, -1.0], [1.0, 0.0]])) @ bodies.jacobi_from_sides(x)
    assert m @ turn == pytest.approx(turn, abs=1e-11)


@pytest.mark.parametrize("condition", CONDITIONS.values(), ids=lambda condition: condition.label)
def test_reversals_are_involutions_that_fix_their_states_and_turn_time(condition) -> None:
    starts = next(s for s in START_SETS.values() if condition in s.conditions())
    x = starts.states(np.array([0.31]), np.array([0.43]))[0]
    if condition.body:
        # Rename body 3, the special one of the standard form, to the one that is asked for.
        r, v = bodies.sides_to_bodies(x)
        shift = condition.body - 3
        x = bodies.bodies_to_sides(np.roll(r, shift, axis=0), np.roll(v, shift, axis=0))
    q = reversal_matrix(condition, x)
    z = bodies.jacobi_from_sides(x)
    assert q @ q == pytest.approx(np.eye(8), abs=1e-14)
    assert q @ z == pytest.approx(z, abs=1e-14)
    assert q.T @ J @ q == pytest.approx(-J, abs=1e-14)
    assert q @ bodies.jacobi_from_sides(bodies.flow_direction(x)) == pytest.approx(
        -bodies.jacobi_from_sides(bodies.flow_direction(x)), abs=1e-13
    )


def test_rotation_matrix_turns_states() -> None:
    x = START_SETS["isosceles"].states(np.array([0.31]), np.array([0.43]))[0]
    assert rotation_matrix(0.7) @ bodies.jacobi_from_sides(x) == pytest.approx(
        bodies.jacobi_from_sides(bodies.turned(x, 0.7)), abs=1e-14
    )


def test_angles_of_the_figure_eight_are_the_known_ones() -> None:
    # C. Simo (2002); digits recomputed with more than 40.
    stability = orbit_of(EIGHT).stability
    assert stability.kind == "elliptic-elliptic"
    assert stability.stable
    assert stability.angles == pytest.approx(EIGHT_ANGLES, abs=1e-12)
    assert stability.max_multiplier == pytest.approx(1.0, abs=1e-12)
    # What it claims to be uncertain by is what it is wrong by, within a hundredfold.
    traces = [2 * math.cos(2 * math.pi * angle) for angle in EIGHT_ANGLES]
    for ours, known in zip(stability.traces, traces, strict=True):
        assert abs(ours - known) <= 2e-13
    assert 1e-15 < stability.error < 1e-10


def test_its_twin_is_not_stable() -> None:
    stability = orbit_of(EIGHT_TWIN).stability
    assert stability.kind == "elliptic-hyperbolic"
    assert not stability.stable
    assert len(stability.angles) == 1
    assert stability.max_multiplier > 1.05


def test_both_starts_have_the_same_stability() -> None:
    for row in (EIGHT, EIGHT_TWIN, *LI_LIAO_2017[:5]):
        orbit = orbit_of(row)
        other = next(one for one in orbit.starts if one != orbit.start)
        again = refine(other.kind, other.p, other.q, float(other.period)).orbit
        assert again is not None
        assert again.stability.kind == orbit.stability.kind
        assert again.stability.traces == pytest.approx(orbit.stability.traces, rel=1e-7)
        assert again.stability.angles == pytest.approx(orbit.stability.angles, abs=1e-7)


@given(st.floats(0.01, 3.13), st.integers(1, 12))
def test_powers_of_traces_are_those_of_multipliers(angle, n) -> None:
    assert power_traces(2 * math.cos(angle), n) == pytest.approx(2 * math.cos(n * angle), abs=1e-11)
    growth = math.exp(angle)
    assert power_traces(growth + 1 / growth, n) == pytest.approx(growth**n + growth**-n, rel=1e-12)
    assert power_traces(-growth - 1 / growth, n) == pytest.approx(
        (-1) ** n * (growth**n + growth**-n), rel=1e-12
    )


@pytest.mark.parametrize(
    ("traces", "kind", "angles", "largest"),
    [
        ((1.0, -1.0), "elliptic-elliptic", (1 / 6, 1 / 3), 1.0),
        ((2.5, 1.0), "elliptic-hyperbolic", (1 / 6,), 2.0),
        ((-2.5, 1.0), "elliptic-inverse hyperbolic", (1 / 6,), 2.0),
        ((10 / 3, 2.5), "hyperbolic-hyperbolic", (), 3.0),
        ((10 / 3, -2.5), "hyperbolic-inverse hyperbolic", (), 3.0),
        ((-10 / 3, -2.5), "inverse hyperbolic-inverse hyperbolic", (), 3.0),
        ((1.0 + 1.0j, 1.0 - 1.0j), "complex quadruple", (), None),
    ],
)
def test_kinds_follow_from_the_traces(traces, kind, angles, largest) -> None:
    stability = classify(traces, TINY)
    assert stability.kind == kind
    assert stability.angles == pytest.approx(angles)
    if largest is None:
        # A pair λ, 1/λ with that complex sum: λ = s/2 + sqrt(s²/4 - 1).
        root = np.sqrt(complex(traces[0]) ** 2 / 4 - 1)
        largest = max(abs(traces[0] / 2 + root), abs(traces[0] / 2 - root))
    assert stability.max_multiplier == pytest.approx(largest)
    assert stability.stable is (kind == "elliptic-elliptic")


@pytest.mark.parametrize("border", [2.0, -2.0])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_a_pair_at_a_border_is_decided_just_as_far_as_its_error_allows(border, side) -> None:
    off = border * (1.0 + side * 5e-7)
    assert classify((off, 0.5), (1e-5, 1e-12)).kind == "undecided"
    decided = classify((off, 0.5), (1e-8, 1e-12)).kind
    inverse = "inverse hyperbolic" if border < 0 else "hyperbolic"
    assert decided == (f"elliptic-{inverse}" if side > 0 else "elliptic-elliptic")
    # The other pair's error decides nothing about this one.
    assert classify((off, 0.5), (1e-8, 1e-3)).kind == decided


def test_a_double_pair_about_to_leave_the_axis_is_undecided() -> None:
    assert classify((1.0 + 1e-7j, 1.0 - 1e-7j), (1e-10, 1e-10)).kind == "undecided"
    assert classify((1.0 + 1e-3j, 1.0 - 1e-3j), (1e-10, 1e-10)).kind == "complex quadruple"


def test_error_is_relative_to_the_size_of_the_traces() -> None:
    assert classify((1e6, 0.5), (1e-3, 1e-12)).error == pytest.approx(1e-9)
    assert classify((0.5, 0.1), (1e-3, 1e-4)).error == pytest.approx(1e-3)
