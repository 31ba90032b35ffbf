"""Tables in and out through the command line: import and export."""

import csv
import io
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from commands import ROOT, program, run
from published import EIGHT_TWIN, LI_LIAO_2017, LI_LIAO_2019

from orbitsearch.catalog import Catalog

# Rows as published (sources in tests/published.py), in ten digits, in five, and two that are wrong.
TABLE = f"""\
label,start,p,q,period,remark
ten,collinear,{LI_LIAO_2017[0].a},{LI_LIAO_2017[0].b},{LI_LIAO_2017[0].period},"as printed, x"
eight,collinear,0.34711,0.53272,6.3250,a turn of the figure-eight
unbound,collinear,0.9,0.9,6.3250,E > 0
nothing,collinear,0.3,0.1,1.0,no orbit is near
"""


def test_import_files_good_rows_and_lists_why_others_failed(capsys, catalog: Path) -> None:
    table = catalog.with_name("table.csv")
    table.write_text(TABLE, encoding="utf-8")
    ran = run(capsys, "import", table, "--source", "Moore 1993", "--catalog", catalog)
    assert (ran.code, ran.err) == (1, "")
    lines = ran.out.splitlines()
    assert lines[0].startswith("line 2, ten: orbit 3 (new): parameters moved by ")
    # The catalogue has the figure-eight already, whichever of its two numbers that is.
    with Catalog.open(catalog) as filed:
        eight = next(r.id for r in filed.orbits() if r.orbit.choreography)
    assert lines[1].startswith(f"line 3, eight: orbit {eight}: parameters moved by ")
    assert "must be bound, E < 0" in lines[2]
    assert lines[3].startswith("line 5, nothing: failed: no orbit found: ")
    assert lines[4] == "2 rows filed (1 new orbits), 2 failed"
    shown = run(capsys, "show", 3, "--catalog", catalog)
    assert "published: Moore 1993 ten (0.3068934205, 0.125506567, T = 6.2346748391)" in shown.out
    sources = run(capsys, "show", eight, "--catalog", catalog, "--json").json["sources"]
    assert [source["label"] for source in sources] == ["eight"]
    with Catalog.open(catalog) as filed:
        assert [source.label for source in filed.sources(None)] == ["unbound", "nothing"]


def test_import_in_json_lists_every_row(capsys, tmp_path: Path) -> None:
    table = tmp_path / "table.csv"
    table.write_text(TABLE, encoding="utf-8")
    ran = run(
        capsys, "import", table, "--source", "somewhere", "--catalog", tmp_path / "c.db", "--json"
    )
    assert (ran.code, ran.err) == (1, "")
    assert [(row["label"], row["id"], row["new"]) for row in ran.json] == [
        ("ten", 1, True), ("eight", 2, True), ("unbound", None, False), ("nothing", None, False),
    ]  # fmt: skip
    assert [row["status"] for row in ran.json[:2]] == ["verified", "verified"]
    assert ran.json[0]["parameters"] == ["0.3068934205", "0.125506567"]
    assert all(row["message"] for row in ran.json)


def test_import_of_good_rows_only_exits_0(capsys, tmp_path: Path) -> None:
    row = LI_LIAO_2019[0]
    table = tmp_path / "table.csv"
    table.write_text(f"start,p,q,period\nrest,{row.x},{row.y},{row.period}\n", encoding="utf-8")
    ran = run(capsys, "import", table, "--source", "Li & Liao", "--catalog", tmp_path / "c.db")
    assert (ran.code, ran.err) == (0, "")
    assert ran.out.splitlines()[-1] == "1 rows filed (1 new orbits), 0 failed"


def test_export_then_import_gives_the_same_orbits(capsys, catalog: Path) -> None:
    table = catalog.with_name("out.csv")
    again = catalog.with_name("again.db")
    ran = run(
        capsys, "export", "--format", "csv", "--output", table, "--catalog", catalog, "--json"
    )
    assert ran.json == {"format": "csv", "orbits": 2, "output": str(table)}
    assert run(capsys, "import", table, "--source", "own", "--catalog", again).code == 0
    with Catalog.open(catalog) as one, Catalog.open(again) as other:
        for before, after in zip(one.orbits(), other.orbits(), strict=True):
            assert after.orbit.start.p == pytest.approx(before.orbit.start.p, abs=1e-12)
            assert after.orbit.scaled_period == pytest.approx(before.orbit.scaled_period, rel=1e-13)
            assert other.find_same(before.orbit) == after.id


@pytest.mark.parametrize("kind", ["csv", "json", "latex"])
def test_export_to_the_screen_and_to_a_file_are_the_same(capsys, catalog: Path, kind) -> None:
    to = ("export", "--format", kind, "--catalog", catalog)
    screen = run(capsys, *to).out
    file = catalog.with_name("out")
    assert run(capsys, *to, "--output", file).out == f"2 orbits written to {file}\n"
    assert file.read_text(encoding="utf-8") == screen
    wrapped = run(capsys, *to, "--json").json
    assert wrapped["text"].rstrip("\n") == screen.rstrip("\n")
    if kind == "csv":
        assert [row["word"] for row in csv.DictReader(io.StringIO(screen))] == ["abAB", "abAB"]
    elif kind == "json":
        assert len(json.loads(screen)) == 2
    else:
        assert screen.startswith(r"\begin{tabular}")
        assert repr(EIGHT_TWIN.a)[:11] in screen


def test_an_import_goes_on_when_its_reader_has_gone(tmp_path: Path) -> None:
    rows = "".join(f"collinear,0.3471,0.5327,6.3259,row {n}\n" for n in range(5))
    (tmp_path / "rows.csv").write_text(f"start,p,q,period,label\n{rows}", encoding="utf-8")
    ran = program("import", "rows.csv", "--source", "test", "--catalog", "c.db", cwd=tmp_path)
    assert ran.stdout is not None
    ran.stdout.close()
    assert ran.stderr is not None
    with ran.stderr as err:
        assert err.read() == ""
    assert ran.wait() == 0
    with Catalog.open(tmp_path / "c.db") as catalog:
        assert len(catalog.sources(1)) == 5


def test_letters_that_the_terminal_lacks_are_escaped(tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "orbitsearch", "starts"],
        cwd=tmp_path, capture_output=True, text=True, check=True,
        env={**os.environ, "PYTHONPATH": str(ROOT), "PYTHONIOENCODING": "ascii"},
    )  # fmt: skip
    assert "\\u03b7" in done.stdout
