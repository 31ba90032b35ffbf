"""The same mechanics from outside: Newton's equations for bodies, scipy's DOP853, and heyoka.

Nothing here knows of sides, lanes or Taylor recurrences; tests and benchmarks hold the compiled
kernels against these.  heyoka (https://github.com/bluescarni/heyoka.py) has wheels for some
platforms only, so it is imported where it is used, and tests that need it skip without it.
"""

import itertools
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

Array = NDArray[np.float64]

PAIRS = tuple(itertools.combinations(range(3), 2))


def collinear(a: float, b: float) -> tuple[Array, Array]:
    """Positions and velocities, each (3, 2): bodies at (-1, 0), (1, 0), (0, 0), L = 0."""
    positions = np.array([[-1.0, 0.0], [1.0, 0.0], [0.0, 0.0]])
    return positions, np.outer([1.0, 1.0, -2.0], [a, b])


def at_rest(x: float, y: float) -> tuple[Array, Array]:
    """Positions and velocities, each (3, 2): (-1/2, 0), (1/2, 0), (x, y) at rest, centred."""
    positions = np.array([[-0.5, 0.0], [0.5, 0.0], [x, y]])
    return positions - positions.mean(axis=0), np.zeros((3, 2))


def sides(positions: Array, velocities: Array) -> Array:
    """State (A, B, C, A', B', C') of the kernels, shape (12,), written out from its definition."""
    (r1, r2, r3), (v1, v2, v3) = positions, velocities
    return np.concatenate([r2 - r1, r3 - r2, r1 - r3, v2 - v1, v3 - v2, v1 - v3])


def random_bound_starts(count: int, seed: int) -> Array:
    """Sides, shape (count, 12), of collinear starts spread over the bound part of the plane.

    E = 3 (a² + b²) - 5/2 < 0 keeps (a, b) inside a disc of radius 0.913; motion from most of it is
    chaotic, with close approaches.
    """
    random = np.random.default_rng(seed)
    angle = random.uniform(0.0, np.pi / 2, count)
    speed = 0.9 * np.sqrt(random.uniform(0.01, 1.0, count))
    return np.array(
        [sides(*collinear(v * np.cos(t), v * np.sin(t))) for v, t in zip(speed, angle, strict=True)]
    )


def least_side(series: Array) -> float:
    """Least side at the beginnings of the steps of a trajectory, shape (steps, 6, terms)."""
    return float(np.min(np.linalg.norm(series[:, :, 0].reshape(-1, 3, 2), axis=2)))


def newton(_: float, y: Array) -> Array:
    """Right-hand side for y = (positions, velocities), shape (12,), straight from Newton's law."""
    r = y[:6].reshape(3, 2)
    acceleration = np.zeros((3, 2))
    for i, j in PAIRS:
        d = r[j] - r[i]
        pull = d / np.dot(d, d) ** 1.5
        acceleration[i] += pull
        acceleration[j] -= pull
    return np.concatenate([y[6:], acceleration.ravel()])


def dop853(positions: Array, velocities: Array, time: float, tolerance: float = 1e-13, **more: Any):
    """Solution object of scipy's DOP853 for a state of bodies."""
    y = np.concatenate([positions.ravel(), velocities.ravel()])
    return solve_ivp(
        newton, (0.0, time), y, method="DOP853", rtol=tolerance, atol=tolerance, **more
    )


def heyoka_system() -> list[Any]:
    """Newton's equations in heyoka's symbols, in the order of `newton`."""
    import heyoka as hy

    names = [f"{c}{i}" for i in range(3) for c in "xy"]
    r = hy.make_vars(*names)
    v = hy.make_vars(*("v" + name for name in names))
    pull = [[] for _ in range(6)]
    for i, j in PAIRS:
        d = [r[2 * j + axis] - r[2 * i + axis] for axis in range(2)]
        cube = hy.sum([d[0] * d[0], d[1] * d[1]]) ** -1.5
        for axis in range(2):
            pull[2 * i + axis].append(d[axis] * cube)
            pull[2 * j + axis].append(-d[axis] * cube)
    return [*zip(r, v, strict=True), *((v[k], hy.sum(pull[k])) for k in range(6))]


def heyoka_flow(
    integrator: Any, positions: Array, velocities: Array, time: float
) -> tuple[Array, Array]:
    """Bodies after `time` by a heyoka integrator of `heyoka_system`, of any precision.

    Variational state, if there is one, follows the first 12 numbers and is the caller's to set.
    """
    kind = integrator.state.dtype.type
    integrator.time = kind(0)
    integrator.state[:12] = np.concatenate([positions.ravel(), velocities.ravel()]).astype(kind)
    integrator.propagate_until(kind(time))
    return integrator.state[:6].reshape(3, 2).copy(), integrator.state[6:12].reshape(3, 2).copy()
