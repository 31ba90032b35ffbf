"""Tables: no digit is lost on the way out or in, and bad tables say where they are bad."""

import csv
import io
import json
import math
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_orbits import EIGHT, figure_eight, numbered, twin

from orbitsearch.errors import BadTable
from orbitsearch.orbit import Orbit
from orbitsearch.records import Record, Source
from orbitsearch.tables import (
    COLUMNS,
    read_starts_csv,
    to_csv,
    to_json,
    to_latex,
    to_text,
)

SOURCE = Source(4, 1, "Moore 1993", "eight", "collinear", "0.347", "0.533", "6.326", "verified")
HEADING = "start,p,q,period\n"


def record(id: int, orbit: Orbit, note: str = "", sources: tuple[Source, ...] = ()) -> Record:
    """Record of an orbit."""
    return Record(id, orbit, "2026-01-02T03:04:05+00:00", "1.0", None, note, sources)


RECORDS = [
    record(1, figure_eight(), 'with "quotes", commas\nand a second line', (SOURCE,)),
    record(2, twin()),
    record(17, numbered(30)),
]


def test_csv_has_every_digit_under_its_heading() -> None:
    rows = list(csv.DictReader(io.StringIO(to_csv(RECORDS))))
    assert list(rows[0]) == list(COLUMNS)
    assert (rows[0]["p"], rows[0]["q"]) == EIGHT.parameters
    assert rows[0]["period"] == EIGHT.period
    assert rows[0]["note"] == RECORDS[0].note
    assert rows[0]["sources"] == "Moore 1993 eight"
    assert [row["choreography"] for row in rows] == ["yes", "no", "yes"]
    assert [int(row["word_length"]) for row in rows] == [len(r.orbit.word) for r in RECORDS]
    for row, one in zip(rows, RECORDS, strict=True):
        assert float(row["scaled_period"]) == one.orbit.scaled_period
        assert float(row["energy"]) == one.orbit.energy
        assert float(row["max_multiplier"]) == one.orbit.stability.max_multiplier
        assert tuple(map(float, row["angles"].split())) == one.orbit.stability.angles


def test_csv_is_read_back_as_starts() -> None:
    rows = read_starts_csv(to_csv(RECORDS))
    starts = [one.orbit.start for one in RECORDS]
    assert [(r.start, (r.p, r.q), r.period) for r in rows] == [
        (s.kind, s.parameters, s.period) for s in starts
    ]
    # The first record's note fills a line of its own.
    assert [row.line for row in rows] == [2, 4, 5]


def test_csv_of_nothing_is_a_heading_that_reads_back_as_nothing() -> None:
    assert to_csv([]).strip() == ",".join(COLUMNS)
    assert read_starts_csv(to_csv([])) == []


def test_json_reads_back_as_the_orbit() -> None:
    values = json.loads(to_json(RECORDS))
    assert [value["id"] for value in values] == [1, 2, 17]
    assert values[0]["parameters"] == list(EIGHT.parameters)
    assert values[0]["sources"][0]["citation"] == "Moore 1993"
    # The second check has no value here, null there; all else is equal.
    values[2]["verdict"]["checks"].pop()
    orbit = RECORDS[2].orbit
    verdict = replace(orbit.verdict, checks=orbit.verdict.checks[:1])
    assert Orbit.from_json(values[2]) == replace(orbit, verdict=verdict)


def test_json_has_null_where_a_number_is_not_finite() -> None:
    odd = replace(figure_eight(), closure=math.inf)
    (value,) = json.loads(to_json([record(1, odd)]))
    assert value["closure"] is None
    assert value["verdict"]["checks"][1]["value"] is None
    assert value["energy"] == figure_eight().energy


def test_latex_has_booktabs_rules_and_all_digits() -> None:
    lines = to_latex(RECORDS).splitlines()
    assert lines[0] == r"\begin{tabular}{rlllllllllll}"
    assert [i for i, line in enumerate(lines) if line.endswith("rule")] == [1, 3, 7]
    assert lines[-1] == r"\end{tabular}"
    cells = [cell.strip() for cell in lines[4].removesuffix(r"\\").split("&")]
    assert cells[:5] == ["1", "collinear", *EIGHT.parameters, EIGHT.period]
    assert cells[5:8] == ["9.237681251", "0", "abAB"]
    assert cells[8:] == [r"(LR)$^{3}$", "0", "choreography, mirror", "elliptic-elliptic"]
    assert RECORDS[2].orbit.word in lines[6]


def test_text_has_a_line_to_each_record_and_cuts_long_words() -> None:
    lines = to_text(RECORDS).splitlines()
    assert len(lines) == 2 + len(RECORDS)
    first = ["1", "collinear", "0.3471168881", "0.5327249454", "6.325913983", "9.237681251"]
    assert lines[2].split()[:8] == [*first, "0", "abAB"]
    assert "abABabABabABabAB... (128)" in lines[4]
    assert max(map(len, lines)) < 170


def test_a_table_of_nothing_is_a_heading() -> None:
    assert to_text([]).split()[:2] == ["id", "start"]
    assert len(to_text([]).splitlines()) <= 3
    lines = to_latex([]).splitlines()
    assert lines[0] == r"\begin{tabular}{rlllllllllll}"
    assert all(line.count("&") == 11 for line in lines if "&" in line)


decimals = st.from_regex(
    r"[+-]?([0-9]{1,40}\.?[0-9]{0,40}|\.[0-9]{1,40})(e-?[0-9]{1,2})?", fullmatch=True
)


@given(
    decimals, decimals, decimals.filter(lambda t: float(t) > 0), st.text("a,\"\n ;'é", max_size=9)
)
def test_numbers_come_in_as_they_are_written(p: str, q: str, period: str, label: str) -> None:
    text = io.StringIO()
    csv.writer(text).writerows(
        [("label", "period", "extra", "start", "q", "p"), (label, period, "x", "rest", q, p)]
    )
    (row,) = read_starts_csv(text.getvalue())
    assert (row.p, row.q, row.period, row.start) == (p, q, period, "rest")
    assert row.label == label.replace("\r\n", "\n").strip()
    assert row.line == 2


def test_a_file_of_a_spreadsheet_is_read(tmp_path: Path) -> None:
    path = tmp_path / "starts.csv"
    path.write_bytes(b"\xef\xbb\xbfstart, p, q, period\r\n\r\nrest, 0.1, 0.2, 3\r\n")
    (row,) = read_starts_csv(path)
    assert (row.line, row.start, row.p, row.q, row.period, row.label) == (
        3, "rest", "0.1", "0.2", "3", "",
    )  # fmt: skip


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", r"^the table is empty: it needs a heading with the columns start, p, q, period$"),
        (" \n\n", r"^the table is empty: "),
        ("start,p,period\n", r"^line 1 has no column `q`, only start, p, period: add it"),
        ("start;p;q;period\n", r"^line 1 has no column `start`, only start;p;q;period: add"),
        ("start,p,q,p,period\n", r"^line 1 has column `p` more than once: keep one"),
        (HEADING + "rest,1,2\n", r"^line 2 has 3 cells, the heading 4: separate"),
        (HEADING + "rest,0,1,0,2,3,4\n", r"^line 2 has 7 cells, .* decimal points$"),
        (HEADING + "rest,1,2,3\n\nrest,1,x,3\n", r"^line 4 .* in column `q`, got 'x': write it as"),
        (HEADING + "rest,nan,2,3\n", r"^line 2 must have a finite .* column `p`, got 'nan'"),
        (HEADING + "rest,1,-inf,3\n", r"^line 2 must have a finite .* column `q`, got '-inf'"),
        (HEADING + "rest,1,2,1e999\n", r"^line 2 must have a finite .* `period`, got '1e999'"),
        (HEADING + "rest,1_0,2,3\n", r"^line 2 must have a finite .* column `p`, got '1_0'"),
        (HEADING + "rest,1,2,0\n", r"^line 2 must have a positive period .* got '0': correct"),
        (HEADING + "rest,1,2,-3\n", r"^line 2 must have a positive period .* got '-3'"),
        (HEADING + "rest,,2,3\n", r"^line 2 has an empty cell in column `p`: fill"),
        (HEADING + " ,1,2,3\n", r"^line 2 has an empty cell in column `start`: fill"),
        (HEADING + 'rest,1,2,"3\n', r"^line 2 is no comma-separated row .* quotation marks$"),
    ],
)  # fmt: skip
def test_bad_tables_name_line_and_column(text: str, message: str) -> None:
    with pytest.raises(BadTable, match=message) as caught:
        read_starts_csv(text)
    assert "\n" not in str(caught.value)


def test_a_file_that_is_not_there_is_named(tmp_path: Path) -> None:
    with pytest.raises(
        BadTable, match=r"^table .*none\.csv cannot be read \(No such file.*: check"
    ):
        read_starts_csv(tmp_path / "none.csv")


def test_a_file_in_another_encoding_is_named(tmp_path: Path) -> None:
    path = tmp_path / "latin.csv"
    path.write_bytes(HEADING.encode() + b"rest,1,2,3\xe9\n")
    with pytest.raises(BadTable, match=r"latin\.csv is no UTF-8 text, byte 27 is not: save it"):
        read_starts_csv(path)
