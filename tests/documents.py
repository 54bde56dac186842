"""Documents whose commands are run: README and the guide.

A fenced block marked `console` holds lines that begin with `$ ` and what they print; `…` stands for anything that
differs from run to run. A block marked with a kind and a name, as `toml plan.toml`, is a file of that name. A block
marked `python` is run; a `text` block right after it is what it prints. Blocks run in their order, in one folder that
holds the demo's `island`.

`python tests/documents.py README.md …` writes what the commands print now in the place of what stands there.
"""

from __future__ import annotations

import os
import re
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
FENCED = re.compile(r"^```(\w+)?(?: (\S+))?\n(.*?)^```$", re.MULTILINE | re.DOTALL)
VARYING = {
    r"(last digest +)\w+": r"\1…",
    r"(last look +)\S+,": r"\1…,",
    r"(run 9, )20\d\d-\d\d-\d\d \d\d:\d\dZ": r"\1…",
    r"\d+\.\d+ s\b": "… s",
}


@dataclass(frozen=True)
class Block:
    """A fenced block: its kind, the file that it is, and its text."""

    kind: str
    file: str
    text: str


def blocks(document: Path) -> list[Block]:
    """All fenced blocks of a document, in order."""
    return [Block(*(part or "" for part in found)) for found in FENCED.findall(document.read_text(encoding="utf-8"))]


def commands(text: str) -> Iterator[tuple[str, str]]:
    """The commands of a console block, each with what stands below it."""
    _, *parts = re.split(r"^\$ (.*)$", text, flags=re.MULTILINE)
    for command, output in zip(parts[0::2], parts[1::2], strict=True):
        yield command, output.strip("\n")


def matches(expected: str, printed: str) -> bool:
    """Whether a print is what the document says, `…` aside."""
    pattern = ".*?".join(re.escape(part) for part in expected.split("…"))
    return re.fullmatch(pattern, printed, flags=re.DOTALL) is not None


def shell(command: str, folder: Path) -> str:
    """What a command prints at 80 columns, standard error included."""
    done = subprocess.run(
        ["bash", "-c", command],
        cwd=folder,
        env=environment(),
        capture_output=True,
        text=True,
        stdin=subprocess.DEVNULL,
    )
    return "\n".join(line.rstrip() for line in (done.stdout + done.stderr).rstrip("\n").split("\n"))


def environment() -> dict[str, str]:
    """This environment with the programs beside the running Python on the path, at 80 columns."""
    binaries = Path(sys.executable).parent
    return {**os.environ, "PATH": f"{binaries}{os.pathsep}{os.environ['PATH']}", "COLUMNS": "80"}


def python(text: str, folder: Path) -> str:
    """What a piece of Python prints; an error ends in an exception."""
    done = subprocess.run([sys.executable, "-c", text], cwd=folder, env=environment(), capture_output=True, text=True)
    if done.returncode:
        raise AssertionError(done.stderr)
    return done.stdout.rstrip("\n")


def _as_printed_now(document: Path, folder: Path) -> str:
    """The document with what its console and Python blocks print."""
    last = ""

    def again(found: re.Match[str]) -> str:
        nonlocal last
        block, before = Block(found[1] or "", found[2] or "", found[3]), last
        last = python(block.text, folder) if block.kind == "python" and not block.file else ""
        if block.file:
            (folder / block.file).write_text(block.text, encoding="utf-8")
        if block.kind == "text" and before:
            return f"```text\n{before}\n```"
        return f"```console\n{_printed(block.text, folder)}```" if block.kind == "console" else found[0]

    return FENCED.sub(again, document.read_text(encoding="utf-8"))


def _printed(text: str, folder: Path) -> str:
    lines = []
    for command, _ in commands(text):
        output = shell(command, folder)
        for pattern, instead in VARYING.items():
            output = re.sub(pattern, instead, output)
        lines.append(f"$ {command}\n{output}\n" if output else f"$ {command}\n")
    return "".join(lines)


if __name__ == "__main__":
    for name in sys.argv[1:]:
        with tempfile.TemporaryDirectory() as place:
            shell("driftbook demo", Path(place))
            Path(name).write_text(_as_printed_now(Path(name), Path(place)), encoding="utf-8")
