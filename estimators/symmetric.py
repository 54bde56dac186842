"""Symmetric positive definite systems of a few unknowns, many at once, by L D L′ without pivoting.

References
----------
Golub, G. H. & Van Loan, C. F. (2013), Matrix Computations, 4th ed., Johns Hopkins, section 4.1.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from driftbook.estimators.windows import Array

Entry = Callable[[int, int], Array]
"""Of a row and a column not beyond it: that entry of every matrix, shape (m,)."""


@dataclass(frozen=True)
class Factor:
    """L D L′ of many matrices.

    Attributes
    ----------
    rows : list of list of array
        L below its diagonal of ones, row by row; each array of shape (m,).
    pivots : list of array
        D.
    share : array, shape (m,)
        The least pivot over the diagonal entry that it is left of: how much elimination cancelled. Not positive where
        a matrix is not positive definite.
    """

    rows: list[list[Array]]
    pivots: list[Array]
    share: Array

    def take(self, places: NDArray[np.intp]) -> Factor:
        """Of some of the matrices."""
        rows = [[entry[places] for entry in row] for row in self.rows]
        return Factor(rows, [pivot[places] for pivot in self.pivots], self.share[places])

    def solve(self, right: Sequence[Array]) -> list[Array]:
        """The solutions of the systems with these right-hand sides, one array an unknown."""
        found: list[Array] = []
        for value, row in zip(right, self.rows, strict=True):
            for entry, before in zip(row, found, strict=True):
                value = value - entry * before
            found.append(value)
        for i in range(len(found) - 1, -1, -1):
            value = np.asarray(found[i] / self.pivots[i])
            for below in range(i + 1, len(found)):
                value -= self.rows[below][i] * found[below]
            found[i] = value
        return found

    def inverse(self) -> list[list[Array]]:
        """Entries of the inverses on and below the diagonal, row by row."""
        size = len(self.pivots)
        low: list[list[Array]] = []  # the inverse of L below its diagonal of ones
        for row in self.rows:
            low.append([])
            for j, entry in enumerate(row):
                total = -entry
                for k in range(j + 1, len(row)):
                    total = total - row[k] * low[k][j]
                low[-1].append(total)
        scaled = [[each / pivot for each in row] + [1 / pivot] for row, pivot in zip(low, self.pivots, strict=True)]
        found: list[list[Array]] = []
        for i in range(size):
            found.append([])
            for j in range(i + 1):
                total = scaled[i][j]
                for k in range(i + 1, size):
                    total = total + low[k][i] * scaled[k][j]
                found[-1].append(total)
        return found


def factor(entry: Entry, size: int) -> Factor:
    """Factor matrices of that size, given by their entries on and below the diagonal."""
    rows: list[list[Array]] = []
    pivots: list[Array] = []
    share = np.full(entry(0, 0).shape, np.inf)
    for i in range(size):
        scaled: list[Array] = []  # L D of this row
        for j in range(i):
            value = entry(i, j)
            for k in range(j):
                value = value - scaled[k] * rows[j][k]
            scaled.append(value)
        row = [value / pivot for value, pivot in zip(scaled, pivots, strict=True)]
        pivot = entry(i, i)
        for left, right in zip(scaled, row, strict=True):
            pivot = pivot - left * right
        share = np.minimum(share, pivot / entry(i, i))
        rows.append(row)
        pivots.append(pivot)
    return Factor(rows, pivots, share)
