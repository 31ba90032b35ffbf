"""The compiled integrator against heyoka and scipy's DOP853."""

import importlib.util
from typing import Any

import numpy as np

from orbitsearch import _kernels, bodies, flow
from tests import reference
from tests.bench.measure import Contestant, Section

__all__ = ["sections"]

STEPS = 400
"""Steps of each start where steps are counted: the same for every contestant."""

STARTS = reference.random_bound_starts(64, seed=3)
WIDE = [
    x
    for x in reference.random_bound_starts(40, seed=7)
    if reference.least_side(flow.track(x, 5.0).series) > 0.1
][:8]
"""Arcs without close approach, on which DOP853 takes no more than seconds."""

FAR = 1e9
TANGENTS = bodies.sides_from_jacobi(np.eye(8))
HAS_HEYOKA = importlib.util.find_spec("heyoka") is not None


# ---------------------------------------------------------------- ours


def our_steps() -> float:
    """Lane-steps of many starts without events."""
    result = flow.propagate(STARTS, FAR, nearest=0.0, max_steps=STEPS)
    return float(np.sum(result.steps))


def our_scan() -> float:
    """Lane-steps of many starts with every event recorded."""
    n = len(STARTS)
    status, steps, counts = (np.zeros(n, np.int64) for _ in range(3))
    kinds = np.zeros((n, 8 * STEPS), np.int64)
    when, first, second = (np.zeros(kinds.shape) for _ in range(3))
    _kernels.scan(
        _kernels.workspace(),
        STARTS.copy(),
        np.full(n, FAR),
        np.zeros(n),
        STEPS,
        *(status, steps, counts, kinds, when, first, second),
    )
    return float(np.sum(steps))


def our_tangents(starts: np.ndarray, tangents: np.ndarray) -> float:
    """Steps of starts with eight tangents each, whichever way those are spread over lanes."""
    result = flow.propagate(starts, FAR, tangents, nearest=0.0, max_steps=STEPS)
    return float(np.sum(result.steps)) * tangents.shape[1] / 8


# ---------------------------------------------------------------- heyoka


def heyoka_relative() -> list[Any]:
    """Equations of two sides and their rates: the form in which heyoka was fastest.

    Measured in turns: bodies 2.6 µs a step, three sides 2.1 µs, two sides 2.0 µs; in batches 0.92,
    0.64 and 0.62 µs.
    """
    import heyoka as hy

    (ax, ay), (bx, by) = sides = [hy.make_vars("ax", "ay"), hy.make_vars("bx", "by")]
    rates = [hy.make_vars("au", "av"), hy.make_vars("bu", "bv")]
    pulls = []
    for x, y in (*sides, (-ax - bx, -ay - by)):
        cube = hy.sum([x * x, y * y]) ** -1.5
        pulls.append((x * cube, y * cube))
    total = [hy.sum([pull[axis] for pull in pulls]) for axis in range(2)]
    first = [(sides[p][axis], rates[p][axis]) for p in range(2) for axis in range(2)]
    second = [
        (rates[p][axis], total[axis] - 3.0 * pulls[p][axis]) for p in range(2) for axis in range(2)
    ]
    return first + second


HEYOKA_STARTS = np.concatenate([STARTS[:, :4], STARTS[:, 6:10]], axis=1)
# Order 20 in both; heyoka's compensated summation (high accuracy) stays off.
TOLERANCE = 1e-16


def heyoka_scalar_steps(integrator: Any, starts: np.ndarray, steps: int = STEPS) -> float:
    """Steps of starts one after the other; variational state, if any, begins as the identity."""
    total = 0
    for x in starts:
        integrator.time = 0.0
        integrator.state[:8] = x
        if len(integrator.state) > 8:
            integrator.state[8:] = np.eye(8).ravel()
        total += integrator.propagate_until(FAR, max_steps=steps)[3]
    return float(total)


def heyoka_batch_steps(integrator: Any) -> float:
    """Lane-steps of starts side by side."""
    size = integrator.batch_size
    total = 0
    for i in range(0, len(HEYOKA_STARTS) - size + 1, size):
        integrator.set_time(0.0)
        integrator.state[:] = HEYOKA_STARTS[i : i + size].T
        integrator.propagate_until([FAR] * size, max_steps=STEPS)
        total += sum(lane[3] for lane in integrator.propagate_res)
    return float(total)


def step_section() -> Section:
    """Steps of chaotic starts, no tangents."""
    contestants = [
        Contestant(f"ours, {_kernels.LANES} lanes, with events (scan)", our_scan),
        Contestant(f"ours, {_kernels.LANES} lanes, no events", our_steps),
        Contestant(
            "ours, one start at a time",
            lambda: sum(
                float(flow.propagate(x, FAR, nearest=0.0, max_steps=STEPS).steps[0])
                for x in STARTS[:8]
            ),
        ),
    ]
    if HAS_HEYOKA:
        import heyoka as hy

        system = heyoka_relative()
        scalar = hy.taylor_adaptive(system, [0.0] * 8, tol=TOLERANCE)
        size = hy.recommended_simd_size()
        batch = hy.taylor_adaptive_batch(system, np.zeros((8, size)), tol=TOLERANCE)
        contestants += [
            Contestant(f"heyoka, batch of {size}, no events", lambda: heyoka_batch_steps(batch)),
            Contestant(
                "heyoka, scalar, no events", lambda: heyoka_scalar_steps(scalar, HEYOKA_STARTS)
            ),
        ]
    # Ours without events comes first: it does what the others do.
    contestants[0], contestants[1] = contestants[1], contestants[0]
    return Section("chaotic collinear starts", "step", contestants)


def tangent_section() -> Section:
    """Steps with the eight tangents of a whole flow derivative."""
    together = np.repeat(TANGENTS[None], len(STARTS), axis=0)
    contestants = [
        Contestant(
            "ours, one start, a tangent in each of 8 lanes",
            lambda: sum(
                our_tangents(np.repeat(x[None], 8, axis=0), TANGENTS[:, None]) for x in STARTS[:8]
            ),
        ),
        Contestant(
            "ours, 8 starts in lanes, 8 tangents each", lambda: our_tangents(STARTS, together)
        ),
    ]
    if HAS_HEYOKA:
        import heyoka as hy

        system = hy.var_ode_sys(heyoka_relative(), hy.var_args.vars, order=1)
        # Compact mode builds in a second instead of twenty, and takes twice as long a step.
        integrator = hy.taylor_adaptive(system, [0.0] * 8, tol=TOLERANCE, compact_mode=False)
        contestants.append(
            Contestant(
                "heyoka, first-order variational equations",
                lambda: heyoka_scalar_steps(integrator, HEYOKA_STARTS[:8], steps=100),
            )
        )
    return Section("eight tangents", "step", contestants)


# ---------------------------------------------------------------- a unit of time


def time_section() -> Section:
    """The same arcs to the same end, whatever steps that takes."""
    span = 5.0
    wide = np.array(WIDE)
    states = [bodies.sides_to_bodies(x) for x in wide]

    def ours_alone() -> float:
        for x in wide:
            flow.propagate(x, span)
        return span * len(wide)

    def ours() -> float:
        flow.propagate(np.concatenate([wide] * 8), span)
        return 8 * span * len(wide)

    def dop853() -> float:
        for positions, velocities in states:
            reference.dop853(positions, velocities, span)
        return span * len(wide)

    contestants = [
        Contestant(f"ours, {_kernels.LANES} lanes", ours),
        Contestant("ours, one start at a time", ours_alone),
    ]
    if HAS_HEYOKA:
        import heyoka as hy

        integrator = hy.taylor_adaptive(heyoka_relative(), [0.0] * 8, tol=TOLERANCE)

        def heyoka() -> float:
            for x in wide:
                integrator.time = 0.0
                integrator.state[:] = np.concatenate([x[:4], x[6:10]])
                integrator.propagate_until(span)
            return span * len(wide)

        contestants.append(Contestant("heyoka, scalar", heyoka))
    contestants.append(Contestant("scipy DOP853, 1e-13, numpy right-hand side", dop853))
    return Section("arcs without close approach", "unit of time", contestants)


def sections() -> list[Section]:
    """Build every table of this file; heyoka compiles meanwhile."""
    return [step_section(), tangent_section(), time_section()]
