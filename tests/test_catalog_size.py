"""100,000 records stay quick: budgets on SQLite's plan, statements and steps, not on a clock."""

import math
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from itertools import islice

import pytest
from sample_orbits import figure_eight, numbered

from orbitsearch.catalog import Catalog
from orbitsearch.catalog_query import PAGE, page_query

MANY = 100_000


@pytest.fixture(scope="module")
def many(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Catalog]:
    """100,000 records that differ from a real one in T*, word, cycle, stability and start."""
    with Catalog.open(tmp_path_factory.mktemp("many") / "orbits.db") as catalog:
        catalog.add(numbered(1))
        connection = catalog._connection
        columns = [row[1] for row in connection.execute("PRAGMA table_info(orbits)")]
        changed = {
            "id": "n",
            "scaled_period": "10 + (n * 7919 % 30011) / 1000.0",
            "word": "CASE n % 1000 WHEN 0 THEN 'abAB' ELSE 'aabaBaB' END",
            "cycle": "CASE n % 1000 WHEN 0 THEN '123123' ELSE '1213' || n END",
            "linearly_stable": "n % 500 = 0",
        }
        numbers = (
            f"WITH RECURSIVE k(n) AS (SELECT 2 UNION ALL SELECT n + 1 FROM k WHERE n < {MANY})"
        )
        connection.execute("BEGIN")
        connection.execute(
            f"{numbers} INSERT INTO orbits ({', '.join(columns)}) SELECT "
            f"{', '.join(changed.get(c, c) for c in columns)} FROM k, orbits WHERE id = 1"
        )
        connection.execute(
            f"{numbers} INSERT INTO starts (orbit_id, kind, p, q, period, p_real, q_real, "
            "period_real, is_primary) SELECT n, kind, n / 1e6, q, period, n / 1e6, q_real, "
            "period_real, is_primary FROM k, starts WHERE orbit_id = 1 AND is_primary"
        )
        # A thousand types, and one choreography in a hundred.
        connection.execute(
            f"{numbers} INSERT INTO kinds SELECT n, 'pseudo-Anosov', 'LR', 6 * (n % 1000), "
            "CASE n % 100 WHEN 0 THEN ' choreography cyclic ' ELSE ' mirror ' END FROM k"
        )
        connection.execute("COMMIT")
        yield catalog


def plan(catalog: Catalog, **conditions: object) -> str:
    """How SQLite means to read a page."""
    statement, values = page_query(**conditions)  # type: ignore[arg-type]
    rows = catalog._connection.execute(
        f"EXPLAIN QUERY PLAN {statement}", (*values, -math.inf, 0, PAGE)
    )
    return "\n".join(row[3] for row in rows)


@pytest.mark.parametrize(
    ("conditions", "index"),
    [
        ({}, "orbits_by_period (scaled_period>"),
        ({"max_scaled_period": 20.0}, "orbits_by_period (scaled_period>? AND scaled_period<?"),
        ({"word": "abAB"}, "orbits_by_cycle (cycle=? AND scaled_period>"),
        ({"stable": True, "start": "rest"}, "orbits_by_period (scaled_period>"),
        ({"status": "verified", "choreography": True}, "orbits_by_period (scaled_period>"),
        ({"braid": "(LR)^3", "symmetry": "mirror"}, "orbits_by_period (scaled_period>"),
    ],
    ids=str,
)
def test_pages_come_from_an_index_already_in_order(
    many: Catalog, conditions: dict[str, object], index: str
) -> None:
    steps = plan(many, **conditions)
    assert f"SEARCH orbits USING INDEX {index}" in steps
    assert "TEMP B-TREE" not in steps
    assert "SCAN orbits" not in steps


@contextmanager
def counted(catalog: Catalog) -> Iterator[Callable[[], int]]:
    """Count the steps of SQLite's machine, in hundreds: a budget that no clock has a part in."""
    hundreds = 0

    def step() -> int:
        nonlocal hundreds
        hundreds += 1
        return 0

    catalog._connection.set_progress_handler(step, 100)
    try:
        yield lambda: 100 * hundreds
    finally:
        catalog._connection.set_progress_handler(None, 0)


@contextmanager
def told(catalog: Catalog) -> Iterator[list[str]]:
    """List the statements that are run."""
    statements: list[str] = []
    catalog._connection.set_trace_callback(statements.append)
    try:
        yield statements
    finally:
        catalog._connection.set_trace_callback(None)


def test_the_first_records_cost_one_page(many: Catalog) -> None:
    with counted(many) as steps, told(many) as statements:
        assert len(list(islice(many.orbits(), 20))) == 20
    assert len(statements) == 1
    assert 0 < steps() < 200 * PAGE


def test_a_word_costs_what_it_finds(many: Catalog) -> None:
    with counted(many) as steps:
        found = list(many.orbits(word="BAba"))
    assert [record.id % 1000 for record in found] == [0] * (MANY // 1000)
    assert 0 < steps() < 200 * len(found)


def test_a_whole_list_costs_a_statement_a_page(many: Catalog) -> None:
    with told(many) as statements:
        records = list(islice(many.orbits(), 4 * PAGE + 10))
    assert len(statements) == 5
    # Three records to each T*, so pages end between equal ones.
    rows = many._connection.execute(
        "SELECT id FROM orbits ORDER BY scaled_period, id LIMIT ?", (4 * PAGE + 10,)
    )
    assert [record.id for record in records] == [row[0] for row in rows]


def test_cycles_have_an_index_of_their_own(many: Catalog) -> None:
    with told(many) as statements:
        many.find_same(numbered(1))
    (lookup,) = (statement for statement in statements if "cycle =" in statement)
    (row,) = many._connection.execute(f"EXPLAIN QUERY PLAN {lookup}")
    assert "USING COVERING INDEX orbits_by_cycle (cycle=? AND scaled_period>" in row[3]


def test_types_are_grouped_at_a_few_steps_an_orbit(many: Catalog) -> None:
    with counted(many) as steps:
        kinds = many.kinds()
    assert len(kinds) == 1001
    assert sum(kind.count for kind in kinds) == MANY
    assert steps() < 100 * MANY


def test_orbits_of_a_type_are_found_in_one_pass(many: Catalog) -> None:
    with counted(many) as steps:
        found = list(many.orbits(symmetry="choreography", max_scaled_period=11.0))
    assert found
    assert all(record.id % 100 == 0 for record in found)
    within = many._connection.execute("SELECT count(*) FROM orbits WHERE scaled_period <= 11")
    assert steps() < 100 * within.fetchone()[0] + 200 * len(found)


def test_a_filter_finds_in_the_whole_catalogue(many: Catalog) -> None:
    stable = list(many.orbits(stable=True))
    assert sorted(record.id for record in stable) == list(range(500, MANY + 1, 500))
    with counted(many) as steps:
        assert list(many.orbits(stable=True, max_scaled_period=9.5)) == []
    assert steps() < 2000


def test_filing_into_a_large_catalogue_reads_few_rows(many: Catalog) -> None:
    orbit = numbered(2)
    with counted(many) as steps:
        added = many.add(replace(orbit, starts=(orbit.start,)))
    assert added.new
    assert 0 < steps() < 5000
    assert many.find_same(figure_eight()) is None
