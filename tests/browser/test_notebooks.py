"""The shipped notebooks run from top to bottom, and are kept without outputs."""

import json
from pathlib import Path

import nbformat
import pytest
from harness import execute

from orbitsearch.lab.launch import copy_notebooks, shipped_notebooks

NAMES = ("browse.ipynb", "search.ipynb", "verify.ipynb")


def test_these_are_the_notebooks() -> None:
    assert tuple(sorted(shipped_notebooks())) == NAMES


@pytest.mark.parametrize("name", NAMES)
def test_a_notebook_is_a_title_a_sentence_and_a_cell_without_output(name: str) -> None:
    notebook = json.loads(shipped_notebooks()[name])
    nbformat.validate(notebook)
    text, panel = notebook["cells"]
    assert text["source"][0].startswith("# ")
    assert len("".join(text["source"][1:]).split(". ")) == 1
    assert (panel["outputs"], panel["execution_count"]) == ([], None)


@pytest.mark.parametrize("name", NAMES)
def test_a_notebook_runs_from_top_to_bottom(tmp_path: Path, name: str) -> None:
    copy_notebooks(tmp_path)
    run = execute(tmp_path / name)
    (shown,) = run.cells[1].outputs
    # A panel, and nothing printed beside it.
    assert "application/vnd.jupyter.widget-view+json" in shown["data"]
