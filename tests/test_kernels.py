"""The integrator on motions that matter: the figure-eight, chaotic arcs, close approaches.

Closed forms are in test_homographic.py, tangents in test_variational.py, lanes and endings in
test_lanes.py, events in test_events.py.
"""

import functools

import numpy as np
import published
import pytest
import reference

from orbitsearch import _kernels, bodies, flow
from orbitsearch.orbit import Status

EIGHT = reference.sides(*reference.collinear(published.EIGHT.a, published.EIGHT.b))
T_EIGHT = published.EIGHT.period


def test_figure_eight_returns_after_a_thousand_periods():
    # Measured: closure 2.8e-9, energy 2.9e-13, angular momentum 1.7e-14; the doubles that stand for
    # the start and the period explain 1e-12 of the closure at most, the rest is rounding.
    last = flow.propagate(EIGHT, 1000 * T_EIGHT).states[0]
    assert np.max(np.abs(last - EIGHT)) < 1e-8
    assert abs(bodies.energy(last) - published.EIGHT.energy) < 1.5e-12
    assert abs(bodies.angular_momentum(last)) < 1e-13


def test_figure_eight_runs_backward_as_well_as_forward():
    forth, back = flow.propagate(np.array([EIGHT, EIGHT]), np.array([T_EIGHT, -T_EIGHT])).states
    assert np.max(np.abs(forth - EIGHT)) < 1e-12
    assert np.max(np.abs(back - EIGHT)) < 1e-12


def test_figure_eight_takes_few_steps():
    # Measured 70 a period; a thousand periods show that the mean stays there.
    assert flow.propagate(EIGHT, T_EIGHT).steps[0] <= 75
    assert flow.propagate(EIGHT, 1000 * T_EIGHT).steps[0] <= 75_000
    assert flow.track(EIGHT, T_EIGHT).steps <= 75


def test_a_third_of_the_period_permutes_the_bodies_of_the_figure_eight():
    # C. Moore, PRL 70 (1993) 3675: all three follow one curve, a third of the period apart.
    positions, _ = bodies.sides_to_bodies(flow.propagate(EIGHT, T_EIGHT / 3).states[0])
    first, _ = bodies.sides_to_bodies(EIGHT)
    distances = np.abs(positions[:, None] - first[None]).max(axis=2)
    assert np.array_equal(np.sort(np.argmin(distances, axis=1)), [0, 1, 2])
    assert np.min(distances, axis=1) == pytest.approx(np.zeros(3), abs=1e-13)
    assert not np.array_equal(np.argmin(distances, axis=1), [0, 1, 2])


def test_forward_then_backward_comes_home():
    starts = reference.random_bound_starts(40, seed=11)
    there = flow.propagate(starts, 6.0)
    assert np.all(there.status == _kernels.STATUS_DONE)
    back = flow.propagate(there.states, -6.0)
    error = np.max(np.abs(back.states - starts), axis=1)
    closest = np.array([reference.least_side(flow.track(x, 6.0).series) for x in starts])
    assert np.count_nonzero(closest < 0.01) >= 8
    # Measured: 1.6e-12 for wide motions, 1.6e-9 in all, through passages down to 2e-6.
    assert np.max(error[closest > 0.05]) < 1e-11
    assert np.max(error) < 1e-8


@pytest.mark.parametrize("seed", [1, 2])
def test_energy_and_angular_momentum_stay_through_close_approaches(seed):
    starts = reference.random_bound_starts(40, seed)
    trajectories = [flow.track(x, 20.0) for x in starts]
    whole = [t for t in trajectories if t.status is Status.CONVERGED]
    assert len(whole) > 25
    for trajectory in whole:
        middle = np.arange(len(trajectory.times) - 1)
        states = trajectory.states(trajectory.times[middle])
        # Energy is a difference of two large numbers where bodies are close; its error is measured
        # against the larger.
        scale = np.max(np.abs(bodies.energy(states)) + np.sum(states[:, 6:] ** 2, axis=1))
        assert np.ptp(bodies.energy(states)) < 1e-13 * scale
        assert np.ptp(bodies.angular_momentum(states)) < 1e-12


def test_dop853_agrees_on_chaotic_arcs():
    # scipy's own error is the larger: 1e-13 a step, times the growth over the arc.
    starts = reference.random_bound_starts(12, seed=5)
    wide = [x for x in starts if reference.least_side(flow.track(x, 5.0).series) > 0.1]
    assert len(wide) >= 4
    for x in wide:
        positions, velocities = bodies.sides_to_bodies(x)
        theirs = reference.dop853(positions, velocities, 5.0).y[:, -1]
        ours = flow.propagate(x, 5.0).states[0]
        expected = reference.sides(theirs[:6].reshape(3, 2), theirs[6:].reshape(3, 2))
        assert np.max(np.abs(ours - expected)) < 1e-9 * np.linalg.norm(ours)


def test_dop853_agrees_through_a_close_approach():
    x = reference.sides(*reference.at_rest(0.0207067154, 0.3133550361))
    time = 0.9
    trajectory = flow.track(x, time)
    assert reference.least_side(trajectory.series) < 0.02
    theirs = reference.dop853(*bodies.sides_to_bodies(x), time).y[:, -1]
    expected = reference.sides(theirs[:6].reshape(3, 2), theirs[6:].reshape(3, 2))
    assert np.max(np.abs(trajectory.last - expected)) < 1e-8


@functools.cache
def errors_against_extended_precision():
    """Final errors of 60 chaotic arcs: ours and heyoka's in double, both against 80-bit floats."""
    hy = pytest.importorskip("heyoka")
    if np.finfo(np.longdouble).nmant < 63:
        pytest.skip("long double has no more digits than double here")
    system = reference.heyoka_system()
    double = hy.taylor_adaptive(system, [0.0] * 12)
    extended = hy.taylor_adaptive(system, [np.longdouble(0)] * 12, fp_type=np.longdouble)
    starts = reference.random_bound_starts(60, seed=1)
    result = flow.propagate(starts, 15.0, nearest=1e-9)
    assert np.all(result.status == _kernels.STATUS_DONE)
    ours, theirs, nearest = [], [], []
    for x, last in zip(starts, result.states, strict=True):
        state = bodies.sides_to_bodies(x)
        exact = reference.sides(*reference.heyoka_flow(extended, *state, 15.0))
        ours.append(np.max(np.abs(last - exact)))
        theirs.append(
            np.max(np.abs(reference.sides(*reference.heyoka_flow(double, *state, 15.0)) - exact))
        )
        nearest.append(reference.least_side(flow.track(x, 15.0).series))
    return np.array(ours), np.array(theirs), np.array(nearest)


def test_chaotic_arcs_are_as_accurate_as_those_of_heyoka():
    ours, theirs, _ = errors_against_extended_precision()
    # Measured: ours 8 times smaller in the median, and in 3 of 4 arcs.
    assert np.median(ours / theirs) < 1.0
    assert np.mean(ours < 10 * theirs) > 0.95


def test_close_approaches_do_not_spoil_chaotic_arcs():
    ours, theirs, nearest = errors_against_extended_precision()
    close = nearest < 0.01
    assert np.count_nonzero(close) >= 5
    assert np.median(ours[close] / theirs[close]) < 1.0


def test_wide_triple_is_the_same_motion_at_another_scale():
    # λ r(λ^(-3/2) t): powers of 4 make the scaling exact in binary, so not a bit may differ.
    scale = 4.0**5
    wide = EIGHT * np.repeat([scale, scale**-0.5], 6)
    near, far = flow.propagate(
        np.array([EIGHT, wide]), np.array([T_EIGHT / 2, scale**1.5 * T_EIGHT / 2])
    ).states
    assert far / np.repeat([scale, scale**-0.5], 6) == pytest.approx(near, rel=1e-13, abs=1e-14)
