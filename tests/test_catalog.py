"""The store: nothing is lost, and nothing is filed twice."""

import json
import math
import sqlite3
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from sample_orbits import (
    EIGHT,
    TWIN,
    elliptic,
    figure_eight,
    hyperbolic,
    numbered,
    twin,
)

import orbitsearch
from orbitsearch.catalog import Catalog
from orbitsearch.errors import BadRequest
from orbitsearch.identity import same_orbit
from orbitsearch.orbit import Orbit, Solution, Start, Status, Verdict

NOT_CONFIRMED = Verdict(Status.NOT_CONFIRMED, "digits ran out")


@pytest.fixture
def catalog(tmp_path: Path) -> Iterator[Catalog]:
    """An empty catalogue."""
    with Catalog.open(tmp_path / "new" / "orbits.db") as opened:
        yield opened


def same_values(one: Orbit, other: Orbit) -> bool:
    """Equality of every field to the last bit; text, since a check's value may be NaN."""
    return repr(replace(one, solution=None)) == repr(replace(other, solution=None))


# --- filing and reading -------------------------------------------------------------------------


def test_an_orbit_comes_back_as_it_was(catalog: Catalog) -> None:
    orbit = replace(figure_eight(), solution=Solution(Status.CONVERGED, "done"))
    added = catalog.add(orbit, note="first light")
    record = catalog.get(added.id)
    assert added.new
    assert same_values(record.orbit, orbit)
    assert record.orbit.start.period == "6.325913982926211677589000"
    assert (record.id, record.note, record.run_id, record.sources) == (1, "first light", None, ())
    assert record.created.endswith("+00:00")
    assert record.tool_version == orbitsearch.__version__


digits = st.from_regex(r"-?[0-9]{1,3}\.[0-9]{1,60}(e-[0-9])?", fullmatch=True)
finite = st.floats(-1e6, 1e6)


@settings(
    suppress_health_check=[HealthCheck.function_scoped_fixture], max_examples=60, deadline=None
)
@given(
    st.lists(st.tuples(digits, digits, digits), min_size=1, max_size=4, unique_by=lambda t: t[:2]),
    finite,
    finite,
    st.floats(allow_nan=True, allow_infinity=True),
    st.text(st.characters(exclude_categories=["Cs"]), max_size=20),
)
def test_every_digit_and_letter_survives(
    tmp_path: Path,
    numbers: list[tuple[str, str, str]],
    scaled_period: float,
    energy: float,
    closure: float,
    text: str,
) -> None:
    starts = tuple(Start("collinear", (p, q), period) for p, q, period in numbers)
    orbit = replace(
        figure_eight(),
        start=starts[-1],
        starts=starts,
        scaled_period=scaled_period,
        energy=energy,
        closure=closure,
        stability=replace(elliptic(0.1, 0.2), traces=(complex(energy, -0.0), complex(closure))),
        verdict=Verdict(Status.VERIFIED, text),
    )
    with Catalog.open(tmp_path / "digits.db") as catalog:
        catalog._connection.execute("DELETE FROM orbits")
        id = catalog.add(orbit, note=text).id
        record = catalog.get(id)
    assert same_values(record.orbit, orbit)
    assert record.note == text


def test_starts_left_out_of_the_list_are_kept(catalog: Catalog) -> None:
    orbit = figure_eight().with_starts(())
    assert catalog.get(catalog.add(orbit).id).orbit.starts == (EIGHT,)


def test_one_start_listed_with_fewer_digits_of_its_period_is_one_start(catalog: Catalog) -> None:
    short = replace(EIGHT, period="6.3259")
    record = catalog.get(catalog.add(figure_eight().with_starts((short,))).id)
    assert record.orbit.starts == (EIGHT,)
    assert record.orbit.start == EIGHT


@pytest.mark.parametrize(
    "status", [s for s in Status if s not in (Status.VERIFIED, Status.NOT_CONFIRMED)]
)
def test_other_outcomes_are_not_filed(catalog: Catalog, status: Status) -> None:
    with pytest.raises(
        BadRequest, match=rf"`orbit` must be verified .* got status '{status}': see"
    ):
        catalog.add(replace(figure_eight(), verdict=Verdict(status, "")))
    assert list(catalog.orbits()) == []


@pytest.mark.parametrize("field", ["scaled_period", "energy", "rotation"])
@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_numbers_that_are_not_finite_are_not_filed(
    catalog: Catalog, field: str, value: float
) -> None:
    name = field.replace("_", " ")
    with pytest.raises(
        BadRequest, match=rf"finite numbers to be filed, got {value} for its {name}"
    ):
        catalog.add(replace(figure_eight(), **{field: value}))  # type: ignore[arg-type]


def test_a_start_that_is_not_finite_is_not_filed(catalog: Catalog) -> None:
    bad = replace(EIGHT, period="1e999")
    with pytest.raises(BadRequest, match="got inf for its collinear start: refine it again"):
        catalog.add(replace(figure_eight(), start=bad))


def test_a_number_without_record_says_what_to_do(catalog: Catalog) -> None:
    with pytest.raises(BadRequest, match=r"`id` must name a record .*, got 7: list the catalogue"):
        catalog.get(7)


# --- identity -----------------------------------------------------------------------------------


def test_filing_again_changes_nothing(catalog: Catalog) -> None:
    first = catalog.add(figure_eight())
    before = catalog.get(first.id)
    assert catalog.add(figure_eight(), note="again") == (first.id, False)
    assert repr(catalog.get(first.id)) == repr(before)


def test_the_figure_eight_and_its_twin_are_two_records(catalog: Catalog) -> None:
    assert catalog.add(figure_eight()).new
    assert catalog.find_same(twin()) is None
    assert catalog.add(twin()).new
    assert [record.orbit.choreography for record in catalog.orbits()] == [True, False]


def test_a_second_start_joins_the_record_once(catalog: Catalog) -> None:
    whole = replace(numbered(3), stability=hyperbolic(9.5, 4.5))
    first, second = whole.starts
    id = catalog.add(replace(whole, starts=(first,))).id
    other = replace(whole, start=second, starts=(second,))
    assert catalog.find_same(other) == id
    for _ in range(2):
        assert catalog.add(other) == (id, False)
    record = catalog.get(id)
    assert record.orbit.start == first
    assert record.orbit.starts == (first, second)


def test_a_shared_start_goes_before_equal_invariants(catalog: Catalog) -> None:
    whole = replace(numbered(3), stability=hyperbolic(9.5, 4.5))
    first, second = whole.starts
    a = catalog.add(replace(whole, starts=(first,))).id
    # Its traces were unknown when it was filed, so the two could not be joined.
    rough = replace(whole, stability=hyperbolic(9.5, 4.5, error=1.0))
    b = catalog.add(replace(rough, start=second, starts=(second,))).id
    assert a != b
    assert same_orbit(catalog.get(a).orbit, replace(whole, start=second, starts=(second,)))
    assert catalog.find_same(replace(whole, start=second, starts=(second,))) == b


def test_a_verified_orbit_takes_the_place_of_one_not_confirmed(catalog: Catalog) -> None:
    whole = numbered(4)
    first = whole.start
    badly = Start(first.kind, (repr(first.p + 2e-8), first.parameters[1]), first.period)
    run = catalog.start_run({"grid": 3})
    old = replace(whole, start=badly, starts=(badly,), energy=-1.0, verdict=NOT_CONFIRMED)
    id = catalog.add(old, note="kept").id
    assert catalog.add(whole, run_id=run) == (id, False)
    record = catalog.get(id)
    assert same_values(record.orbit, whole)
    assert (record.note, record.run_id) == ("kept", run)
    assert [r.id for r in catalog.orbits(status="verified")] == [id]
    assert list(catalog.orbits(status="not confirmed")) == []


def test_one_not_confirmed_never_takes_the_place_of_a_verified_orbit(catalog: Catalog) -> None:
    id = catalog.add(figure_eight()).id
    assert catalog.add(replace(figure_eight(), verdict=NOT_CONFIRMED)) == (id, False)
    assert catalog.get(id).orbit.status == Status.VERIFIED


def test_find_start_gives_each_record_once_and_the_nearest_first(catalog: Catalog) -> None:
    two, eight = catalog.add(twin()).id, catalog.add(figure_eight()).id
    near = catalog.find_start("collinear", EIGHT.p, EIGHT.q, 0.01)
    assert [n.id for n in near] == [eight, two]
    assert near[0].distance == 0.0
    assert near[1].distance == pytest.approx(EIGHT.p - TWIN.p)
    assert [n.id for n in catalog.find_start("collinear", EIGHT.p, EIGHT.q, 0.001)] == [eight]
    assert catalog.find_start("rest", EIGHT.p, EIGHT.q, 0.01) == []
    id = catalog.add(
        replace(numbered(5), starts=(numbered(5).start, replace(EIGHT, parameters=("0.1", "0.2"))))
    ).id
    assert [n.id for n in catalog.find_start("collinear", 0.1025, 0.2, 0.01)] == [id]


@pytest.mark.parametrize("tolerance", [-1.0, math.nan, math.inf])
def test_find_start_refuses_a_tolerance_that_is_none(catalog: Catalog, tolerance: float) -> None:
    with pytest.raises(BadRequest, match=rf"`tolerance` must be .* got {tolerance}: 1e-6 finds"):
        catalog.find_start("collinear", 0.3, 0.5, tolerance)


# --- lists --------------------------------------------------------------------------------------


@pytest.fixture
def twelve(catalog: Catalog) -> Catalog:
    """Twelve numbered orbits, filed in no order, the fourth and fifth not confirmed."""
    for n in (5, 2, 11, 0, 7, 3, 9, 1, 10, 4, 8, 6):
        orbit = numbered(n)
        catalog.add(replace(orbit, verdict=NOT_CONFIRMED) if n in (4, 5) else orbit)
    return catalog


@pytest.mark.parametrize(
    ("conditions", "expected"),
    [
        ({}, range(12)),
        ({"stable": True}, range(0, 12, 2)),
        ({"stable": False}, range(1, 12, 2)),
        ({"choreography": True}, range(0, 12, 3)),
        ({"choreography": False, "stable": True}, [2, 4, 8, 10]),
        ({"max_scaled_period": numbered(4).scaled_period}, range(5)),
        ({"word": "BAba" * 6}, [4]),
        ({"word": "abAB" * 100}, []),
        ({"status": "not confirmed"}, [4, 5]),
        ({"status": Status.VERIFIED, "max_scaled_period": 16.0}, [0, 1, 2, 3]),
        ({"start": "isosceles"}, range(12)),
        ({"start": "rest"}, []),
    ],
    ids=str,
)
def test_lists_meet_every_condition_in_order_of_period(
    twelve: Catalog, conditions: dict[str, object], expected: list[int]
) -> None:
    records = list(twelve.orbits(**conditions))  # type: ignore[arg-type]
    assert [r.orbit.cycle for r in records] == [numbered(n).cycle for n in expected]


@pytest.mark.parametrize(
    ("conditions", "message"),
    [
        ({"word": "abc"}, "`word` .* got 'c' at place 3"),
        ({"max_scaled_period": 0.0}, r"`max_scaled_period` must be positive, got 0\.0: "),
        ({"max_scaled_period": math.nan}, "`max_scaled_period` must be positive, got nan: "),
        ({"status": "rejected"}, "`status` must be 'verified' or 'not confirmed', got 'rejected'"),
        ({"status": "fine"}, "`status` must be .* got 'fine': other outcomes are not catalogued"),
    ],
)
def test_a_bad_condition_is_refused_at_the_call(
    catalog: Catalog, conditions: dict[str, object], message: str
) -> None:
    with pytest.raises(BadRequest, match=message):
        catalog.orbits(**conditions)  # type: ignore[arg-type]


def test_adding_while_listing_works_with_a_second_writer(twelve: Catalog) -> None:
    listed = twelve.orbits()
    next(listed)
    with Catalog.open(twelve.path) as second:
        assert second.add(numbered(40)).new
    assert twelve.add(numbered(41)).new
    assert len(list(listed)) == 11


def test_starts_are_given_as_numbers(twelve: Catalog) -> None:
    points = twelve.starts("isosceles")
    assert [p.p for p in points] == [numbered(n).starts[1].p for n in range(12)]
    assert [p.scaled_period for p in points] == [numbered(n).scaled_period for n in range(12)]
    assert twelve.get(points[0].orbit_id).orbit.cycle == numbered(0).cycle
    assert twelve.starts("rest") == []


# --- runs and sources ---------------------------------------------------------------------------


def test_a_run_is_noted_from_start_to_end(catalog: Catalog) -> None:
    first = catalog.start_run({"start": "collinear", "grid": [200, 200]})
    second = catalog.start_run({})
    catalog.finish_run(first, {"orbits": 12}, "stopped")
    one, two = catalog.runs()
    assert (one.id, one.state, one.counts) == (first, "stopped", {"orbits": 12})
    assert one.request == {"start": "collinear", "grid": [200, 200]}
    assert one.finished is not None
    assert one.finished >= one.started
    assert (two.id, two.state, two.counts, two.finished) == (second, "running", None, None)
    assert catalog.get(catalog.add(figure_eight(), run_id=second).id).run_id == second


def test_unknown_runs_and_states_are_refused(catalog: Catalog) -> None:
    with pytest.raises(BadRequest, match=r"`run_id` must name a run .*, got 3: list the runs"):
        catalog.add(figure_eight(), run_id=3)
    assert list(catalog.orbits()) == []
    with pytest.raises(BadRequest, match=r"`id` must name a run .*, got 3: list the runs"):
        catalog.finish_run(3, {})
    with pytest.raises(
        BadRequest, match=r"`state` must be one of .*stopped, failed, got 'gone': ch"
    ):
        catalog.finish_run(catalog.start_run({}), {}, "gone")


ROW = ("Li & Liao 2017", "7", "collinear", "0.30689", "0.12551", "6.23467")


def test_a_published_row_is_filed_once_and_keeps_its_match(catalog: Catalog) -> None:
    id = catalog.add(figure_eight()).id
    row = catalog.add_source(None, *ROW, "diverged")
    assert [s.outcome for s in catalog.sources(None)] == ["diverged"]
    for _ in range(2):
        assert catalog.add_source(id, *ROW, "verified") == row
    assert catalog.sources(None) == []
    assert catalog.add_source(None, *ROW, "diverged") == row
    (source,) = catalog.sources(id)
    assert (source.citation, source.label, source.kind, source.p, source.q, source.period) == ROW
    assert (source.orbit_id, source.outcome) == (id, "verified")
    assert catalog.get(id).sources == (source,)
    other = catalog.add_source(id, ROW[0], "8", *ROW[2:], "the same")
    assert [s.id for s in catalog.get(id).sources] == [row, other]


def test_a_source_needs_a_record_that_exists(catalog: Catalog) -> None:
    with pytest.raises(BadRequest, match=r"`orbit_id` must name a record .*, got 9: list"):
        catalog.add_source(9, *ROW, "verified")


def test_the_record_holds_no_second_copy_of_the_starts(catalog: Catalog) -> None:
    catalog.add(numbered(2))
    with sqlite3.connect(catalog.path) as connection:
        (text,) = connection.execute("SELECT record FROM orbits").fetchone()
    connection.close()
    assert json.loads(text)["starts"] == []
