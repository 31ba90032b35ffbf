"""Tangents of the flow against differences, closed forms, heyoka, and symplectic geometry."""

import numpy as np
import published
import pytest
import reference

from orbitsearch import _kernels, bodies, flow

TANGENTS = bodies.sides_from_jacobi(np.eye(8))
EIGHT = reference.sides(*reference.collinear(published.EIGHT.a, published.EIGHT.b))
T_EIGHT = published.EIGHT.period
# Coordinates (ρ, λ, ρ', λ'): J of the form ω = dρ ∧ dρ' + dλ ∧ dλ'.
J = np.kron([[0.0, 1.0], [-1.0, 0.0]], np.eye(4))


def derivatives(states, times, nearest=flow.NEAREST):
    """Derivatives of the flow in canonical coordinates, shape (n, 8, 8)."""
    states = np.atleast_2d(states)
    tangents = np.repeat(TANGENTS[None], len(states), axis=0)
    result = flow.propagate(states, times, tangents, nearest=nearest)
    assert np.all(result.status == _kernels.STATUS_DONE)
    return np.swapaxes(bodies.jacobi_from_sides(result.tangents), 1, 2)


def quiet_starts(count):
    """Chaotic starts whose closest approach within 6 units of time stays above 0.05."""
    starts = reference.random_bound_starts(8 * count, seed=21)
    wide = [x for x in starts if reference.least_side(flow.track(x, 6.0).series) > 0.05]
    assert len(wide) >= count
    return np.array(wide[:count])


def test_tangents_match_central_differences_in_every_direction():
    for x in quiet_starts(4):
        matrix = derivatives(x, 3.0)[0]
        # Truncation of a central difference falls with δ², rounding grows with 1/δ; one Richardson
        # step makes it δ⁴, which lets δ stay large.
        z = bodies.jacobi_from_sides(x)

        def difference(delta, z=z):
            shifted = np.concatenate([z + delta * np.eye(8), z - delta * np.eye(8)])
            ends = flow.propagate(bodies.sides_from_jacobi(shifted), 3.0).states
            up, down = np.split(bodies.jacobi_from_sides(ends), 2)
            return (up - down).T / (2 * delta)

        best = (4 * difference(1e-4) - difference(2e-4)) / 3
        assert np.max(np.abs(best - matrix)) < 1e-7 * np.linalg.norm(matrix, 2)


def test_flow_derivative_is_symplectic_to_rounding():
    # Over the figure-eight's period, and over arcs with growth up to 1e3.
    starts = np.concatenate([[EIGHT], quiet_starts(8)])
    times = np.array([T_EIGHT] + 8 * [6.0])
    for matrix in derivatives(starts, times):
        defect = np.max(np.abs(matrix.T @ J @ matrix - J))
        # Measured: 4e-17 to 4e-15 times the square of the norm.
        assert defect < 4e-14 * np.linalg.norm(matrix, 2) ** 2


def test_flow_derivative_of_the_figure_eight_has_determinant_one():
    assert np.linalg.det(derivatives(EIGHT, T_EIGHT)[0]) == pytest.approx(1.0, abs=1e-11)


def test_velocity_is_carried_into_velocity():
    # The flow maps (x', x'') at the start to (x', x'') at the end: time shifts commute with it.
    starts = quiet_starts(6)

    result = flow.propagate(starts, 6.0, bodies.flow_direction(starts)[:, None])
    expected = bodies.flow_direction(result.states)
    scale = np.max(np.abs(expected), axis=1)
    error = np.max(np.abs(result.tangents[:, 0] - expected), axis=1)
    assert np.all(error < 1e-11 * scale)


def test_flow_direction_is_newton_law():
    for x in reference.random_bound_starts(5, seed=3):
        positions, velocities = bodies.sides_to_bodies(flow.propagate(x, 0.7).states[0])
        y = np.concatenate([positions.ravel(), velocities.ravel()])
        rates = reference.newton(0.0, y)
        found = bodies.flow_direction(reference.sides(positions, velocities))
        expected = reference.sides(velocities, rates[6:].reshape(3, 2))
        assert found == pytest.approx(expected, rel=1e-13)


def test_scaling_gives_a_closed_form_tangent():
    # r → λ r(λ^(-3/2) t): differentiating by λ at 1, (x, v) -> (x - 3t/2 x', -v/2 - 3t/2 v').
    x, t = EIGHT, 0.3 * T_EIGHT
    start = x * np.repeat([1.0, -0.5], 6)
    result = flow.propagate(x, t, start[None, None])
    last = result.states[0]
    expected = last * np.repeat([1.0, -0.5], 6) - 1.5 * t * bodies.flow_direction(last)
    assert result.tangents[0, 0] == pytest.approx(expected, rel=1e-12, abs=1e-12)


def test_one_tangent_in_each_lane_gives_what_eight_in_one_lane_give():
    together = flow.propagate(EIGHT, T_EIGHT, TANGENTS[None])
    apart = flow.propagate(np.repeat(EIGHT[None], 8, axis=0), T_EIGHT, TANGENTS[:, None])
    assert np.array_equal(apart.tangents[:, 0], together.tangents[0])


def test_tangents_do_not_disturb_the_motion():
    alone = flow.propagate(EIGHT, T_EIGHT)
    among = flow.propagate(EIGHT, T_EIGHT, TANGENTS[None])
    assert np.array_equal(alone.states, among.states)
    assert np.array_equal(alone.steps, among.steps)


def test_tangents_come_back_with_the_motion():
    starts = quiet_starts(6)
    tangents = np.repeat(TANGENTS[None], len(starts), axis=0)
    there = flow.propagate(starts, 4.0, tangents)
    back = flow.propagate(there.states, -4.0, there.tangents)
    growth = [np.linalg.norm(bodies.jacobi_from_sides(d), 2) for d in there.tangents]
    error = np.max(np.abs(back.tangents - tangents), axis=(1, 2))
    assert np.all(error < 1e-13 * np.square(growth))


def test_stability_angles_of_the_figure_eight_are_the_published_ones():
    angles = np.angle(np.linalg.eigvals(derivatives(EIGHT, T_EIGHT)[0])) / (2 * np.pi)
    # Four multipliers at 1 (time shift, energy, rotation, angular momentum) form Jordan blocks,
    # which scatter like the square root of rounding; the four others are simple.
    for published_angle in published.EIGHT_ANGLES:
        assert np.min(np.abs(angles - published_angle)) < 1e-11
        assert np.min(np.abs(angles + published_angle)) < 1e-11


def test_tangents_are_as_accurate_as_those_of_heyoka():
    hy = pytest.importorskip("heyoka")
    if np.finfo(np.longdouble).nmant < 63:
        pytest.skip("long double has no more digits than double here")
    system = hy.var_ode_sys(reference.heyoka_system(), hy.var_args.vars, order=1)
    double = hy.taylor_adaptive(system, [0.0] * 12, compact_mode=True)
    extended = hy.taylor_adaptive(
        system, [np.longdouble(0)] * 12, fp_type=np.longdouble, compact_mode=True
    )
    starts = reference.random_bound_starts(40, seed=3)
    # Arcs that pass within 1e-4 lose more digits than 80-bit floats have to spare.
    starts = starts[[reference.least_side(flow.track(x, 8.0).series) > 1e-4 for x in starts]]
    assert len(starts) > 30

    bases = [bodies.sides_to_bodies(tangent) for tangent in TANGENTS]
    columns = np.array([np.concatenate([r.ravel(), v.ravel()]) for r, v in bases]).T
    ratios = []
    for x, ours in zip(starts, derivatives(starts, 8.0), strict=True):
        found = []
        for integrator in (extended, double):
            kind = integrator.state.dtype.type
            integrator.state[12:] = np.eye(12, dtype=kind).ravel()
            reference.heyoka_flow(integrator, *bodies.sides_to_bodies(x), 8.0)
            ends = integrator.state[12:].reshape(12, 12) @ columns
            moved = [reference.sides(e[:6].reshape(3, 2), e[6:].reshape(3, 2)) for e in ends.T]
            found.append(bodies.jacobi_from_sides(np.array(moved)).T)
        exact, theirs = found
        ratios.append(np.max(np.abs(ours - exact)) / np.max(np.abs(theirs - exact)))
    # Measured: 0.2 in the median.
    assert np.median(ratios) < 1.0
    assert np.mean(np.array(ratios) < 10.0) > 0.9
