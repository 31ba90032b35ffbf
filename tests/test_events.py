"""Events: found where they are, once each, with the right name, by scan and by track alike."""

import numpy as np
import published
import pytest
import reference

from orbitsearch import _kernels, bodies, flow
from orbitsearch.orbit import Status

EIGHT = reference.sides(*reference.collinear(published.EIGHT.a, published.EIGHT.b))
T_EIGHT = published.EIGHT.period


def event_functions(states):
    """The eight event functions of sides, shape (8, ...), by their definition in `flow.Events`."""
    A, B, C = (states[..., i : i + 2] for i in (0, 2, 4))
    rates = [states[..., i : i + 2] for i in (6, 8, 10)]

    def dot(u, v):
        return np.sum(u * v, axis=-1)

    # Twice the signed area; apexes 1, 2, 3 lie between sides A and C, B and A, C and B; the rate
    # of the kinetic energy is that of Σ 1/|X|; half the rates of the squared sides.
    pulls = sum(dot(X, v) * dot(X, X) ** -1.5 for X, v in zip((A, B, C), rates, strict=True))
    return np.stack(
        [
            A[..., 0] * B[..., 1] - A[..., 1] * B[..., 0],
            dot(A, A) - dot(C, C),
            dot(B, B) - dot(A, A),
            dot(C, C) - dot(B, B),
            -pulls,
            *(dot(X, v) for X, v in zip((A, B, C), rates, strict=True)),
        ]
    )


def middle_body(state):
    """Number 1..3 of the body between the others, for a state in line."""
    positions, _ = bodies.sides_to_bodies(state)
    along = positions @ (positions[np.argmax(np.linalg.norm(positions, axis=1))])
    return int(np.argsort(along)[1]) + 1


def scan_events(starts, time, capacity=2000):
    """Kinds, times and residuals of each start by the compiled scan, in the order of time."""
    n = len(starts)
    status, steps, counts = (np.zeros(n, np.int64) for _ in range(3))
    # Like `orbitsearch.scan`: another integer type would compile the kernel once more.
    kinds = np.zeros((n, capacity), np.int8)
    when, first, second = (np.zeros((n, capacity)) for _ in range(3))
    _kernels.scan(
        _kernels.workspace(),
        starts.copy(),
        np.full(n, time),
        flow.NEAREST * bodies.size(starts),
        100_000,
        *(status, steps, counts, kinds, when, first, second),
    )
    found = []
    for i in range(n):
        order = np.argsort(when[i, : counts[i]], kind="stable")
        found.append(np.array([kinds[i], when[i], first[i], second[i]])[:, order])
    return status, found


# ---------------------------------------------------------------- the figure-eight


def test_figure_eight_is_in_line_at_every_sixth_of_its_period():
    # A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881: 12 arcs between an isosceles triple
    # and one in line with a body midway; here the start is in line with body 3 midway.
    events = flow.track(EIGHT, 1.01 * T_EIGHT).events
    in_line = events.functions == 0
    assert events.times[in_line] == pytest.approx(T_EIGHT / 6 * np.arange(1, 7), abs=1e-13)
    # The word of the figure-eight visits all three in turn, twice.
    labels = [middle_body(x) for x in events.states[in_line]]
    assert sorted(labels[:3]) == [1, 2, 3]
    assert labels == 2 * labels[:3]
    assert labels[-1] == 3
    # Crossings alternate in direction.
    signs = np.sign(events.rates[in_line])
    assert np.all(signs[1:] == -signs[:-1])


def test_figure_eight_is_isosceles_halfway_and_at_each_line():
    # Halfway between two lines it is symmetric to an axis; in line, the middle body is the apex.
    events = flow.track(EIGHT, 1.01 * T_EIGHT).events
    isosceles = (events.functions >= 1) & (events.functions <= 3)
    assert events.times[isosceles] == pytest.approx(T_EIGHT / 12 * np.arange(1, 13), abs=1e-13)


def test_scan_of_the_figure_eight_has_no_residual_at_its_symmetric_states():
    _, (events,) = scan_events(EIGHT[None], 1.01 * T_EIGHT)
    kinds, when, first, second = events
    in_line = kinds <= 3
    assert when[in_line] == pytest.approx(T_EIGHT / 6 * np.arange(1, 7), abs=1e-13)
    track = flow.track(EIGHT, 1.01 * T_EIGHT)
    assert kinds[in_line].tolist() == [middle_body(x) for x in track.states(when[in_line])]
    apex = (kinds >= 4) & (kinds <= 6)
    halfway = apex & (np.round(12 * when / T_EIGHT) % 2 == 1)
    assert np.count_nonzero(halfway) == 6
    for chosen in (in_line, halfway):
        assert np.max(np.abs(first[chosen])) < 1e-12
        assert np.max(np.abs(second[chosen])) < 1e-12


# ---------------------------------------------------------------- none missed, none invented


def test_every_sign_change_on_a_fine_grid_is_an_event_and_the_reverse():
    # Each step is cut in 64; a pair of roots closer than that to each other may hide from the
    # grid, so only the odd direction is exact for those: events the grid does not see come in twos.
    total = 0
    for x in reference.random_bound_starts(40, seed=2):
        trajectory = flow.track(x, 10.0)
        lengths = np.diff(trajectory.times)
        grid = (trajectory.times[:-1, None] + lengths[:, None] * np.arange(64) / 64).ravel()
        # The start lies in its own set: its own zeros are no events.
        grid = grid[1:]
        values = event_functions(trajectory.states(grid))
        events = trajectory.events
        for e in range(8):
            changes = np.nonzero(np.sign(values[e, 1:]) != np.sign(values[e, :-1]))[0]
            times = events.times[events.functions == e]
            times = times[(times > grid[0]) & (times < grid[-1])]
            cells = np.searchsorted(grid, times) - 1
            counted = np.bincount(cells, minlength=len(grid) - 1)
            # A root within rounding of a grid point may be counted on its other side.
            odd = np.nonzero(counted % 2)[0]
            assert len(odd) == len(changes), (e, len(odd), len(changes))
            assert np.all(np.abs(odd - changes) <= 1)
            total += len(times)
    assert total > 2000


def test_events_lie_on_zeros_of_their_functions():
    for x in reference.random_bound_starts(10, seed=6):
        events = flow.track(x, 8.0).events
        values = event_functions(events.states)[events.functions, np.arange(len(events.times))]
        # Time to the exact zero, by the rate; relative to the time scale of the fastest pair.
        pairs = np.linalg.norm(events.states[:, :6].reshape(-1, 3, 2), axis=2).min(axis=1)
        assert np.all(np.abs(values / events.rates) < 1e-12 * np.maximum(pairs**1.5, 1e-2))


def test_rates_are_the_slopes_of_the_event_functions():
    trajectory = flow.track(EIGHT, 5.0)
    events = trajectory.events
    inside = (events.times > 1e-3) & (events.times < 4.999)
    delta = 1e-5
    up = event_functions(trajectory.states(events.times[inside] + delta))
    down = event_functions(trajectory.states(events.times[inside] - delta))
    index = events.functions[inside], np.arange(np.count_nonzero(inside))
    slope = (up[index] - down[index]) / (2 * delta)
    assert len(slope) > 25
    assert events.rates[inside] == pytest.approx(slope, rel=1e-7)


def test_scipy_finds_the_same_events():
    starts = reference.random_bound_starts(30, seed=7)
    wide = [x for x in starts if reference.least_side(flow.track(x, 4.0).series) > 0.1]
    assert len(wide) >= 4

    def function(e):
        def of_bodies(_, y):
            x = reference.sides(y[:6].reshape(3, 2), y[6:].reshape(3, 2))
            return event_functions(x)[e]

        return of_bodies

    functions = [function(e) for e in range(8)]
    compared = 0
    for x in wide[:4]:
        solution = reference.dop853(
            *bodies.sides_to_bodies(x), 4.0, events=functions, max_step=0.05
        )
        ours = flow.track(x, 4.0).events
        for e in range(8):
            theirs = solution.t_events[e]
            theirs = theirs[theirs > 1e-6]
            times = ours.times[ours.functions == e]
            assert times == pytest.approx(theirs, abs=1e-9)
            compared += len(times)
    assert compared > 60


def test_scan_and_track_agree_on_random_starts():
    starts = reference.random_bound_starts(40, seed=13)
    status, found = scan_events(starts, 10.0)
    compared = 0
    for x, code, (kinds, when, _, _) in zip(starts, status, found, strict=True):
        trajectory = flow.track(x, 10.0)
        assert flow.STATUS[int(code)] is trajectory.status
        events = trajectory.events
        # scan reports lines (once for each of the two fixed sets in line), isosceles triples, and
        # minima of the kinetic energy.
        lines, again = when[kinds <= 3], when[kinds == 8]
        assert np.array_equal(lines, again)
        kinds, when = kinds[kinds < 8], when[kinds < 8]
        slow = (events.functions == 4) & (events.rates > 0.0)
        keep = (events.functions <= 3) | slow
        assert len(when) == np.count_nonzero(keep)
        order = np.lexsort([events.times[keep], events.functions[keep]])
        classes = np.where(kinds <= 3, 0, np.where(kinds <= 6, kinds - 3, 4))
        mine = np.lexsort([when, classes])
        assert np.array_equal(classes[mine], events.functions[keep][order])
        # Through close approaches two roundings of one motion drift apart; most pairs are equal.
        assert when[mine] == pytest.approx(events.times[keep][order], abs=1e-6)
        states = events.states[keep][order]
        for kind, state in zip(kinds[mine], states, strict=True):
            if kind <= 3:
                assert kind == middle_body(state)
                compared += 1
    assert compared > 200


def test_residuals_are_those_of_the_fixed_sets():
    # Written out from their definitions; lengths over the size, r·v over its square root.
    starts = reference.random_bound_starts(20, seed=17)
    _, found = scan_events(starts, 6.0)
    seen = set()
    for x, events in zip(starts, found, strict=True):
        trajectory = flow.track(x, 6.0)
        if trajectory.status is not Status.CONVERGED:
            continue
        states = trajectory.states(events[1])
        for kind, first, second, state in zip(
            events[0].astype(int), events[2], events[3], states, strict=True
        ):
            r, v = bodies.sides_to_bodies(state)
            size = float(bodies.size(state))
            seen.add(kind)
            if kind >= 7:
                expected = np.array(
                    [(r[1] - r[0]) @ (v[1] - v[0]), (r[2] - r[1]) @ (v[2] - v[1])]
                ) / np.sqrt(size)
            else:
                k = (kind - 1) % 3
                i, j = (k + 1) % 3, (k + 2) % 3
                side = r[j] - r[i]
                base = side @ (v[j] - v[i]) / np.sqrt(size)
                if kind <= 3:
                    halves = np.linalg.norm(r[k] - r[i]) - np.linalg.norm(r[k] - r[j])
                    # Which half comes first is a convention; its size is not.
                    expected = np.array([np.copysign(halves, first) / size, base])
                else:
                    # The apex moves along the base: by symmetry, at right angles to the axis.
                    across = side[0] * v[k, 1] - side[1] * v[k, 0]
                    expected = np.array([across / np.sqrt(size), base])
            close = np.min(np.linalg.norm(state[:6].reshape(3, 2), axis=1))
            assert [first, second] == pytest.approx(expected, abs=1e-9 / min(1.0, close))
    assert seen == {1, 2, 3, 4, 5, 6, 7, 8}


# ---------------------------------------------------------------- pairs of roots


def touching_state():
    """A state in line whose signed area only touches zero: velocities leave its rate zero.

    A' x B + A x B' = 0 with A, B along x needs A'_y B_x = A_x B'_y; the second derivative of the
    area is then 2 A' x B', since in line the accelerations are along the line.
    """
    A, B = np.array([2.0, 0.0]), np.array([-0.8, 0.0])
    dA = np.array([0.3, 0.5])
    dB = np.array([0.7, 0.5 * B[0] / A[0]])
    x = np.concatenate([A, B, -A - B, dA, dB, -dA - dB])
    curvature = 2 * (dA[0] * dB[1] - dA[1] * dB[0])
    return x, curvature


def in_line_times(x, before, after):
    """Times of alignment, counted from x, when met from `before` earlier; and their steps."""
    earlier = flow.propagate(x, -before).states[0]
    _, (events,) = scan_events(earlier[None], before + after)
    trajectory = flow.track(earlier, before + after)
    tracked = trajectory.events.times[trajectory.events.functions == 0]
    scanned = events[1][events[0] <= 3]
    assert scanned == pytest.approx(tracked, abs=1e-12)
    return tracked - before, np.searchsorted(trajectory.times, tracked)


@pytest.mark.parametrize("depth", [1e-3, 1e-4, 1e-6, 1e-8, 1e-10])
def test_a_line_that_is_crossed_and_crossed_back_within_a_step_is_found_twice(depth):
    x, curvature = touching_state()
    # Bending the triple by B_y = ∓depth puts the extremum of the area at ∓depth·A_x.
    shift = -np.copysign(depth / x[0], curvature)
    x = x + np.array([0, 0, 0, shift, 0, -shift, 0, 0, 0, 0, 0, 0])
    half_gap = np.sqrt(2 * depth / abs(curvature))
    # Met from many distances, so that the two fall into one step, or into two, in every way.
    same_step = 0
    for before in np.linspace(0.15, 0.45, 25):
        times, steps = in_line_times(x, before, 0.2)
        near = np.abs(times) < 0.15
        assert np.count_nonzero(near) == 2, before
        assert times[near] == pytest.approx(
            [-half_gap, half_gap], rel=5 * half_gap, abs=1e-12 / half_gap
        )
        same_step += len(set(steps[near])) == 1
    # At the greatest depth the two are farther apart than a step is long.
    assert same_step >= 5 or depth == 1e-3


@pytest.mark.parametrize("depth", [1e-3, 1e-4, 1e-6, 1e-8, 1e-10])
def test_a_line_that_is_nearly_reached_is_not_crossed(depth):
    x, curvature = touching_state()
    shift = np.copysign(depth / x[0], curvature)
    x = x + np.array([0, 0, 0, shift, 0, -shift, 0, 0, 0, 0, 0, 0])
    for before in np.linspace(0.15, 0.45, 25):
        times, _ = in_line_times(x, before, 0.2)
        assert not np.any(np.abs(times) < 0.15), before


# ---------------------------------------------------------------- beginnings and ends


@pytest.mark.parametrize(
    ("state", "function"),
    [
        (EIGHT, 0),
        (flow.propagate(EIGHT, T_EIGHT / 12).states[0], 2),
        (reference.sides(*reference.at_rest(0.0, 0.6)), 3),
        (reference.sides(*reference.at_rest(0.2, 0.6)), 4),
    ],
    ids=["in line", "isosceles", "isosceles at rest", "at rest"],
)
def test_a_start_in_its_own_set_is_no_event(state, function):
    # Rounding leaves such a start a hair to one side or the other, in half of the directions to
    # the side from which it would cross at once.
    for angle in np.linspace(0.0, 2 * np.pi, 41):
        turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
        turned = (state.reshape(6, 2) @ turn.T).ravel()
        events = flow.track(turned, 0.3).events
        assert not np.any((events.functions == function) & (events.times < 1e-3))
        _, (found,) = scan_events(turned[None], 0.3)
        assert not np.any(found[1] < 1e-3)


def test_no_event_comes_after_the_time_asked_for():
    starts = reference.random_bound_starts(40, seed=13)
    for time in (0.5, 1.7):
        _, found = scan_events(starts, time)
        assert all(np.all(events[1] <= time) for events in found)
        whole = scan_events(starts, 2 * time)[1]
        for short, long in zip(found, whole, strict=True):
            assert short.shape[1] == np.count_nonzero(long[1] <= time)


def test_two_bodies_in_step_are_slowest_where_they_are_farthest():
    # Homographic motion (test_homographic.py): all sides are stationary at both apsides, and the
    # kinetic energy is least at the far one, half a period after the near one.
    mu, e = 3**-0.5, 0.4
    period = 2 * np.pi / np.sqrt(mu)
    z = np.exp(2j * np.pi * np.arange(3) / 3)
    r, v = (1 - e) * z, 1j * np.sqrt(mu * (1 + e) / (1 - e)) * z
    start = reference.sides(np.stack([r.real, r.imag], -1), np.stack([v.real, v.imag], -1))
    events = flow.track(start, 1.2 * period).events
    for function in (4, 5, 6, 7):
        times = events.times[events.functions == function]
        assert times == pytest.approx([period / 2, period], abs=1e-11)
    _, (found,) = scan_events(start[None], 1.2 * period)
    slow = found[0] == 7
    assert found[1][slow] == pytest.approx([period / 2], abs=1e-11)
