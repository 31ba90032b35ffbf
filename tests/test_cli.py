"""Every command does what it says, as text and as JSON, and ends with the code it promises."""

import argparse
import json
import os
from collections.abc import Iterator
from pathlib import Path

import pytest
from commands import EIGHT_GUESS, EIGHT_WINDOW, check_orbit, program, run
from published import EIGHT, EIGHT_ANGLES

from orbitsearch import __version__
from orbitsearch.catalog import Catalog
from orbitsearch.cli.parser import make_parser
from orbitsearch.starts import START_SETS


def test_search_tells_in_json_what_it_did_and_found(capsys, tmp_path: Path) -> None:
    path = tmp_path / "new" / "orbits.db"
    ran = run(capsys, "search", *EIGHT_WINDOW, "--workers", 1, "--catalog", path, "--json")
    assert (ran.code, ran.err) == (0, "")
    said = ran.json
    assert said["state"] == "finished"
    assert (said["new"], said["known"]) == ([1, 2], [])
    assert said["request"] == {
        "start": "collinear", "window": [0.3, 0.4, 0.5, 0.6], "grid": [8, 8], "scaled_period": 12.0
    }  # fmt: skip
    assert said["counts"]["starts"] == 64
    assert said["counts"]["verified"] == 2
    with Catalog.open(path, create=False) as filed:
        assert [record.id for record in filed.orbits()] == [1, 2]


def test_search_prints_counts_and_a_table_of_what_is_new(capsys, tmp_path: Path) -> None:
    path = tmp_path / "orbits.db"
    ran = run(capsys, "search", *EIGHT_WINDOW, "--workers", 1, "--catalog", path)
    assert (ran.code, ran.err) == (0, "")
    assert "64 starts, 0 skipped" in ran.out
    table = [line.split() for line in ran.out.splitlines() if " collinear " in line]
    assert [row[5] for row in table] == ["9.237681251", "9.237682751"]
    assert [row[-3:] for row in table] == [
        ["choreography,", "mirror", "verified"],
        ["elliptic-hyperbolic", "mirror", "verified"],
    ]
    assert ran.out.splitlines()[-1] == f"2 new, 0 known orbits; catalogue {path}, run 1"


def test_a_second_search_adds_nothing(capsys, catalog: Path) -> None:
    ran = run(capsys, "search", *EIGHT_WINDOW, "--workers", 1, "--catalog", catalog, "--json")
    assert ran.code == 0
    assert (ran.json["new"], ran.json["known"]) == ([], [1, 2])
    with Catalog.open(catalog) as filed:
        records = [*filed.orbits()]
        assert len(records) == 2
        assert [len(record.orbit.starts) for record in records] == [2, 2]
        assert [one.state for one in filed.runs()] == ["finished", "finished"]


def test_search_takes_a_grid_of_two_numbers(capsys, tmp_path: Path) -> None:
    window = [*EIGHT_WINDOW]
    window[window.index("--grid") + 1 : window.index("--grid") + 2] = ["3", "5"]
    ran = run(capsys, "search", *window, "--workers", 1, "--catalog", tmp_path / "c.db", "--json")
    assert ran.json["request"]["grid"] == [3, 5]
    assert ran.json["counts"]["starts"] == 15


def test_refine_prints_an_orbit_and_files_it_only_when_told(capsys, tmp_path: Path) -> None:
    path = tmp_path / "orbits.db"
    ran = run(capsys, "refine", *EIGHT_GUESS, "--catalog", path)
    assert (ran.code, ran.err) == (0, "")
    assert "verdict: verified (every check passed)" in ran.out
    assert "parameters moved by at most 1.1" in ran.out
    assert not path.exists()

    ran = run(capsys, "refine", *EIGHT_GUESS, "--catalog", path, "--keep")
    assert ran.code == 0
    assert ran.out.endswith("\nfiled as orbit 1\n")
    ran = run(capsys, "refine", *EIGHT_GUESS, "--catalog", path, "--keep")
    assert ran.out.endswith("\nalready filed as orbit 1\n")


def test_refine_in_json_has_every_field_and_the_digits(capsys, tmp_path: Path) -> None:
    ran = run(
        capsys, "refine", *EIGHT_GUESS, "--json", "--keep", "--catalog", tmp_path / "orbits.db"
    )
    assert (ran.code, ran.err) == (0, "")
    value = ran.json
    check_orbit(value)
    assert [float(text) for text in value["parameters"]] == pytest.approx(
        [EIGHT.a, EIGHT.b], abs=1e-14
    )
    assert value["scaled_period"] == pytest.approx(EIGHT.scaled_period, rel=1e-14)
    assert value["energy"] == pytest.approx(EIGHT.energy, rel=1e-14)
    assert value["stability"]["angles"] == pytest.approx(EIGHT_ANGLES, abs=1e-10)
    assert (value["status"], value["word"], value["choreography"]) == ("verified", "abAB", True)
    assert (value["id"], value["new"], value["elsewhere"]) == (1, True, False)
    assert value["solution"]["status"] == "converged"


def test_refine_that_finds_no_orbit_says_so_and_exits_1(capsys, tmp_path: Path) -> None:
    guess = ("--start", "collinear", "--at", 0.3, 0.1, "--period", 1.0)
    path = tmp_path / "orbits.db"
    ran = run(capsys, "refine", *guess, "--keep", "--catalog", path)
    assert (ran.code, ran.err) == (1, "")
    assert ran.out.startswith("no orbit found: ")
    ran = run(capsys, "refine", *guess, "--keep", "--catalog", path, "--json")
    assert ran.code == 1
    assert ran.json["status"] in {"diverged", "escape", "collision", "budget", "degenerate"}
    assert ran.json["solution"].keys() == {"status", "reason"}
    assert not path.exists()


def test_verify_judges_numbers_as_they_are_given(capsys) -> None:
    five_digits = ("--start", "collinear", "--at", 0.34711, 0.53272, "--period", 6.3259)
    ran = run(capsys, "verify", *five_digits)
    assert (ran.code, ran.err) == (1, "")
    assert "verdict: rejected (closure is " in ran.out
    ran = run(capsys, "verify", *five_digits, "--json")
    check_orbit(ran.json)
    assert ran.json["status"] == "rejected"
    assert {check["name"] for check in ran.json["verdict"]["checks"]} >= {"closure", "multipliers"}
    exact = ("--start", "collinear", "--at", EIGHT.a, EIGHT.b, "--period", EIGHT.period)
    assert run(capsys, "verify", *exact, "--json").json["status"] == "verified"


def test_verify_of_a_motion_that_ends_early_gives_the_reason(capsys) -> None:
    collapse = ("--start", "collinear", "--at", 0, 0, "--period", 4)
    ran = run(capsys, "verify", *collapse, "--json")
    assert ran.code == 1
    assert ran.json == {
        "status": "rejected", "reason": "cannot be followed over its period: collision"
    }  # fmt: skip
    assert "verdict: rejected (cannot be followed" in run(capsys, "verify", *collapse).out


def test_verify_takes_a_number_of_the_catalogue(capsys, catalog: Path) -> None:
    ran = run(capsys, "verify", 2, "--catalog", catalog)
    assert (ran.code, ran.err) == (0, "")
    assert "verdict: verified" in ran.out
    ran = run(capsys, "verify", 2, "--catalog", catalog, "--json")
    check_orbit(ran.json)
    assert (ran.json["id"], ran.json["status"]) == (2, "verified")


def test_list_filters_and_its_json_has_numbers(capsys, catalog: Path) -> None:
    def ids(*options: object) -> list[int]:
        ran = run(capsys, "list", "--catalog", catalog, "--json", *options)
        assert (ran.code, ran.err) == (0, "")
        for value in ran.json:
            check_orbit(value)
        return [value["id"] for value in ran.json]

    eight, twin = ids()
    assert ids("--stable") == [eight]
    assert ids("--max-scaled-period", 9.237682) == [eight]
    assert ids("--max-scaled-period", 9) == []
    assert ids("--word", "BAba") == ids("--word", "abAB") == [eight, twin]
    assert ids("--word", "ab") == []
    assert ids("--start", "isosceles") == [eight, twin]
    assert ids("--start", "rest") == []
    text = run(capsys, "list", "--catalog", catalog)
    assert [line.split()[0] for line in text.out.splitlines()[2:]] == [str(eight), str(twin)]


def test_show_gives_one_orbit_with_its_origin(capsys, catalog: Path) -> None:
    ran = run(capsys, "show", 1, "--catalog", catalog)
    assert (ran.code, ran.err) == (0, "")
    assert ran.out.startswith("orbit 1, filed ")
    assert f"by orbitsearch {__version__}, run 1" in ran.out
    assert "also starts from: isosceles " in ran.out
    ran = run(capsys, "show", 1, "--catalog", catalog, "--json")
    check_orbit(ran.json)
    assert (ran.json["id"], ran.json["run_id"], ran.json["sources"]) == (1, 1, [])


def test_runs_and_starts_are_listed(capsys, catalog: Path) -> None:
    ran = run(capsys, "runs", "--catalog", catalog)
    assert ran.out.startswith("run 1 finished ")
    assert ran.out.rstrip().endswith("T* < 12; 2 orbits filed")
    said = run(capsys, "runs", "--catalog", catalog, "--json").json
    assert [(one["id"], one["state"], one["counts"]["filed"]) for one in said] == [
        (1, "finished", 2)
    ]
    described = run(capsys, "starts", "--json").json
    assert list(described) == list(START_SETS)
    assert described["isosceles"]["parameters"] == ["eta", "u"]
    text = run(capsys, "starts").out
    assert all(f"{name}  (" in text for name in START_SETS)


def subparsers() -> Iterator[tuple[str, argparse.ArgumentParser]]:
    (commands,) = [
        action
        for action in make_parser()._actions
        if isinstance(action, argparse._SubParsersAction)
    ]
    yield from commands.choices.items()


@pytest.mark.parametrize(("name", "parser"), [*subparsers()])
def test_help_of_every_command_explains_every_option(capsys, name, parser) -> None:
    ran = run(capsys, name, "--help")
    assert (ran.code, ran.err) == (0, "")
    assert "--json" in ran.out
    words = " ".join(ran.out.split())
    for action in parser._actions:
        assert action.help, f"{name} {action.option_strings or action.dest} has no help"
        assert " ".join(action.help.split()) in words
        for option in action.option_strings:
            assert option in ran.out


def test_help_of_the_program_lists_every_command(capsys) -> None:
    ran = run(capsys, "--help")
    assert ran.code == 0
    for name, _ in subparsers():
        assert f"\n    {name} " in ran.out
    assert run(capsys, "--version").out == f"orbitsearch {__version__}\n"


def test_as_a_program_json_is_all_there_is_on_standard_output(tmp_path: Path) -> None:
    with program("refine", *EIGHT_GUESS, "--keep", "--json", cwd=tmp_path) as started:
        out, err = started.communicate()
    assert (started.returncode, err) == (0, "")
    check_orbit(json.loads(out))
    # Without --catalog, what is kept goes below the folder one works in.
    assert (tmp_path / "catalog" / "orbits.db").is_file()


def test_a_reader_that_has_enough_is_no_error(tmp_path: Path) -> None:
    reader, writer = os.pipe()
    os.close(reader)
    try:
        with program("starts", cwd=tmp_path, stdout=writer) as started:
            _, err = started.communicate()
    finally:
        os.close(writer)
    assert (started.returncode, err) == (0, "")
