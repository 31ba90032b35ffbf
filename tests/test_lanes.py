"""Lanes, endings, and the compiled file itself.

Eight starts share a vector; none of them may notice.  Endings are codes that a start of the kind
they name really gives.
"""

import inspect
import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import published
import pytest
import reference
from numba.core.dispatcher import Dispatcher

from orbitsearch import _kernels, bodies, flow
from orbitsearch.orbit import Status

EIGHT = reference.sides(*reference.collinear(published.EIGHT.a, published.EIGHT.b))
T_EIGHT = published.EIGHT.period
MANY = 37
"""More starts than lanes, and no multiple: lanes refill, and some stay idle at the end."""


def scanned(starts, times, max_steps=100_000, capacity=500):
    """All outputs of `_kernels.scan` by name."""
    n = len(starts)
    result = {name: np.zeros(n, np.int64) for name in ("status", "steps", "counts")}
    result["kinds"] = np.zeros((n, capacity), np.int8)
    result |= {name: np.zeros((n, capacity)) for name in ("when", "first", "second")}
    result["states"] = starts.copy()
    _kernels.scan(
        _kernels.workspace(),
        result["states"],
        np.array(np.broadcast_to(times, n), float),
        flow.NEAREST * bodies.size(starts),
        max_steps,
        *(result[k] for k in ("status", "steps", "counts", "kinds", "when", "first", "second")),
    )
    return result


@pytest.fixture(scope="module")
def batch():
    """Different starts over different times, so that lanes finish in any order."""
    times = np.random.default_rng(8).uniform(0.2, 9.0, MANY)
    return reference.random_bound_starts(MANY, seed=8), times


def test_a_start_alone_gives_bit_for_bit_what_it_gives_among_others(batch):
    starts, times = batch
    tangents = np.repeat(bodies.sides_from_jacobi(np.eye(8)[:2])[None], MANY, axis=0)
    together = flow.propagate(starts, times, tangents)
    for i in range(MANY):
        alone = flow.propagate(starts[i], times[i], tangents[i : i + 1])
        assert np.array_equal(alone.states[0], together.states[i])
        assert np.array_equal(alone.tangents[0], together.tangents[i])
        assert alone.steps[0] == together.steps[i]


def test_order_of_starts_does_not_matter(batch):
    starts, times = batch
    order = np.random.default_rng(9).permutation(MANY)
    straight = flow.propagate(starts, times)
    shuffled = flow.propagate(starts[order], times[order])
    assert np.array_equal(shuffled.states, straight.states[order])
    assert np.array_equal(shuffled.steps, straight.steps[order])


def test_scan_of_a_start_alone_equals_the_scan_among_others(batch):
    starts, times = batch
    together = scanned(starts, times)
    assert np.sum(together["counts"]) > 10 * MANY
    for i in range(MANY):
        alone = scanned(starts[i : i + 1], times[i : i + 1])
        for name, values in together.items():
            assert np.array_equal(alone[name][0], values[i]), name


def test_one_bad_lane_does_not_spoil_the_others():
    # Two bodies in one place: every coefficient of that lane is NaN from the first step.
    broken = EIGHT.copy()
    broken[:2] = 0.0
    broken[4:6] = -broken[2:4]
    starts = np.array([EIGHT, broken, EIGHT])
    result = flow.propagate(starts, T_EIGHT)
    assert result.status.tolist() == [
        _kernels.STATUS_DONE,
        _kernels.STATUS_COLLISION,
        _kernels.STATUS_DONE,
    ]
    assert np.array_equal(result.states[0], flow.propagate(EIGHT, T_EIGHT).states[0])
    assert np.array_equal(result.states[0], result.states[2])
    found = scanned(starts, T_EIGHT)
    assert found["status"].tolist() == result.status.tolist()
    assert flow.track(broken, T_EIGHT).status is Status.COLLISION


def test_no_time_means_no_motion():
    result = flow.propagate(np.array([EIGHT, EIGHT]), np.array([0.0, T_EIGHT]))
    assert np.array_equal(result.states[0], EIGHT)
    assert result.steps[0] == 0
    assert result.steps[1] > 0


def test_nothing_to_do_is_done():
    result = flow.propagate(np.empty((0, 12)), 1.0)
    assert result.states.shape == (0, 12)


def test_inputs_are_left_alone(batch):
    starts, times = batch
    tangents = np.ones((MANY, 1, 12))
    copies = starts.copy(), times.copy(), tangents.copy()
    flow.propagate(starts, times, tangents)
    for given, copy in zip((starts, times, tangents), copies, strict=True):
        assert np.array_equal(given, copy)


def test_head_on_fall_ends_as_a_collision():
    # Bodies 1 and 2 fall on body 3 from rest at distance 1; by the 1D Kepler problem with μ = 5/4
    # (test_homographic.py, e = 1) they meet after half a period at semi-major axis 1/2.
    start = reference.sides(*reference.collinear(0.0, 0.0))
    meet = np.pi / np.sqrt(1.25) * 0.5**1.5
    trajectory = flow.track(start, 10.0)
    assert trajectory.status is Status.COLLISION
    # At distance d the fall has √2/3 d^(3/2) / √μ left: nothing to speak of at 1e-7.
    assert trajectory.times[-1] == pytest.approx(meet, rel=1e-9)
    assert flow.propagate(start, 10.0).status[0] == _kernels.STATUS_COLLISION
    assert scanned(start[None], 10.0)["status"][0] == _kernels.STATUS_COLLISION


def escaping_starts():
    """Bound triples that throw a body out: status ESCAPE, with the time of that verdict."""
    found = []
    for x in reference.random_bound_starts(60, seed=4):
        trajectory = flow.track(x, 300.0)
        if trajectory.status is Status.ESCAPE:
            found.append(trajectory)
    assert len(found) >= 10
    return found


def test_an_escape_is_never_called_back():
    # The verdict is held against the motion itself: `propagate` follows the triple on regardless,
    # and the single body must keep going away with positive energy relative to the binary.
    for trajectory in escaping_starts():
        pairs = np.linalg.norm(trajectory.last[:6].reshape(3, 2), axis=1)
        binary = int(np.argmin(pairs))

        # Half the difference of the two long sides joins the binary's centre and the third body.
        first, second = (binary + 1) % 3, (binary + 2) % 3
        later = np.array([0.0, 5.0, 20.0, 50.0, 100.0])
        result = flow.propagate(
            np.repeat(trajectory.last[None], 5, axis=0), later, max_steps=1_000_000
        )
        assert np.all(result.status == _kernels.STATUS_DONE)
        sides = result.states.reshape(5, 2, 3, 2)
        apart, rate = np.moveaxis((sides[:, :, first] - sides[:, :, second]) / 2, 1, 0)
        distance = np.linalg.norm(apart, axis=1)
        assert np.all(np.diff(distance) > 0.0)
        # Relative motion of masses 1 and 2: v²/2 - 3/r stays above zero.
        assert np.all(np.sum(rate**2, axis=1) / 2 > 3.0 / distance)


def test_scan_and_track_call_the_same_starts_escaped():
    starts = reference.random_bound_starts(30, seed=4)
    by_scan = scanned(starts, 150.0, capacity=20_000)
    for x, code, steps in zip(starts, by_scan["status"], by_scan["steps"], strict=True):
        trajectory = flow.track(x, 150.0)
        if code == _kernels.STATUS_ESCAPE:
            assert trajectory.status is Status.ESCAPE
            assert trajectory.steps == steps
        else:
            assert trajectory.status is not Status.ESCAPE


def test_running_out_of_steps_is_a_status_and_leaves_the_state_reached():
    result = flow.propagate(EIGHT, T_EIGHT, max_steps=20)
    assert flow.STATUS[int(result.status[0])] is Status.BUDGET
    assert result.steps[0] == 20
    trajectory = flow.track(EIGHT, T_EIGHT, max_steps=20)
    assert trajectory.status is Status.BUDGET
    assert trajectory.steps == 20
    assert np.max(np.abs(trajectory.last - result.states[0])) < 1e-14
    assert scanned(EIGHT[None], T_EIGHT, max_steps=20)["status"][0] == _kernels.STATUS_BUDGET


def test_more_events_than_room_is_a_status_and_writes_nothing_beyond():
    whole = scanned(EIGHT[None], T_EIGHT)
    short = scanned(EIGHT[None], T_EIGHT, capacity=7)
    assert whole["counts"][0] > 7
    assert short["status"][0] == _kernels.STATUS_BUDGET
    assert short["counts"][0] == 7
    assert np.array_equal(short["when"][0], whole["when"][0, :7])


def test_track_grows_its_room():
    # 1,024 steps are room for 14 periods of the figure-eight.
    trajectory = flow.track(EIGHT, 20 * T_EIGHT)
    assert trajectory.status is Status.CONVERGED
    assert trajectory.steps > 1024
    assert trajectory.times[-1] == 20 * T_EIGHT
    assert np.max(np.abs(trajectory.last - EIGHT)) < 1e-10


def test_read_only_arguments_do_not_compile_the_kernel_again():
    # A second signature costs seconds once per machine and was easy to cause: numba tells
    # read-only arrays from others.
    flow.propagate(EIGHT, T_EIGHT / 7)
    before = len(_kernels.flow.signatures)
    times = np.array([0.1, 0.2])
    times.flags.writeable = False
    flow.propagate(np.array([EIGHT, EIGHT]), times)
    flow.propagate(np.array([EIGHT, EIGHT]), 0.1)
    assert len(_kernels.flow.signatures) == before == 1


# ---------------------------------------------------------------- one file


def compiled_functions(module):
    """Dispatchers among a module's globals."""
    return {k: v for k, v in vars(module).items() if isinstance(v, Dispatcher)}


def test_every_compiled_function_is_written_in_the_kernels_file():
    # numba's disk cache watches the file of the function it caches, no other: a compiled helper
    # or table imported from elsewhere would go stale unnoticed.
    here = Path(_kernels.__file__)
    found = compiled_functions(_kernels)
    assert len(found) > 20
    for name, function in found.items():
        assert Path(inspect.getsourcefile(function.py_func)) == here, name
        for used in function.py_func.__code__.co_names:
            value = function.py_func.__globals__.get(used)
            module = getattr(value, "__module__", None)
            assert not (module or "").startswith("orbitsearch") or module == _kernels.__name__, used


SHORT_ARC = """
import json, sys
import numpy as np
from orbitsearch import _kernels, flow
states, tangents = (np.array(part) for part in json.loads(sys.argv[1]))
result = flow.propagate(states, 0.25, tangents)
events = flow.track(states[0], 0.75).events
# Two events at one moment (an isosceles triple that is also at its slowest) come in either order.
order = np.lexsort([events.times, events.functions])
print(json.dumps({
    "compiled": hasattr(_kernels.flow, "signatures"),
    "states": result.states.tolist(),
    "tangents": result.tangents.tolist(),
    "steps": result.steps.tolist(),
    "functions": events.functions[order].tolist(),
    "times": events.times[order].tolist(),
}))
"""


def test_plain_python_gives_the_same_numbers():
    states = np.array([EIGHT, reference.sides(*reference.at_rest(0.2, 0.6))])
    tangents = np.repeat(bodies.sides_from_jacobi(np.eye(8)[:2])[None], 2, axis=0)
    argument = json.dumps([states.tolist(), tangents.tolist()])
    outputs = []
    for disabled in "01":
        done = subprocess.run(
            [sys.executable, "-W", "error", "-c", SHORT_ARC, argument],
            env=os.environ | {"NUMBA_DISABLE_JIT": disabled},
            capture_output=True,
            text=True,
            check=True,
        )
        outputs.append(json.loads(done.stdout))
    compiled, plain = outputs
    assert compiled["compiled"]
    assert not plain["compiled"]
    assert compiled["steps"] == plain["steps"]
    assert compiled["functions"] == plain["functions"] != []
    for name in ("states", "tangents", "times"):
        assert np.array(plain[name]) == pytest.approx(
            np.array(compiled[name]), rel=1e-12, abs=1e-13
        )
