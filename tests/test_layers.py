"""Imports point one way: every module may import from rooms below its own, and from its own room.

The table is the plan of the house; the tests read the imports, also those inside functions, and
hold them against it.
"""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import orbitsearch

ROOT = Path(orbitsearch.__file__).parent

# From the ground up.  A room is one module, a package with all it contains, or a few modules that
# share one subject; rooms on the same floor do not know each other.
FLOORS: tuple[dict[str, tuple[str, ...]], ...] = (
    {"errors": ("errors",), "kernels": ("_kernels",)},
    {
        "words": (
            "words",
            "cycles",
            "artin",
            "turns",
            "braids",
            "braid_pattern",
            "_crossings",
            "_letters",
            "_surds",
        ),
        "symmetry": ("symmetry",),
        "period law": ("period_law",),
        "workers": ("workers",),
        "bodies": ("bodies",),
    },
    {"braid type": ("braid_type",)},
    {
        "orbit": ("orbit", "records"),
        "migrations": ("migrations",),
    },
    {
        "identity": ("identity",),
        "flow": ("flow",),
        "independent": ("independent",),
    },
    {
        "starts": ("starts",),
        "shape": ("shape", "strands"),
        "tables": ("tables", "starts_table"),
        "describe": ("describe",),
        "catalog": (
            "catalog",
            "catalog_file",
            "catalog_provenance",
            "catalog_query",
            "catalog_rows",
        ),
    },
    {
        "scan": ("scan",),
        "shoot": ("shoot",),
        "stability": ("stability",),
        "syzygies": ("syzygies",),
        "symmetry of an orbit": ("find_symmetry",),
        "period": ("period",),
    },
    {"classify": ("classify",)},
    {"verify": ("verify",)},
    {"complete": ("complete",)},
    {"refine": ("refine",)},
    {"search": ("search",), "nearby": ("nearby",)},
    {"runs": ("runs",), "plots": ("plots",)},
    {"lab": ("lab",)},
    {"cli": ("cli", "__main__")},
)

PLACE = {
    module: (number, room)
    for number, floor in enumerate(FLOORS)
    for room, modules in floor.items()
    for module in modules
}

# Listing the catalogue must not pay for a compiler: these load without any of HEAVY, however deep.
LIGHT = (
    "catalog", "identity", "tables", "words", "cycles", "artin", "turns", "braids", "symmetry",
    "orbit", "migrations", "records",
)  # fmt: skip
HEAVY = ("numpy", "scipy", "numba", "llvmlite", "orbitsearch._kernels", "orbitsearch.flow")


def name_of(path: Path) -> str:
    """Dotted name of a source file under ROOT, without the package's own."""
    parts = path.relative_to(ROOT).with_suffix("").parts
    return ".".join(part for part in parts if part != "__init__")


SOURCES = {name_of(path): path for path in sorted(ROOT.rglob("*.py"))}


def imported(path: Path) -> set[str]:
    """Absolute names of everything a source file imports, `from p import n` as p and as p.n."""
    # The package that a relative import of one dot starts from.
    package = ["orbitsearch", *path.relative_to(ROOT).parts[:-1]]
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                above = package[: len(package) - node.level + 1]
                base = ".".join([*above, *([base] if base else [])])
            found.add(base)
            found.update(f"{base}.{alias.name}" for alias in node.names)
    return found


def ours(path: Path) -> set[str]:
    """First names below the package (module or subpackage) that a source file imports."""
    names = {n.split(".")[1] for n in imported(path) if n.startswith("orbitsearch.")}
    return {n for n in names if (ROOT / f"{n}.py").exists() or (ROOT / n).is_dir()}


def allowed(importer: str, target: str) -> bool:
    """Whether the plan has an arrow between these two top-level names."""
    if importer == target:
        return True
    floor, room = PLACE[importer]
    below, other = PLACE[target]
    return below < floor or (below, other) == (floor, room)


def test_every_module_has_a_place():
    stale = PLACE.keys() - {name.split(".")[0] for name in SOURCES}
    assert not stale, f"{sorted(stale)} in FLOORS of tests/test_layers.py are no modules: remove"
    homeless = {name.split(".")[0] for name in SOURCES} - {""} - PLACE.keys()
    assert not homeless, (
        f"{sorted(homeless)} not found in FLOORS of tests/test_layers.py: add each to a room on "
        "the lowest floor that is above everything it imports"
    )


@pytest.mark.parametrize("name", [n for n in SOURCES if n])
def test_imports_point_down(name):
    importer = name.split(".")[0]
    if importer not in PLACE:
        pytest.skip("test_every_module_has_a_place reports it")
    for target in ours(SOURCES[name]):
        if target in PLACE:
            assert allowed(importer, target), (
                f"{name} (floor {PLACE[importer][0]}) imports {target} (floor {PLACE[target][0]}): "
                "move what is needed down, or, if the plan is wrong, change FLOORS"
            )


def test_imports_have_no_cycle():
    # Within a room arrows may point anywhere, but not around.
    graph = {}
    for name, path in SOURCES.items():
        full = f"orbitsearch.{name}".rstrip(".")
        known = {f"orbitsearch.{n}".rstrip(".") for n in SOURCES}
        graph[full] = (imported(path) & known) - {full}
    # A package is imported before anything in it; naming itself on the way is no arrow.
    while graph:
        free = {name for name, targets in graph.items() if not targets & graph.keys()}
        assert free, f"imports go around among {sorted(graph)}"
        graph = {name: targets for name, targets in graph.items() if name not in free}


def test_only_the_kernels_compile():
    # numba's disk cache watches one file (see orbitsearch/_kernels.py).
    for name, path in SOURCES.items():
        tops = {n.split(".")[0] for n in imported(path)}
        assert name == "_kernels" or not tops & {"numba", "llvmlite"}, name


def loaded_after(statement: str) -> set[str]:
    """Names in sys.modules of a fresh interpreter after a statement."""
    code = f"{statement}; import sys; print(*sys.modules, sep='\\n')"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return set(done.stdout.split())


@pytest.mark.parametrize("module", LIGHT)
def test_catalogue_side_loads_no_solver(module):
    assert module in SOURCES
    heavy = loaded_after(f"import orbitsearch.{module}") & set(HEAVY)
    assert not heavy


def test_the_package_itself_loads_nothing_of_ours():
    # Every submodule pays for what __init__ imports.
    loaded = loaded_after("import orbitsearch")
    assert not {n for n in loaded if n.startswith("orbitsearch.")}
    assert not loaded & set(HEAVY)


# ---------------------------------------------------------------- the checker itself


def test_the_plan_names_each_module_once():
    names = [m for floor in FLOORS for modules in floor.values() for m in modules]
    assert len(names) == len(set(names))


def test_an_arrow_up_or_sideways_is_refused():
    assert not allowed("errors", "search")
    assert not allowed("flow", "identity")
    assert allowed("search", "errors")
    assert allowed("words", "_letters")


def test_every_form_of_import_is_read(tmp_path, monkeypatch):
    monkeypatch.setattr(sys.modules[__name__], "ROOT", tmp_path)
    inner = tmp_path / "part" / "a.py"
    inner.parent.mkdir()
    inner.write_text(
        "import orbitsearch.one\n"
        "from orbitsearch import two\n"
        "from orbitsearch.three import x\n"
        "from .. import four\n"
        "from ..five import y\n"
        "from .six import z\n"
        "def f():\n    import orbitsearch.seven\n",
        encoding="utf-8",
    )
    for name in ("one", "two", "three", "four", "five", "seven"):
        (tmp_path / f"{name}.py").touch()
    assert ours(inner) == {"one", "two", "three", "four", "five", "seven", "part"}
