"""The physical lines of a file, with their true numbers, in batches that DuckDB can scan."""

from __future__ import annotations

from collections.abc import Iterator
from typing import BinaryIO

import numpy as np
import pyarrow as pa

_CHUNK = 1 << 22
_BYTE_ORDER_MARK = b"\xef\xbb\xbf"
# text keeps its line end; is_utf8 is false where the bytes are not, and the text then shows them escaped.
SCHEMA = pa.schema([("line", pa.int64()), ("text", pa.string()), ("is_utf8", pa.bool_())])


def line_batches(file: BinaryIO) -> pa.RecordBatchReader:
    """The lines from the file's beginning as one stream of (line, text, is_utf8); read as it is asked for."""
    return pa.RecordBatchReader.from_batches(SCHEMA, _batches(file))


def _batches(file: BinaryIO) -> Iterator[pa.RecordBatch]:
    line = 1
    for chunk in _whole_lines(file):
        batch = _batch(chunk, line)
        line += batch.num_rows
        yield batch


def _whole_lines(file: BinaryIO) -> Iterator[bytes]:
    """The file's bytes in chunks that end where a line ends; the last one gets a line end if it has none."""
    file.seek(0)
    chunk = file.read(_CHUNK).removeprefix(_BYTE_ORDER_MARK)
    unfinished: list[bytes] = []
    while chunk:
        end = chunk.rfind(b"\n") + 1
        if end:
            yield b"".join([*unfinished, chunk[:end]])
            unfinished = [chunk[end:]]
        else:
            unfinished.append(chunk)
        chunk = file.read(_CHUNK)
    last = b"".join(unfinished)
    if last:
        yield last + b"\n"


def _batch(chunk: bytes, first_line: int) -> pa.RecordBatch:
    ends = np.flatnonzero(np.frombuffer(chunk, dtype=np.uint8) == ord("\n")) + 1
    numbers = pa.array(np.arange(first_line, first_line + len(ends), dtype=np.int64))
    if _is_utf8(chunk):
        offsets = np.concatenate([[0], ends]).astype(np.int32)
        texts = pa.Array.from_buffers(pa.string(), len(ends), [None, pa.py_buffer(offsets), pa.py_buffer(chunk)])
        return pa.record_batch([numbers, texts, pa.array(np.ones(len(ends), dtype=bool))], schema=SCHEMA)
    lines = [part + b"\n" for part in chunk[:-1].split(b"\n")]
    good = [_is_utf8(line) for line in lines]
    shown = [line.decode(errors="strict" if ok else "backslashreplace") for line, ok in zip(lines, good, strict=True)]
    return pa.record_batch([numbers, pa.array(shown, pa.string()), pa.array(good)], schema=SCHEMA)


def _is_utf8(text: bytes) -> bool:
    if text.isascii():
        return True
    try:
        text.decode()
    except UnicodeDecodeError:
        return False
    return True
