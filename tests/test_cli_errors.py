"""A request that cannot be carried out: one line that says why, exit code 2, nothing written."""

import os
import re
import sqlite3
from pathlib import Path

import pytest
from commands import EIGHT_GUESS, EIGHT_WINDOW, complaint, program, run
from sample_orbits import figure_eight

from orbitsearch.catalog import Catalog
from orbitsearch.migrations import STEPS

HEADING = "start,p,q,period\n"


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Empty working folder: whatever a refused request writes shows up here."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.fixture
def filed(tmp_path: Path) -> Path:
    """Catalogue of one orbit."""
    path = tmp_path / "orbits.db"
    with Catalog.open(path) as catalog:
        catalog.add(figure_eight())
    return path


def window(*numbers: object, **options: object) -> list[object]:
    more = [part for name, value in options.items() for part in (f"--{name}", value)]
    return ["search", "--window", *numbers, *more]


BAD_SEARCHES = {
    "reversed first range": (window(0.6, 0, 0, 0.6), "`window` must go from low to high in a: 0.6"),
    "reversed second range": (window(0, 0.6, 0.6, 0.6), "from low to high in b: 0.6 to 0.6"),
    "unbound": (window(5, 6, 5, 6), "`window` must hold bound starts .* 5 6 5 6; try 0 0.6 0 0.6"),
    "far away": (window(1e200, 2e200, 0, 1), "`window` must hold bound starts"),
    "outside the domain": (window(-2, -1, -2, -1), "`window` must hold bound starts"),
    "nan": (window("nan", 0.6, 0, 0.6), "`window` must hold finite numbers: nan"),
    "infinite": (window(0, "inf", 0, 0.6), "`window` must hold finite numbers: 0 inf"),
    "no number": (window(0, "wide", 0, 0.6), "--window: invalid float value: 'wide'"),
    "three numbers": (window(0, 0.6, 0), "--window: expected 4 arguments"),
    "a grid of one": (["search", "--grid", 1], "`grid` must be at least 2 each way: 1 x 1"),
    "a negative grid": (["search", "--grid", 5, -5], "`grid` must be at least 2 each way: 5 x -5"),
    "a huge grid": (["search", "--grid", 10**5], r"must not pass 50,000,000 starts: 100000 x 1000"),
    "a grid of three": (["search", "--grid", 3, 4, 5], "`grid` takes one number or two: 3 4 5"),
    "half a start": (["search", "--grid", 2.5], "--grid: invalid int value: '2.5'"),
    "no such set": (["search", "--start", "square"], "one of collinear, isosceles, .*: 'square'"),
    "T* of 0": (["search", "--scaled-period", 0], "`scaled-period` must be above 0 .*: 0"),
    "T* of nan": (["search", "--scaled-period", "nan"], "`scaled-period` must be .*: nan"),
    "T* too large": (["search", "--scaled-period", 1e4], "at most 1000: 10000"),
    "no workers": (["search", "--workers", 0], "`workers` must be at least 1: 0"),
}

BAD_GUESSES = {
    "unbound": (("collinear", 0.9, 0.9, 6), "`a`, `b` = 0.9, 0.9 must be bound, E < 0: E = 2.36"),
    "outside": (("rest", 0.3, 0.0, 6), "`x`, `y` = 0.3, 0.0 lie outside the domain"),
    "not a number": (("isosceles", "nan", 0.1, 6), "`eta` must be a finite number: nan"),
    "infinite": (("rest", 0.1, "inf", 6), "`y` must be a finite number: inf"),
    "period nan": (("collinear", 0.3, 0.5, "nan"), "`period` must be a finite number: nan"),
    "period 0": (("collinear", 0.3, 0.5, 0), "`period` must be positive: 0.0; give the period"),
    "negative period": (("perpendicular", 0.3, 0.5, -2), "`period` must be positive: -2.0"),
    "no such set": (("square", 0.3, 0.5, 6), "`start` must be one of collinear, .*: 'square'"),
    "huge": (("collinear", 1e200, 0, 6), "must be bound, E < 0: E = inf"),
    "endless": (("collinear", 0.3, 0.5, 1e9), r"`period` must be at most T. = 10000: 1e.09"),
    "text": (("collinear", "x", 0.5, 6), "argument --at: invalid float value: 'x'"),
}

BAD_LINES = {
    "no command": ([], "COMMAND; see `orbitsearch --help`"),
    "no such command": (["find"], "invalid choice: 'find'"),
    "no such option": (["list", "--fast"], "unrecognized arguments: --fast"),
    "half an option": (["list", "--max", 3], "unrecognized arguments: --max 3"),
    "refine without guess": (["refine"], "are required: --start, --at, --period; see `orbitsearch"),
    "verify nothing": (["verify"], "`verify` takes a number ID, or `--start`, `--at` and"),
    "verify two things": (["verify", 1, *EIGHT_GUESS], "`verify` takes a number ID, or"),
    "verify half a guess": (["verify", *EIGHT_GUESS[:5]], "`verify` needs all of `--start`"),
    "show no number": (["show", "one"], "argument ID: invalid int value: 'one'"),
    "export to what": (["export"], "--format"),
    "export to xml": (["export", "--format", "xml"], "invalid choice: 'xml'"),
}


def no_traces(folder: Path) -> None:
    assert [*folder.iterdir()] == []


@pytest.mark.parametrize(("line", "reason"), BAD_SEARCHES.values(), ids=BAD_SEARCHES)
def test_a_bad_search_is_refused_before_anything_is_written(capsys, folder, line, reason) -> None:
    assert re.search(reason, complaint(run(capsys, *line)))
    no_traces(folder)


@pytest.mark.parametrize("command", ["refine", "verify"])
@pytest.mark.parametrize(("guess", "reason"), BAD_GUESSES.values(), ids=BAD_GUESSES)
def test_a_bad_guess_is_refused(capsys, folder, command, guess, reason) -> None:
    start, p, q, period = guess
    line = [command, "--start", start, "--at", p, q, "--period", period]
    said = complaint(run(capsys, *line, *(["--keep"] if command == "refine" else [])))
    assert re.search(reason, said)
    no_traces(folder)


@pytest.mark.parametrize(("line", "reason"), BAD_LINES.values(), ids=BAD_LINES)
def test_a_line_that_makes_no_sense_is_refused(capsys, folder, line, reason) -> None:
    said = complaint(run(capsys, *line))
    assert re.search(reason, said)
    no_traces(folder)


@pytest.mark.parametrize("command", ["list", "runs", "show 1", "verify 1", "export --format csv"])
def test_without_a_catalogue_there_is_nothing_to_read_and_none_is_made(
    capsys, folder, command
) -> None:
    said = complaint(run(capsys, *command.split(), "--catalog", "missing/none.db"))
    assert "there is no catalogue missing" in said
    assert "check `--catalog`" in said
    no_traces(folder)


@pytest.mark.parametrize("command", ["show", "verify"])
@pytest.mark.parametrize("number", [2, 0, -1, 10**30])
def test_an_unknown_number_is_refused(capsys, filed: Path, command, number) -> None:
    said = complaint(run(capsys, command, number, "--catalog", filed))
    assert f"`id` must name a record of this catalogue, got {number}: list the catalogue" in said


@pytest.mark.parametrize(
    ("filters", "reason"),
    [
        (["--word", "abc"], "`--word` must use only the letters a, b, A, B, got 'c' at place 3"),
        (["--max-scaled-period", "nan"], "`--max-scaled-period` must be positive, got nan"),
        (["--max-scaled-period", "-1"], "`--max-scaled-period` must be positive, got -1"),
        (["--start", "square"], "`start` must be one of collinear, isosceles"),
    ],
)
def test_a_bad_filter_is_refused(capsys, filed: Path, filters, reason) -> None:
    assert reason in complaint(run(capsys, "list", "--catalog", filed, *filters))


COMMANDS_WITH_CATALOG = {
    "search": ["search", *EIGHT_WINDOW, "--workers", 1],
    "refine": ["refine", *EIGHT_GUESS, "--keep"],
    "import": ["import", "table.csv", "--source", "somewhere"],
    "list": ["list"],
    "show": ["show", 1],
    "verify": ["verify", 1],
    "runs": ["runs"],
    "export": ["export", "--format", "json"],
}
WRITERS = [name for name in COMMANDS_WITH_CATALOG if name in ("search", "refine", "import")]


def refused(capsys, name: str, catalog: Path) -> str:
    if name == "import":
        Path("table.csv").write_text(f"{HEADING}rest,0.2,0.2,1.7\n", encoding="utf-8")
    return complaint(run(capsys, *COMMANDS_WITH_CATALOG[name], "--catalog", catalog))


@pytest.mark.parametrize("name", COMMANDS_WITH_CATALOG)
def test_a_file_that_is_no_catalogue_is_left_alone(capsys, folder, name) -> None:
    text = folder / "notes.txt"
    text.write_text("not a catalogue\n" * 100, encoding="utf-8")
    assert "must be an SQLite file" in refused(capsys, name, text)
    assert text.read_text(encoding="utf-8") == "not a catalogue\n" * 100
    other = folder / "other.db"
    connection = sqlite3.connect(other)
    connection.execute("CREATE TABLE books (title TEXT)")
    connection.close()
    assert "is an SQLite file of another program" in refused(capsys, name, other)
    assert "is a folder" in refused(capsys, name, folder)


@pytest.mark.parametrize("name", COMMANDS_WITH_CATALOG)
def test_a_catalogue_of_a_newer_version_is_left_alone(capsys, folder, filed, name) -> None:
    connection = sqlite3.connect(filed)
    connection.execute(f"PRAGMA user_version = {len(STEPS) + 1}")
    connection.close()
    said = refused(capsys, name, filed)
    assert f"has schema version {len(STEPS) + 1}, this program knows {len(STEPS)}: install" in said


@pytest.mark.parametrize("name", WRITERS)
def test_a_folder_that_cannot_be_made_is_refused(capsys, folder, name) -> None:
    (folder / "file").write_text("", encoding="utf-8")
    assert "cannot be made" in refused(capsys, name, folder / "file" / "orbits.db")


@pytest.mark.skipif(
    not hasattr(os, "geteuid") or os.geteuid() == 0, reason="root may write anywhere"
)
@pytest.mark.parametrize("name", WRITERS)
def test_a_folder_without_permission_is_refused(capsys, folder, name) -> None:
    locked = folder / "locked"
    locked.mkdir(mode=0o500)
    assert "not writable" in refused(capsys, name, locked / "orbits.db")


BAD_TABLES = {
    "missing columns": ("start,p\nrest,0.2\n", "line 1 has no column `q`, only start, p: add it"),
    "text in numbers": (f"{HEADING}rest,0.2,wide,1.7\n", "line 2 .* in column `q`, got 'wide'"),
    "nan": (f"{HEADING}rest,0.2,nan,1.7\n", "line 2 must have a finite .* `q`, got 'nan'"),
    "negative period": (f"{HEADING}rest,0.2,0.2,-1\n", "line 2 must have a positive period"),
    "a short row": (f"{HEADING}rest,0.2\n", "line 2 has 2 cells, the heading 4"),
    "empty": ("", "the table is empty"),
    "binary": (b"\xff\xfe\x00", "is no UTF-8 text"),
}


@pytest.mark.parametrize(("text", "reason"), BAD_TABLES.values(), ids=BAD_TABLES)
def test_a_bad_table_is_refused_whole(capsys, folder, text, reason) -> None:
    table = Path("table.csv")
    table.write_bytes(text if isinstance(text, bytes) else text.encode())
    said = complaint(run(capsys, "import", table, "--source", "somewhere"))
    assert re.search(reason, said)
    assert [*folder.iterdir()] == [folder / "table.csv"]


def test_a_table_that_is_not_there_and_a_source_without_name_are_refused(capsys, folder) -> None:
    said = complaint(run(capsys, "import", "none.csv", "--source", "somewhere"))
    assert "table none.csv cannot be read" in said
    Path("table.csv").write_text(HEADING, encoding="utf-8")
    said = complaint(run(capsys, "import", "table.csv", "--source", " "))
    assert "`source` must not be empty" in said
    assert not (folder / "catalog").exists()


@pytest.mark.parametrize("output", ["no/folder/here.csv", "."])
def test_an_output_that_cannot_be_written_is_refused(capsys, folder, filed, output) -> None:
    line = ("export", "--format", "csv", "--catalog", filed, "--output", output)
    said = complaint(run(capsys, *line))
    assert f"`output` must be a file that can be written: {output}" in said
    assert complaint(run(capsys, *line, "--json")) == said


def test_as_a_program_a_refused_request_is_one_line_too(tmp_path: Path) -> None:
    for line in (window(5, 6, 5, 6), ["show", 10**30], ["refine", "--start", "square"]):
        with program(*line, cwd=tmp_path) as started:
            out, err = started.communicate()
        assert (started.returncode, out) == (2, "")
        assert re.fullmatch(r"orbitsearch: .+\n", err)
    no_traces(tmp_path)


def test_negative_numbers_with_exponents_are_numbers(folder: Path, capsys) -> None:
    guess = ["--at", "-3.471e-1", "5.327e-1", "--period", "6.3259"]
    code, out, _ = run(capsys, "refine", "--start", "collinear", *guess)
    assert code == 0
    assert "in standard form 0.3471 0.5327" in out
    said = complaint(run(capsys, "search", "--window", "-inf", 1, 0, 1))
    assert "`window` must hold finite numbers: -inf" in said
