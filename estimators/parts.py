"""Pieces in smaller parts, for models that keep so much of a window that a piece leaves the processor's cache."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from driftbook.estimators.batches import Answer, Kernel, Piece
from driftbook.estimators.windows import Array

Cut = tuple[slice, slice]
"""Rows, and blocks."""


def in_parts(kernel: Kernel, size: int) -> Kernel:
    """The kernel that works on parts of some `size` observations in their segments; bits do not depend on it."""

    def fit_piece(piece: Piece) -> Answer:
        cuts = list(_cuts(piece, size))
        if len(cuts) == 1:
            return kernel(piece)
        columns: dict[str, Array] = {}
        status = np.empty(piece.shape, dtype=np.int8)
        for cut in cuts:
            part = _part(piece, cut)
            found = kernel(part)
            status[cut] = found.status.reshape(part.shape)
            for name, values in found.columns.items():
                if name not in columns:
                    columns[name] = np.empty(piece.shape)
                columns[name][cut] = values.reshape(part.shape)
        return Answer(columns, status)

    return fit_piece


def _cuts(piece: Piece, size: int) -> Iterator[Cut]:
    rows, blocks, _ = piece.shape
    segment = piece.lookback + piece.offsets
    some_blocks = max(1, min(blocks, size // segment))
    some_rows = max(1, size // (segment * blocks))
    for row in range(0, rows, some_rows):
        for block in range(0, blocks, some_blocks):
            yield slice(row, min(row + some_rows, rows)), slice(block, min(block + some_blocks, blocks))


def _part(piece: Piece, cut: Cut) -> Piece:
    rows, blocks = cut
    start, stop = blocks.start * piece.lookback, blocks.stop * piece.lookback + piece.offsets
    steps = None if piece.steps is None else piece.steps[rows, start : stop - 1]
    return replace(piece, x=piece.x[rows, start:stop], dt=piece.dt[cut], steps=steps)
