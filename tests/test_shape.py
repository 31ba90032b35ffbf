"""The shape sphere against its symmetries, exact motions, a classical inequality and scipy."""

import numpy as np
import published
import pytest
import reference
from hypothesis import given
from hypothesis import strategies as st
from test_homographic import homographic, period

from orbitsearch import bodies, flow, strands
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Status
from orbitsearch.shape import (
    COLLISIONS,
    EULER,
    POLES,
    collision_distances,
    great_circle_distance,
    sample,
    shape,
    shape_of_positions,
    shape_velocity,
    triangle,
)

EIGHT = reference.sides(*reference.collinear(published.EIGHT.a, published.EIGHT.b))
T_EIGHT = published.EIGHT.period
EPSILON = 2.0**-52
POINTS = np.array([COLLISIONS[pair] for pair in ("12", "23", "31")])

coordinates = st.floats(-10.0, 10.0).map(lambda x: round(x, 9))


@st.composite
def triangles(draw):
    """Positions of three bodies of which no two are nearer than a hundredth of the size."""
    r = np.array(draw(st.lists(coordinates, min_size=6, max_size=6))).reshape(3, 2)
    sides = np.linalg.norm(np.roll(r, -1, axis=0) - r, axis=1)
    if sides.min() <= 0.01 * sides.max():
        r = np.array([[0.0, 0.0], [1.0, 0.3], [0.2, -0.9]]) + 0.01 * r
    return r


@st.composite
def unit_vectors(draw):
    """Points of the sphere, every second one of them beside a collision, an Euler point or pole."""
    v = np.array(draw(st.lists(st.floats(-1.0, 1.0), min_size=3, max_size=3)))
    length = np.linalg.norm(v)
    v = np.array([0.6, 0.0, 0.8]) if length < 0.1 else v / length
    if draw(st.booleans()):
        centre = draw(st.sampled_from([*POINTS, *EULER.values(), *POLES.values()]))
        v = centre + draw(st.sampled_from([0.0, 1e-15, 1e-12, 1e-9, 1e-6, 1e-3])) * v
    return v / np.linalg.norm(v)


def turned_about(n, axis, angle):
    """Points turned about a unit axis (the rotation formula of O. Rodrigues)."""
    along = np.tensordot(n, axis, axes=(-1, 0))[..., None] * axis
    across = n - along
    return along + np.cos(angle) * across + np.sin(angle) * np.cross(axis, n)


def places(*z):
    """Positions, shape (3, 2), from complex numbers."""
    return np.stack([np.real(z), np.imag(z)], axis=-1)


def random_states(count, seed):
    """Sides and rates, shape (count, 12), of random triangles that move anyhow."""
    random = np.random.default_rng(seed)
    return bodies.bodies_to_sides(*random.normal(size=(2, count, 3, 2)))


# ---------------------------------------------------------------- points with a name


def test_landmarks_are_where_the_convention_puts_them():
    # Euler point of body 3 at (1, 0, 0), collision of 1 and 2 opposite, counterclockwise above.
    assert EULER[3].tolist() == [1.0, 0.0, 0.0]
    assert COLLISIONS["12"].tolist() == [-1.0, 0.0, 0.0]
    assert POLES["counterclockwise"] == pytest.approx([0.0, 0.0, 1.0], abs=1e-15)
    assert POLES["clockwise"] == pytest.approx([0.0, 0.0, -1.0], abs=1e-15)
    half, root = 0.5, 0.75**0.5
    assert COLLISIONS["23"] == pytest.approx([half, root, 0.0], abs=1e-15)
    assert COLLISIONS["31"] == pytest.approx([half, -root, 0.0], abs=1e-15)


@pytest.mark.parametrize(("body", "pair"), [(1, "23"), (2, "31"), (3, "12")])
def test_each_euler_point_is_opposite_to_the_collision_of_the_outer_two(body, pair):
    assert EULER[body] == pytest.approx(-COLLISIONS[pair], abs=1e-15)


def test_landmarks_cannot_be_changed():
    with pytest.raises(ValueError, match="read-only"):
        EULER[3][0] = 2.0
    with pytest.raises(TypeError, match="does not support item assignment"):
        EULER[3] = POLES["clockwise"]


def test_third_coordinate_is_the_ratio_in_weitzenbocks_inequality():
    # R. Weitzenböck, Math. Z. 5 (1919) 137: a² + b² + c² >= 4 √3 F, equal for the equilateral
    # triangle only.  Here the ratio of the two sides, F with its sign.
    r = np.random.default_rng(5).normal(size=(200, 3, 2))
    a, b, c = (np.linalg.norm(r[:, (k + 1) % 3] - r[:, k], axis=-1) for k in range(3))
    area = 0.5 * np.cross(*(np.pad(r[:, k] - r[:, 0], [(0, 0), (0, 1)]) for k in (1, 2)))[:, 2]
    expected = 4 * np.sqrt(3) * area / (a**2 + b**2 + c**2)
    assert shape_of_positions(r)[:, 2] == pytest.approx(expected, abs=1e-14)


def test_isosceles_triangles_lie_on_the_meridian_of_the_apex():
    # Apex 3: a great circle through both poles, the Euler point of 3 and the collision of 1 and 2.
    heights = np.linspace(0.0, 5.0, 11)
    points = np.array([shape_of_positions(places(-1, 1, 1j * h)) for h in heights])
    assert points[:, 1] == pytest.approx(0.0, abs=1e-15)
    longitude = np.unwrap(np.arctan2(points[:, 2], points[:, 0]))
    assert np.all(np.diff(longitude) > 0.0)


# ---------------------------------------------------------------- symmetries


@given(triangles(), st.floats(-np.pi, np.pi), st.floats(1e-6, 1e6), coordinates)
def test_place_size_and_rotation_leave_the_shape(r, angle, scale, shift):
    turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    moved = scale * (r @ turn + shift)
    assert shape_of_positions(moved) == pytest.approx(shape_of_positions(r), abs=1e-11)


@given(triangles())
def test_cyclic_relabelling_turns_by_120_degrees_about_the_poles(r):
    # The body with label 1 is called 2, and so on: collision 12 becomes collision 23.
    image = shape_of_positions(np.roll(r, 1, axis=0))
    expected = turned_about(shape_of_positions(r), np.array([0.0, 0.0, 1.0]), -2 * np.pi / 3)
    assert image == pytest.approx(expected, abs=1e-12)


@given(triangles(), st.sampled_from([1, 2, 3]))
def test_an_exchange_is_a_half_turn_about_the_euler_axis_of_the_third_body(r, body):
    exchanged = r[{1: [0, 2, 1], 2: [2, 1, 0], 3: [1, 0, 2]}[body]]
    expected = turned_about(shape_of_positions(r), EULER[body], np.pi)
    assert shape_of_positions(exchanged) == pytest.approx(expected, abs=1e-12)


@given(triangles())
def test_the_mirror_image_is_below_the_equator(r):
    assert shape_of_positions(r * [1.0, -1.0]) == pytest.approx(
        shape_of_positions(r) * [1.0, 1.0, -1.0], abs=1e-12
    )


def test_states_and_positions_agree_over_any_leading_axes():
    x = random_states(24, seed=3)
    r, _ = bodies.sides_to_bodies(x)
    points = shape(x)
    assert shape_of_positions(r) == pytest.approx(points, abs=1e-14)
    assert np.linalg.norm(points, axis=-1) == pytest.approx(1.0, abs=1e-15)
    assert np.array_equal(shape(x.reshape(2, 3, 4, 12)), points.reshape(2, 3, 4, 3))
    assert np.array_equal(shape(x[0]), points[0])


@pytest.mark.parametrize("scale", [1e-300, 1e-160, 1e160, 1e300])
def test_the_smallest_and_largest_triangles_have_shapes(scale):
    x = random_states(3, seed=4)
    assert shape(scale * x) == pytest.approx(shape(x), abs=1e-15)


# ---------------------------------------------------------------- exact motions


@pytest.mark.parametrize("e", [0.0, 0.5, 0.9])
@pytest.mark.parametrize(
    ("name", "point"),
    [("triangle", POLES["counterclockwise"]), ("line", EULER[3]), ("turned line", EULER[1])],
)
def test_homographic_motions_keep_their_shape(name, point, e):
    # Kepler ellipses in closed form (test_homographic.py).
    T = period(name)
    exact = np.array([homographic(name, e, t) for t in np.linspace(0.0, T, 33)])
    assert np.max(great_circle_distance(shape(exact), point)) < 1e-14
    # Integrated for half a period, which is as far as their instability lets them be followed.
    followed = flow.track(homographic(name, e, 0.5 * T), 0.5 * T)
    _, points = sample(followed)
    assert np.max(great_circle_distance(points, point)) < 1e-8
    speeds = np.linalg.norm(shape_velocity(exact), axis=-1)
    turning = np.linalg.norm(exact[:, 6:], axis=-1) / np.linalg.norm(exact[:, :6], axis=-1)
    assert np.all(speeds < 1e-13 * turning)


def test_shape_velocity_is_the_slope_of_the_shape():
    x = random_states(50, seed=8)
    h = 1e-3
    # Positions on straight lines with the rates of x: the five-point rule (Abramowitz & Stegun,
    # table 25.2) has an error of h⁴ f⁽⁵⁾/30.
    moved = [x + np.concatenate([k * h * x[:, 6:], 0 * x[:, 6:]], axis=1) for k in (-2, -1, 1, 2)]
    a, b, c, d = (shape(y) for y in moved)
    slope = (a - 8 * b + 8 * c - d) / (12 * h)
    velocity = shape_velocity(x)
    size = np.linalg.norm(x[:, 6:], axis=1) / np.linalg.norm(x[:, :6], axis=1)
    assert np.all(np.abs(velocity - slope) < 1e-6 * np.maximum(1.0, size[:, None]) ** 5)
    assert np.sum(velocity * shape(x), axis=-1) == pytest.approx(0.0, abs=1e-13)


def test_the_figure_eight_goes_through_euler_points_and_isosceles_shapes():
    # A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881: 12 congruent arcs from an Euler point
    # to an isosceles triangle.
    track = flow.track(EIGHT, T_EIGHT)
    points = shape(track.states(np.arange(12) * T_EIGHT / 12))
    near = [min(EULER, key=lambda k: great_circle_distance(EULER[k], p)) for p in points[::2]]
    assert near == [3, 1, 2, 3, 1, 2]
    for body, point in zip(near, points[::2], strict=True):
        assert great_circle_distance(point, EULER[body]) < 1e-12
    distances = np.sort(np.abs(points[1::2, :] @ POINTS.T), axis=1)
    for point in points[1::2]:
        cosines = POINTS @ point
        gaps = np.abs(cosines - np.roll(cosines, 1))
        assert np.sort(gaps)[0] < 1e-12 < 0.1 < np.sort(gaps)[1]
    # All six are one triangle, up to labels and mirror image.
    assert distances == pytest.approx(np.tile(distances[0], (6, 1)), abs=1e-12)


# ---------------------------------------------------------------- distances


def test_distances_from_collisions_agree_with_the_points():
    x = random_states(100, seed=9)
    expected = great_circle_distance(shape(x)[:, None, :], POINTS)
    assert collision_distances(x) == pytest.approx(expected, abs=1e-14)


@pytest.mark.parametrize("side", [0, 1, 2])
def test_a_small_distance_from_a_collision_has_all_its_digits(side):
    # By the map, a pair ε apart with the third body at distance 1 from its middle has
    # tan(d/2) = |ρ|/|λ| = (ε/√2)/(2/√6) = ε √3/2.
    for gap in (1e-3, 1e-8, 1e-20, 1e-100):
        base, other = gap * np.exp(0.4j), np.exp(2.9j)
        ring = np.roll([base, -base / 2 + other, -base / 2 - other], side)
        x = np.concatenate([np.stack([ring.real, ring.imag], axis=-1).ravel(), np.zeros(6)])
        assert collision_distances(x)[side] == pytest.approx(
            2 * np.arctan(gap * 3**0.5 / 2), rel=4e-16
        )


def test_great_circles_are_accurate_when_short_and_when_long():
    # Exact by construction: two points of one circle of longitude.
    for angle in (1e-300, 1e-16, 1e-8, 1.0, np.pi / 2, 3.0, np.pi - 1e-8, np.pi):
        n, m = [1.0, 0.0, 0.0], [np.cos(angle), 0.0, np.sin(angle)]
        assert float(great_circle_distance(n, m)) == pytest.approx(angle, rel=3e-16)


# ---------------------------------------------------------------- triangles of given shape


@given(unit_vectors())
def test_a_triangle_of_given_shape_has_that_shape(n):
    r = triangle(n)
    assert great_circle_distance(shape_of_positions(r), n) < 6 * EPSILON
    assert np.sum(r**2) == pytest.approx(1.0, abs=4 * EPSILON)
    assert np.sum(r, axis=0) == pytest.approx(0.0, abs=2 * EPSILON)
    assert r[0, 1] == r[1, 1]
    assert r[0, 0] <= r[1, 0]


@pytest.mark.parametrize("centre", [*POINTS, *EULER.values(), *POLES.values()])
@pytest.mark.parametrize("away", [1e-9, 1e-6, 1e-3])
def test_triangles_beside_the_named_points_are_well_conditioned(centre, away):
    # A circle about each point, also the collisions: as accurate as anywhere.
    side = np.array([0.0, 0.0, 1.0]) if abs(centre[2]) < 0.5 else np.array([1.0, 0.0, 0.0])
    other = np.cross(centre, side)
    angles = np.linspace(0, 2 * np.pi, 37)[:, None]
    ring = np.cos(away) * centre + np.sin(away) * (
        np.cos(angles) * side + np.sin(angles) * other / np.linalg.norm(other)
    )
    ring /= np.linalg.norm(ring, axis=-1, keepdims=True)
    back = shape_of_positions(triangle(ring))
    assert np.max(great_circle_distance(back, ring)) < 6 * EPSILON
    assert great_circle_distance(back, centre) == pytest.approx(away, rel=1e-15 / away + 1e-12)


def test_neighbouring_shapes_have_neighbouring_triangles():
    # A small circle that keeps away from the collision of 1 and 2, across both halves of the map.
    angles = np.linspace(0.0, 2 * np.pi, 2001)
    ring = np.stack([0.5 * np.cos(angles), 0.5 * np.sin(angles), 0 * angles + 0.75**0.5], axis=-1)
    moves = np.linalg.norm(np.diff(triangle(ring), axis=0), axis=(1, 2))
    assert np.max(moves) < 2 * np.pi / 2000


def test_vectors_that_are_nearly_of_unit_length_are_taken_as_unit():
    n = np.array([0.6, 0.0, 0.8])
    assert triangle(n * (1 + 9e-7)) == pytest.approx(triangle(n), abs=2 * EPSILON)


# ---------------------------------------------------------------- sampling


def close_orbit():
    """One with close passages over a period, distances down to 0.003 on the sphere."""
    # X. Li & S. Liao, Sci. China Phys. Mech. Astron. 60 (2017) 129511.
    row = published.LI_LIAO_2017[7]
    return flow.track(reference.sides(*reference.collinear(row.a, row.b)), row.period)


@pytest.mark.parametrize("spacing", [0.3, 0.02])
def test_neighbours_keep_the_spacing_and_the_distance_from_collisions(spacing):
    for track in (flow.track(EIGHT, T_EIGHT), close_orbit()):
        times, points = sample(track, spacing)
        assert times[0] == 0.0
        assert times[-1] == track.times[-1]
        assert np.all(np.diff(times) > 0.0)
        assert np.isin(track.times, times).all()
        assert np.array_equal(points, shape(track.states(times)))
        apart = great_circle_distance(points[1:], points[:-1])
        nearest = np.min(great_circle_distance(points[:, None], POINTS), axis=1)
        assert np.all(apart <= spacing)
        assert np.all(apart <= 0.25 * np.minimum(nearest[1:], nearest[:-1]) * (1 + 1e-9))


def angles_around(points):
    """Angles by which the pieces of a path turn about each collision point, shape (n - 1, 3)."""
    east = np.cross([0.0, 0.0, 1.0], POINTS)
    z = points @ east.T + 1j * points[:, 2:]
    return np.angle(z[1:] * z[:-1].conj())


def test_turns_about_collision_points_are_resolved():
    # Piece by piece: were a turn missed in one, four parts of it would make it up.
    tracks = [flow.track(x, 12.0) for x in reference.random_bound_starts(12, seed=3)]
    tracks = [track for track in tracks if track.status is Status.CONVERGED]
    closest, turns = [], []
    for track in tracks:
        times, points = sample(track, 0.1)
        finer = np.interp(np.arange(4 * len(times) - 3) / 4, np.arange(len(times)), times)
        coarse = angles_around(points)
        fine = angles_around(shape(track.states(finer))).reshape(-1, 4, 3).sum(axis=1)
        distances = great_circle_distance(points[:, None], POINTS)
        # Farther away the angle also turns about the opposite point.
        near = np.maximum(distances[1:], distances[:-1]) < 1.0
        assert np.max(np.abs(coarse - fine)[near]) < 1e-6
        closest.append(np.min(distances))
        turns.append(np.sum(np.abs(coarse[near])) / (2 * np.pi))
    assert len(tracks) >= 8
    assert min(closest) < 1e-5
    assert max(turns) > 10


def test_a_loop_within_one_step_is_not_taken_for_standing_still():
    # One step made by hand: bodies 1 and 2 circle once, e^(2πit) in its Taylor series to order 20,
    # off by (2π)²¹/21! = 0.001 of the circle at the end, so that both ends of the step look alike.
    order = np.arange(21)
    circle = (2j * np.pi) ** order / np.cumprod(np.concatenate([[1.0], order[1:]]))
    sides = np.array([0.1, -0.05, -0.05])[:, None] * circle
    sides[1:, 0] += [1.0, -1.0]
    series = np.stack([sides.real, sides.imag], axis=1).reshape(1, 6, 21)
    track = flow.Trajectory(np.array([0.0, 1.0]), series, np.zeros(12), Status.CONVERGED)
    _, points = sample(track)
    assert great_circle_distance(points[0], points[-1]) < 1e-3
    # ρ turns counterclockwise and λ stays, so ρ̄λ turns clockwise in the plane of n2 and n3, which
    # from outside, where the collision is, looks counterclockwise.
    assert np.sum(angles_around(points), axis=0)[0] == pytest.approx(2 * np.pi, abs=0.02)


def test_a_trajectory_into_a_collision_is_refused():
    # Three bodies at rest on a line fall onto each other.
    track = flow.track(reference.sides(places(-1, 1, 0), np.zeros((3, 2))), 10.0)
    with pytest.raises(
        BadRequest, match=r"^`trajectory` must not run into a collision, it does at"
    ):
        sample(track)


@pytest.mark.parametrize("spacing", [0.0, -1.0, 1e-5, 0.6, np.nan, np.inf])
def test_spacing_is_bounded(spacing):
    with pytest.raises(BadRequest, match=r"`spacing` must be between 0\.0001 and 0\.5 radians"):
        sample(flow.track(EIGHT, 0.1), spacing)


def test_too_many_points_are_refused(monkeypatch):
    monkeypatch.setattr(strands, "MOST_PIECES", 1000)
    track = flow.track(EIGHT, T_EIGHT)
    assert len(sample(track, 0.1)[0]) < 1000
    with pytest.raises(BadRequest, match="`trajectory` must need no more than 1000 pieces"):
        sample(track, 0.005)


# ---------------------------------------------------------------- bad requests


@pytest.mark.parametrize("function", [shape, shape_velocity, collision_distances])
def test_states_must_be_states(function):
    with pytest.raises(BadRequest, match=r"`x` must have shape \(\.\.\., 12\), got \(6,\)"):
        function(np.ones(6))
    with pytest.raises(BadRequest, match=r"`x` must have shape \(\.\.\., 12\), got \(\)"):
        function(1.0)
    with pytest.raises(BadRequest, match="`x` must be an array of numbers, got 'triangle'"):
        function("triangle")
    bad = EIGHT.copy()
    bad[3] = np.nan
    with pytest.raises(BadRequest, match="finite places, got infinity or NaN"):
        function(np.stack([EIGHT, bad]))
    with pytest.raises(BadRequest, match="got a triple collision"):
        function(np.concatenate([np.zeros(6), np.ones(6)]))


def test_velocities_must_be_finite_where_they_matter():
    bad = EIGHT.copy()
    bad[8] = np.inf
    with pytest.raises(BadRequest, match="`x` must have finite rates"):
        shape_velocity(bad)
    assert np.array_equal(shape(bad), shape(EIGHT))


def test_positions_must_be_positions():
    with pytest.raises(BadRequest, match=r"`r` must have shape \(\.\.\., 3, 2\), got \(2, 3\)"):
        shape_of_positions(np.ones((2, 3)))
    with pytest.raises(BadRequest, match="got a triple collision"):
        shape_of_positions(np.full((3, 2), 0.1))
    with pytest.raises(BadRequest, match="finite places"):
        shape_of_positions(np.full((3, 2), np.inf))


@pytest.mark.filterwarnings("error")
def test_points_must_be_on_the_sphere():
    with pytest.raises(BadRequest, match=r"`n` must have shape \(\.\.\., 3\), got \(2,\)"):
        triangle([1.0, 0.0])
    with pytest.raises(BadRequest, match=r"`n` must be of unit length to 1e-06, got .* 1\.00001"):
        triangle([[0.0, 0.0, 1.0], [0.0, 1.00001, 0.0]])
    for value in (np.nan, np.inf):
        with pytest.raises(BadRequest, match="`n` must be of unit length"):
            triangle([value, 0.0, 0.0])
