"""Quotes in delimited text: splitting a line by them, and rows whose quoted fields span lines."""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Iterable, Iterator
from enum import Enum
from itertools import islice

import numpy as np
import pyarrow as pa

from driftbook.store.intake.lines import SCHEMA
from driftbook.store.intake.source import WHITESPACE

DELIMITERS = (",", ";", "\t", "|")
MOST_LINES = 100
_MOST_TEXT = 1 << 20
_QUOTED = re.compile(r'"((?:[^"]++|"")*+)"')
_SPACE = {mark: re.compile(f"[{WHITESPACE.replace(mark, '')}]*") for mark in DELIMITERS}


class Broken(Enum):
    """Why a line can't be split: a quote is still open at its end, or text follows a closed one."""

    OPEN = "open"
    MISPLACED = "misplaced"


def split_line(text: str, delimiter: str) -> list[str] | Broken:
    """The trimmed fields of one row; a quoted field has nothing but space around it."""
    space = _SPACE[delimiter]
    text = text.strip("\r\n")
    fields, place = [], 0
    while True:
        start = _end(space, text, place)
        if text.startswith('"', start):
            match = _QUOTED.match(text, start)
            if match is None:
                return Broken.OPEN
            place = _end(space, text, match.end())
            if place < len(text) and text[place] != delimiter:
                return Broken.MISPLACED
            fields.append(match[1].replace('""', '"').strip(WHITESPACE))
        else:
            found = text.find(delimiter, start)
            place = found if found >= 0 else len(text)
            fields.append(text[start:place].strip(WHITESPACE))
        if place == len(text):
            return fields
        place += 1


def _end(pattern: re.Pattern[str], text: str, place: int) -> int:
    """Where a pattern that matches everywhere, perhaps nothing, ends."""
    match = pattern.match(text, place)
    return match.end() if match else place


def joined(batches: Iterable[pa.RecordBatch], delimiter: str, width: int) -> Iterator[pa.RecordBatch]:
    """The lines, those of one row as one: it keeps its first line's number.

    A line with an odd number of quotes that ends inside a quoted field is taken together with the lines after it, up
    to the one that closes the field, if that gives a row of the right width within `MOST_LINES` lines. Otherwise it
    stays alone, and the quote costs one line.
    """
    source = iter(batches)
    ahead: deque[pa.RecordBatch] = deque(islice(source, 1))
    while ahead:
        batch = ahead.popleft()
        opening = _lines_that_stay_open(batch, delimiter)
        while opening and sum(map(len, ahead)) < MOST_LINES and (following := next(source, None)) is not None:
            ahead.append(following)
        if opening:
            batch, taken = _join(batch, opening, list(_first(ahead)), delimiter, width)
            _drop(ahead, taken)
        yield batch
        ahead.extend(islice(source, 0 if ahead else 1))


def _lines_that_stay_open(batch: pa.RecordBatch, delimiter: str) -> list[int]:
    texts = batch.column("text")
    odd = _lines_with_odd_quotes(batch)
    return [place for place in odd if split_line(texts[place].as_py(), delimiter) is Broken.OPEN]


def _lines_with_odd_quotes(batch: pa.RecordBatch) -> list[int]:
    texts = batch.column("text")
    _, offsets, letters = texts.buffers()
    bounds = np.frombuffer(offsets, dtype=np.int32)[texts.offset : texts.offset + len(texts) + 1]
    quotes = np.flatnonzero(np.frombuffer(letters, dtype=np.uint8)[bounds[0] : bounds[-1]] == ord('"')) + bounds[0]
    counts = np.diff(np.searchsorted(quotes, bounds))
    found: list[int] = np.flatnonzero(counts % 2).tolist()
    return found


def _first(ahead: Iterable[pa.RecordBatch]) -> Iterator[dict[str, object]]:
    """The next lines after a batch, as many as a row may span."""
    wanted = MOST_LINES
    for batch in ahead:
        yield from batch.slice(0, wanted).to_pylist()
        wanted -= min(wanted, len(batch))


def _drop(ahead: deque[pa.RecordBatch], count: int) -> None:
    while count:
        batch = ahead.popleft()
        if len(batch) > count:
            ahead.appendleft(batch.slice(count))
        count -= min(count, len(batch))


def _join(
    batch: pa.RecordBatch, opening: list[int], following: list[dict[str, object]], delimiter: str, width: int
) -> tuple[pa.RecordBatch, int]:
    """The batch with its rows joined, and how many of the following lines went into its last row."""
    rows = [*batch.to_pylist(), *following]
    kept, done = [], 0
    for first in opening:
        if first < done:
            continue
        kept += rows[done:first]
        text, done = _row_from(rows, first, delimiter, width)
        kept.append({**rows[first], "text": text})
    kept += rows[done : len(batch)]
    return pa.RecordBatch.from_pylist(kept, schema=SCHEMA), max(0, done - len(batch))


def _row_from(rows: list[dict[str, object]], first: int, delimiter: str, width: int) -> tuple[str, int]:
    """The text of the row that begins at a line, and the place of the line after it."""
    alone = str(rows[first]["text"]), first + 1
    text = ""
    for place, row in enumerate(rows[first : first + MOST_LINES], start=first):
        text += str(row["text"])
        if not row["is_utf8"] or len(text) > _MOST_TEXT:
            return alone
        if '"' not in str(row["text"]):
            continue
        fields = split_line(text, delimiter)
        if fields is Broken.MISPLACED:
            return alone
        if isinstance(fields, list):
            return (text, place + 1) if len(fields) == width else alone
    return alone
