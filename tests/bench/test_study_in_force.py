"""The table of the models in force that ships is right: windows from other seeds give its shares of models with a pull.

Run by hand:

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_study_in_force.py -m study
"""

from pathlib import Path

import numpy as np
import pytest
from in_force_study import TRUTHS, WINDOWS, counted

from driftbook.estimators import MODELS

GUIDE = Path(__file__).resolve().parents[2] / "store" / "guide" / "in_force.md"
AGAIN = {60: 200, 250: 200, 1000: 50}  # windows of a row that are simulated again
STANDARD_ERRORS = 4.0  # of the difference of two shares: of 90 none is expected beyond


def shipped():
    """Of each row: windows, and the shares of abm and gbm, of merton, and of all models with a pull."""
    rows = {}
    for line in GUIDE.read_text(encoding="utf-8").splitlines():
        fields = [field.strip() for field in line.strip("|").split("|")]
        if fields[0] in TRUTHS:
            shares = [0.0 if text == "·" else float(text) / 100 for text in fields[3:]]
            by_model = dict(zip(MODELS, shares, strict=False))
            kinds = by_model["abm"] + by_model["gbm"], by_model["merton"], shares[-1]
            rows[fields[0], int(fields[1])] = int(fields[2]), kinds
    return rows


SHIPPED = shipped()


def test_every_truth_and_lookback_is_in_the_table_that_ships():
    assert set(SHIPPED) == {(name, n) for name in TRUTHS for n in WINDOWS}


@pytest.mark.study
@pytest.mark.parametrize(("name", "n"), SHIPPED)
def test_the_table_that_ships_is_right(name, n):
    windows, shares = SHIPPED[name, n]
    again = AGAIN[n]
    found = counted(name, n, again, seed=1)
    pull = sum(count for model, count in found.items() if MODELS[model].has_pull)
    for count, share in zip((found["abm"] + found["gbm"], found["merton"], pull), shares, strict=True):
        middle = np.clip((share * windows + count) / (windows + again), 0.02, 0.98)
        error = np.sqrt(middle * (1 - middle) * (1 / windows + 1 / again))
        assert abs(count / again - share) < STANDARD_ERRORS * error + 5e-4
