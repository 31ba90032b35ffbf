"""Settings for all tests, and the catalogue that the tests of the commands start from."""

import shutil
from pathlib import Path

import pytest
from commands import EIGHT_WINDOW
from hypothesis import settings

from orbitsearch.cli import main

# Doctests would be looked for in it as in a module of its own, by a name that is taken.
collect_ignore = ["conftest.py"]

# Machines that run the tests are shared: an example may meet a slow spell, or compile a kernel.
settings.register_profile("shared machine", deadline=None)
settings.load_profile("shared machine")


@pytest.fixture(scope="session")
def searched(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Catalogue of one small search: the figure-eight and its twin."""
    path = tmp_path_factory.mktemp("searched") / "orbits.db"
    assert main(["search", *EIGHT_WINDOW, "--workers", "1", "--catalog", str(path)]) == 0
    return path


@pytest.fixture
def catalog(searched: Path, tmp_path: Path) -> Path:
    """Copy of that catalogue, to be written to."""
    return Path(shutil.copy(searched, tmp_path / "orbits.db"))
