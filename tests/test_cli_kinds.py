"""Browsing the catalogue by what orbits are: `kinds`, `list --braid`, `list --symmetry`, `show`."""

import csv
import io
import json
import math
from dataclasses import replace
from pathlib import Path

import pytest
from commands import complaint, run
from sample_orbits import EIGHT_SCALED_PERIOD, figure_eight, numbered, twin

from orbitsearch.catalog import Catalog
from orbitsearch.cycles import word_of_cycle
from orbitsearch.symmetry import NAMES
from orbitsearch.words import invert


@pytest.fixture
def many(tmp_path: Path) -> Path:
    """Catalogue of the figure-eight, its twin, and orbits of other types."""
    path = tmp_path / "many.db"
    with Catalog.open(path) as catalog:
        for orbit in (figure_eight(), twin(), *map(numbered, range(1, 5))):
            catalog.add(orbit)
    return path


def test_kinds_groups_by_braid(capsys, many: Path) -> None:
    said = run(capsys, "kinds", "--catalog", many, "--json").json
    first, *others = said["kinds"]
    assert first == {
        "kind": "pseudo-Anosov", "cycle": "LR" * 3, "exponent_sum": 0, "trace": 18,
        "dilatation": pytest.approx(((3 + math.sqrt(5)) / 2) ** 3),
        "entropy": pytest.approx(3 * math.log((3 + math.sqrt(5)) / 2)), "count": 2,
        "choreographies": 1, "stable": 2, "shortest_scaled_period": EIGHT_SCALED_PERIOD, "id": 1,
    }  # fmt: skip
    assert [kind["count"] for kind in others] == [1, 1, 1, 1]
    periods = [kind["shortest_scaled_period"] for kind in said["kinds"]]
    assert periods == sorted(periods)
    assert said["untyped"] == []
    assert said["period_law"]["count"] == 6


def test_kinds_prints_a_table_and_the_law(capsys, many: Path) -> None:
    ran = run(capsys, "kinds", "--catalog", many)
    lines = ran.out.splitlines()
    assert (ran.code, ran.err) == (0, "")
    assert lines[0].split()[:3] == ["orbits", "braid", "cycle"]
    assert lines[2].split() == [
        "2", "pseudo-Anosov", "(LR)^3", "0", "18", "2.887271", "1", "2", "9.237681251", "1"
    ]  # fmt: skip
    assert "of 6 within 2.433 ± 0.075 (published)" in lines[-1]


def test_kinds_of_an_empty_catalogue(capsys, tmp_path: Path) -> None:
    path = tmp_path / "empty.db"
    Catalog.open(path).close()
    assert run(capsys, "kinds", "--catalog", path).out == "no orbits\n"
    said = run(capsys, "kinds", "--catalog", path, "--json").json
    assert said == {
        "kinds": [], "untyped": [],
        "period_law": {"median": None, "inside": 0, "count": 0, "farthest": None},
    }  # fmt: skip


@pytest.mark.parametrize(
    ("braid", "ids"),
    [
        ("pseudo-Anosov", [1, 2, 3, 4, 5, 6]),
        ("PSEUDO-anosov", [1, 2, 3, 4, 5, 6]),
        ("periodic", []),
        ("reducible", []),
        ("LRLRLR", [1, 2]),
        ("(RL)^3", [1, 2]),
        ("1 -2 1 -2 1 -2", [1, 2]),
        ("2 -1 2 -1 2 -1", [1, 2]),
        ("2 1 -2 1 -2 1 -2 -2", [1, 2]),
        ("()", []),
        ("1 1", []),
    ],
)
def test_list_finds_a_braid_in_any_form(capsys, many: Path, braid: str, ids: list[int]) -> None:
    listed = run(capsys, "list", "--braid", braid, "--catalog", many, "--json").json
    assert sorted(orbit["id"] for orbit in listed) == ids


@pytest.mark.parametrize(
    ("name", "ids"),
    [
        ("choreography", [1, 5]),
        ("cyclic", [1, 5]),
        ("mirror", [1, 2, 3, 4, 5, 6]),
        ("mirror-exchange", []),
        ("none", []),
    ],
)
def test_list_finds_a_symmetry(capsys, many: Path, name: str, ids: list[int]) -> None:
    listed = run(capsys, "list", "--symmetry", name, "--catalog", many, "--json").json
    assert sorted(orbit["id"] for orbit in listed) == ids


def test_every_name_of_a_symmetry_can_be_asked_for(capsys, many: Path) -> None:
    for name in NAMES:
        assert run(capsys, "list", "--symmetry", name, "--catalog", many).code == 0


def test_filters_add_up(capsys, many: Path) -> None:
    asked = ("--braid", "(LR)^3", "--symmetry", "choreography", "--word", "BAba")
    listed = run(capsys, "list", *asked, "--catalog", many, "--json").json
    assert [orbit["id"] for orbit in listed] == [1]


def test_a_word_is_found_with_another_arc_silent(capsys, tmp_path: Path) -> None:
    # The cycle 1213 with each arc silent in turn: words of two letters and of three.
    words = {word_of_cycle("1213", silent) for silent in (1, 2, 3)}
    assert len(words) > 1
    path = tmp_path / "one.db"
    with Catalog.open(path) as catalog:
        catalog.add(replace(figure_eight(), cycle="1213", word=min(words)))
    for word in (*words, *map(invert, words)):
        listed = run(capsys, "list", "--word", word, "--catalog", path, "--json").json
        assert [orbit["id"] for orbit in listed] == [1], word
    assert run(capsys, "list", "--word", "abAB", "--catalog", path).out == "no orbits\n"


@pytest.mark.parametrize(
    ("option", "value", "said"),
    [
        ("--braid", "1 -3", "must be 1, -1, 2 or -2 for three strands, got -3 at place 2"),
        ("--braid", "LRX", "`--braid` must be a kind (periodic, reducible, pseudo-Anosov), a cyc"),
        ("--braid", "1 -2", "`--braid` must return each body to its place over a period, and this"),
        ("--braid", "LR", "exchanges 3: ask for its power 3"),
        ("--braid", "L" * 100_000 + "x", "LLLLL...': write for instance periodic"),
        ("--braid", "(" * 20_000 + "L" + ")" * 20_000 + "x", "((((...': write for instance"),
        ("--braid", "(LR)^99999999", "`--braid` must have at most 1000000 turns when written out"),
        ("--braid", "1" * 5000, "`--braid` must be 1, -1, 2 or -2 for three strands"),
        ("--braid", "(LR)^0", "`--braid` must be turns L and R with powers from 1 on"),
        ("--braid", "\u0661 2", "`--braid` must be a kind"),
        ("--braid", "", "`--braid` must be"),
        ("--symmetry", "ring", "`--symmetry` must be one of choreography, cyclic"),
        ("--word", "abc", "`--word` must use only the letters a, b, A, B, got 'c' at place 3"),
    ],
)
def test_a_bad_filter_is_refused_in_one_line(
    capsys, many: Path, option: str, value: str, said: str
) -> None:
    assert said in complaint(run(capsys, "list", option, value, "--catalog", many))


def test_show_prints_the_whole_type(capsys, catalog: Path) -> None:
    text = run(capsys, "show", 1, "--catalog", catalog).out
    lines = {" ".join(line.split()) for line in text.splitlines()}
    assert "braid: pseudo-Anosov, (LR)^3, exponent sum 0" in lines
    assert "trace 18" in lines
    assert "dilatation ((3 + √5)/2)^3 = 17.94427191" in lines
    assert "over T/3 pseudo-Anosov, LR, exponent sum 0, trace 3" in lines
    assert "symmetry: choreography, mirror" in lines
    assert "all three bodies run along one curve, a third of the period apart" in lines
    assert "reversible through 6 collinear and 6 isosceles states" in lines
    assert "1/12 of the period generates the whole orbit" in lines
    law = "T* over length 2.3094, -0.1236 from the published mean 2.433 ± 0.075"
    assert law in lines


def test_json_has_the_type(capsys, catalog: Path) -> None:
    said = run(capsys, "show", 1, "--catalog", catalog, "--json").json
    braid, symmetry = said["braid"], said["symmetry"]
    assert (braid["kind"], braid["trace"], braid["cycle"]) == ("pseudo-Anosov", 18, "LRLRLR")
    assert braid["windings"] == [0, 0, 0]
    assert (braid["part"]["of"], braid["part"]["trace"]) == (3, 3)
    assert symmetry["names"] == ["choreography", "cyclic", "mirror"]
    assert symmetry["reversals"] == {"collinear": 6, "isosceles": 6}
    assert (symmetry["fraction"], symmetry["curves"]) == ("1/12", 1)
    assert 0 <= symmetry["deviation"] < 1e-9
    assert math.isclose(said["margins"][1], math.pi / 3, rel_tol=1e-9)
    assert math.isclose(said["law_residual"], 9.23768125072455 / 4 - 2.433)


def test_export_carries_the_type(capsys, catalog: Path) -> None:
    text = run(capsys, "export", "--format", "csv", "--catalog", catalog).out
    row, twin_row = csv.DictReader(io.StringIO(text))
    assert row["braid_kind"] == "pseudo-Anosov"
    assert (row["braid_cycle"], row["exponent_sum"], row["trace"]) == ("LRLRLR", "0", "18")
    assert math.isclose(float(row["entropy"]), 3 * math.log((3 + math.sqrt(5)) / 2))
    assert row["windings"] == "0 0 0"
    assert (row["symmetry"], twin_row["symmetry"]) == ("choreography, mirror", "mirror")
    assert (row["fraction"], row["reversals"]) == ("1/12", "collinear:6 isosceles:6")
    assert row["canonical_start"].startswith("collinear 0.34711688811892")
    exported = run(capsys, "export", "--format", "json", "--catalog", catalog).out
    assert [orbit["braid"]["trace"] for orbit in json.loads(exported)] == [18, 18]
    latex = run(capsys, "export", "--format", "latex", "--catalog", catalog).out
    assert "choreography, mirror" in latex
    assert r"(LR)$^{3}$ & 0 &" in " ".join(latex.split())
