"""Landing a file: standard input, pipes, gzip and UTF-16 become a plain file that can be read more than once."""

from __future__ import annotations

import codecs
import gzip
import io
import shutil
import stat
import sys
import zlib
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from tempfile import TemporaryFile
from typing import BinaryIO

from driftbook.store.errors import IntakeError

STANDARD_INPUT = Path("-")
_GZIP_MARK = b"\x1f\x8b"
_CHUNK = 1 << 20
# gzip packs ordinary text 3 to 20 times and tables that repeat themselves perhaps 100 times; at most 1032 times
_MOST_RATIO = 200
_ALWAYS_ALLOWED = 1 << 30


@contextmanager
def landed(path: Path, name: str) -> Iterator[tuple[Path, Path]]:
    """The file as it was given and the file to read, which differ if it had to be unpacked or decoded.

    What has to be copied goes to temporary files that only their owner can read, and that are gone afterwards.
    """
    with ExitStack() as stack:
        given = path if _can_be_read_again(path) else _copied(stack, path)
        plain = _unpacked(stack, given, name) if _begins_with(given, _GZIP_MARK) else given
        for mark, encoding in ((codecs.BOM_UTF16_LE, "utf-16-le"), (codecs.BOM_UTF16_BE, "utf-16-be")):
            if _begins_with(plain, mark):
                plain = _decoded(stack, plain, encoding)
                break
        yield given, plain


def _can_be_read_again(path: Path) -> bool:
    if path == STANDARD_INPUT:
        return False
    mode = path.stat().st_mode
    return stat.S_ISREG(mode) or stat.S_ISDIR(mode)


def _begins_with(path: Path, mark: bytes) -> bool:
    with path.open("rb") as file:
        return file.read(len(mark)) == mark


def _temporary(stack: ExitStack) -> BinaryIO:
    return stack.enter_context(TemporaryFile())


def _path_of(temporary: BinaryIO) -> Path:
    """A temporary file has no name of its own, so that not even a kill leaves it behind."""
    return Path(f"/proc/self/fd/{temporary.fileno()}")


def _copied(stack: ExitStack, path: Path) -> Path:
    target = _temporary(stack)
    with ExitStack() as reading:
        source = sys.stdin.buffer if path == STANDARD_INPUT else reading.enter_context(path.open("rb"))
        shutil.copyfileobj(source, target, _CHUNK)
    target.flush()
    return _path_of(target)


def _unpacked(stack: ExitStack, path: Path, name: str) -> Path:
    target = _temporary(stack)
    packed = path.stat().st_size
    try:
        with gzip.open(path) as source:
            while chunk := source.read(_CHUNK):
                target.write(chunk)
                check_growth(target.tell(), packed, name, "unpack it and take in the plain file")
    except (EOFError, gzip.BadGzipFile, zlib.error) as problem:
        raise IntakeError(f"{name} is a broken gzip file: {problem}. Get it again.") from problem
    target.flush()
    return _path_of(target)


def check_growth(size: int, packed: int, name: str, instead: str) -> None:
    """Refuses a small file that becomes huge once it is unpacked."""
    if size > max(_ALWAYS_ALLOWED, _MOST_RATIO * packed):
        raise IntakeError(
            f"{name} unpacks to more than {_MOST_RATIO} times its size and more than {_ALWAYS_ALLOWED >> 30} GiB; "
            f"if that is meant, {instead}."
        )


def _decoded(stack: ExitStack, path: Path, encoding: str) -> Path:
    """UTF-16 as UTF-8; half a character becomes bytes that are no UTF-8, so that its row is refused like any such."""
    target = _temporary(stack)
    decoder = codecs.getincrementaldecoder(encoding)("surrogatepass")
    with path.open("rb") as source:
        source.seek(len(codecs.BOM_UTF16_LE))
        while chunk := source.read(_CHUNK):
            # a byte alone at the end is left in the decoder
            target.write(decoder.decode(chunk).encode("utf-8", "surrogatepass"))
    if decoder.getstate()[0]:
        target.write(b"\xff")
    target.seek(0, io.SEEK_END)
    target.flush()
    return _path_of(target)
