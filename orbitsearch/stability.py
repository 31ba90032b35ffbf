"""Linear stability: the two pairs of Floquet multipliers that the symmetries leave.

The monodromy matrix of the planar problem has eight trivial multipliers: four from the centre of
mass (absent in Jacobi coordinates), two from time and energy, two from rotation and angular
momentum.  The rest live on the symplectic space ker dE ∩ ker dL modulo the directions of time and
rotation, of dimension four; a matrix M acts on it as W^T M W, where the columns of W span the
orthogonal complement of those directions and of the two gradients.

Two computations are made of everything.  *Direct*: variational equations over the whole period.
*By symmetry*: over one arc of length t between two reversing symmetries Q_s and Q_e, where
M = (Q_s B^-1 Q_e B)^n with B the flow's derivative over the arc and T = 2 n t; errors grow only
with the 2n-th root of the multiplier there, so its figures are the ones reported.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies, flow
from orbitsearch.orbit import Stability
from orbitsearch.starts import Condition

__all__ = [
    "Arc",
    "classify",
    "direct_traces",
    "flow_derivative",
    "power_traces",
    "reversal_matrix",
    "rotation_matrix",
    "symmetric_traces",
    "trace_difference",
]

Array = NDArray[np.float64]

_J = np.block([[np.zeros((4, 4)), np.eye(4)], [-np.eye(4), np.zeros((4, 4))]])


# Directions, in radians, in which an arc is computed to see what rounding does to it.
_DIRECTIONS = (0.0, 1.0, 2.0)


@dataclass(frozen=True)
class Arc:
    """Arc of an orbit between two conditions: state at its start and end, and its time."""

    begin: Array
    end: Array
    time: float
    start: Condition
    stop: Condition


def flow_derivative(x: Array, time: float) -> Array:
    """Derivative of the flow over `time` at state x, shape (12,), in Jacobi coordinates (8, 8)."""
    basis = bodies.sides_from_jacobi(np.eye(8))
    moved = flow.propagate(np.tile(x, (8, 1)), time, basis[:, None, :])
    return bodies.jacobi_from_sides(moved.tangents[:, 0]).T


def rotation_matrix(angle: float) -> Array:
    """Rotation of all four Jacobi vectors by an angle, shape (8, 8)."""
    c, s = np.cos(angle), np.sin(angle)
    return np.kron(np.eye(4), np.array([[c, -s], [s, c]]))


def reversal_matrix(condition: Condition, x: Array) -> Array:
    """Matrix, shape (8, 8) in Jacobi coordinates, of the reversing symmetry that fixes state x."""
    plane = condition.plane_matrix(x)
    r, v = bodies.sides_to_bodies(bodies.sides_from_jacobi(np.eye(8)))
    to = list(condition.reversal.permutation)
    image_r, image_v = np.empty_like(r), np.empty_like(v)
    image_r[:, to], image_v[:, to] = r @ plane.T, -v @ plane.T
    return bodies.jacobi_from_sides(bodies.bodies_to_sides(image_r, image_v)).T


def _normal_space(x: Array) -> Array:
    """Columns W, shape (8, 4): complement of time, rotation, and the gradients of E and L."""
    z = bodies.jacobi_from_sides(x)
    time = bodies.jacobi_from_sides(bodies.flow_direction(x))
    turn = np.kron(np.eye(4), np.array([[0.0, -1.0], [1.0, 0.0]])) @ z
    directions = np.stack([time, turn, _J @ time, _J @ turn], axis=1)
    full = np.linalg.qr(directions, mode="complete")[0]
    return np.asarray(full[:, 4:])


def _pair_traces(m: Array) -> tuple[complex, complex]:
    """λ + 1/λ of the two pairs of a symplectic 4 by 4 matrix, larger modulus first.

    They are the roots of s² - c1 s + c2, c1 = tr M, c2 = (c1² - tr M²)/2 - 2.
    """
    c1 = float(np.trace(m))
    c2 = 0.5 * (c1 * c1 - float(np.trace(m @ m))) - 2.0
    root = np.sqrt(complex(0.25 * c1 * c1 - c2))
    half = 0.5 * c1
    first = half + root if abs(half + root) >= abs(half - root) else half - root
    # The product of the roots gives the smaller one without cancellation.
    second = c2 / first if abs(first) > 0 else -root
    return complex(first), complex(second)


def power_traces(trace: complex, n: int) -> complex:
    """λ^n + λ^-n from λ + 1/λ, by the recurrence of the Chebyshev polynomials.

    Examples
    --------
    >>> power_traces(3.0, 3)
    18.0
    """
    before, now = 2.0 + 0.0 * trace, trace
    for _ in range(n - 1):
        before, now = now, trace * now - before
    return now


def direct_traces(
    x: Array, period: float, rotation: float
) -> tuple[tuple[complex, complex], float, float]:
    """Traces of the two pairs from the whole period.

    The matrix is that of the motion in the frame that turns by `rotation` in a period.

    Returns
    -------
    traces : pair of complex
    blur : float
        Change of the larger trace, over its size, when the start is turned: what rounding does.
    growth : float
        Norm of the monodromy matrix.
    """
    found = []
    for direction in _DIRECTIONS[:2]:
        start = bodies.turned(x, direction)
        m = rotation_matrix(-rotation) @ flow_derivative(start, period)
        w = _normal_space(start)
        found.append((_pair_traces(w.T @ m @ w), float(np.linalg.norm(m, 2))))
    (traces, growth), (other, _) = found
    return traces, trace_difference(traces, other), growth


def _arc_traces(arc: Arc) -> tuple[complex, complex]:
    b = flow_derivative(arc.begin, arc.time)
    inverse = -_J @ b.T @ _J
    fraction = (
        reversal_matrix(arc.start, arc.begin) @ inverse @ reversal_matrix(arc.stop, arc.end) @ b
    )
    w = _normal_space(arc.begin)
    n = arc.start.reversal.order_with(arc.stop.reversal)
    first, second = (power_traces(s, n) for s in _pair_traces(w.T @ fraction @ w))
    return (first, second) if abs(first) >= abs(second) else (second, first)


def symmetric_traces(arc: Arc) -> tuple[tuple[complex, complex], tuple[float, float]]:
    """Traces of the two pairs over the whole period, computed from one arc, and their errors.

    The errors are measured: the same arc turned to other directions in the plane is the same to
    mathematics but is rounded differently; ten times the spread of the results is reported.
    """
    begin, *others = (
        _arc_traces(replace(arc, begin=bodies.turned(arc.begin, t), end=bodies.turned(arc.end, t)))
        for t in _DIRECTIONS
    )
    turned = [begin, *(_in_order_of(begin, other) for other in others)]
    errors = [
        10.0 * max(abs(other[k] - begin[k]) for other in turned) + 1e-14 * max(1.0, abs(begin[k]))
        for k in range(2)
    ]
    return begin, (errors[0], errors[1])


def _in_order_of(
    one: tuple[complex, complex], other: tuple[complex, complex]
) -> tuple[complex, complex]:
    """The two traces of `other` in the order that fits `one`: equal moduli come in either."""
    swapped = (other[1], other[0])
    straight_miss = abs(one[0] - other[0]) + abs(one[1] - other[1])
    swapped_miss = abs(one[0] - swapped[0]) + abs(one[1] - swapped[1])
    return other if straight_miss <= swapped_miss else swapped


def trace_difference(one: tuple[complex, complex], other: tuple[complex, complex]) -> float:
    """Largest difference of two pairs of traces over the larger of 1 and their size."""
    first, second = _in_order_of(one, other)
    return float(max(abs(one[0] - first), abs(one[1] - second)) / max(1.0, abs(one[0])))


def _multiplier(trace: complex) -> float:
    """Larger |λ| of a pair."""
    root = np.sqrt(complex(0.25 * trace * trace - 1.0))
    return float(max(abs(0.5 * trace + root), abs(0.5 * trace - root)))


def _pair_kind(trace: float, error: float) -> str:
    if abs(abs(trace) - 2.0) <= error:
        return "undecided"
    if abs(trace) < 2.0:
        return "elliptic"
    return "hyperbolic" if trace > 0 else "inverse hyperbolic"


def classify(traces: tuple[complex, complex], errors: tuple[float, float]) -> Stability:
    """Kind of stability from the traces of the two pairs.

    Parameters
    ----------
    traces : pair of complex
    errors : pair of float
        Absolute uncertainty of each; a pair that cannot be told from a border (trace ±2, or a
        double pair about to leave the real axis) makes the kind undecided.

    Examples
    --------
    >>> tiny = (1e-12, 1e-12)
    >>> classify((1.9, -1.2), tiny).kind, classify((9.0, 1.2), tiny).kind
    ('elliptic-elliptic', 'elliptic-hyperbolic')
    """
    first, second = (complex(s) for s in traces)
    angles: tuple[float, ...] = ()
    # Near a double root of s² - c1 s + c2 its error is the square root of the coefficients'.
    separate = abs(first - second) ** 2 > 10.0 * max(errors) * max(1.0, abs(first))
    if first.imag != 0.0:
        kind = "complex quadruple" if separate else "undecided"
    else:
        kinds = sorted(_pair_kind(s.real, e) for s, e in zip((first, second), errors, strict=True))
        kind = "undecided" if "undecided" in kinds else "-".join(kinds)
        inside = [s.real for s in (first, second) if abs(s.real) < 2.0]
        angles = tuple(sorted(float(np.arccos(0.5 * s)) / (2.0 * np.pi) for s in inside))
    largest = max(_multiplier(first), _multiplier(second))
    relative = max(e / max(1.0, abs(s)) for s, e in zip((first, second), errors, strict=True))
    return Stability(kind, (first, second), angles, largest, float(relative))
