"""README and DEVELOPERS say what is so: commands, options, examples, names of files."""

import argparse
import doctest
import re
import tomllib
from pathlib import Path

import pytest

import orbitsearch
from orbitsearch.cli.commands import COMMANDS
from orbitsearch.cli.parser import make_parser
from orbitsearch.starts import START_SETS
from orbitsearch.symmetry import NAMES

ROOT = Path(orbitsearch.__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def parsers() -> dict[str, argparse.ArgumentParser]:
    actions = make_parser()._actions
    return next(a.choices for a in actions if isinstance(a, argparse._SubParsersAction))


def test_every_command_and_option_is_in_the_readme():
    for name, parser in parsers().items():
        assert f"`orbitsearch {name}`" in README
        for action in parser._actions:
            for option in action.option_strings:
                assert option in ("-h", "--help") or option in README, f"{name} {option}"


def test_every_option_has_help():
    for name, parser in parsers().items():
        for action in parser._actions:
            assert action.help or action.option_strings == ["--format"], f"{name} {action.dest}"


def test_the_parser_knows_every_command():
    assert parsers().keys() == COMMANDS.keys()


@pytest.mark.parametrize("line", re.findall(r"^orbitsearch .*$", README, re.MULTILINE))
def test_commands_in_the_readme_can_be_typed(line):
    words = [w.strip('"') for w in re.findall(r'"[^"]*"|\S+', line)]
    options = make_parser().parse_args(words[1:])
    assert options.run is COMMANDS[words[1]]


def test_python_examples_of_the_readme_run():
    results = doctest.testfile(str(ROOT / "README.md"), module_relative=False)
    assert results.attempted > 0
    assert results.failed == 0


def test_readme_opens_with_the_job_and_the_caution():
    first, second = README.split("\n\n")[1:3]
    assert first.startswith("People who work on the three-body problem")
    assert "ideal point masses" in second
    assert "no substitute for validated tools" in second


def test_every_start_set_is_described():
    for name in START_SETS:
        assert f"| `{name}` |" in README


def test_every_symmetry_is_described():
    for name in NAMES:
        assert f"| `{name}` |" in README


def test_python_version_is_said_once_the_same_everywhere():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    version = project["requires-python"].removeprefix(">=")
    assert f"Python {version} or newer" in README
    assert project["scripts"] == {"orbitsearch": "orbitsearch.cli:main"}


def test_developers_names_files_that_exist():
    for name in re.findall(r"`((?:orbitsearch|tests|\.ci|starts|cli)/[\w./]+)`", DEVELOPERS):
        here = ROOT / name if (ROOT / name).exists() else ROOT / "orbitsearch" / name
        assert here.exists(), name
