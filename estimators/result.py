"""What a fit returns: named arrays, one entry a window."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, eq=False)
class Fit:
    """The fits of one model on a batch of windows.

    Every array has the same shape: ``(..., windows)`` from `rolling`, ``(...)`` from `fit`. A column is also an
    attribute: ``fit.kappa`` is ``fit.columns["kappa"]``.

    Attributes
    ----------
    model : str
        The model's name.
    n : integer array
        Number of steps that were used.
    columns : mapping of str to float64 array
        One array a column of the model, in the model's order. NaN where a number is not defined, has no end, or was
        not asked for. A column of kind ``"boolean"`` holds 1.0, 0.0 or NaN, so that "not known" has a value too.
    status : int8 array
        A `Status` a window.
    """

    model: str
    n: NDArray[np.int64]
    columns: Mapping[str, NDArray[np.float64]]
    status: NDArray[np.int8]

    def __getattr__(self, name: str) -> NDArray[np.float64]:
        """Return the column of that name."""
        if name.startswith("_") or name == "columns":  # asked for while an object is copied or read back
            raise AttributeError(name)
        try:
            return self.columns[name]
        except KeyError:
            raise AttributeError(f"{self.model} has no column {name!r}; it has {', '.join(self.columns)}") from None
