"""Strands against exact motions, scipy, braids made of half turns, and published orbits."""

from itertools import pairwise

import numpy as np
import published
import pytest
import reference
from hypothesis import given
from hypothesis import strategies as st
from test_homographic import homographic, period

from orbitsearch import bodies, flow, strands
from orbitsearch.braids import Braid
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Status
from orbitsearch.shape import sample
from orbitsearch.strands import artin_word, divide, may_turn, swept, world_lines
from orbitsearch.syzygies import crossings, syzygies

EIGHT = reference.sides(*reference.collinear(published.EIGHT.a, published.EIGHT.b))
T_EIGHT = published.EIGHT.period
LETTERS = (1, -1, 2, -2)

# Burau's matrices at t = -1 (W. Burau 1936, from memory).
MATRICES = {1: [[1, 1], [0, 1]], 2: [[1, 0], [-1, 1]], -1: [[1, -1], [0, 1]], -2: [[1, 0], [1, 1]]}


def trace(word):
    """Trace of the product of integer matrices."""
    product = np.eye(2, dtype=int)
    for letter in word:
        product = product @ MATRICES[letter]
    return int(np.trace(product))


def planar(z):
    """Positions, shape (n, 3, 2), from complex numbers, shape (n, 3)."""
    return np.stack([z.real, z.imag], axis=-1)


def reduced(word):
    """Word without neighbouring letters that cancel."""
    out = []
    for letter in word:
        if out and out[-1] == -letter:
            out.pop()
        else:
            out.append(letter)
    return tuple(out)


def half_turns(word, pieces=6, wobble=0.0):
    """Bodies at -1, 0, 1 on a line that exchange places by half turns, (n, 3) complex.

    `wobble` tilts everything back and forth by as many radians, which exchanges nothing.
    """
    z, order = np.array([-1.0, 0.0, 1.0], complex), [0, 1, 2]
    rows = [z]
    for letter in word:
        left = abs(letter) - 1
        pair = order[left : left + 2]
        middle = left - 0.5
        turn = np.exp(np.sign(letter) * 1j * np.pi * np.arange(1, pieces) / pieces)
        for t in turn:
            z = z.copy()
            z[pair] = middle - 0.5 * t, middle + 0.5 * t
            rows.append(z)
        z = z.copy()
        z[pair] = left, left - 1.0
        rows.append(z)
        order[left : left + 2] = pair[::-1]
    return np.array(rows) * np.exp(1j * wobble * np.sin(np.arange(len(rows))))[:, None]


# ---------------------------------------------------------------- angles swept


@pytest.mark.parametrize("e", [0.0, 0.4, 0.9])
@pytest.mark.parametrize("name", ["triangle", "turned line"])
def test_homographic_motions_sweep_a_turn_a_period(name, e):
    # Kepler ellipses in closed form; from farthest to closest it is half a turn.
    T = period(name)
    track = flow.track(homographic(name, e, 0.5 * T), 0.5 * T)
    assert swept(track) == pytest.approx(np.full(3, np.pi), abs=1e-7)


def test_the_mirror_image_sweeps_backwards():
    x = homographic("triangle", 0.3, 0.0) * np.tile([1.0, -1.0], 6)
    assert swept(flow.track(x, period("triangle") / 2)) == pytest.approx(np.full(3, -np.pi))


def test_no_pair_of_the_figure_eight_winds():
    # Each pair has turned by as much one way as the other: L = 0, and the two lobes are alike.
    angles = swept(flow.track(EIGHT, T_EIGHT))
    assert angles == pytest.approx(np.zeros(3), abs=1e-12)
    half = swept(flow.track(EIGHT, T_EIGHT / 2))
    assert np.max(np.abs(half)) > 1.0


def test_scipy_sweeps_the_same_angles():
    # DOP853 on Newton's equations; its samples are close enough to be unwrapped.
    starts = reference.random_bound_starts(30, seed=7)
    wide = [x for x in starts if reference.least_side(flow.track(x, 4.0).series) > 0.1]
    for x in wide[:4]:
        r, v = bodies.sides_to_bodies(x)
        solution = reference.dop853(r, v, 4.0, t_eval=np.linspace(0.0, 4.0, 4001))
        z = solution.y[:6].T.reshape(-1, 3, 2) @ np.array([1.0, 1.0j])
        angles = np.unwrap(np.angle(np.roll(z, -1, axis=1) - z), axis=0)
        assert swept(flow.track(x, 4.0)) == pytest.approx(angles[-1] - angles[0], abs=1e-8)


@pytest.mark.parametrize("turns", [40.0, 40.25])
def test_a_binary_turns_as_kepler_says_and_its_companion_does_not(turns):
    # A pair at distance d has the rate √2 d^(-3/2); a body at distance D >> d changes that by some
    # (d/D)³, and moves itself by (d/D)^(3/2) as much.
    d, far = 0.01, 10.0
    rate = np.sqrt(2.0) * d**-1.5
    r = np.array([[-d / 2, 0.0], [d / 2, 0.0], [0.0, far]])
    v = np.array([[0.0, -rate * d / 2], [0.0, rate * d / 2], [0.0, 0.0]])
    angles = swept(flow.track(reference.sides(r, v), turns * 2 * np.pi / rate))
    assert angles[0] == pytest.approx(2 * np.pi * turns, rel=1e-6)
    assert np.max(np.abs(angles[1:])) < 1e-3


def test_a_whole_turn_within_one_step_is_counted():
    # One step made by hand: e^(2πit) in its Taylor series to order 20, which is off by
    # (2π)²¹/21! = 0.001 at the end, so that the beginning and the end of the step look alike.
    order = np.arange(21)
    factorials = np.cumprod(np.concatenate([[1.0], order[1:]]))
    sides = np.exp(2j * np.pi * np.arange(3) / 3)[:, None] * (2j * np.pi) ** order / factorials
    series = np.stack([sides.real, sides.imag], axis=1).reshape(1, 6, 21)
    track = flow.Trajectory(np.array([0.0, 1.0]), series, np.zeros(12), Status.CONVERGED)
    assert swept(track) == pytest.approx(np.full(3, 2 * np.pi), abs=2e-3)


def test_between_neighbours_no_side_leaves_its_cone():
    # The bound itself, looked at 50 times within every piece: in the closest passages, and on a
    # circle, where the integrator makes its longest steps, 7 a turn.
    starts = [*reference.random_bound_starts(12, seed=3), homographic("triangle", 0.0, 0.0)]
    tracks = [flow.track(x, 10.0) for x in starts]
    tracks = [track for track in tracks if track.status is not Status.COLLISION]
    divided = []
    for track in tracks:
        times = divide(track, may_turn(track))
        inside = times[:-1, None] + np.diff(times)[:, None] * np.linspace(0, 1, 50)
        states = track.states(inside.ravel())[:, :6].reshape(len(inside), 50, 3, 2)
        moved = np.linalg.norm(states - states[:, :1], axis=-1).max(axis=1)
        assert np.all(moved <= np.sin(0.5) * np.linalg.norm(states[:, 0], axis=-1))
        divided.append(len(times) - len(track.times))
    assert divided[-1] > 2 * tracks[-1].steps


# ---------------------------------------------------------------- words of half turns


@given(st.lists(st.sampled_from(LETTERS), min_size=1, max_size=25), st.floats(-3.0, 3.0))
def test_a_braid_made_of_half_turns_is_read_back(word, angle):
    # The line of sight turns with the bodies.
    z = half_turns(word, wobble=0.2) * np.exp(1j * angle)
    assert reduced(artin_word(planar(z), angle)) == reduced(word)


@given(
    st.lists(st.sampled_from(LETTERS), min_size=1, max_size=15),
    st.floats(-3.0, 3.0),
    st.sampled_from([0.0, np.pi / 2, np.pi, 1.0]),
)
def test_another_line_of_sight_gives_a_conjugate_braid(word, turn, angle):
    # Also along the line on which all three are at rest, one behind the other.
    z = half_turns(word)
    expected = Braid.from_artin(word)
    assert Braid.from_artin(artin_word(planar(z), angle)) == expected
    assert Braid.from_artin(artin_word(planar(z * np.exp(1j * turn)), angle)) == expected


@given(st.lists(st.sampled_from(LETTERS), min_size=1, max_size=15), st.integers(0, 1000))
def test_another_first_moment_gives_a_conjugate_braid(word, cut):
    pure = word * 6
    z = half_turns(pure)
    cut = cut % (len(z) - 2)
    rotated = np.concatenate([z[cut:-1], z[: cut + 1]])
    assert Braid.from_artin(artin_word(planar(rotated))) == Braid.from_artin(pure)


@given(st.integers(0, 2**32 - 1), st.sampled_from([0.0, 1.0, np.pi / 2]))
def test_straight_pieces_may_be_as_long_as_they_like(seed, angle):
    # Random corners: up to three exchanges in a piece, and the same in the same order when each is
    # cut in 64.
    z = np.random.default_rng(seed).normal(size=(8, 6)).view(complex)
    z = np.concatenate([z, z[:1]])
    share = np.arange(64)[:, None] / 64
    fine = np.concatenate([a + share * (b - a) for a, b in pairwise(z)])
    fine = np.concatenate([fine, z[:1]])
    assert artin_word(planar(z), angle) == artin_word(planar(fine), angle)


@given(st.integers(0, 2**32 - 1))
def test_exponents_of_a_pure_braid_add_up_to_twice_the_windings(seed):
    z = np.random.default_rng(seed).normal(size=(30, 6)).view(complex)
    z = np.concatenate([z, z[:1]])
    relative = np.roll(z, -1, axis=1) - z
    windings = np.angle(relative[1:] / relative[:-1]).sum() / (2 * np.pi)
    word = artin_word(planar(z))
    assert np.sum(np.sign(word)) == pytest.approx(2 * windings, abs=1e-9)
    assert Braid.from_artin(word).is_pure


def test_three_bodies_in_line_with_the_sight_exchange_all_at_once():
    # A rigid half turn, seen so that all three are behind each other halfway.
    z = np.exp(1j * np.linspace(0, np.pi, 13))[:, None] * np.array([-1.0, 0.25, 1.0])
    for turn in (1, -1):
        word = artin_word(planar(np.concatenate([z, -z[1:]])) * [1, turn])
        # The half twist is σ1 σ2 σ1 = σ2 σ1 σ2, and its square is the full twist.
        assert word[:3] in (tuple(turn * k for k in w) for w in ((1, 2, 1), (2, 1, 2)))
        full = Braid.from_artin(tuple(turn * k for k in (1, 2) * 3))
        assert Braid.from_artin(word) == full


def test_bodies_exactly_behind_each_other_are_told_apart_by_height():
    # Quarter turns of three bodies in line, without any rounding, from in line with the sight.
    z = 1j ** np.arange(1, 6)[:, None] * np.array([-1.0, 0.0, 1.0])
    z = np.round(z.real) + 1j * np.round(z.imag)
    assert np.all(z[0].real == 0.0)
    for corners, turn in ((z, 1), (z.conj(), -1)):
        word = artin_word(planar(corners))
        assert len(word) == 6
        assert Braid.from_artin(word) == Braid.from_artin([turn * k for k in (1, 2) * 3])


def test_bodies_that_only_come_near_do_not_exchange():
    z = np.array([[-1, 0, 1], [-0.01 + 0.5j, 0, 1], [-1, 0, 1]], complex)
    assert artin_word(planar(z)) == ()


def test_a_hundred_thousand_corners_are_read():
    n = 100_000
    phase = 0.1 + 100 * np.pi * np.arange(n + 1) / n
    z = np.exp(1j * (phase[:, None] + 2 * np.pi * np.arange(3) / 3))
    word = artin_word(planar(z))
    # Fifty full turns of a rigid triangle: (σ1 σ2)^3 each, up to conjugation.
    assert len(word) == 300
    assert Braid.from_artin(word) == Braid.from_artin((1, 2) * 150)


# ---------------------------------------------------------------- words of orbits


@pytest.mark.parametrize("angle", [0.0, 0.4, 1.0, np.pi / 2, 2.0, 3.0])
def test_the_figure_eight_is_the_pigtail_three_times(angle):
    # Its braid is (σ1 σ2⁻¹)³ (C. Moore, PRL 70 (1993) 3675), of trace 18.
    track = flow.track(EIGHT, T_EIGHT)
    expected = Braid.from_artin((1, -2) * 3)
    for positions in (
        world_lines(track)[1],
        bodies.sides_to_bodies(track.states(sample(track)[0]))[0],
    ):
        word = artin_word(positions, angle)
        assert trace(word) == 18
        assert Braid.from_artin(word).trace == 18
        assert Braid.from_artin(word) in (expected, expected.mirror())


def test_a_third_of_the_figure_eight_is_a_cube_root_of_it():
    third = artin_word(world_lines(flow.track(EIGHT, T_EIGHT / 3))[1])
    whole = artin_word(world_lines(flow.track(EIGHT, T_EIGHT))[1])
    assert Braid.from_artin(third * 3) == Braid.from_artin(whole)
    assert Braid.from_artin(third) in (Braid.from_artin((1, -2)), Braid.from_artin((-1, 2)))


@pytest.mark.parametrize("row", published.LI_LIAO_2017[:5], ids=lambda row: f"T={row.period:.0f}")
def test_the_braid_of_the_strands_is_that_of_the_shapes(row):
    # X. Li & S. Liao (2017).  Strands know nothing of the shape sphere, nor crossings of strands.
    track = flow.track(reference.sides(*reference.collinear(row.a, row.b)), row.period)
    windings = swept(track) / (2 * np.pi)
    assert windings == pytest.approx(np.round(windings), abs=1e-4)
    exponents = 2 * round(windings.sum())
    expected = Braid.from_crossings(crossings(syzygies(track)), exponents)
    for angle in (0.0, 0.9, np.pi / 2):
        word = artin_word(world_lines(track)[1], angle)
        assert np.sum(np.sign(word)) == exponents
        assert Braid.from_artin(word) == expected


def test_an_orbit_that_turns_has_windings_and_a_braid_that_fits():
    # R. Broucke, Celest. Mech. 12 (1975) 439.
    for row in published.BROUCKE_1975:
        r = np.stack([row.positions, np.zeros(3)], axis=-1)
        v = np.stack([np.zeros(3), row.velocities], axis=-1)
        track = flow.track(reference.sides(r, v), row.period)
        windings = np.round(swept(track) / (2 * np.pi)).astype(int)
        assert np.any(windings != 0)
        expected = Braid.from_crossings(crossings(syzygies(track)), 2 * int(windings.sum()))
        assert Braid.from_artin(artin_word(world_lines(track)[1], 0.3)) == expected


# ---------------------------------------------------------------- bad requests


@pytest.mark.parametrize("function", [swept, world_lines])
@pytest.mark.parametrize(
    "start",
    [
        reference.sides(np.array([[-1.0, 0], [1, 0], [0, 0]]), np.zeros((3, 2))),
        reference.sides(*reference.at_rest(0.0, 0.6)),
    ],
    ids=["in line", "isosceles"],
)
def test_bodies_at_rest_that_fall_onto_each_other_have_no_strands(function, start):
    track = flow.track(start, 10.0)
    assert track.status is Status.COLLISION
    with pytest.raises(
        BadRequest,
        match=r"^`trajectory` must not run into a collision, it does at time [\d.]+: stop",
    ):
        function(track)


def test_too_many_pieces_are_refused(monkeypatch):
    monkeypatch.setattr(strands, "MOST_PIECES", 50)
    with pytest.raises(BadRequest, match="`trajectory` must need no more than 50 pieces, its 70"):
        swept(flow.track(EIGHT, T_EIGHT))


def test_positions_must_be_those_of_three_bodies():
    with pytest.raises(
        BadRequest, match=r"`positions` must have shape \(n, 3, 2\).* got \(5, 2, 2\)"
    ):
        artin_word(np.ones((5, 2, 2)))
    with pytest.raises(BadRequest, match=r"`positions` must have shape .* got \(1, 3, 2\)"):
        artin_word(np.ones((1, 3, 2)))
    z = half_turns((1, 1))
    z[3, 1] = np.nan
    with pytest.raises(BadRequest, match="`positions` and `angle` must be finite"):
        artin_word(planar(z))
    with pytest.raises(BadRequest, match="`positions` and `angle` must be finite"):
        artin_word(planar(half_turns((1, 1))), np.inf)


def test_a_path_must_close():
    z = half_turns((1, 2))
    with pytest.raises(BadRequest, match=r"`positions` must end where they begin, .* got a gap of"):
        artin_word(planar(z[:-2]))
    # Nearly closed is closed: no body can be in the way.
    z[-1] += 0.05 + 0.1j
    assert artin_word(planar(z)) == (1, 2)


@pytest.mark.parametrize("angle", [0.0, 0.7, np.pi / 2])
def test_bodies_may_not_meet_on_the_path(angle):
    z = np.array([[-1, 0, 1], [-1, -1, 1], [-1, 0, 1]], complex)
    with pytest.raises(
        BadRequest, match="`positions` must keep the bodies apart, two coincide in row 1"
    ):
        artin_word(planar(z), angle)
    z = np.array([[-1, 0, 1], [1, 0, -1]], complex)
    with pytest.raises(BadRequest, match="two meet between rows 0 and 1: sample the motion more"):
        artin_word(planar(z), angle)
