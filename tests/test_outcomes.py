"""What became of each start of a scan: how long it lived, alignments, closest approach.

Held against closed forms, against DOP853, and against trajectories that keep every event.
"""

import pickle

import numpy as np
import published
import pytest
import reference

from orbitsearch import _kernels, bodies, flow
from orbitsearch.scan import NEAREST, Outcomes, Scan, scan
from orbitsearch.search import TILE, SearchRequest, TileDone, search
from orbitsearch.starts import START_SETS, start_set

COLLINEAR = start_set("collinear")
DONE, COLLISION, ESCAPE, BUDGET = (
    _kernels.STATUS_DONE, _kernels.STATUS_COLLISION, _kernels.STATUS_ESCAPE, _kernels.STATUS_BUDGET
)  # fmt: skip
# How far a passage can be from the end of a step; see `Scan.nearest`.
STEPWISE = 1.0035


def scan_one(p: float, q: float, scaled_period: float) -> Scan:
    return scan(COLLINEAR, np.array([p]), np.array([q]), scaled_period)


def scaled_time(p: float, q: float, time: float) -> float:
    """|E|^(3/2) t with E = 3 (a² + b²) - 5/2."""
    return (2.5 - 3.0 * (p * p + q * q)) ** 1.5 * time


@pytest.mark.parametrize("sixths", [0.5, 1.5, 2.99, 3.01, 11.5])
def test_figure_eight_is_in_line_at_every_sixth_of_its_period(sixths) -> None:
    # A. Chenciner & R. Montgomery (2000); the start, in line itself, is not counted.
    eight = published.EIGHT
    asked = scaled_time(eight.a, eight.b, 2.0 * sixths * eight.period / 6.0)
    seen = scan_one(eight.a, eight.b, asked)
    assert seen.status[0, 0] == DONE
    assert seen.lifetime[0, 0] == 0.5 * asked
    assert seen.alignments[0, 0] == int(sixths)


def test_head_on_fall_lives_until_it_collides() -> None:
    # Bodies 1 and 2 fall on body 3: half a Kepler ellipse of semi-major axis 1/2 with μ = 5/4.
    meet = np.pi / np.sqrt(1.25) * 0.5**1.5
    seen = scan_one(0.0, 0.0, 40.0)
    assert seen.status[0, 0] == COLLISION
    # The last step ends within 1e-5 of the collision, or beyond it.
    assert seen.lifetime[0, 0] == pytest.approx(scaled_time(0.0, 0.0, meet), rel=1e-6)
    assert seen.nearest[0, 0] < NEAREST
    # Always in line is not an alignment.
    assert seen.alignments[0, 0] == 0


@pytest.mark.parametrize("e", [0.0, 0.5, 0.9, 0.99])
def test_nearest_is_the_pericentre_of_a_kepler_ellipse(e) -> None:
    # Three bodies in line at -q, 0, q stay so: q is on an ellipse with μ = 5/4 and semi-major axis
    # 1/(1 + e), from 1 at the far end, with speed √(μ (1 - e)), to (1 - e)/(1 + e).
    speed = np.sqrt(1.25 * (1.0 - e))
    r = np.array([[-1.0, 0.0], [1.0, 0.0], [0.0, 0.0]])
    x = reference.sides(r, speed * np.array([[0.0, -1.0], [0.0, 1.0], [0.0, 0.0]]))[None]
    period = 2.0 * np.pi / np.sqrt(1.25) / (1.0 + e) ** 1.5
    time, nearest = np.array([0.6 * period]), NEAREST * bodies.size(x)
    status, steps, counts = (np.zeros(1, np.int64) for _ in range(3))
    kinds = np.zeros((1, 500), np.int64)
    events = (np.zeros((1, 500)) for _ in range(3))
    _kernels.scan(
        _kernels.workspace(), x, time, nearest, 1000, status, steps, counts, kinds, *events
    )
    assert status[0] == DONE
    assert time[0] == 0.6 * period
    least = (1.0 - e) / (1.0 + e)
    assert least * (1.0 - 1e-9) <= nearest[0] <= least * STEPWISE


def by_dop853(p: float, q: float, time: float) -> tuple[int, float]:
    """Sign changes of the signed area, and least distance over the size, at many moments."""
    positions, velocities = reference.collinear(p, q)
    solution = reference.dop853(positions, velocities, time, 1e-11, dense_output=True).sol
    at = np.union1d(np.linspace(0.0, time, 4000), solution.ts)
    r = solution(at)[:6].reshape(3, 2, -1)
    a, b, c = r[1] - r[0], r[2] - r[1], r[0] - r[2]
    area = a[0] * b[1] - a[1] * b[0]
    least = min(np.hypot(*side).min() for side in (a, b, c))
    size = bodies.size(reference.sides(positions, velocities)[None])[0]
    # The first value is zero: the start is in line.
    return int(np.sum(area[1:-1] * area[2:] < 0.0)), float(least / size)


def test_outcomes_agree_with_dop853() -> None:
    p, q = np.linspace(0.05, 0.55, 4), np.linspace(0.1, 0.6, 4)
    seen = scan(COLLINEAR, p, q, 12.0)
    compared = np.argwhere(seen.valid & (seen.status == DONE))
    assert len(compared) >= 12
    for i, j in compared:
        alignments, least = by_dop853(p[i], q[j], 6.0 / scaled_time(p[i], q[j], 1.0))
        assert seen.alignments[i, j] == alignments
        # It may be less, for the last step may go beyond the time.
        assert seen.nearest[i, j] <= least * STEPWISE
    assert len({*seen.alignments[seen.status == DONE]}) >= 2


@pytest.mark.parametrize("kind", START_SETS)
def test_outcomes_agree_with_whole_trajectories(kind) -> None:
    starts = start_set(kind)
    p0, p1, q0, q1 = starts.window
    seen = scan(starts, np.linspace(p0, p1, 9), np.linspace(q0, q1, 9), 40.0)
    statuses = set()
    for i, j in np.argwhere(seen.valid):
        place = seen.p[i, j : j + 1], seen.q[i, j : j + 1]
        x, rate = starts.states(*place)[0], abs(starts.energies(*place)[0]) ** 1.5
        path = flow.track(x, 20.0 / rate, nearest=NEAREST)
        assert seen.status[i, j] == {v: k for k, v in flow.STATUS.items()}[path.status]
        statuses.add(path.status)
        assert seen.lifetime[i, j] == pytest.approx(rate * path.times[-1], rel=1e-9)
        events = path.events
        assert seen.alignments[i, j] == np.sum(events.functions == 0)
        # Sides are least where they are stationary, or at an end.
        states = np.stack([x, path.last, *events.states[events.functions >= 5]])
        least = np.linalg.norm(states[:, :6].reshape(-1, 3, 2), axis=2).min()
        assert seen.nearest[i, j] * bodies.size(x) <= least * STEPWISE
        if seen.status[i, j] == ESCAPE:
            # Here no step goes beyond the end.
            assert seen.nearest[i, j] * bodies.size(x) >= least * (1.0 - 1e-9)
    assert len(statuses) >= 2


def test_a_start_out_of_steps_lived_as_long_as_its_steps(monkeypatch) -> None:
    monkeypatch.setattr(flow, "MAX_STEPS", 20)
    eight = published.EIGHT
    seen = scan_one(eight.a, eight.b, 40.0)
    path = flow.track(reference.sides(*reference.collinear(eight.a, eight.b)), 40.0, max_steps=20)
    assert seen.status[0, 0] == BUDGET
    assert seen.lifetime[0, 0] == pytest.approx(
        scaled_time(eight.a, eight.b, path.times[-1]), rel=1e-12
    )


def test_starts_that_are_not_valid_have_no_outcome() -> None:
    seen = scan(COLLINEAR, np.array([-0.1, 0.3, 0.85]), np.array([0.2, 0.9]), 4.0)
    assert seen.valid.tolist() == [[False, False], [True, False], [True, False]]
    for nothing in (np.isnan(seen.lifetime), np.isnan(seen.nearest), seen.alignments < 0):
        assert np.array_equal(nothing, ~seen.valid)
    assert np.array_equal(seen.status < 0, ~seen.valid)


# ---------------------------------------------------------------- tiles

# Tiles of different sizes, a corner without bound starts.
TILED = SearchRequest("collinear", (0.3, 0.9, 0.0, 0.6), (56, 28), 4.0)


def test_tiles_put_together_are_the_scan_of_the_whole_grid() -> None:
    tiles = [event.outcomes for event in search(TILED, workers=1) if isinstance(event, TileDone)]
    p, q = np.linspace(0.3, 0.9, 56), np.linspace(0.0, 0.6, 28)
    whole = Outcomes.of(scan(COLLINEAR, p, q, TILED.scaled_period), (0, 56), (0, 28))
    covered = np.zeros(TILED.grid, int)
    for tile in tiles:
        place = slice(*tile.rows), slice(*tile.columns)
        covered[place] += 1
        for name in ("status", "lifetime", "alignments", "nearest"):
            values = getattr(tile, name)
            # Starts on a common edge are in both tiles, and the same in both.
            assert np.array_equal(values, getattr(whole, name)[place], equal_nan=True), name
    assert len(tiles) == TILED.tiles == 6
    assert covered.min() == 1
    # Two edges between three rows of tiles, one between two columns.
    assert np.sum(covered > 1) == 2 * 28 + 56 - 2
    assert np.sum(covered == 4) == 2


def test_outcomes_cost_a_worker_a_few_bytes_a_start() -> None:
    n = TILE + 1
    seen = scan(COLLINEAR, np.linspace(0.0, 0.1, n), np.linspace(0.0, 0.1, n), 1.0)
    outcomes = Outcomes.of(seen, (0, n), (0, n))
    assert len(pickle.dumps(outcomes)) < 11 * n * n + 1000
    back = pickle.loads(pickle.dumps(outcomes))
    assert (back.rows, back.columns) == ((0, n), (0, n))
    assert np.array_equal(back.lifetime, outcomes.lifetime, equal_nan=True)
