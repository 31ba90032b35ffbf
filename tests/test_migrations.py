"""Catalogues of version 1 open as today's, with types as complete as what they stored allows.

`data/catalog_v1.sql` was written by version 1 of the schema: a search of each of three start sets
and five imported rows, of which the first two are the figure-eight and its twin (C. Moore, PRL 70
(1993) 3675; M. Suvakov, CMDA 119 (2014) 369) and the last two rest starts of X. Li & S. Liao,
New Astronomy 70 (2019) 22.
"""

import json
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest
from commands import run

from orbitsearch.catalog import Catalog
from orbitsearch.migrations import APPLICATION_ID, STEPS
from orbitsearch.orbit import Orbit
from orbitsearch.refine import verify_as_given
from orbitsearch.symmetry import REVERSALS

DUMP = Path(__file__).parent / "data" / "catalog_v1.sql"


@pytest.fixture
def old(tmp_path: Path) -> Path:
    """A catalogue file of version 1."""
    path = tmp_path / "old.db"
    connection = sqlite3.connect(path)
    connection.executescript(DUMP.read_text(encoding="utf-8"))
    connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    connection.execute("PRAGMA user_version = 1")
    connection.close()
    return path


def stored(path: Path) -> dict[int, dict[str, object]]:
    """Records of a file as they stand, by number."""
    with sqlite3.connect(path) as connection:
        rows = connection.execute("SELECT id, record FROM orbits").fetchall()
    connection.close()
    return {id: json.loads(record) for id, record in rows}


def between_mirrors(record: dict[str, object]) -> bool:
    ends = record["solution"]["condition"]  # type: ignore[index]
    return record["start"] in ("isosceles", "perpendicular") and REVERSALS[ends].plane == "mirror"


def test_nothing_that_was_stored_is_lost_or_changed(old: Path) -> None:
    before = stored(old)
    with sqlite3.connect(old) as connection:
        starts = connection.execute("SELECT * FROM starts").fetchall()
        sources = connection.execute("SELECT * FROM sources").fetchall()
    connection.close()
    with Catalog.open(old) as catalog:
        records = {record.id: record for record in catalog.orbits()}
        assert catalog._connection.execute("SELECT * FROM starts").fetchall() == starts
        assert catalog._connection.execute("SELECT * FROM sources").fetchall() == sources
        assert catalog._connection.execute("PRAGMA user_version").fetchone() == (len(STEPS),)
    assert records.keys() == before.keys()
    for id, record in stored(old).items():
        for key in before[id].keys() - {"word", "cycle"}:
            assert record[key] == before[id][key]


def test_types_are_those_that_are_computed_afresh(old: Path) -> None:
    before = stored(old)
    with Catalog.open(old) as catalog:
        records = list(catalog.orbits())
        untyped = catalog.untyped()
    assert len(records) == 18
    assert untyped == [id for id, record in before.items() if between_mirrors(record)]
    for record in records:
        orbit = record.orbit
        fresh = verify_as_given(orbit.start.kind, orbit.start.p, orbit.start.q, orbit.period)
        assert isinstance(fresh, Orbit)
        assert (orbit.word, orbit.cycle) == (fresh.word, fresh.cycle)
        if record.id not in untyped:
            assert orbit.braid == fresh.braid
            assert orbit.symmetry is not None
            assert fresh.symmetry is not None
            assert orbit.symmetry.names == fresh.symmetry.names
            assert orbit.symmetry.reversals == fresh.symmetry.reversals


def test_migrated_orbits_are_grouped_and_found(capsys, old: Path) -> None:
    listed = run(capsys, "list", "--symmetry", "choreography", "--catalog", str(old), "--json").json
    assert [orbit["id"] for orbit in listed] == [1]
    kinds = run(capsys, "kinds", "--catalog", str(old), "--json").json
    eight = next(kind for kind in kinds["kinds"] if kind["trace"] == 18)
    assert (eight["count"], eight["choreographies"], eight["id"]) == (2, 1, 1)
    assert sum(kind["count"] for kind in kinds["kinds"]) + len(kinds["untyped"]) == 18
    said = run(capsys, "kinds", "--catalog", str(old)).out
    assert f"orbitsearch verify {kinds['untyped'][0]}" in said


def test_verifying_a_record_fills_in_its_type_and_nothing_else(capsys, old: Path) -> None:
    with Catalog.open(old) as catalog:
        id = catalog.untyped()[0]
        before = catalog.get(id)
    assert before.orbit.braid is None
    assert "not known" in run(capsys, "show", str(id), "--catalog", str(old)).out
    ran = run(capsys, "verify", str(id), "--catalog", str(old))
    assert ran.code == 0
    assert "that is filled in now" in ran.out
    with Catalog.open(old) as catalog:
        after = catalog.get(id)
        assert id not in catalog.untyped()
    assert after.orbit.braid is not None
    assert after.orbit.symmetry is not None
    assert after.orbit.margins is not None
    assert after.orbit.verdict == before.orbit.verdict
    assert after.orbit.starts == before.orbit.starts
    assert (after.created, after.run_id) == (before.created, before.run_id)


def test_another_search_fills_in_what_it_meets_and_files_nothing_twice(capsys, old: Path) -> None:
    window = ("--start", "isosceles", "--grid", "16", "--scaled-period", "20", "--workers", "1")
    with Catalog.open(old) as catalog:
        untyped = [catalog.get(id) for id in catalog.untyped()]
    open_before = {record.id for record in untyped if record.orbit.start.kind == "isosceles"}
    assert len(open_before) >= 4
    found = run(capsys, "search", *window, "--catalog", str(old), "--json").json
    assert found["new"] == []
    assert open_before <= set(found["known"])
    with Catalog.open(old) as catalog:
        assert not open_before & set(catalog.untyped())


@pytest.mark.parametrize(
    "damage",
    [
        "record = '{'",
        "record = '[]'",
        'record = replace(record, \'"syzygies":"\', \'"syzygies":"X\')',
        'record = replace(record, \'"syzygies":"\', \'"syzygies":"1\')',
    ],
)
def test_a_damaged_record_does_not_lock_up_the_others(capsys, old: Path, damage: str) -> None:
    with sqlite3.connect(old) as connection:
        connection.execute(f"UPDATE orbits SET {damage} WHERE id = 3")
    connection.close()
    with Catalog.open(old) as catalog:
        assert 3 in catalog.untyped()
        assert catalog.get(1).orbit.braid is not None
    assert run(capsys, "show", "1", "--catalog", str(old)).code == 0


def test_two_programs_may_migrate_one_file_at_once(old: Path) -> None:
    code = f"from orbitsearch.catalog import Catalog; Catalog.open({str(old)!r}).close()"
    both = [subprocess.Popen([sys.executable, "-c", code]) for _ in range(2)]
    assert [one.wait(timeout=60) for one in both] == [0, 0]
    with Catalog.open(old) as catalog:
        assert sum(kind.count for kind in catalog.kinds()) + len(catalog.untyped()) == 18
