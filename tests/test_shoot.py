"""Newton's method on arcs: how fast it converges, how it fails, and what that costs."""

import numpy as np
import pytest
from published import EIGHT, EIGHT_TWIN, LI_LIAO_2017

from orbitsearch import flow
from orbitsearch.orbit import Status
from orbitsearch.shoot import REASONS, Shots, _residuals_and_jacobian, shoot
from orbitsearch.starts import CONDITIONS, START_SETS

KIND = {condition.label: kind for kind, condition in CONDITIONS.items()}
COLLINEAR = START_SETS["collinear"]

# The figure-eight's arcs from its collinear start: end condition and share of the period.
EIGHT_ARCS = {"I2": 1 / 12, "C1": 1 / 6, "I3": 1 / 4, "C3": 1 / 2}


def one(label: str, p: float, q: float, time: float, start: str = "collinear", **more) -> Shots:
    """A single shot."""
    starts = START_SETS[start]
    return shoot(starts, *(np.array([value]) for value in (KIND[label], p, q, time)), **more)


@pytest.mark.parametrize("label", EIGHT_ARCS)
def test_the_figure_eight_is_found_from_each_of_its_arcs(label) -> None:
    arc = EIGHT.period * EIGHT_ARCS[label]
    shot = one(label, EIGHT.a + 1e-4, EIGHT.b - 1e-4, arc * 1.001)
    assert shot.status == [Status.CONVERGED]
    # Longer arcs are worse conditioned: the two ends leave the start to a hundred roundings.
    assert (shot.p[0], shot.q[0]) == pytest.approx((EIGHT.a, EIGHT.b), abs=2e-13)
    assert shot.time[0] == pytest.approx(arc, abs=1e-13)
    assert shot.residual[0] < 1e-12
    assert abs(shot.p[0] - EIGHT.a) <= max(10 * shot.error[0], 1e-15)
    # Measured 5 to 8: the last ones make sure that nothing but rounding is left.
    assert shot.iterations[0] <= 8


def test_convergence_is_quadratic() -> None:
    # Newton's error is c times the square of the one before: the slope of log against log is 2.
    arc = EIGHT.period / 2
    errors = []
    for steps in range(1, 5):
        shot = one("C3", EIGHT.a + 2e-3, EIGHT.b - 1e-3, arc, max_iterations=steps)
        assert shot.status == [Status.BUDGET]
        errors.append(max(abs(shot.p[0] - EIGHT.a), abs(shot.q[0] - EIGHT.b)))
    logs = np.log([error for error in errors if error > 1e-12])
    assert len(logs) >= 3
    slopes = np.diff(logs[1:]) / np.diff(logs[:-1])
    assert slopes[-1] == pytest.approx(2.0, abs=0.3)


def test_the_jacobian_is_the_derivative_of_the_residuals() -> None:
    kinds = np.array(sorted(CONDITIONS))
    n = len(kinds)
    for starts in START_SETS.values():
        p0, p1, q0, q1 = starts.window
        p, q = np.full(n, 0.7 * p0 + 0.3 * p1), np.full(n, 0.8 * q0 + 0.2 * q1)
        t = np.full(n, 0.4)
        _, jacobian, moved = _residuals_and_jacobian(starts, kinds, p, q, t)
        assert set(moved.status) == {0}
        h = 1e-5
        for column, step in enumerate(np.eye(3) * h):
            high, low = (
                _residuals_and_jacobian(
                    starts, kinds, p + sign * step[0], q + sign * step[1],
                    t * np.exp(sign * step[2]),
                )[0]
                for sign in (1, -1)
            )  # fmt: skip
            # Residuals are divided by the size, which the Jacobian holds still: that is right where
            # they vanish, and here its change is added back.
            scales = scale_of_residuals(starts, kinds, p, q, t, step)
            expected = (high * scales[0] - low * scales[1]) / (2 * h)
            assert jacobian[:, :, column] == pytest.approx(expected, rel=1e-7, abs=1e-7)


def scale_of_residuals(starts, kinds, p, q, t, step) -> list[np.ndarray]:
    """Size to the power of each residual after a step there and back, over that before."""
    sizes = []
    for sign in (1, -1, 0):
        x = flow.propagate(
            starts.states(p + sign * step[0], q + sign * step[1]), t * np.exp(sign * step[2])
        ).states
        sizes.append(np.linalg.norm(x[:, :6], axis=1))
    degrees = np.array([CONDITIONS[kind].degrees for kind in kinds])
    return [(size / sizes[2])[:, None] ** degrees for size in sizes[:2]]


@pytest.mark.parametrize(
    ("arguments", "status"),
    [
        # Residuals that do not shrink, half-way between two orbits.
        (("C3", 0.347, 0.533, 3.5), Status.DIVERGED),
        # Off for another orbit, farther than it may go.
        (("C3", 0.347, 0.533, 5.0), Status.ESCAPE),
        # Bodies 1 and 2 fall on each other past body 3, which moves across at right angles.
        (("C3", 0.0, 0.5, 4.0), Status.COLLISION),
    ],
)
def test_a_shot_that_fails_says_how(arguments, status) -> None:
    shot = one(*arguments)
    assert shot.status == [status]
    assert shot.iterations[0] <= 12
    assert REASONS[status]


def test_an_arc_of_no_length_leaves_the_start_undetermined() -> None:
    # Every start fulfils its own condition at t = 0.
    shot = one("C3", 0.3, 0.4, 1e-200)
    assert shot.status == [Status.DEGENERATE]
    assert shot.iterations[0] == 1


def test_a_shot_out_of_iterations_says_so() -> None:
    shot = one("C3", 0.34, 0.53, 3.15, max_iterations=2)
    assert shot.status == [Status.BUDGET]
    assert shot.iterations[0] == 2


def test_a_shot_that_leaves_the_domain_of_its_set_is_given_up() -> None:
    # Beside a = 0, whose other side holds the same orbits once more.
    shot = one("P", 0.0, 0.4, 0.3)
    assert shot.status == [Status.ESCAPE]
    assert -0.05 < shot.p[0] < 0.0
    assert shot.iterations[0] == 1


def test_every_ending_has_its_sentence() -> None:
    endings = {
        Status.CONVERGED, Status.DIVERGED, Status.COLLISION, Status.ESCAPE, Status.DEGENERATE,
        Status.BUDGET,
    }  # fmt: skip
    assert REASONS.keys() == endings
    assert len(set(REASONS.values())) == len(endings)


def test_a_guess_may_move_no_farther_than_its_reach() -> None:
    near = one("C3", EIGHT.a + 3e-3, EIGHT.b, EIGHT.period / 2, reach=0.02)
    assert near.status == [Status.CONVERGED]
    # It converges a quarter of the reach at a time, or is given up for not getting nearer.
    short = one("C3", EIGHT.a + 3e-3, EIGHT.b, EIGHT.period / 2, reach=1e-3, patience=25)
    assert short.status == [Status.ESCAPE]
    assert 1e-3 < EIGHT.a + 3e-3 - short.p[0] <= 1.25e-3


def test_a_batch_answers_as_each_shot_alone() -> None:
    labels = ["C3", "I2", "C3", "C3", "C1", "I3", "I3", "C3", "C3"]
    p = np.array([0.347, 0.347, 0.0, 0.34, 0.347, 0.3069, 0.347, 0.347, 0.393])
    q = np.array([0.533, 0.533, 0.5, 0.536, 0.533, 0.1255, 0.533, 0.533, 0.0976])
    time = np.array([3.163, 0.527, 4.0, 3.145, 1.054, 1.5587, 1.5815, 5.0, 3.5])
    together = shoot(COLLINEAR, np.array([KIND[label] for label in labels]), p, q, time)
    for i, label in enumerate(labels):
        alone = one(label, p[i], q[i], time[i])
        assert alone.status[0] is together.status[i]
        assert alone.iterations[0] == together.iterations[i]
        assert (alone.p[0], alone.q[0]) == (together.p[i], together.q[i])


def test_an_empty_batch_is_no_error() -> None:
    empty = np.empty(0)
    shots = shoot(COLLINEAR, np.empty(0, np.int64), empty, empty, empty)
    assert shots.status == []
    assert len(shots.p) == 0


def test_shots_hold_their_budget() -> None:
    # From two digits of four orbits: measured 6 to 11 iterations.
    rows = (EIGHT, EIGHT_TWIN, LI_LIAO_2017[0], LI_LIAO_2017[2])
    p, q, period = (np.array([row[i] for row in rows]) for i in range(3))
    kinds = np.full(len(rows), KIND["C3"])
    shots = shoot(COLLINEAR, kinds, p.round(3), q.round(3), period / 2, reach=0.01)
    assert all(shots.iterations <= 12)
    # Half a period each time: about 30 steps to a unit of T*.
    scaled = period * np.abs(COLLINEAR.energies(p, q)) ** 1.5
    assert all(shots.steps <= 15 * scaled * shots.iterations)
