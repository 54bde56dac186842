"""Clients that know nothing of driftbook: Node and older DuckDBs run the guide's snippets.

`.ci/run` installs them: Node finds `@duckdb/node-api` by NODE_PATH, OLDER_DUCKDBS names interpreters of Python that
have an older DuckDB and nothing else, separated by colons.
"""

import os
import re
import shutil
import subprocess

import pytest
from documents import ROOT, Block, blocks, environment, matches

GUIDE = ROOT / "store" / "guide" / "dashboards.md"
OLDER = [path for path in os.environ.get("OLDER_DUCKDBS", "").split(":") if path]


def has_node_client():
    asked = ["node", "-e", "require('@duckdb/node-api')"]
    return shutil.which("node") is not None and subprocess.run(asked, capture_output=True).returncode == 0


@pytest.mark.skipif(not has_node_client(), reason="no Node with @duckdb/node-api (.ci/run installs it)")
def test_node_runs_the_snippet_of_the_guide(folder):
    (script,) = [block.text for block in blocks(GUIDE) if block.kind == "js"]
    done = subprocess.run(["node", "-e", script], cwd=folder, capture_output=True, text=True, timeout=60)
    assert done.stderr == ""
    assert done.stdout.splitlines() == ["carbon_permit gbm", "crown_eur abm", "diesel gbm"]


@pytest.mark.skipif(not OLDER, reason="OLDER_DUCKDBS names no interpreter with an older DuckDB (.ci/run installs two)")
@pytest.mark.parametrize("interpreter", OLDER)
def test_an_older_duckdb_runs_the_snippets_of_the_guide(interpreter, folder):
    version = subprocess.run(
        [interpreter, "-c", "import duckdb; print(duckdb.__version__)"], capture_output=True, text=True
    )
    assert re.match(r"1\.[2-5]\.", version.stdout)
    ran = 0
    for script, expected in snippets(blocks(GUIDE), folder):
        done = subprocess.run(
            [interpreter, "-c", script], cwd=folder, env=environment(), capture_output=True, text=True
        )
        assert matches(expected, done.stdout.strip()), done.stderr
        ran += 1
    assert ran == 3


def snippets(of: list[Block], folder):
    for block, after in zip(of, [*of[1:], Block("", "", "")], strict=True):
        if block.file:
            (folder / block.file).write_text(block.text, encoding="utf-8")
        elif block.kind == "python":
            yield block.text, after.text.strip("\n")
