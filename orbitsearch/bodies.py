"""States of three equal masses: positions and velocities, relative coordinates, invariants, scale.

Two descriptions of one state are used.  *Bodies*: positions and velocities, each of shape (3, 2),
with the centre of mass at rest in the origin.  *Sides*: 12 numbers (A, B, C, A', B', C') with
A = r2 - r1, B = r3 - r2, C = r1 - r3, the description the compiled kernels integrate.  All
functions take any number of leading axes.  Units: G = m1 = m2 = m3 = 1.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "angular_momentum",
    "bodies_to_sides",
    "distance",
    "energy",
    "flow_direction",
    "jacobi_from_sides",
    "relabelled",
    "sides_from_jacobi",
    "sides_to_bodies",
    "size",
    "turn_between",
    "turned",
]

Array = NDArray[np.float64]

_FROM = (0, 1, 2)
_TO = (1, 2, 0)

# Jacobi vectors ρ = (r1 - r2)/√2, λ = (r1 + r2 - 2 r3)/√6 of the same-named combinations of sides.
# With equal masses they are orthonormal: momenta are velocities, the symplectic form is plain.
_JACOBI = np.array([[-1.0, 0.0, 0.0], [0.0, -1.0, 1.0]]) / np.sqrt([[2.0], [6.0]])
_SIDES = np.array(
    [[-np.sqrt(2.0), 0.0], [np.sqrt(0.5), -np.sqrt(1.5)], [np.sqrt(0.5), np.sqrt(1.5)]]
)


def bodies_to_sides(positions: Array, velocities: Array) -> Array:
    """Sides of a state.

    Parameters
    ----------
    positions, velocities : ndarray, shape (..., 3, 2)

    Returns
    -------
    ndarray, shape (..., 12)

    Examples
    --------
    >>> import numpy as np
    >>> r = np.array([[-1.0, 0.0], [1.0, 0.0], [0.0, 0.0]])
    >>> bodies_to_sides(r, np.zeros((3, 2)))[:6]
    array([ 2.,  0., -1.,  0., -1.,  0.])
    """
    sides = positions[..., _TO, :] - positions[..., _FROM, :]
    rates = velocities[..., _TO, :] - velocities[..., _FROM, :]
    shape = sides.shape[:-2]
    return np.concatenate([sides.reshape(*shape, 6), rates.reshape(*shape, 6)], axis=-1)


def sides_to_bodies(x: Array) -> tuple[Array, Array]:
    """Positions and velocities, each of shape (..., 3, 2), with the centre of mass at rest in 0."""
    sides = x.reshape(*x.shape[:-1], 2, 3, 2)
    # r_k is a third of the sum of the vectors that lead to it: r_1 = (C - A)/3 and so on.
    bodies = (np.roll(sides, 1, axis=-2) - sides) / 3.0
    return bodies[..., 0, :, :], bodies[..., 1, :, :]


def energy(x: Array) -> Array:
    """Energy, shape (...,), of states x, shape (..., 12)."""
    sides = x.reshape(*x.shape[:-1], 2, 3, 2)
    kinetic = np.sum(sides[..., 1, :, :] ** 2, axis=(-1, -2)) / 6.0
    distances = np.sqrt(np.sum(sides[..., 0, :, :] ** 2, axis=-1))
    return np.asarray(kinetic - np.sum(1.0 / distances, axis=-1))


def angular_momentum(x: Array) -> Array:
    """Angular momentum about the centre of mass, shape (...,), of states x, shape (..., 12)."""
    sides = x.reshape(*x.shape[:-1], 2, 3, 2)
    r, v = sides[..., 0, :, :], sides[..., 1, :, :]
    return np.asarray(np.sum(r[..., 0] * v[..., 1] - r[..., 1] * v[..., 0], axis=-1) / 3.0)


def flow_direction(x: Array) -> Array:
    """Right-hand side of the equations of motion, shape (..., 12), at states x, shape (..., 12)."""
    sides = x.reshape(*x.shape[:-1], 2, 3, 2)
    r = sides[..., 0, :, :]
    pulls = r / np.sum(r**2, axis=-1, keepdims=True) ** 1.5
    second = np.sum(pulls, axis=-2, keepdims=True) - 3.0 * pulls
    return np.concatenate([x[..., 6:], second.reshape(*x.shape[:-1], 6)], axis=-1)


def size(x: Array) -> Array:
    """Root of the sum of the squared sides, shape (...,): the length that results are scaled by."""
    return np.asarray(np.sqrt(np.sum(x[..., :6] ** 2, axis=-1)))


def turned(x: Array, angle: float) -> Array:
    """States x, shape (..., 12), turned by an angle about the centre of mass."""
    c, s = np.cos(angle), np.sin(angle)
    return np.asarray((x.reshape(*x.shape[:-1], 6, 2) @ [[c, s], [-s, c]]).reshape(x.shape))


def turn_between(x: Array, y: Array) -> float:
    """Angle in (-π, π] by which state y, shape (12,), is x turned, by least squares."""
    a, b = (z.reshape(6, 2) @ np.array([1.0, 1.0j]) for z in (x, y))
    return float(np.angle(np.vdot(a, b)))


def distance(x: Array, y: Array, energy: float) -> float:
    """Largest difference of a body's position, in 1/|E|, or velocity, in |E|^(1/2).

    Parameters
    ----------
    x, y : ndarray, shape (12,)
    energy : float
        The unit, so that the result does not depend on the scale of the orbit.
    """
    unit = abs(energy)
    (r, v), (s, w) = sides_to_bodies(x), sides_to_bodies(y)
    return float(
        max(
            np.linalg.norm(r - s, axis=1).max() * unit,
            np.linalg.norm(v - w, axis=1).max() / np.sqrt(unit),
        )
    )


def relabelled(x: Array, permutation: tuple[int, int, int], mirror: bool = False) -> Array:
    """State x, shape (12,), with body i in the place of body ``permutation[i]``, mirrored or not.

    Parameters
    ----------
    x : ndarray, shape (12,)
    permutation : tuple of int
        Numbered from 0.
    mirror : bool
        Whether the plane is also mirrored, y -> -y.
    """
    plane = np.array([1.0, -1.0 if mirror else 1.0])
    images = np.empty((2, 3, 2))
    for image, vectors in zip(images, sides_to_bodies(x), strict=True):
        image[list(permutation)] = vectors * plane
    return bodies_to_sides(*images)


def jacobi_from_sides(x: Array) -> Array:
    """Canonical coordinates (ρ, λ, ρ', λ'), shape (..., 8), of states or tangents (..., 12)."""
    sides = x.reshape(*x.shape[:-1], 2, 3, 2)
    return np.asarray((_JACOBI @ sides).reshape(*x.shape[:-1], 8))


def sides_from_jacobi(z: Array) -> Array:
    """Inverse of `jacobi_from_sides`: shape (..., 8) to (..., 12)."""
    vectors = z.reshape(*z.shape[:-1], 2, 2, 2)
    return np.asarray((_SIDES @ vectors).reshape(*z.shape[:-1], 12))
