"""README: every command in it was really run, and prints what stands there.

A fenced block marked `console` holds lines beginning with `$ ` and what they print; `…` stands for anything that
differs from run to run. Blocks run in their order in one empty folder where the demo was made.
"""

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
BLOCK = re.compile(r"^```(\w*)\n(.*?)^```$", re.MULTILINE | re.DOTALL)
BLOCKS = BLOCK.findall(README)


def _commands(block: str) -> list[tuple[str, str]]:
    _, *parts = re.split(r"^\$ (.*)$", block, flags=re.MULTILINE)
    return [(command, output.strip("\n")) for command, output in zip(parts[0::2], parts[1::2], strict=True)]


def _matches(expected: str, printed: str) -> bool:
    pattern = ".*?".join(re.escape(part) for part in expected.split("…"))
    return re.fullmatch(pattern, printed, flags=re.DOTALL) is not None


def _run(command: str, folder: Path) -> str:
    binaries = Path(sys.executable).parent
    environment = {**os.environ, "PATH": f"{binaries}{os.pathsep}{os.environ['PATH']}", "COLUMNS": "80"}
    done = subprocess.run(
        ["bash", "-c", command], cwd=folder, env=environment, capture_output=True, text=True, stdin=subprocess.DEVNULL
    )
    return "\n".join(line.rstrip() for line in (done.stdout + done.stderr).rstrip("\n").split("\n"))


def test_the_first_two_blocks_are_the_two_commands_each_complete():
    (_, first), (_, second) = BLOCKS[:2]
    assert len(first.strip().splitlines()) == len(second.strip().splitlines()) == 1
    assert "pip install" in first
    assert first.strip().endswith("driftbook demo")
    assert "pip install" in second
    assert second.strip().endswith("pytest")


def test_every_command_prints_what_stands_in_the_readme(tmp_path):
    (demo,) = re.findall(r"driftbook demo$", BLOCKS[0][1].strip())
    assert "To copy:" in _run(demo, tmp_path)
    for kind, block in BLOCKS[2:]:
        if kind == "toml":
            (tmp_path / "plan.toml").write_text(block, encoding="utf-8")
        if kind == "csv":
            (tmp_path / "worst.csv").write_text(block, encoding="utf-8")
        for command, expected in _commands(block) if kind == "console" else []:
            printed = _run(command, tmp_path)
            assert _matches(expected, printed), f"$ {command}\n{printed}\n--- expected\n{expected}"


@pytest.mark.parametrize("block", [block for kind, block in BLOCKS if kind == "python"])
def test_the_python_in_the_readme_runs(block, tmp_path):
    _run("driftbook demo", tmp_path)
    done = subprocess.run([sys.executable, "-c", block], cwd=tmp_path, capture_output=True, text=True)
    assert done.returncode == 0, done.stderr


def test_the_readme_gives_the_cautions():
    words = " ".join(README.split())
    assert "no advice and no forecast of returns" in words
    assert "regulator" in words
