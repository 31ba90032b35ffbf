"""Start sets: standard form, tangents, domains, and who is in which set and who is not."""

import math
from itertools import permutations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from orbitsearch import bodies, flow
from orbitsearch.errors import BadRequest
from orbitsearch.starts import CONDITIONS, START_SETS, set_of, start_set

SETS = list(START_SETS.values())
BY_NAME = pytest.mark.parametrize("starts", SETS, ids=lambda starts: starts.name)
LABELS = {condition.label: condition for condition in CONDITIONS.values()}

# Energies in closed form, worked out from the standard forms by hand.
ENERGIES = {
    "collinear": lambda a, b: 3 * (a * a + b * b) - 2.5,
    "isosceles": lambda eta, u: (
        3 * u * u * (1 + 3 * eta * eta) - 0.5 - 2 / math.sqrt(1 + 9 * eta * eta)
    ),
    "rest": lambda x, y: -1 - 1 / math.hypot(x - 0.5, y) - 1 / math.hypot(x + 0.5, y),
    "perpendicular": lambda s, v: v * v * (3 + s * s) / 4 - 0.5 - 1 / (1 - s) - 1 / (1 + s),
}


def inner(starts, share: tuple[float, float]) -> tuple[np.ndarray, np.ndarray]:
    """Parameters at a share of the set's window, as arrays of one."""
    p0, p1, q0, q1 = starts.window
    return np.array([p0 + share[0] * (p1 - p0)]), np.array([q0 + share[1] * (q1 - q0)])


def state(starts, share: tuple[float, float]) -> np.ndarray:
    return starts.states(*inner(starts, share))[0]


def moved(
    x: np.ndarray, angle=0.0, scale=1.0, mirror=False, reverse=False, order=(0, 1, 2)
) -> np.ndarray:
    """The same state turned, scaled in length, mirrored, reversed, with its bodies renamed.

    Body i becomes body ``order[i]``; velocities go with the root of 1 / scale.
    """
    r, v = bodies.sides_to_bodies(x)
    c, s = math.cos(angle), math.sin(angle)
    plane = np.array([[c, -s], [s, c]]) @ np.diag([1.0, -1.0 if mirror else 1.0])
    sign = -1.0 if reverse else 1.0
    to_r, to_v = np.empty((3, 2)), np.empty((3, 2))
    to_r[list(order)] = scale * r @ plane.T
    to_v[list(order)] = sign * v @ plane.T / math.sqrt(scale)
    return bodies.bodies_to_sides(to_r, to_v)


SHARES = st.tuples(st.floats(0.05, 0.95), st.floats(0.05, 0.95))
MOVES = st.fixed_dictionaries(
    {
        "angle": st.floats(-math.pi, math.pi),
        "scale": st.floats(0.01, 100.0),
        "mirror": st.booleans(),
        "reverse": st.booleans(),
        "order": st.sampled_from([*permutations(range(3))]),
    }
)


@BY_NAME
@given(share=SHARES)
def test_standard_states_are_in_their_set_at_rest_without_rotation(starts, share) -> None:
    x = state(starts, share)
    r, v = bodies.sides_to_bodies(x)
    assert np.abs(starts.own.residuals(x)).max() < 1e-15
    assert np.abs(r.sum(axis=0)).max() < 1e-14
    assert np.abs(v.sum(axis=0)).max() < 1e-14
    assert np.abs(x[:6].reshape(3, 2).sum(axis=0)).max() < 1e-14
    assert abs(np.sum(r[:, 0] * v[:, 1] - r[:, 1] * v[:, 0])) < 1e-13


@BY_NAME
@given(share=SHARES)
def test_energies_are_those_of_the_closed_form(starts, share) -> None:
    p, q = inner(starts, share)
    assert starts.energies(p, q)[0] == pytest.approx(
        ENERGIES[starts.name](p[0], q[0]), rel=1e-12, abs=1e-12
    )


@BY_NAME
@given(share=SHARES)
def test_tangents_are_derivatives_of_states(starts, share) -> None:
    p, q = inner(starts, share)
    tangents = starts.tangents(p, q)[0]
    h = 1e-5
    for tangent, (dp, dq) in zip(tangents, ((h, 0.0), (0.0, h)), strict=True):
        # States are polynomials of degree two: central differences have no error but rounding.
        difference = (starts.states(p + dp, q + dq) - starts.states(p - dp, q - dq))[0] / (2 * h)
        assert tangent == pytest.approx(difference, abs=1e-9)


@BY_NAME
@given(share=SHARES, move=MOVES)
@settings(max_examples=200)
def test_parameters_are_found_again_however_the_state_is_moved(starts, share, move) -> None:
    p, q = inner(starts, share)
    assume(starts.inside(p, q)[0])
    special = starts.own.body
    body = move["order"][special - 1] + 1 if special else 0
    again = starts.parameters_of(moved(starts.states(p, q)[0], **move), body)
    unit = move["scale"]
    assert again == pytest.approx((p[0], q[0], unit), rel=1e-9, abs=1e-9)
    assert starts.inside(*(np.array([value]) for value in again[:2]))[0]


@BY_NAME
@given(share=SHARES, move=MOVES)
def test_conditions_hold_however_the_state_is_moved(starts, share, move) -> None:
    x = moved(state(starts, share), **move)
    special = starts.own.body
    body = move["order"][special - 1] + 1 if special else 0
    (mine,) = [condition for condition in starts.conditions() if condition.body == body]
    assert np.abs(mine.residuals(x)).max() < 1e-13


@BY_NAME
def test_residuals_do_not_depend_on_scale_or_direction(starts) -> None:
    for other in SETS:
        x = state(other, (0.31, 0.43))
        for condition in starts.conditions():
            expected = np.abs(condition.residuals(x))
            again = np.abs(condition.residuals(moved(x, angle=0.7, scale=13.0)))
            assert again == pytest.approx(expected, rel=1e-11, abs=1e-13)


@pytest.mark.parametrize("label", LABELS)
@BY_NAME
def test_states_of_one_set_are_not_in_another(starts, label) -> None:
    condition = LABELS[label]
    for share in ((0.31, 0.43), (0.5, 0.2), (0.77, 0.61)):
        for order in permutations(range(3)):
            largest = np.abs(condition.residuals(moved(state(starts, share), order=order))).max()
            special = starts.own.body
            named = order[special - 1] + 1 if special else 0
            if condition in starts.conditions() and condition.body == named:
                assert largest < 1e-14
            else:
                assert largest > 1e-2


def test_collinear_starts_are_not_isosceles_ones() -> None:
    # Body 3 in the middle is as far from 1 as from 2, and r_3·v_3 = 0 since r_3 = 0: what tells the
    # two sets apart is that an apex moves along its base.
    collinear = START_SETS["collinear"]
    p, q = np.array([0.3, 0.1]), np.array([0.5, 0.4])
    for x in collinear.states(p, q):
        residuals = np.abs(LABELS["I3"].residuals(x))
        assert residuals[[0, 2]].max() < 1e-15
        assert residuals[1] > 0.1


def test_perpendicular_states_are_not_at_rest() -> None:
    # All three sides are stationary in both sets.
    x = state(START_SETS["perpendicular"], (0.4, 0.4))
    sides, rates = x.reshape(2, 3, 2)
    assert np.abs(np.sum(sides * rates, axis=1)).max() < 1e-15
    assert np.abs(LABELS["rest"].residuals(x)).max() > 0.1


@pytest.mark.parametrize(
    ("name", "inside", "outside"),
    [
        ("collinear", [(0, 0), (0.3, 0.5), (3, 3)], [(-1e-9, 0.5), (0.3, -0.1)]),
        ("isosceles", [(0.1, 0), (0.5, 0.3)], [(0, 0.3), (-0.5, 0.3), (0.5, -0.1)]),
        (
            "rest",
            [(0, 0.1), (0.5, 1e-6), (0, math.sqrt(0.75)), (0.2, 0.7)],
            [(-0.1, 0.5), (0.1, 0), (0.1, -0.5), (0.51, 0.1), (0.2, 0.72)],
        ),
        ("perpendicular", [(0, 0), (0.99, 2)], [(-0.1, 1), (1, 1), (0.5, -0.1)]),
    ],
)
def test_domains_hold_every_start_once(name, inside, outside) -> None:
    p, q = np.array([*inside, *outside], dtype=float).T
    expected = [True] * len(inside) + [False] * len(outside)
    assert START_SETS[name].inside(p, q).tolist() == expected


@BY_NAME
def test_default_windows_hold_bound_starts(starts) -> None:
    p, q = np.meshgrid(np.linspace(*starts.window[:2], 20), np.linspace(*starts.window[2:], 20))
    p, q = p.ravel(), q.ravel()
    bound = starts.inside(p, q) & (starts.energies(p, q) < 0)
    assert bound.mean() > 0.3


@BY_NAME
@given(share=SHARES)
@settings(max_examples=20)
def test_the_motion_is_symmetric_about_a_start(starts, share) -> None:
    # What a reversal is for: the state at -t is the image of the state at t.
    x = state(starts, share)
    moves = flow.propagate(np.array([x, x]), np.array([0.1, -0.1]))
    assume(set(moves.status) == {0})
    r, v = bodies.sides_to_bodies(moves.states[0])
    plane = starts.own.plane_matrix(x)
    image_r, image_v = np.empty((3, 2)), np.empty((3, 2))
    to = list(starts.own.reversal.permutation)
    image_r[to], image_v[to] = r @ plane.T, -v @ plane.T
    back = bodies.bodies_to_sides(image_r, image_v)
    scale = max(1.0, np.abs(moves.states[1]).max())
    assert np.abs(back - moves.states[1]).max() / scale < 1e-9


def test_sets_are_found_by_name_and_by_condition() -> None:
    for name, starts in START_SETS.items():
        assert start_set(name) is starts
        for condition in starts.conditions():
            assert set_of(condition) is starts
    with pytest.raises(BadRequest, match=r"`start` must be one of collinear, .*: 'square'"):
        start_set("square")
    assert sorted(LABELS) == ["C1", "C2", "C3", "I1", "I2", "I3", "P", "rest"]
