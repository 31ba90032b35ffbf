"""The orbit nearest to a start, when nobody says its period."""

import math

import published
import pytest

from orbitsearch.errors import BadRequest
from orbitsearch.nearby import find_near
from orbitsearch.orbit import Status


def test_the_figure_eight_is_found_from_nearby() -> None:
    # C. Moore, PRL 70 (1993) 3675; A. Chenciner & R. Montgomery, Ann. Math. 152 (2000) 881.
    answer = find_near("collinear", 0.3475, 0.5330, 12.0)
    assert answer.status is Status.VERIFIED
    assert math.isclose(answer.orbit.start.p, published.EIGHT.a, rel_tol=1e-12)
    assert math.isclose(answer.orbit.scaled_period, published.EIGHT.scaled_period, rel_tol=1e-12)
    assert math.isclose(answer.solution.moved, 0.3475 - published.EIGHT.a, rel_tol=1e-3)
    assert "the nearest moved by 0.000383" in answer.message


def test_of_two_orbits_the_nearer_one_is_taken() -> None:
    # M. Suvakov, CMDA 119 (2014) 369: the twin is 8e-3 away.
    twin = published.EIGHT_TWIN
    answer = find_near("collinear", twin.a + 1e-3, twin.b, 12.0)
    assert math.isclose(answer.orbit.start.p, twin.a, abs_tol=1e-10)


def test_nothing_within_reach_is_an_answer() -> None:
    answer = find_near("collinear", 0.3, 0.3, 40.0)
    assert answer.orbit is None
    assert answer.message == "no orbit of T* up to 40 starts within 0.02 of 0.3, 0.3"
    assert find_near("collinear", 0.3475, 0.5330, 12.0, reach=1e-5).orbit is None


def test_a_bound_below_the_period_leaves_the_orbit_out() -> None:
    assert find_near("collinear", 0.3475, 0.5330, 9.0).orbit is None


@pytest.mark.parametrize(
    ("p", "q", "bound", "said"),
    [
        (0.9, 0.9, 12.0, "`a`, `b` must be a bound start of the collinear set, got 0.9, 0.9"),
        (-0.1, 0.5, 12.0, "must be a bound start"),
        (math.nan, 0.5, 12.0, "must be a bound start"),
        (0.3, 0.5, 0.0, "`scaled_period` must be a positive number, got 0.0"),
        (0.3, 0.5, math.inf, "`scaled_period` must be a positive number, got inf"),
    ],
)
def test_bad_requests_are_told(p: float, q: float, bound: float, said: str) -> None:
    with pytest.raises(BadRequest, match=said):
        find_near("collinear", p, q, bound)
