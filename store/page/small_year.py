"""A year of a series in the height of a line: the last value of each period, and its lowest and highest."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
from markupsafe import Markup
from numpy.typing import NDArray

FINE, COARSE = 52, 26
_MANY = 300
_HEIGHT = 28
_EDGE = 2  # what the line needs above and below


def periods_for(series: int) -> int:
    """Weeks, or for very many series fortnights, so that the sheet stays light."""
    return COARSE if series > _MANY else FINE


def small_years(columns: Mapping[str, NDArray[Any]], periods: int) -> Iterator[tuple[str, Markup]]:
    """A drawing for each series, from columns series (in pieces), period, last, lowest and highest."""
    names = columns["series"]
    if not len(names):
        return
    starts = np.flatnonzero(np.concatenate([[True], names[1:] != names[:-1]]))
    lengths = np.diff(np.append(starts, len(names)))
    top = np.maximum.reduceat(columns["highest"], starts)
    span = top - np.minimum.reduceat(columns["lowest"], starts)
    scale = np.where(span > 0, (_HEIGHT - 2 * _EDGE) / np.where(span > 0, span, 1.0), 0.0)
    above = np.where(span > 0, _EDGE, _HEIGHT // 2)

    def down(column: str) -> NDArray[np.int64]:
        """Pixels from the top."""
        values = np.repeat(top, lengths) - columns[column]
        heights: NDArray[np.int64] = np.rint(np.repeat(above, lengths) + values * np.repeat(scale, lengths)).astype(int)
        return heights

    at, last, high, low = columns["period"], down("last"), down("highest"), down("lowest")
    line = [f"l{x}{y:+}" if y else f"h{x}" for x, y in zip(_steps(at), _steps(last), strict=True)]
    band = [f"m{x}{y:+}v{h}" for x, y, h in zip(_steps(at), _steps(high, low), (low - high).tolist(), strict=True)]
    for start, length in zip(starts.tolist(), lengths.tolist(), strict=True):
        line[start] = f"M{at[start]} {last[start]}{'h1' if length == 1 else ''}"
        band[start] = f"M{at[start]} {high[start]}v{low[start] - high[start]}"
        stop = start + length
        yield names[start], _drawing("".join(line[start:stop]), "".join(band[start:stop]), periods - 1)


def _steps(there: NDArray[Any], before: NDArray[Any] | None = None) -> list[int]:
    """From each place to the next, which is shorter to write than the places; the first of a series is written over."""
    steps: list[int] = (there - np.roll(there if before is None else before, 1)).tolist()
    return steps


def _drawing(line: str, band: str, width: int) -> Markup:
    """The band is a stroke a period wide for each of them."""
    return Markup(  # noqa: S704
        f'<svg class=y viewBox="0 0 {width} {_HEIGHT}" preserveAspectRatio=none aria-hidden=true>'
        f'<path d="{band}"/><path d="{line}"/></svg>'
    )
