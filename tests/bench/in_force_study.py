"""Which model is put in force on which truth: simulated windows, all models, the rule of the book at a first run.

    python tests/bench/in_force_study.py run
    python tests/bench/in_force_study.py table > store/guide/in_force.md

The truths are prices; `latest` would show the model counted here. Counts are kept in the JSON file that
DRIFTBOOK_IN_FORCE names, by default in the temporary folder; what is there is not run again.
"""

import json
import os
import sys
import tempfile
import zlib
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np
from study_paths import DAY, brownian, pulled, shocks, with_jumps

from driftbook.estimators import MODELS, Status
from driftbook.estimators.compare import bic
from driftbook.store.in_force import Candidate, choose
from driftbook.store.plan import BEST

WINDOWS = {60: 500, 250: 500, 1000: 100}  # of each truth, by lookback
VOLATILITY = 0.3
STEP = VOLATILITY * np.sqrt(DAY)


def walk(rng, n, paths, kind="gaussian"):
    return brownian(shocks(rng, kind, n, paths)[0], DAY, 0.0, VOLATILITY)


def with_pull(rng, n, paths, kappa):
    return pulled(rng, rng.standard_normal((paths, n)), DAY, kappa, 0.0, VOLATILITY)


def partly_unchanged(rng, n, paths):
    """A walk whose price is written down again as it was in one of five steps."""
    x = walk(rng, n, paths)
    stale = rng.random((paths, n)) < 0.2
    for k in range(1, n + 1):
        x[:, k] = np.where(stale[:, k - 1], x[:, k - 1], x[:, k])
    return x


def bouncing(rng, n, paths, share):
    x = walk(rng, n, paths)
    return x + share * STEP * rng.standard_normal(x.shape)


def jumping(rng, n, paths):
    return with_jumps(rng, rng.standard_normal((paths, n)), DAY, 0.0, VOLATILITY, 10.0, -0.02, 0.08)


TRUTHS = {
    "random walk": walk,
    "ou, half-life 35 days": lambda *a: with_pull(*a, 5.0),
    "ou, half-life 9 days": lambda *a: with_pull(*a, 20.0),
    "ou, half-life 3 days": lambda *a: with_pull(*a, 60.0),
    "walk, Student-5 steps": lambda *a: walk(*a, "student5"),
    "walk, GARCH steps": lambda *a: walk(*a, "garch"),
    "walk, 20 % unchanged": partly_unchanged,
    "walk, bounce of ½ a step": lambda *a: bouncing(*a, 0.5),
    "walk, bounce of a step": lambda *a: bouncing(*a, 1.0),
    "walk, 10 jumps a year": jumping,
}


def in_force(x):
    """The model in force of each window of positive values, shape (m, n + 1), all steps a day."""
    n = x.shape[1] - 1
    fits = {name: (model.of_logs or model).fit(x, DAY) for name, model in MODELS.items()}
    criteria = {name: bic(fit.loglik, len(MODELS[name].parameters), n) for name, fit in fits.items()}
    return [_choice(fits, criteria, k) for k in range(len(x))]


def _choice(fits, criteria, k):
    found = []
    for name, fit in fits.items():
        model, criterion = MODELS[name], float(criteria[name][k])
        p = float(fit.no_reversion_p[k]) if model.tests_pull else None
        usable = criterion if np.isfinite(criterion) else None
        found.append(Candidate(name, Status(fit.status[k]).word, usable, model.has_pull, p))
    free = min(one.bic for one in found if one.is_usable and not one.has_pull)
    found = [one if MODELS[one.model].tests_pull else replace(one, without_pull=free) for one in found]
    return choose(found, BEST, None).model


def counted(name, n, windows, seed=0):
    """How often each model is in force."""
    rng = np.random.default_rng([zlib.crc32(name.encode()), n, seed])
    return Counter(in_force(40 * np.exp(TRUTHS[name](rng, n, windows))))


INTRODUCTION = """\
# Which model is put in force on which truth

Simulated daily prices, all ten models fitted to each window, and the model that a first run puts in force: the best by
bic, but one with a pull only where no_reversion_p is below 0.05 (the quartic, which has none, where it is ahead of all
models without a pull), and merton never where more than 5 % of steps leave the price unchanged. In percent of the
windows; **pull** is the share of all models with one. Volatility is 0.3 a year, lookbacks are in steps. On later runs a
model has to lead by 6 in bic twice before it takes over.

What it tells: where there is no pull one is put in force in some 3 to 8 % of windows. A half-life of 35 days is seen
in a sixth of windows of a year, and nearly always in four years. Fat tails and GARCH look like jumps to merton, the
more so the longer the window; its sigma is then that between "jumps", and `latest` shows the total. A bounce of a
whole step's standard deviation looks like a pull in two windows of five, and ou_noise is seldom ahead of it: where
noise_share is above 0.1, `latest` says so. Which of ou, exp_ou and cir describes a pull is hardly in the data.

Made by `tests/bench/in_force_study.py`.
"""


def kept_in():
    return Path(os.environ.get("DRIFTBOOK_IN_FORCE", Path(tempfile.gettempdir()) / "driftbook_in_force.json"))


def kept():
    return json.loads(kept_in().read_text()) if kept_in().exists() else {}


def run():
    found = kept()
    for n, windows in WINDOWS.items():
        for name in TRUTHS:
            key = f"{name} | {n}"
            if key not in found:
                found[key] = counted(name, n, windows)
                kept_in().write_text(json.dumps(found, indent=1))
                print(key, dict(found[key]), flush=True)


def table(found):
    yield INTRODUCTION
    yield "| truth | lookback | windows | " + " | ".join(MODELS) + " | **pull** |"
    yield "|---|---|---|" + "---|" * (len(MODELS) + 1)
    for name in TRUTHS:
        for n in WINDOWS:
            counts = found.get(f"{name} | {n}")
            if counts is None:
                continue
            windows = sum(counts.values())
            shares = {model: 100 * counts.get(model, 0) / windows for model in MODELS}
            pull = sum(share for model, share in shares.items() if MODELS[model].has_pull)
            texts = " | ".join(f"{share:.1f}" if share else "·" for share in shares.values())
            yield f"| {name} | {n} | {windows} | {texts} | {pull:.1f} |"


if __name__ == "__main__":
    if sys.argv[1:] == ["table"]:
        print("\n".join(table(kept())))
    else:
        run()
