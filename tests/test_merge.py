"""Records that turn out to be one orbit become one record, and nothing of either is lost."""

from dataclasses import replace
from pathlib import Path

import pytest
from sample_orbits import EIGHT, TWIN, figure_eight, hyperbolic, twin

from orbitsearch.catalog import Catalog
from orbitsearch.errors import BadRequest
from orbitsearch.identity import canonical_start
from orbitsearch.orbit import Orbit, Start, Status
from orbitsearch.refine import refine
from orbitsearch.runs import run_search
from orbitsearch.search import SearchRequest

FIRST = Start("isosceles", ("0.25", "0.5"), "7.0")
SECOND = Start("rest", ("0.2", "0.3"), "1.7")
THIRD = Start("rest", ("0.25", "0.3"), "1.9")


def found_from(*starts: Start, error: float = 1e-11) -> Orbit:
    """An orbit whose record knows these starts; an `error` of 1 makes its invariants useless."""
    stability = hyperbolic(9.5, 4.5, error=error)
    return replace(figure_eight(), start=starts[0], starts=starts, stability=stability)


@pytest.fixture
def catalog(tmp_path: Path):
    with Catalog.open(tmp_path / "orbits.db") as one:
        yield one


@pytest.fixture
def apart(catalog: Catalog) -> Catalog:
    """Two records of one orbit, each with one of its starts, filed when nothing joined them."""
    run = catalog.start_run({})
    assert catalog.add(found_from(FIRST, error=1.0), note="by hand").new
    assert catalog.add(found_from(SECOND, error=1.0), run_id=run, note="again").new
    catalog.add_source(2, "Saltmarsh", "reed-1", "rest", "0.2", "0.3", "1.7", "matched")
    return catalog


def test_a_complete_orbit_joins_them_under_the_older_number(apart: Catalog) -> None:
    created = apart.get(2).created
    assert apart.add(found_from(SECOND, FIRST)) == (1, False)
    (record,) = apart.orbits()
    assert record.id == 1
    assert record.orbit.starts == (FIRST, SECOND)
    assert record.orbit.start == FIRST
    assert [source.label for source in record.sources] == ["reed-1"]
    assert record.note == f"by hand; merged with orbit 2, filed {created}, found by run 1; again"


@pytest.mark.parametrize("verified_first", [True, False])
def test_a_verified_record_survives_one_that_was_not_confirmed(
    catalog: Catalog, verified_first: bool
) -> None:
    verified = found_from(FIRST if verified_first else SECOND, error=1.0)
    unsure = found_from(SECOND if verified_first else FIRST, error=0.5)
    unsure = replace(unsure, verdict=replace(unsure.verdict, status=Status.NOT_CONFIRMED))
    for orbit in (verified, unsure) if verified_first else (unsure, verified):
        assert catalog.add(orbit).new
    both = found_from(SECOND, FIRST, error=0.5)
    catalog.add(replace(both, verdict=unsure.verdict))
    (record,) = catalog.orbits()
    assert record.id == 1
    assert record.orbit.status == Status.VERIFIED
    assert record.orbit.stability == verified.stability
    assert record.orbit.start == verified.start
    assert set(record.orbit.starts) == {FIRST, SECOND}


def test_a_type_survives_a_record_that_lacked_it(catalog: Catalog) -> None:
    bare = replace(found_from(FIRST, error=1.0), braid=None, symmetry=None, margins=None)
    known = found_from(SECOND, error=1.0)
    for orbit in (bare, known):
        assert catalog.add(orbit).new
    catalog.add(replace(bare, starts=(FIRST, SECOND)))
    (record,) = catalog.orbits()
    assert record.orbit.braid == known.braid
    assert record.orbit.symmetry == known.symmetry
    assert catalog.untyped() == []


def test_the_old_number_leads_to_the_record(apart: Catalog) -> None:
    apart.add(found_from(SECOND, FIRST))
    assert apart.get(2) == apart.get(1)
    apart.add_source(2, "Saltmarsh", "reed-2", "rest", "0.2", "0.3", "1.7", "matched")
    assert len(apart.sources(1)) == 2
    with pytest.raises(BadRequest, match="`id` must name a record of this catalogue, got 3"):
        apart.get(3)


def test_the_old_number_is_never_given_again(apart: Catalog) -> None:
    apart.add(found_from(SECOND, FIRST))
    other = found_from(THIRD)
    assert apart.add(replace(other, scaled_period=20.0)) == (3, True)


def test_numbers_lead_on_when_the_record_is_merged_once_more(apart: Catalog) -> None:
    apart.add(found_from(THIRD, error=1.0))
    # Only within a tolerance could one orbit have three starts; the numbers still lead home.
    apart.add(found_from(THIRD, SECOND))
    assert {record.id for record in apart.orbits()} == {1, 2}
    assert apart.get(3).id == 2
    apart.add(found_from(SECOND, FIRST))
    assert [apart.get(id).id for id in (1, 2, 3)] == [1, 1, 1]


def test_equal_invariants_alone_merge_nothing(apart: Catalog) -> None:
    # The new orbit has a start of the second record only; the first merely looks like it.
    assert apart.add(found_from(SECOND)) == (2, False)
    assert {record.id for record in apart.orbits()} == {1, 2}


def test_the_figure_eight_and_its_twin_are_never_merged(catalog: Catalog) -> None:
    ids = [catalog.add(orbit).id for orbit in (figure_eight(), twin(), figure_eight(), twin())]
    assert ids == [1, 2, 1, 2]


def test_one_start_stands_for_an_orbit_whichever_was_found() -> None:
    for starts in ((FIRST, EIGHT), (EIGHT, FIRST)):
        assert canonical_start(found_from(*starts)) == EIGHT
    for starts in ((EIGHT, TWIN), (TWIN, EIGHT)):
        assert canonical_start(found_from(*starts)) == TWIN
    nearly = Start("collinear", ("0.34711688811892695", "0.4"), "7")
    for starts in ((EIGHT, nearly), (nearly, EIGHT)):
        assert canonical_start(found_from(*starts)) == nearly


def test_a_search_merges_what_it_finds_filed_twice(catalog: Catalog) -> None:
    # C. Moore, PRL 70 (1993) 3675; filed once for each of its starts, with traces that say nothing.
    eight = refine("collinear", 0.3471168881, 0.5327249454, 6.3259139829).orbit
    assert eight is not None
    unsure = replace(eight, stability=replace(eight.stability, error=1.0))
    for start in eight.starts:
        catalog.add(replace(unsure, start=start, starts=(start,)))
    assert len(list(catalog.orbits())) == 2
    request = SearchRequest("collinear", (0.3, 0.4, 0.5, 0.6), (8, 8), 12.0)
    list(run_search(catalog, request, workers=1))
    found = [record for record in catalog.orbits() if record.orbit.choreography]
    assert [record.id for record in found] == [1]
    assert len(found[0].orbit.starts) == 2
