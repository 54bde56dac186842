"""The rules of the house that a machine can hold."""

import ast
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
TOP_LEVEL = {
    "README.md", "DEVELOPERS.md", "pyproject.toml", "store", "estimators", "tests", "migrations", "LICENSE",
}  # fmt: skip
STDLIB = set(sys.stdlib_module_names)
# Leaves, and the folders that may import them; the command line starts the page.
LEAVES = {"driftbook.store.cli": {"cli"}, "driftbook.store.page": {"page", "cli"}}


def _tracked() -> list[Path]:
    listed = subprocess.run(["git", "ls-files", "-co", "--exclude-standard"], cwd=ROOT, capture_output=True, text=True)
    if listed.returncode:
        pytest.skip("not a git checkout")
    return [Path(line) for line in listed.stdout.splitlines() if (ROOT / line).exists()]


def _python_files(folder: str) -> list[Path]:
    return sorted((ROOT / folder).rglob("*.py"))


def _imports(path: Path) -> set[str]:
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            found |= {node.module, *(f"{node.module}.{alias.name}" for alias in node.names)}
    return found


def test_the_top_level_holds_what_the_design_says_and_nothing_else():
    entries = {path.parts[0] for path in _tracked() if not path.parts[0].startswith(".")}
    assert entries == TOP_LEVEL


@pytest.mark.parametrize("path", _python_files("estimators"), ids=str)
def test_estimators_import_numpy_scipy_and_the_standard_library_alone(path):
    roots = {name.split(".")[0] for name in _imports(path)}
    assert roots <= STDLIB | {"numpy", "scipy", "driftbook"}
    assert not {name for name in _imports(path) if name.startswith(("driftbook.store", "driftbook.migrations"))}


@pytest.mark.parametrize("path", _python_files("estimators"), ids=str)
def test_estimators_know_no_clock_environment_or_log(path):
    assert not _imports(path) & {"time", "datetime", "os", "logging", "random", "subprocess", "socket"}


@pytest.mark.parametrize("path", _python_files("store"), ids=str)
def test_the_store_holds_no_numerics_and_nothing_imports_a_leaf(path):
    imports = _imports(path)
    assert not {name for name in imports if name == "math.exp" or name.split(".")[0] in {"scipy", "statsmodels"}}
    for leaf, friends in LEAVES.items():
        assert friends & set(path.parts) or not {name for name in imports if name.startswith(leaf)}


def test_only_the_swap_opens_a_book_for_writing():
    opens = {path.name for path in _python_files("store") if "duckdb.connect(" in path.read_text(encoding="utf-8")}
    assert opens == {"swap.py", "reader.py", "tables.py"}
    for name in ("reader.py", "tables.py"):
        text = (ROOT / "store" / name).read_text(encoding="utf-8")
        assert text.count("duckdb.connect(") == text.count('duckdb.connect(":memory:")')


def test_no_second_copy_of_the_packages_is_imported():
    import driftbook.estimators
    import driftbook.store  # noqa: F401

    assert not {"store", "estimators", "migrations"} & set(sys.modules)


def test_every_package_folder_is_listed_in_pyproject():
    listed = set(tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["setuptools"]["packages"])
    folders = {
        "driftbook." + ".".join(path.parent.relative_to(ROOT).parts)
        for top in ("store", "estimators", "migrations")
        for path in (ROOT / top).rglob("__init__.py")
    }
    assert listed == folders


def test_the_project_stands_alone_and_names_no_foreign_path():
    words = ("../sha" + "red", "/wo" + "rk/", "/t" + "mp/", "RECI" + "PES", "prototypes" + "/")
    for path in _tracked():
        if path.suffix in {".py", ".md", ".sql", ".toml", ".css", ".html"} or path.name == "run":
            text = (ROOT / path).read_text(encoding="utf-8")
            assert not [word for word in words if word in text], path
