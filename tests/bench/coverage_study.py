"""How often the 95 % intervals hold the truth, for every model: runs cells, keeps them, prints the table of the guide.

    python tests/bench/coverage_study.py run --models ou,gbm --lookbacks 60,250 --seconds 600
    python tests/bench/coverage_study.py table > store/guide/coverage.md

A cell is a truth at a lookback. Cells are kept in the JSON file that DRIFTBOOK_COVERAGE names, by default in the
temporary folder; what is there with as many replications as wanted is not run again.
"""

import argparse
import json
import os
import sys
import tempfile
import time
import zlib
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from study_truths import CLOSED, LOOKBACKS, TRUTHS

from driftbook.estimators import MODELS, Status

AT_ONCE = 500_000  # observations that are simulated and fitted at one time
WANTED = {True: 10_000, False: 2_000}  # replications of closed forms, and of the others
STANDARD_ERRORS = 3.0
OF_LEVEL = ("theta",)  # no end on either side is an answer for these: the set is the whole line
HIDDEN = (Status.NOT_CONVERGED, Status.FLAT, Status.OUT_OF_RANGE, Status.DISCRETE)


@dataclass(frozen=True)
class Share:
    """Of how many windows the interval of a column was given, of how many it held the truth."""

    given: int
    held: int


def kept_in():
    return Path(os.environ.get("DRIFTBOOK_COVERAGE", Path(tempfile.gettempdir()) / "driftbook_coverage.json"))


def kept():
    return json.loads(kept_in().read_text()) if kept_in().exists() else {}


def key_of(truth, n):
    return f"{truth.model} | {truth.name} | {n}"


def judged(fit, column, truth):
    """Of each window: whether it has an interval of this column, and whether the truth lies in it."""
    value, lower, upper = (fit.columns[f"{column}{end}"] for end in ("", "_lower", "_upper"))
    usable = ~np.isin(fit.status, HIDDEN)
    given = usable & (np.isfinite(lower) | np.isfinite(upper))
    if column in OF_LEVEL:
        given |= usable & np.isfinite(value)
    held = ~(truth < lower) & ~(truth > upper)
    if column == "half_life":  # with kappa's set [0, 0] there is none: it holds the truth where that is no pull
        none = fit.columns["kappa_upper"] == 0
        given, held = given | none, np.where(none, np.isinf(truth), held)
    return given, given & held


def powers_of_z(drift, centre, scale):
    """Coefficients of the true drift in z = (x − centre)/scale, shape (4, windows)."""
    d0, d1, d2, d3 = drift
    return np.stack(
        [
            d0 + centre * (d1 + centre * (d2 + centre * d3)),
            scale * (d1 + centre * (2 * d2 + 3 * centre * d3)),
            scale**2 * (d2 + 3 * centre * d3),
            scale**3 * d3 * np.ones_like(centre),
        ]
    )


def true_columns(truth, fit):
    columns = dict(truth)
    if "drift" in columns:
        of_z = powers_of_z(columns.pop("drift"), fit.columns["centre"], fit.columns["scale"])
        columns |= dict(zip(("a0", "a1", "a2", "a3"), of_z, strict=True))
    return columns


def run_cell(truth, n, replications, seed=0):
    """Shares of all columns with a truth, over so many windows of n steps."""
    found, statuses = {}, np.zeros(len(Status), dtype=int)
    at_once = max(1, AT_ONCE // n)
    for start in range(0, replications, at_once):
        paths = min(at_once, replications - start)
        rng = np.random.default_rng([zlib.crc32(key_of(truth, n).encode()), start, seed])
        windows = truth.make(rng, n, paths)
        steps = windows.steps if np.ndim(windows.steps) == 0 else np.broadcast_to(windows.steps, (paths, n))
        fit = MODELS[truth.model].fit(windows.x, steps)
        statuses += np.bincount(fit.status, minlength=len(Status))
        for column, value in true_columns(windows.truth, fit).items():
            given, held = judged(fit, column, value)
            before = found.get(column, Share(0, 0))
            found[column] = Share(before.given + int(given.sum()), before.held + int(held.sum()))
    shares = {column: [share.given, share.held] for column, share in found.items()}
    words = {Status(k).word: int(count) for k, count in enumerate(statuses) if count}
    return {"replications": replications, "shares": shares, "statuses": words}


def band(truth, column):
    """Least and most that an interval may cover."""
    if column in truth.at_zero:
        return 0.97, 1.0  # one side only can miss
    if truth.fat_tails and column in {"sigma", "sigma_s", "total_volatility"}:
        return 0.90, 0.965
    return 0.94, 0.965


def verdict(truth, column, given, held):
    """A word where the share is outside the band by more than three standard errors of the simulation."""
    least, most = band(truth, column)
    share = held / given
    if share < least - STANDARD_ERRORS * np.sqrt(least * (1 - least) / given):
        return "low"
    if share > most + STANDARD_ERRORS * np.sqrt(most * (1 - most) / given):
        return "high"
    return ""


FEWEST = 50  # windows with an interval, below which nothing is said


def cell_text(truth, column, cell):
    if cell is None or column not in cell["shares"]:
        return "·"
    given, held = cell["shares"][column]
    if given < FEWEST:
        return "–"
    text = f"{100 * held / given:.1f}"
    word = verdict(truth, column, given, held)
    share = given / cell["replications"]
    return text + (f" **{word}**" if word else "") + (f" ({100 * share:.0f} %)" if share < 0.985 else "")


def lines_of(model, cells):
    truths = [truth for truth in TRUTHS if truth.model == model]
    yield f"### {model}\n"
    yield "| truth | column | " + " | ".join(map(str, LOOKBACKS)) + " | windows |"
    yield "|---|---|" + "---|" * (len(LOOKBACKS) + 1)
    for truth in truths:
        here = [cells.get(key_of(truth, n)) for n in LOOKBACKS]
        columns = dict.fromkeys(column for cell in here if cell for column in cell["shares"])
        counts = [f"{cell['replications']}" if cell else "–" for cell in here]
        windows = counts[0] if len(set(counts)) == 1 else ", ".join(counts)
        for column in columns:
            texts = " | ".join(cell_text(truth, column, cell) for cell in here)
            yield f"| {truth.name} | {column} | {texts} | {windows} |"
    yield ""


INTRODUCTION = """\
# How often the intervals hold the truth

Every interval of driftbook is a 95 % one. Here is how often it holds the truth, in windows simulated from a known one:
per model and truth, at four lookbacks, in percent. Steps are of a day (1/252 of a year) unless the truth says
otherwise.

- **low** and **high**: below 94 or above 96.5 by more than three standard errors of the simulation. At exactly no pull
  or no noise only one side can miss, so kappa, its half-life and noise may hold it in 97 to 100 %; with Student-5 and
  GARCH steps sigma may hold it in 90 to 96.5 %, and its truth is the average over the window.
- A percentage in brackets: the share of windows in which there was such an interval at all; without one it was 98.5 %
  or more. Shares count windows with an interval only. An empty end means no end on that side, and holds what lies
  there; theta with two empty ends holds everything.
- "–": fewer than 50 windows had an interval. "·": not run.
- "windows": how many were simulated for each of the four lookbacks.
- calendar: 1, 2, 3 or 4 days of 365, as with weekends and holidays. scattered: steps from next to none to several days.
  GARCH: (0.10, 0.85) with Student-6 shocks. Feller: 2 kappa theta/sigma².

Where it falls short: merton with few jumps in the window, whose number, size and share of the volatility a window of
60 or 250 steps hardly tells (its intervals of jump_mean, jump_sd and total_volatility are to be taken as too short
there); inertial in windows of 60 steps that hold less than two swings, for omega, and for damping near the strongest
that steps can show; the quartic's coefficients where volatility comes in waves; sigma of ou with Student-5 steps at a
lookback of 60. Where ckls cannot tell sigma from gamma, its intervals hold the truth more often than they say, and eta
of inertial does under strong damping.

Made by `tests/bench/coverage_study.py`.
"""


def table(cells):
    yield INTRODUCTION
    for model in dict.fromkeys(truth.model for truth in TRUTHS):
        yield from lines_of(model, cells)


def run(models, lookbacks, seconds, replications):
    cells, begun = kept(), time.monotonic()
    for n in lookbacks:
        for truth in TRUTHS:
            key, wanted = key_of(truth, n), replications or WANTED[truth.model in CLOSED]
            if truth.model not in models or cells.get(key, {"replications": 0})["replications"] >= wanted:
                continue
            if time.monotonic() - begun > seconds:
                return
            start = time.process_time()
            cells[key] = run_cell(truth, n, wanted)
            kept_in().write_text(json.dumps(cells, indent=1))
            print(f"{time.process_time() - start:7.1f} s  {key}  {cells[key]['shares']}", flush=True)


def main():
    parser = argparse.ArgumentParser()
    parser.add_argument("command", choices=("run", "table"))
    parser.add_argument("--models", default=",".join(MODELS))
    parser.add_argument("--lookbacks", default=",".join(map(str, LOOKBACKS)))
    parser.add_argument("--seconds", type=float, default=np.inf)
    parser.add_argument("--replications", type=int, default=0)
    given = parser.parse_args()
    if given.command == "table":
        sys.stdout.write("\n".join(table(kept())))
        return
    lookbacks = [int(n) for n in given.lookbacks.split(",")]
    run(given.models.split(","), lookbacks, given.seconds, given.replications)


if __name__ == "__main__":
    main()
