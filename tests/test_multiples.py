"""Period multiples: derived from the group, and proved on a real orbit for each pair of sets.

An arc of time t from a start set to an end condition makes an orbit of period T = multiple times t.
Here the orbit is integrated over T by scipy's DOP853, which knows nothing of sets.
"""

import math
from itertools import product

import numpy as np
import pytest
from reference import dop853

from orbitsearch import bodies
from orbitsearch.orbit import Orbit, Status
from orbitsearch.shoot import shoot
from orbitsearch.starts import CONDITIONS, START_SETS, period_multiple
from orbitsearch.symmetry import Reversal
from orbitsearch.verify import verify

KIND = {condition.label: kind for kind, condition in CONDITIONS.items()}

# (start set, end condition): parameters and time of the arc, guesses found with this tool by scans
# of the sets' own windows for arcs to that end, T* up to 80.  The marked ones are published: the
# figure-eight (C. Moore 1993) and two rest starts (X. Li & S. Liao 2019).
SEEDS = {
    ("collinear", "C1"): (0.347117, 0.532725, 1.054319),  # figure-eight
    ("collinear", "C2"): (0.568991, 0.449429, 8.660756),
    ("collinear", "C3"): (0.306893, 0.125507, 3.117337),
    ("collinear", "I1"): (0.568991, 0.449429, 4.330378),
    ("collinear", "I2"): (0.347117, 0.532725, 0.527159),  # figure-eight
    ("collinear", "I3"): (0.306893, 0.125507, 1.558669),
    ("collinear", "rest"): (0.6414776, 0.3753471, 16.578971),
    ("collinear", "P"): (0.0620144, 0.2547877, 2.522518),
    ("isosceles", "C1"): (1.565497, 0.137264, 2.598462),  # figure-eight
    ("isosceles", "C2"): (2.112080, 0.0956656, 14.260415),
    ("isosceles", "C3"): (0.108597, 0.487662, 2.323732),
    ("isosceles", "I1"): (1.885270, 0.137820, 56.105849),
    ("isosceles", "I2"): (0.7211013, 0.1003186, 6.911563),
    ("isosceles", "I3"): (0.324929, 0.354222, 4.298822),
    ("isosceles", "rest"): (0.4585038, 0.0673899, 3.587248),
    ("isosceles", "P"): (0.324929, 0.354222, 2.149411),
    ("rest", "C1"): (0.1938234, 0.6063751, 1.912057),
    ("rest", "C2"): (0.1954621, 0.5474236, 1.936317),
    ("rest", "C3"): (0.0648682, 0.4860255, 1.663068),
    ("rest", "I1"): (0.2114010, 0.3510806, 1.878114),
    ("rest", "I2"): (0.1846729, 0.5753741, 1.289660),
    ("rest", "I3"): (0.1549011, 0.6460870, 1.189463),
    ("rest", "rest"): (0.0207067, 0.3133550, 1.087048),  # Li & Liao
    ("rest", "P"): (0.3089693, 0.4236728, 1.222874),  # Li & Liao
    ("perpendicular", "C1"): (0.493791, 1.098699, 2.754728),
    ("perpendicular", "C2"): (0.472695, 0.969810, 1.581969),
    ("perpendicular", "C3"): (0.522859, 1.287579, 1.703912),
    ("perpendicular", "I1"): (0.0420862, 1.4284688, 11.896515),
    ("perpendicular", "I2"): (0.228670, 1.001669, 1.515991),
    ("perpendicular", "I3"): (0.440632, 1.033961, 1.609467),
    ("perpendicular", "rest"): (0.5952639, 1.3285746, 3.473448),
    ("perpendicular", "P"): (0.811066, 1.537893, 2.157487),
}

# Over the size of the orbit.  Some have multipliers of 1e8, of which DOP853 feels the root: most
# close to 1e-9, the worst to 1e-4.
CLOSED, APART = 1e-3, 0.05


def plane(kind: str, angle: float) -> np.ndarray:
    c, s = math.cos(angle), math.sin(angle)
    return {
        "identity": np.eye(2),
        "half-turn": -np.eye(2),
        "mirror": np.array([[c, s], [s, -c]]),
    }[kind]


def matrix(reversal: Reversal, angle: float) -> np.ndarray:
    """What a reversal does to the six coordinates of three bodies, its axis at half that angle."""
    shuffle = np.zeros((3, 3))
    shuffle[list(reversal.permutation), range(3)] = 1.0
    return np.kron(shuffle, plane(reversal.plane, angle))


def order(one: Reversal, other: Reversal) -> int:
    """Order of the product of two reversals, up to a rotation when both are mirrors."""
    step = matrix(other, 0.7) @ matrix(one, 0.2)
    power = step
    for n in range(1, 13):
        turn = power[:2, :2] if one.plane == other.plane == "mirror" else np.eye(2)
        if np.allclose(power, np.kron(np.eye(3), turn), atol=1e-12):
            return n
        power = step @ power
    raise AssertionError("of no finite order")


@pytest.mark.parametrize(("start", "end"), [*product(START_SETS, KIND)])
def test_multiples_are_twice_the_order_of_the_two_reversals(start, end) -> None:
    own, condition = START_SETS[start].own, CONDITIONS[KIND[end]]
    assert period_multiple(own, condition) == 2 * order(own.reversal, condition.reversal)


def test_a_multiple_does_not_depend_on_the_direction() -> None:
    for one, other in product(CONDITIONS.values(), repeat=2):
        assert period_multiple(one, other) == period_multiple(other, one)


def off(begin: np.ndarray, end: np.ndarray, fit: bool) -> tuple[float, float]:
    """Distance of two states (2, 3, 2) over the size of the first, and the angle it was turned."""
    one, other = (np.ascontiguousarray(x).view(complex)[..., 0] for x in (begin, end))
    angle = float(np.angle(np.vdot(one[0], other[0]))) if fit else 0.0
    gap = np.abs(other * np.exp(-1j * angle) - one).max(axis=1)
    size = np.abs(one[0]).max()
    return float(max(gap[0] / size, gap[1] * math.sqrt(size))), angle


@pytest.mark.parametrize(("start", "end"), list(SEEDS))
def test_the_multiple_closes_a_real_orbit_and_no_part_of_it_does(start, end) -> None:
    p, q, t = SEEDS[start, end]
    starts, kind = START_SETS[start], KIND[end]
    shots = shoot(starts, np.array([kind]), np.array([p]), np.array([q]), np.array([t]), reach=1e-3)
    assert shots.status == [Status.CONVERGED]
    assert shots.time[0] == pytest.approx(t, rel=1e-4)
    period = period_multiple(starts.own, CONDITIONS[kind]) * shots.time[0]
    begin = np.stack(bodies.sides_to_bodies(starts.states(shots.p, shots.q)[0]))
    # Half the period forwards and half backwards: where both meet, the orbit is closed, and errors
    # grow with the root of its largest multiplier only.
    path = dop853(*begin, period / 2, t_eval=[period / 3, period / 2]).y.T.reshape(2, 2, 3, 2)
    back = dop853(*begin, -period / 2).y[:, -1].reshape(2, 3, 2)
    relative = starts.own.reversal.plane == CONDITIONS[kind].reversal.plane == "mirror"
    closure, angle = off(back, path[1], fit=relative)
    assert closure < CLOSED
    for part in path:
        assert off(begin, part, fit=True)[0] > APART
    orbit = verify(starts, shots.p[0], shots.q[0], shots.time[0], kind)
    assert isinstance(orbit, Orbit)
    assert orbit.status in (Status.VERIFIED, Status.NOT_CONFIRMED)
    assert math.remainder(orbit.rotation - angle, 2 * math.pi) == pytest.approx(0.0, abs=CLOSED)
    # Only two mirrors turn an orbit, and two mirrors do unless by chance.
    assert (abs(orbit.rotation) > 0.01) is relative


def test_every_pair_has_its_orbit() -> None:
    # None is missing: a new start set has to bring orbits for its pairs, or to say what was tried.
    assert SEEDS.keys() == set(product(START_SETS, KIND))
