"""The rules of the house that a machine can hold."""

import ast
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import numpy as np
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


# Reading any of these runs what a file says.
UNPICKLING = {"pickle", "_pickle", "marshal", "shelve", "dill", "cloudpickle", "joblib", "copyreg", "yaml"}
UNPICKLERS = {"read_pickle", "unpickle", "Unpickler", "eval", "exec", "compile", "__import__"}


@pytest.mark.parametrize("path", [*_python_files("store"), *_python_files("estimators"), *_python_files("migrations")],
                         ids=str)  # fmt: skip
def test_nothing_is_unpickled_and_no_text_is_run(path):
    assert not {name.split(".")[0] for name in _imports(path)} & UNPICKLING
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.keyword) and node.arg == "allow_pickle":
            assert isinstance(node.value, ast.Constant)
            assert node.value.value is False
        if isinstance(node, ast.Call):
            name = node.func.attr if isinstance(node.func, ast.Attribute) else getattr(node.func, "id", "")
            is_of_re = isinstance(node.func, ast.Attribute) and getattr(node.func.value, "id", "") == "re"
            assert name not in UNPICKLERS or is_of_re, name


def test_the_table_that_is_loaded_holds_no_objects():
    """numpy itself refuses objects in a file unless told; this holds that the file needs no telling."""
    for path in (ROOT / "estimators" / "data").glob("*.npz"):
        with np.load(path, allow_pickle=False) as stored:
            assert all(stored[name].dtype.kind in "fiub" for name in stored.files)


def test_every_named_query_has_a_name_of_its_own_and_is_used():
    texts = [path.read_text(encoding="utf-8") for path in (ROOT / "store" / "sql").glob("*.sql")]
    names = re.findall(r"^-- name: (\w+)$", "\n".join(texts), re.MULTILINE)
    assert sorted(names) == sorted(set(names))
    code = "\n".join(path.read_text(encoding="utf-8") for path in _python_files("store"))
    assert [name for name in names if f'"{name}"' not in code] == []


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
