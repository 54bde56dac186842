"""The physical lines of a file, with their true numbers, in batches that DuckDB can scan."""

from __future__ import annotations

from collections.abc import Iterator
from typing import BinaryIO

import numpy as np
import pyarrow as pa

from driftbook.store.errors import IntakeError

_CHUNK = 1 << 22
_LONGEST_LINE = 1 << 28
_BYTE_ORDER_MARK = b"\xef\xbb\xbf"
# text keeps its line end; is_utf8 is false where the bytes are not, and the text then shows them escaped.
SCHEMA = pa.schema([("line", pa.int64()), ("text", pa.string()), ("is_utf8", pa.bool_())])


def line_batches(file: BinaryIO, name: str) -> Iterator[pa.RecordBatch]:
    """The lines from the file's beginning as (line, text, is_utf8); read as they are asked for.

    A line ends with LF, CRLF or a CR alone, also in one file.
    """
    line = 1
    for chunk in _whole_lines(file, name):
        batch = _batch(chunk, line)
        line += batch.num_rows
        yield batch


def _whole_lines(file: BinaryIO, name: str) -> Iterator[bytes]:
    """The file's bytes in chunks that end where a line ends; the last one gets a line end if it has none."""
    file.seek(0)
    chunk = file.read(_CHUNK).removeprefix(_BYTE_ORDER_MARK)
    unfinished: list[bytes] = []
    while chunk:
        end = _end_of_lines(chunk)
        if end:
            yield b"".join([*unfinished, chunk[:end]])
            unfinished = [chunk[end:]]
        else:
            unfinished.append(chunk)
            _check_length(unfinished, name)
        chunk = file.read(_CHUNK)
    last = b"".join(unfinished)
    if last:
        yield last if last.endswith(b"\r") else last + b"\n"


def _end_of_lines(chunk: bytes) -> int:
    """Where the last whole line of a chunk ends; a CR at the very end may be half of a CRLF."""
    return max(chunk.rfind(b"\n"), chunk.rfind(b"\r", 0, len(chunk) - 1)) + 1


def _check_length(unfinished: list[bytes], name: str) -> None:
    if sum(map(len, unfinished)) > _LONGEST_LINE:
        raise IntakeError(
            f"{name} has a line of more than {_LONGEST_LINE >> 20} MiB, as no table of rows has; is it the right file?"
        )


def _batch(chunk: bytes, first_line: int) -> pa.RecordBatch:
    ends = _line_ends(chunk)
    numbers = pa.array(np.arange(first_line, first_line + len(ends), dtype=np.int64))
    if _is_utf8(chunk):
        offsets = np.concatenate([[0], ends]).astype(np.int32)
        texts = pa.Array.from_buffers(pa.string(), len(ends), [None, pa.py_buffer(offsets), pa.py_buffer(chunk)])
        return pa.record_batch([numbers, texts, pa.array(np.ones(len(ends), dtype=bool))], schema=SCHEMA)
    lines = [chunk[start:end] for start, end in zip([0, *ends], ends, strict=False)]
    good = [_is_utf8(line) for line in lines]
    shown = [line.decode(errors="strict" if ok else "backslashreplace") for line, ok in zip(lines, good, strict=True)]
    return pa.record_batch([numbers, pa.array(shown, pa.string()), pa.array(good)], schema=SCHEMA)


def _line_ends(chunk: bytes) -> np.ndarray[tuple[int], np.dtype[np.int64]]:
    letters = np.frombuffer(chunk, dtype=np.uint8)
    is_end = letters == ord("\n")
    if chunk.count(b"\r") != chunk.count(b"\r\n"):
        is_return = letters == ord("\r")
        is_return[:-1] &= ~is_end[1:]
        is_end |= is_return
    return np.flatnonzero(is_end) + 1


def _is_utf8(text: bytes) -> bool:
    if text.isascii():
        return True
    try:
        text.decode()
    except UnicodeDecodeError:
        return False
    return True
