"""The shape sphere: triangles up to place, size and rotation.

With the Jacobi vectors ρ = (r1 - r2)/√2 and λ = (r1 + r2 - 2 r3)/√6 the shape of a triangle is the
unit vector

    n = (|ρ|² - |λ|², 2 ρ·λ, 2 ρ x λ) / (|ρ|² + |λ|²),

the map of H. Hopf (1931); for three bodies see R. Montgomery, Amer. Math. Monthly 122 (2015)
299-321 (both from memory).  Mirror images are apart: on the upper half bodies 1, 2, 3 run
counterclockwise, on the lower clockwise, and at the poles the triangle is equilateral.  On the
equator the three are in line.  There lie the three collisions of two bodies, 120 degrees apart, and
opposite to each the Euler point of the third body, which is midway between the others.

Angles and distances on the sphere are radians.
"""

from __future__ import annotations

from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from orbitsearch.errors import BadRequest
from orbitsearch.flow import Trajectory
from orbitsearch.strands import Pieces, divide, may_turn

__all__ = [
    "COLLISIONS",
    "EULER",
    "POLES",
    "collision_distances",
    "great_circle_distance",
    "sample",
    "shape",
    "shape_of_positions",
    "shape_velocity",
    "triangle",
]

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

# A vector farther from unit length than this is no point of the sphere but a mistake.
UNIT = 1e-6
# Neighbouring samples are at most this share of their distance to a collision apart: 25 and more
# to each turn around it, which draws as round.
SHARE = 0.25
LEAST_SPACING, MOST_SPACING = 1e-4, 0.5


def shape(x: ArrayLike) -> Array:
    """Points of the shape sphere for states.

    Parameters
    ----------
    x : array_like, shape (..., 12)
        Sides and rates (`orbitsearch.bodies`); only the sides matter.

    Returns
    -------
    ndarray, shape (..., 3)
        Unit vectors.  A collision of two bodies is a shape like any other.

    Raises
    ------
    BadRequest
        When the last axis is not 12 long, a side is not finite, or all three bodies are in one
        place.

    Examples
    --------
    Body 3 midway between the others.

    >>> shape([2.0, 0, -1, 0, -1, 0, 0, 0, 0, 0, 0, 0])
    array([1., 0., 0.])
    """
    rho, lam = _jacobi(_scaled(_states(x))[..., :6])
    return _point(rho, lam)


def shape_of_positions(r: ArrayLike) -> Array:
    """Points of the shape sphere, shape (..., 3), for positions.

    Parameters
    ----------
    r : array_like, shape (..., 3, 2)
        The centre of mass may be anywhere.

    Raises
    ------
    BadRequest
        As `shape`.

    Examples
    --------
    Bodies 1 and 2 in collision.

    >>> shape_of_positions([[1.0, 2.0], [1.0, 2.0], [4.0, 5.0]])
    array([-1.,  0.,  0.])
    """
    r = _floats(r, "r")
    if r.shape[-2:] != (3, 2):
        raise BadRequest(
            f"`r` must have shape (..., 3, 2), got {r.shape}: give the places of three bodies"
        )
    _refuse_infinite(r)
    sides = np.roll(r, -1, axis=-2) - r
    return _point(*_jacobi(_scaled(sides.reshape(*r.shape[:-2], 6))))


def shape_velocity(x: ArrayLike) -> Array:
    """Velocity of the shape as a state moves on.

    Parameters
    ----------
    x : array_like, shape (..., 12)
        Sides and their rates.

    Returns
    -------
    ndarray, shape (..., 3)
        Tangent vectors at `shape` of x, in radians per unit of time.

    Raises
    ------
    BadRequest
        As `shape`, and when a rate is not finite.

    Notes
    -----
    Written with W = ρ'λ - ρλ' of complex ρ and λ, which no change of size, turn or change of both
    contributes to: the speed is 2|W|/(|ρ|² + |λ|²).  Differentiating the map itself would subtract
    large numbers in a close passage, where bodies fall fast but the shape changes less.

    Examples
    --------
    Three bodies at rest do not change their shape at that moment.

    >>> shape_velocity([1.0, 0, -0.5, 0.8, -0.5, -0.8, 0, 0, 0, 0, 0, 0])
    array([0., 0., 0.])
    """
    x = _scaled(_states(x))
    if not np.isfinite(x[..., 6:]).all():
        raise BadRequest("`x` must have finite rates, got infinity or NaN: stop before it")
    rho, lam = _jacobi(x[..., :6])
    rho_rate, lam_rate = _jacobi(x[..., 6:])
    change = rho_rate * lam - rho * lam_rate
    inertia = np.abs(rho) ** 2 + np.abs(lam) ** 2
    first = 4.0 * ((rho * lam).conj() * change).real
    rest = 2.0 * (lam**2 * change.conj() - rho.conj() ** 2 * change)
    velocity = np.stack([first, rest.real, rest.imag], axis=-1) / inertia[..., None] ** 2
    return np.asarray(velocity + 0.0)


def collision_distances(x: ArrayLike) -> Array:
    """Distances on the shape sphere from the collision points, to full relative accuracy.

    Parameters
    ----------
    x : array_like, shape (..., 12)

    Returns
    -------
    ndarray, shape (..., 3)
        Radians, from the collisions of the pairs 12, 23 and 31.

    Raises
    ------
    BadRequest
        As `shape`.

    Examples
    --------
    At an Euler point two collisions are 60 degrees away, and one is on the other side.

    >>> np.degrees(collision_distances([2.0, 0, -1, 0, -1, 0, 0, 0, 0, 0, 0, 0])).round(9)
    array([180.,  60.,  60.])
    """
    x = _scaled(_states(x))
    sides = x[..., :6].reshape(*x.shape[:-1], 3, 2)
    # Every side is the ρ of its own pair, and the difference of the other two is the λ.
    others = np.roll(sides, -1, axis=-2) - np.roll(sides, 1, axis=-2)
    near, far = np.linalg.norm(sides, axis=-1), np.linalg.norm(others, axis=-1)
    return np.asarray(2.0 * np.arctan2(np.sqrt(3.0) * near, far))


def triangle(n: ArrayLike) -> Array:
    """A triangle of given shape, the inverse of `shape_of_positions`.

    Parameters
    ----------
    n : array_like, shape (..., 3)
        Unit vectors, to 1e-6; they are given exactly unit length.

    Returns
    -------
    ndarray, shape (..., 3, 2)
        Positions with centre of mass 0 and moment of inertia Σ|r|² = 1, bodies 1 and 2 on a
        horizontal line with 1 on the left.  Triangles of neighbouring shapes are neighbours, too,
        except where bodies 1 and 2 collide: there 3 is seen to turn about them.

    Raises
    ------
    BadRequest
        When the last axis is not 3 long or the vectors are not finite or not of unit length.

    Examples
    --------
    >>> (triangle([0.0, 0, 1]) * 3**0.5).round(3) + 0.0
    array([[-0.866, -0.5  ],
           [ 0.866, -0.5  ],
           [ 0.   ,  1.   ]])
    """
    n = _unit(n)
    w = n[..., 1] + 1j * n[..., 2]
    # |ρ|² and |λ|² are (1 ± n1)/2, and their product is |w|/2: the smaller one comes from that,
    # since 1 ± n1 would lose the digits of small numbers.
    larger = np.sqrt(0.5 * (1.0 + np.abs(n[..., 0])))
    smaller = 0.5 * np.abs(w) / larger
    wide = n[..., 0] >= 0.0
    rho = -np.where(wide, larger, smaller)
    lam = np.where(wide, smaller, larger) * np.exp(1j * np.angle(-w))
    positions = np.stack(
        [
            rho / np.sqrt(2.0) + lam / np.sqrt(6.0),
            -rho / np.sqrt(2.0) + lam / np.sqrt(6.0),
            -2.0 * lam / np.sqrt(6.0),
        ],
        axis=-1,
    )
    return np.stack([positions.real, positions.imag], axis=-1)


def great_circle_distance(n: ArrayLike, m: ArrayLike) -> Array:
    """Angle in [0, π] between points of the sphere, accurate for small and large ones alike.

    Parameters
    ----------
    n, m : array_like, shape (..., 3)
        Unit vectors, with leading axes that fit each other.

    Returns
    -------
    ndarray, shape (...)

    Examples
    --------
    >>> float(great_circle_distance([1.0, 0, 0], [1.0, 1e-12, 0]))
    1e-12
    """
    a, b = np.asarray(n, dtype=np.float64), np.asarray(m, dtype=np.float64)
    chord, other = np.linalg.norm(a - b, axis=-1), np.linalg.norm(a + b, axis=-1)
    return np.asarray(2.0 * np.arctan2(chord, other))


def sample(trajectory: Trajectory, spacing: float = 0.02) -> tuple[Array, Array]:
    """Points along the curve of a motion, close enough to be joined by straight lines.

    Parameters
    ----------
    trajectory : Trajectory
    spacing : float
        Largest distance between neighbours in radians, between 1e-4 and 0.5.

    Returns
    -------
    times : ndarray, shape (n,)
        From the beginning to the end, with every step of the integrator among them.
    points : ndarray, shape (n, 3)
        Neighbours are also no farther apart than a quarter of their distances to the nearest
        collision point, and joined by great circles they pass all three on the same sides as the
        motion (by the bound explained in `orbitsearch.strands`).

    Raises
    ------
    BadRequest
        When `spacing` is out of bounds, the trajectory runs into a collision, or there would be
        more points than `orbitsearch.strands.MOST_PIECES`.
    """
    if not LEAST_SPACING <= spacing <= MOST_SPACING:
        raise BadRequest(
            f"`spacing` must be between {LEAST_SPACING:g} and {MOST_SPACING:g} radians, got "
            f"{spacing!r}: 0.02 draws smooth curves"
        )
    turns = may_turn(trajectory)

    def too_long(pieces: Pieces) -> NDArray[np.bool_]:
        _, _, before, after = pieces
        nearest = np.minimum(*(collision_distances(x).min(axis=-1) for x in (before, after)))
        apart = great_circle_distance(shape(before), shape(after))
        return np.asarray(turns(pieces) | (apart > np.minimum(spacing, SHARE * nearest)))

    times = divide(trajectory, too_long)
    return times, shape(trajectory.states(times))


def _floats(values: ArrayLike, name: str) -> Array:
    """Values as an array of doubles with one axis or more."""
    try:
        return np.asarray(values, dtype=np.float64)
    except (TypeError, ValueError):
        raise BadRequest(f"`{name}` must be an array of numbers, got {values!r}") from None


def _states(x: ArrayLike) -> Array:
    """States as an array with last axis 12."""
    x = _floats(x, "x")
    if x.shape[-1:] != (12,):
        raise BadRequest(
            f"`x` must have shape (..., 12), got {x.shape}: give the sides and their rates, as "
            "orbitsearch.bodies.bodies_to_sides does"
        )
    return x


def _refuse_infinite(places: Array) -> None:
    if not np.isfinite(places).all():
        raise BadRequest("a shape needs finite places, got infinity or NaN: stop before it")


def _scaled(x: Array) -> Array:
    """Sides, shape (..., 6), and rates where there are, over the largest component of the sides.

    Shapes do not notice, and squares of the smallest and largest numbers stay numbers.
    """
    _refuse_infinite(x[..., :6])
    largest = np.max(np.abs(x[..., :6]), axis=-1, keepdims=True, initial=0.0)
    if not largest.all():
        raise BadRequest(
            "a shape needs three bodies that are not all in one place, got a triple collision: "
            "stop before it"
        )
    return np.asarray(x / largest)


def _jacobi(sides: Array) -> tuple[Complex, Complex]:
    """ρ and λ, shape (...), or their rates, as complex numbers, of sides or rates (..., 6)."""
    a, b, c = (sides[..., i] + 1j * sides[..., i + 1] for i in (0, 2, 4))
    return -a / np.sqrt(2.0), (c - b) / np.sqrt(6.0)


def _point(rho: Complex, lam: Complex) -> Array:
    """The map of Hopf."""
    p, q, w = np.abs(rho) ** 2, np.abs(lam) ** 2, 2.0 * rho.conj() * lam
    # Adding 0 turns -0 into 0, which reads better.
    return np.asarray(np.stack([p - q, w.real, w.imag], axis=-1) / (p + q)[..., None] + 0.0)


def _unit(n: ArrayLike) -> Array:
    n = _floats(n, "n")
    if n.shape[-1:] != (3,):
        raise BadRequest(f"`n` must have shape (..., 3), got {n.shape}: give unit vectors")
    length = np.linalg.norm(n, axis=-1, keepdims=True)
    # Written so that NaN fails, too.
    if not np.all(np.abs(length - 1.0) <= UNIT):
        worst = float(length.flat[int(np.argmax(~(np.abs(length - 1.0) <= UNIT)))])
        raise BadRequest(
            f"`n` must be of unit length to {UNIT:g}, got a vector of length {worst:.9g}: divide "
            "it by its length"
        )
    return np.asarray(n / length)


def _landmark(*places: complex) -> Array:
    """The shape of three places, not to be written to."""
    point = shape_of_positions(np.stack([np.real(places), np.imag(places)], axis=-1))
    point.setflags(write=False)
    return point


COLLISIONS = MappingProxyType(
    {"12": _landmark(0, 0, 1), "23": _landmark(1, 0, 0), "31": _landmark(0, 1, 0)}
)
"""Collision points by the pair that collides."""

EULER = MappingProxyType({1: _landmark(0, -1, 1), 2: _landmark(-1, 0, 1), 3: _landmark(-1, 1, 0)})
"""Euler points by the body midway between the others."""

_THIRD = complex(-0.5, np.sqrt(0.75))

POLES = MappingProxyType(
    {
        "counterclockwise": _landmark(1, _THIRD, _THIRD.conjugate()),
        "clockwise": _landmark(1, _THIRD.conjugate(), _THIRD),
    }
)
"""The equilateral triangles by the sense in which bodies 1, 2, 3 follow each other."""
