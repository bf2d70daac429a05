"""The shape of the code: who imports whom, how long a module is, and what the front door shows.

Data flow from files to answers in one direction, and so do imports: a module imports only from rows above its own in the
table below, or from its own package.  The lower layers do arithmetic and know NumPy and SciPy only.
"""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path
from types import ModuleType

import pytest

import reweight as rw

PACKAGE = Path(rw.__file__).parent
ROOT = PACKAGE.parent
LONGEST = 400

# Lowest first; entries of one row do not import each other.
ROWS: tuple[tuple[str, ...], ...] = (
    ("errors", "version"),
    ("units", "files", "notation", "memory", "products"),
    ("labels", "clock"),
    ("study",),
    ("reading",),
    ("drafting", "runs"),
    ("series",),
    ("tally",),
    ("multistate",),
    ("estimate",),
    ("quantities",),
    ("density_of_states",),
    ("continuing", "deciding"),
    ("combining",),
    ("saving",),
    ("studies",),
    ("uncertainty",),
    ("answers",),
    ("transitions",),
    ("checks",),
    ("figures",),
    ("report",),
    ("guide",),
    ("__init__",),
    ("cli",),
)
RANK = {name: rank for rank, row in enumerate(ROWS) for name in row}

ARRAY_LAYER = ("memory", "products", "series", "tally", "multistate", "estimate", "quantities", "uncertainty")
ARRAY_LAYER_IMPORTS = {"numpy", "scipy", "reweight"}
ARRAY_LAYER_KNOWS = {"errors", *ARRAY_LAYER}  # of this package

# Importing these costs half a second or more each; only a function that needs one pays for it.
HEAVY = {"matplotlib", "pint", "pymbar", "netCDF4", "scipy.stats"}


def modules() -> dict[str, Path]:
    """Dotted name below the package, such as ``tally.leaves``, to file; the command line as ``cli``."""
    found = {}
    for folder, prefix in ((PACKAGE, ""), (ROOT / "cli", "cli.")):
        for path in sorted(folder.rglob("*.py")):
            parts = path.relative_to(folder).with_suffix("").parts
            if parts[-1] == "__init__" and len(parts) + len(prefix) > 1:
                parts = parts[:-1]
            found[(prefix + ".".join(parts)).rstrip(".")] = path
    return found


MODULES = modules()


def imported(path: Path, *, top_level_only: bool = False) -> set[str]:
    """Dotted names of the modules a file imports; names imported from a package count as its modules, too."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    names: set[str] = set()
    for node in tree.body if top_level_only else ast.walk(tree):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path} imports relatively"
            assert node.module is not None
            names |= {node.module, *(f"{node.module}.{alias.name}" for alias in node.names)}
    return names


def entry(module: str) -> str:
    """Entry of the table that a module below the package belongs to."""
    return module.split(".")[0]


def entries_imported(path: Path) -> set[str]:
    found = set()
    for name in imported(path):
        parts = name.split(".")
        if parts[0] == "reweight" and len(parts) > 1 and parts[1] in {*RANK, "datasets"}:
            found.add(parts[1])
    return found


def test_the_table_knows_every_module() -> None:
    unknown = {entry(module) for module in MODULES} - set(RANK)

    assert not unknown, f"place {unknown} in the table of rows"


@pytest.mark.parametrize("module", MODULES)
def test_a_module_imports_only_from_rows_above_its_own(module: str) -> None:
    own = entry(module)

    backwards = {
        name for name in entries_imported(MODULES[module]) - {own, "datasets"} if RANK[name] >= RANK[own]
    }

    assert not backwards, f"{module} imports {backwards}, which stand to its right"


@pytest.mark.parametrize("module", [name for name in MODULES if entry(name) != "cli"])
def test_the_package_does_not_need_its_data_sets(module: str) -> None:
    assert "datasets" not in entries_imported(MODULES[module])


@pytest.mark.parametrize("module", [name for name in MODULES if entry(name) in ARRAY_LAYER])
def test_the_array_layer_knows_arrays_only(module: str) -> None:
    path = MODULES[module]
    roots = {name.split(".")[0] for name in imported(path)}

    assert roots - set(sys.stdlib_module_names) <= ARRAY_LAYER_IMPORTS
    assert entries_imported(path) <= ARRAY_LAYER_KNOWS


@pytest.mark.parametrize("path", sorted((ROOT / "datasets").glob("*.py")), ids=lambda path: path.stem)
def test_what_judges_the_analysis_does_not_use_it(path: Path) -> None:
    """Exact solutions and simulators import nothing of the package but each other."""
    foreign = {
        name
        for name in imported(path)
        if name.startswith("reweight") and not name.startswith("reweight.datasets")
    }

    assert not foreign


@pytest.mark.parametrize("module", MODULES)
def test_a_module_stays_short(module: str) -> None:
    lines = MODULES[module].read_text(encoding="utf-8").count("\n")

    assert lines <= LONGEST, f"{module} has {lines} lines; split it by what it has reason to change for"


@pytest.mark.parametrize("module", MODULES)
def test_heavy_packages_are_imported_where_they_are_used(module: str) -> None:
    if entry(module) == "figures":
        return
    top = imported(MODULES[module], top_level_only=True)

    assert not {name for name in top if name in HEAVY or name.split(".")[0] in HEAVY}


def test_the_checks_of_this_file_see_a_forbidden_import(tmp_path: Path) -> None:
    """Negative control."""
    path = tmp_path / "odd.py"
    path.write_text("def f():\n    from reweight.answers import curve\n    import xarray\n", encoding="utf-8")

    assert entries_imported(path) == {"answers"}
    assert "xarray" in imported(path)
    assert RANK["answers"] > RANK["tally"]
    assert imported(path, top_level_only=True) == set()


def test_the_front_door_shows_what_it_says() -> None:
    public = {
        name for name in dir(rw) if not name.startswith("_") and not isinstance(getattr(rw, name), ModuleType)
    }

    assert rw.__all__ == sorted(rw.__all__)
    assert len(set(rw.__all__)) == len(rw.__all__)
    assert public == set(rw.__all__) - {"__version__"}
    assert all(getattr(rw, name) is not None for name in rw.__all__)


@pytest.mark.parametrize("name", [name for name in rw.__all__ if name != "__version__"])
def test_every_public_name_says_what_it_is(name: str) -> None:
    assert (getattr(rw, name).__doc__ or "").strip()


def test_importing_the_package_prints_nothing_and_warns_of_nothing() -> None:
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", "import reweight"], capture_output=True, text=True, check=False
    )

    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")
