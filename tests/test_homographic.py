"""Equilateral and collinear homographic motions: three Kepler ellipses in closed form.

If the bodies keep the shape z_k (complex numbers, sum zero) up to a factor q(t), each obeys
q'' = -μ q/|q|³ with μ from the shape's own attraction, -μ z_k = Σ (z_j - z_k)/|z_j - z_k|³:

- equilateral, circumradius 1, sides √3: two pulls of 1/3 at 30° to the radius, so μ = 1/√3;
- in line at -1, 0, 1: the outer bodies feel 1 + 1/4, so μ = 5/4.

With semi-major axis 1, n = √μ and nt = E - e sin E, q = cos E - e + i √(1-e²) sin E.
"""

import numpy as np
import pytest
import reference
from numpy.typing import NDArray
from scipy.linalg import expm

from orbitsearch import _kernels, bodies, flow
from orbitsearch.orbit import Status

EPSILON = 2.0**-52
TRIANGLE = np.exp(2j * np.pi * np.arange(3) / 3)
LINE = np.array([-1.0, 1.0, 0.0], complex)
# The same line with another body between the others, along no axis.
TURNED = np.exp(0.7j) * np.array([0.0, -1.0, 1.0])
SHAPES = {"triangle": (TRIANGLE, 3**-0.5), "line": (LINE, 1.25), "turned line": (TURNED, 1.25)}
TANGENTS = bodies.sides_from_jacobi(np.eye(8))


def period(shape: str) -> float:
    """Period at semi-major axis 1."""
    return 2 * np.pi / np.sqrt(SHAPES[shape][1])


def homographic(shape: str, e: float, t: float) -> NDArray[np.float64]:
    """Sides, shape (12,), at time t after the bodies are closest."""
    z, mu = SHAPES[shape]
    n = np.sqrt(mu)
    anomaly = n * t + e * np.sin(n * t)
    # Newton on nt = E - e sin E, left running until rounding is all that moves.
    for _ in range(60):
        anomaly -= (anomaly - e * np.sin(anomaly) - n * t) / (1 - e * np.cos(anomaly))
    minor = np.sqrt(1 - e * e)
    q = np.cos(anomaly) - e + 1j * minor * np.sin(anomaly)
    rate = n / (1 - e * np.cos(anomaly))
    p = rate * (-np.sin(anomaly) + 1j * minor * np.cos(anomaly))
    return reference.sides(*(np.stack([(c * z).real, (c * z).imag], axis=-1) for c in (q, p)))


def carried(x, time):
    """State after `time`, the norm of the 8x8 flow derivative there, and the steps."""
    result = flow.propagate(x, time, TANGENTS[None], nearest=1e-9)
    assert result.status[0] == _kernels.STATUS_DONE
    matrix = bodies.jacobi_from_sides(result.tangents[0]).T
    return result.states[0], np.linalg.norm(matrix, 2), int(result.steps[0])


@pytest.mark.parametrize("phase", [0.0, 0.5], ids=["from closest", "from farthest"])
@pytest.mark.parametrize("e", [0.0, 0.1, 0.3, 0.6, 0.9, 0.95])
def test_triangle_is_followed_as_far_as_its_instability_lets_doubles_follow(e, phase):
    # Not a fixed tolerance: the error is one rounding times the growth of a deviation.  Measured
    # ratios are 0.1 to 1.6 with growth up to 1e7 (three periods at e = 0, one at e = 0.95).
    revolutions = 3.0 if e <= 0.3 else 2.0 if e <= 0.6 else 1.0
    T = period("triangle")
    last, growth, _ = carried(homographic("triangle", e, phase * T), revolutions * T)
    error = np.max(np.abs(last - homographic("triangle", e, (phase + revolutions) * T)))
    assert error < 10 * EPSILON * growth
    assert growth < 1e8


@pytest.mark.parametrize("e", [0.0, 0.3, 0.6, 0.9, 0.95])
def test_line_from_farthest_stays_exact_for_five_periods(e):
    # A deviation off the symmetric line grows by 1e5 to 1e8 a period, but rounding is the same for
    # both outer bodies, so none arises; what is left is the Kepler ellipse.  Measured up to 8e-13.
    T = period("line")
    last, _, _ = carried(homographic("line", e, 0.5 * T), 5 * T)
    assert np.max(np.abs(last - homographic("line", e, 5.5 * T))) < 5e-12


@pytest.mark.parametrize("e", [0.0, 0.3, 0.6, 0.9])
def test_turned_line_is_followed_as_far_as_its_instability_lets_doubles_follow(e):
    T = period("turned line")
    last, growth, _ = carried(homographic("turned line", e, 0.5 * T), T)
    error = np.max(np.abs(last - homographic("turned line", e, 1.5 * T)))
    assert error < 10 * EPSILON * growth
    assert error < 1e-7


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize("e", [0.0, 0.5, 0.9])
def test_dense_output_lies_on_the_ellipse(shape, e):
    T = period(shape)
    trajectory = flow.track(homographic(shape, e, 0.5 * T), 0.5 * T)
    assert trajectory.status is Status.CONVERGED
    at = np.linspace(0.0, 0.5 * T, 101)
    exact = np.array([homographic(shape, e, 0.5 * T + t) for t in at])
    deviation = np.max(np.abs(trajectory.states(at) - exact), axis=1)
    speed = np.max(np.abs(exact), axis=1)
    assert np.all(deviation < 1e-11 * speed)


def test_local_error_of_one_step_has_the_order_of_the_series():
    # One step of length h with the kernel's own series, against the ellipse: positions lose the
    # term h^(ORDER+1), velocities h^ORDER.  Steps are long, so that truncation shows over rounding.
    T = period("line")
    e = 0.5
    start = homographic("line", e, 0.5 * T)
    lengths = 1.2 * 0.97 ** np.arange(8)
    errors = []
    for h in lengths:
        w = _kernels.workspace()
        for lane in range(_kernels.LANES):
            _kernels._put(w, lane, start)
        _kernels._series(w)
        w[_kernels.H, 0, :] = h
        _kernels._advance(w, 6)
        last = np.empty(12)
        _kernels._get(w, 3, last)
        difference = np.abs(last - homographic("line", e, 0.5 * T + h))
        errors.append([np.max(difference[:6]), np.max(difference[6:])])
    errors = np.array(errors)
    assert np.all(errors > 1e-13), "rounding would hide the slope"
    slopes = np.polyfit(np.log(lengths), np.log(errors), 1)[0]
    order = _kernels.ORDER
    assert slopes == pytest.approx([order + 1, order], abs=0.6)


@pytest.mark.parametrize("e", [0.0, 0.6, 0.9])
def test_steps_for_a_period_stay_within_budget(e):
    # Measured 7, 38 and 63.
    T = period("line")
    assert carried(homographic("line", e, 0.5 * T), T)[2] <= {0.0: 8, 0.6: 40, 0.9: 66}[e]


def rotating_system(shape: str) -> NDArray[np.float64]:
    """Matrix of the motion near the circular solution, in the frame that turns with it.

    For bodies, y = (r, r'): r'' = F(r) in the fixed frame becomes r'' = F + n² r - 2n J r' in the
    rotating one, with J (x, y) = (-y, x), and F's Hessian is summed over the pairs.
    """
    z, mu = SHAPES[shape]
    n = np.sqrt(mu)
    r = np.stack([z.real, z.imag], axis=-1)
    force = np.zeros((3, 2, 3, 2))
    for i, j in reference.PAIRS:
        d = r[j] - r[i]
        s = np.sqrt(d @ d)
        block = np.eye(2) / s**3 - 3 * np.outer(d, d) / s**5
        for a, b in ((i, j), (j, i)):
            force[a, :, b, :] += block
            force[a, :, a, :] -= block
    turn = np.kron(np.eye(3), [[0.0, -1.0], [1.0, 0.0]])
    matrix = np.zeros((12, 12))
    matrix[:6, 6:] = np.eye(6)
    matrix[6:, :6] = force.reshape(6, 6) + mu * np.eye(6)
    matrix[6:, 6:] = -2 * n * turn
    # y of the rotating frame to y of the fixed frame at the moment when both coincide, and back.
    shift = np.eye(12)
    shift[6:, :6] = n * turn
    return shift @ matrix @ np.linalg.inv(shift)


@pytest.mark.parametrize("shape", SHAPES)
@pytest.mark.parametrize(("pieces", "bound"), [(1, 5e-11), (30, 1e-12)])
def test_tangents_of_circular_motion_match_a_matrix_exponential(shape, pieces, bound):
    # After a full turn the rotating frame is back, so the flow derivative is expm(T M) exactly.
    # Steps are chosen by the motion alone.  A circle is its worst case: an entire function, so the
    # steps are long (7 a turn), and a deviation that grows by 1e5 a turn is truncated at 1e-11
    # (measured).  In 30 pieces, which forces shorter steps, rounding alone is left: 3e-15, and
    # 6e-14 of expm.
    T = period(shape)
    exact = expm(T * rotating_system(shape))
    x, tangents = homographic(shape, 0.0, 0.0)[None], TANGENTS[None]
    for _ in range(pieces):
        result = flow.propagate(x, T / pieces, tangents)
        x, tangents = result.states, result.tangents
    for tangent, last in zip(TANGENTS, tangents[0], strict=True):
        moved = exact @ np.concatenate([part.ravel() for part in bodies.sides_to_bodies(tangent)])
        expected = reference.sides(moved[:6].reshape(3, 2), moved[6:].reshape(3, 2))
        assert np.max(np.abs(last - expected)) < bound * np.linalg.norm(exact, 2)


def test_multipliers_of_the_circular_triangle_are_those_of_gascheau():
    # G. Gascheau (1843), E. J. Routh (1875): exponents over n solve λ⁴ + λ² + (27/4) σ = 0 with
    # σ = (m1 m2 + m2 m3 + m3 m1)/(m1 + m2 + m3)² = 1/3 here, so λ² = -1/2 ± i √2.
    root = np.sqrt(-0.5 + 1j * np.sqrt(2.0))
    multipliers = np.exp(2 * np.pi * root), np.exp(-2 * np.pi * root)
    T = period("triangle")
    result = flow.propagate(homographic("triangle", 0.0, 0.0), T, TANGENTS[None])
    found = np.linalg.eigvals(bodies.jacobi_from_sides(result.tangents[0]).T)
    # Expanding pair |λ| = 85 to ten digits; the contracting one lies under the rounding of it.
    assert np.min(np.abs(found - multipliers[0])) < 1e-10 * abs(multipliers[0])
    assert np.min(np.abs(found - multipliers[0].conjugate())) < 1e-10 * abs(multipliers[0])
    assert np.min(np.abs(found - multipliers[1])) < 1e-10
