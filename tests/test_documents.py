"""README and the guide: every command in them is run, and prints what stands there."""

from pathlib import Path

import pytest
from documents import ROOT, blocks, commands, matches, python, shell

README = ROOT / "README.md"
DOCUMENTS = [README, *sorted((ROOT / "store" / "guide").glob("*.md"))]


def test_the_first_two_blocks_are_the_two_commands_each_complete():
    first, second = (block.text.strip() for block in blocks(README)[:2])
    assert "\n" not in first + second
    assert "pip install" in first
    assert first.endswith("driftbook demo")
    assert "pip install" in second
    assert second.endswith("pytest")


@pytest.mark.parametrize("document", DOCUMENTS, ids=lambda path: path.name)
def test_every_command_prints_what_stands_below_it(document: Path, folder):
    printed = None
    for block in blocks(document):
        if block.file:
            (folder / block.file).write_text(block.text, encoding="utf-8")
        for command, expected in commands(block.text) if block.kind == "console" else []:
            output = shell(command, folder)
            assert matches(expected, output), f"$ {command}\n{output}\n--- expected\n{expected}"
        if block.kind == "text" and printed is not None:
            assert matches(block.text.strip("\n"), printed), printed
        printed = python(block.text, folder) if block.kind == "python" and not block.file else None


def test_the_readme_gives_the_cautions():
    words = " ".join(README.read_text(encoding="utf-8").split())
    assert "no advice and no forecast of returns" in words
    assert "regulator" in words
