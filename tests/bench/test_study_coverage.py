"""The coverage study: its table that ships is right, and its words follow from its numbers.

The long part is run by hand: it simulates every cell of the table anew, from other seeds, and compares.

    OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1 pytest tests/bench/test_study_coverage.py -m study
"""

import re
from pathlib import Path

import coverage_study
import numpy as np
import pytest
from coverage_study import LOOKBACKS, cell_text, key_of, lines_of, run_cell, verdict
from study_truths import TRUTHS

GUIDE = Path(__file__).resolve().parents[2] / "store" / "guide" / "coverage.md"
AGAIN = {60: 1000, 250: 1000, 1000: 200, 2500: 100}  # windows of a cell that is run again
STANDARD_ERRORS = 4.5  # of the difference of two shares: of some 2000 none is expected beyond
CELL = re.compile(r"(?P<share>[\d.]+)(?: \*\*\w+\*\*)?(?: \((?P<given>\d+) %\))?$")
BY_NAME = {(truth.model, truth.name): truth for truth in TRUTHS}


def shipped():
    """Of each cell: by column the share of windows that held the truth, and how many windows had an interval."""
    found, model = {}, None
    for line in GUIDE.read_text(encoding="utf-8").splitlines():
        if line.startswith("### "):
            model = line[4:]
        fields = [field.strip() for field in line.strip("|").split("|")]
        if len(fields) != 3 + len(LOOKBACKS) or (model, fields[0]) not in BY_NAME:
            continue
        windows = (fields[-1].split(", ") * len(LOOKBACKS))[: len(LOOKBACKS)]
        for n, text, count in zip(LOOKBACKS, fields[2:-1], windows, strict=True):
            match = CELL.match(text)
            if match:
                given = float(match["given"] or 100) / 100 * int(count)
                found.setdefault((model, fields[0], n), {})[fields[1]] = float(match["share"]) / 100, given
    return found


SHIPPED = shipped()


def test_every_truth_is_in_the_table_that_ships():
    assert {key[:2] for key in SHIPPED} == set(BY_NAME)


@pytest.mark.study
@pytest.mark.parametrize("key", SHIPPED, ids=str)
def test_the_table_that_ships_is_right(key):
    model, name, n = key
    cell = run_cell(BY_NAME[model, name], n, AGAIN[n], seed=1)
    for column, (share, windows) in SHIPPED[key].items():
        given, held = cell["shares"][column]
        if given < coverage_study.FEWEST:
            continue
        middle = np.clip((share * windows + held) / (windows + given), 0.02, 0.98)
        error = np.sqrt(middle * (1 - middle) * (1 / windows + 1 / given))
        assert abs(held / given - share) < STANDARD_ERRORS * error + 5e-4, column


def truth_of(model, name):
    return BY_NAME[model, name]


@pytest.mark.parametrize(
    ("name", "column", "held", "word"),
    [
        ("kappa 5", "kappa", 9500, ""),
        ("kappa 5", "kappa", 9330, ""),
        ("kappa 5", "kappa", 9320, "low"),
        ("kappa 5", "kappa", 9710, "high"),
        ("no pull", "kappa", 9710, ""),
        ("no pull", "kappa", 10000, ""),
        ("no pull", "kappa", 9600, "low"),
        ("no pull", "sigma", 9710, "high"),
        ("kappa 5, GARCH", "sigma", 9000, ""),
        ("kappa 5, GARCH", "sigma", 8900, "low"),
        ("kappa 5, GARCH", "kappa", 9000, "low"),
    ],
)
def test_the_word_of_a_cell(name, column, held, word):
    assert verdict(truth_of("ou", name), column, 10000, held) == word


def test_a_cell_tells_how_many_windows_had_an_interval():
    truth = truth_of("ou", "kappa 5")
    cell = {"replications": 1000, "shares": {"kappa": [1000, 950], "theta": [800, 700], "sigma": [40, 30]}}
    assert [cell_text(truth, column, cell) for column in ("kappa", "theta", "sigma", "half_life")] == [
        "95.0",
        "87.5 **low** (80 %)",
        "–",
        "·",
    ]
    assert cell_text(truth, "kappa", None) == "·"


def test_cells_are_kept_and_not_run_again(tmp_path, monkeypatch, capsys):
    monkeypatch.setenv("DRIFTBOOK_COVERAGE", str(tmp_path / "cells.json"))
    coverage_study.run(["abm"], [60], np.inf, 50)
    kept, first = coverage_study.kept(), capsys.readouterr().out
    assert set(kept) == {key_of(truth, 60) for truth in TRUTHS if truth.model == "abm"}
    assert len(first.splitlines()) == len(kept)
    coverage_study.run(["abm"], [60], np.inf, 50)
    assert coverage_study.kept() == kept
    assert not capsys.readouterr().out
    rows = [line for line in lines_of("abm", kept) if line.startswith("| Gaussian")]
    assert [row.split("|")[2].strip() for row in rows] == ["mu", "sigma"]
    assert rows[0].endswith("| · | · | · | 50, –, –, – |")


def test_a_cell_depends_on_its_name_and_seed_alone():
    truth = truth_of("ou", "kappa 20")
    assert run_cell(truth, 60, 100) == run_cell(truth, 60, 100)
    assert run_cell(truth, 60, 100) != run_cell(truth, 60, 100, seed=1)
