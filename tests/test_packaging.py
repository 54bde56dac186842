"""The wheel is whole: what it holds works in a bare environment, far from the checkout."""

import os
import subprocess
import sys
import venv
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture(scope="module")
def wheel(tmp_path_factory):
    folder = tmp_path_factory.mktemp("wheel")
    subprocess.run(
        [sys.executable, "-m", "build", "--wheel", "--outdir", folder, ROOT], check=True, capture_output=True, text=True
    )
    (built,) = folder.glob("driftbook-*.whl")
    return built


def test_the_wheel_holds_migrations_queries_tables_and_type_marks(wheel):
    names = set(zipfile.ZipFile(wheel).namelist())
    assert {
        "driftbook/migrations/0001_book.sql",
        "driftbook/store/sql/runs.sql",
        "driftbook/store/demo/plan.toml",
        "driftbook/store/page/templates/first.html",
        "driftbook/store/page/static/page.css",
        "driftbook/estimators/data/slope_law.npz",
        "driftbook/store/py.typed",
        "driftbook/estimators/py.typed",
    } <= names
    assert not [name for name in names if name.startswith(("tests/", "store/", "estimators/", "driftbook/__init__"))]


def test_help_and_demo_run_from_the_wheel_in_a_bare_environment(wheel, tmp_path):
    venv.create(tmp_path / "bare", with_pip=True)
    binaries = tmp_path / "bare" / "bin"
    subprocess.run([binaries / "pip", "install", "--quiet", wheel], check=True, capture_output=True)
    bare = {"PATH": os.environ["PATH"], "HOME": str(tmp_path)}
    shown = subprocess.run([binaries / "driftbook", "--help"], capture_output=True, text=True, env=bare, check=True)
    assert "no advice and no forecast of returns" in " ".join(shown.stdout.split())
    told = subprocess.run(
        [binaries / "driftbook", "demo"], capture_output=True, text=True, env=bare, cwd=tmp_path, check=True
    )
    assert "half-life" in told.stdout
    assert (tmp_path / "island" / "island.duckdb").exists()
