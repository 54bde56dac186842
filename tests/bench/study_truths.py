"""The truths of the coverage study: for each model a grid of processes, and what each of its columns should hold.

A truth is a function of a generator, the number of steps and that of paths. It gives windows, their steps, and by name
the true values of columns: one number, or one a window.
"""

from dataclasses import dataclass
from functools import partial

import numpy as np
import study_paths as paths_of
from study_paths import DAY, brownian, calendar, scattered, shocks

CLOSED = ("abm", "gbm", "ou", "exp_ou")
LOOKBACKS = (60, 250, 1000, 2500)


@dataclass(frozen=True)
class Truth:
    model: str
    name: str
    make: object
    fat_tails: bool = False
    at_zero: frozenset = frozenset()  # columns whose truth is at the end of their range


@dataclass(frozen=True)
class Windows:
    x: np.ndarray
    steps: object
    truth: dict


def steps_by(kind, rng, n):
    return {"equal": lambda: DAY, "calendar": lambda: calendar(rng, n), "scattered": lambda: scattered(rng, n)}[kind]()


def half_life(kappa):
    return np.log(2) / kappa if kappa > 0 else np.inf


def abm(rng, n, paths, *, mu=3.0, sigma=7.0, kind="gaussian", gaps="equal"):
    steps = steps_by(gaps, rng, n)
    noise, size = shocks(rng, kind, n, paths)
    return Windows(40 + brownian(noise, steps, mu, sigma), steps, {"mu": mu, "sigma": sigma * size})


def gbm(rng, n, paths, *, mu=0.05, sigma=0.3, kind="gaussian", gaps="equal"):
    steps = steps_by(gaps, rng, n)
    noise, size = shocks(rng, kind, n, paths)
    logs = brownian(noise, steps, mu - sigma**2 / 2, sigma)
    truth = {"sigma": sigma * size} | ({"mu": mu} if kind == "gaussian" else {})
    return Windows(40 * np.exp(logs), steps, truth)


def ou(rng, n, paths, *, kappa, theta=40.0, sigma=7.0, kind="gaussian", gaps="equal", start=None, log=False):
    steps = steps_by(gaps, rng, n)
    noise, size = shocks(rng, kind, n, paths)
    x = paths_of.pulled(rng, noise, steps, kappa, theta, sigma, start)
    truth = {"kappa": kappa, "sigma": sigma * size, "half_life": half_life(kappa)}
    if kappa > 0:
        truth["theta"] = theta
    return Windows(np.exp(x) if log else x, steps, truth)


def cir(rng, n, paths, *, kappa, feller, sigma=0.5, kind="gaussian", gaps="equal"):
    steps = steps_by(gaps, rng, n)
    a = feller * sigma**2 / 2
    if kappa == 0:
        x = paths_of.square_root(rng, paths, n, steps, a, kappa, sigma, first=1.0)
    elif kind == "gaussian":
        x = paths_of.square_root(rng, paths, n, steps, a, kappa, sigma)
    else:
        noise, size = shocks(rng, kind, n, paths)
        return Windows(
            paths_of.square_root_with(noise, steps, kappa, a / kappa, sigma),
            steps,
            {"kappa": kappa, "theta": a / kappa, "sigma": sigma * size, "half_life": half_life(kappa)},
        )
    truth = {"kappa": kappa, "sigma": sigma, "half_life": half_life(kappa), "feller_ratio": feller}
    if kappa > 0:
        truth["theta"] = a / kappa
    return Windows(x, steps, truth)


def ckls(rng, n, paths, *, kappa, gamma, local=0.4, theta=1.0, gaps="equal"):
    """`local` is sigma·theta^(gamma − 1), the relative volatility at theta."""
    steps = steps_by(gaps, rng, n)
    sigma = local * theta ** (1 - gamma)
    x = paths_of.elastic(rng, paths, n, steps, kappa, theta, sigma, gamma)
    mean = np.exp(np.log(x[:, :-1]).mean(axis=1))
    truth = {"kappa": kappa, "sigma": sigma, "gamma": gamma, "half_life": half_life(kappa)}
    truth["local_volatility"] = sigma * mean**gamma
    if kappa > 0:
        truth["theta"] = theta
    if gamma > 1:
        del truth["half_life"]
    return Windows(x, steps, truth)


def quartic(rng, n, paths, *, drift, sigma, first=0.0, kind="gaussian", gaps="equal"):
    """The true coefficients depend on the centre and scale of a window: the study works them out from `drift`."""
    steps = steps_by(gaps, rng, n)
    noise, size = shocks(rng, kind, n, paths)
    x = paths_of.cubic(rng, noise, steps, drift, sigma, first)
    truth = {"drift": np.array(drift), "sigma": sigma * size}
    roots = np.sort(np.roots(drift[::-1])) if drift[3] < 0 else np.zeros(1)
    if np.isreal(roots).all() and np.ptp(roots.real) > 0:
        truth |= dict(zip(("bottom_lower", "barrier", "bottom_upper"), roots.real, strict=True))
    return Windows(x, steps, truth)


def merton(rng, n, paths, *, sigma=0.25, rate=10.0, mean=-0.02, sd=0.06, mu=0.05, kind="gaussian", gaps="equal"):
    steps = steps_by(gaps, rng, n)
    noise, size = shocks(rng, kind, n, paths)
    b = mu - sigma**2 / 2 - rate * np.expm1(mean + sd**2 / 2)
    x = 40 * np.exp(paths_of.with_jumps(rng, noise, steps, b, sigma, rate, mean, sd))
    if kind != "gaussian" or rate == 0:
        return Windows(x, steps, {"total_volatility": sigma * size})
    total = np.sqrt(sigma**2 + rate * (mean**2 + sd**2))
    names = ("mu", "sigma", "jump_rate", "jump_mean", "jump_sd", "total_volatility")
    return Windows(x, steps, dict(zip(names, (mu, sigma, rate, mean, sd, total), strict=True)))


def inertial(rng, n, paths, *, damping, kappa_s, sigma_s=0.3, gaps="equal"):
    steps = steps_by(gaps, rng, n)
    stiffness, eta = damping * kappa_s, damping * sigma_s
    x = 3 + paths_of.swinging(rng, paths, n, steps, damping, stiffness, eta)
    names = ("damping", "omega", "theta", "eta", "kappa_s", "sigma_s")
    return Windows(x, steps, dict(zip(names, (damping, np.sqrt(stiffness), 3.0, eta, kappa_s, sigma_s), strict=True)))


def ou_noise(rng, n, paths, *, kappa, noise, sigma=0.3, kind="gaussian", gaps="equal"):
    hidden = ou(rng, n, paths, kappa=kappa, theta=3.0, sigma=sigma, kind=kind, gaps=gaps)
    y = hidden.x + noise * rng.standard_normal(hidden.x.shape)
    return Windows(y, hidden.steps, hidden.truth | {"noise": noise})


EDGES = {"kappa": ("kappa", "half_life"), "noise": ("noise",)}


def grid(make, cases, model=None):
    model = model or make.__name__
    for name, settings in cases.items():
        yield Truth(
            model,
            name,
            partial(make, **settings),
            fat_tails=settings.get("kind", "gaussian") != "gaussian",
            at_zero=frozenset(
                column for setting, columns in EDGES.items() if settings.get(setting) == 0 for column in columns
            ),
        )


BROWNIAN = {
    "Gaussian": {},
    "Student-5": {"kind": "student5"},
    "GARCH": {"kind": "garch"},
    "calendar": {"gaps": "calendar"},
    "scattered": {"gaps": "scattered"},
}
PULLS = {
    "no pull": {"kappa": 0.0},
    "no pull, GARCH": {"kappa": 0.0, "kind": "garch"},
    "kappa 1": {"kappa": 1.0},
    "kappa 5": {"kappa": 5.0},
    "kappa 20": {"kappa": 20.0},
    "kappa 60": {"kappa": 60.0},
    "kappa 5, starts 3 sd away": {"kappa": 5.0, "start": 3.0},
    "kappa 5, Student-5": {"kappa": 5.0, "kind": "student5"},
    "kappa 20, Student-5": {"kappa": 20.0, "kind": "student5"},
    "kappa 5, GARCH": {"kappa": 5.0, "kind": "garch"},
    "kappa 20, GARCH": {"kappa": 20.0, "kind": "garch"},
    "no pull, calendar": {"kappa": 0.0, "gaps": "calendar"},
    "kappa 5, calendar": {"kappa": 5.0, "gaps": "calendar"},
    "kappa 20, calendar": {"kappa": 20.0, "gaps": "calendar"},
    "kappa 5, scattered": {"kappa": 5.0, "gaps": "scattered"},
    "kappa 20, scattered": {"kappa": 20.0, "gaps": "scattered"},
}
IN_LOGS = {"theta": 3.5, "sigma": 0.4, "log": True}
OF_LOGS = ("no pull", "kappa 5", "kappa 20", "kappa 20, Student-5", "kappa 5, GARCH", "kappa 5, calendar")
WELLS = {"drift": (0.0, 10.0, 0.0, -10.0), "sigma": 2.0, "first": 1.0}
ONE_WELL = {"drift": (0.0, -20.0, 0.0, 0.0), "sigma": 1.0}

TRUTHS = (
    *grid(abm, BROWNIAN),
    *grid(gbm, BROWNIAN | {"sigma 1": {"sigma": 1.0}}),
    *grid(ou, PULLS),
    *grid(ou, {name: PULLS[name] | IN_LOGS for name in OF_LOGS}, "exp_ou"),
    *grid(
        cir,
        {
            "no pull": {"kappa": 0.0, "feller": 4.0},
            "kappa 1, Feller 4": {"kappa": 1.0, "feller": 4.0},
            "kappa 5, Feller 4": {"kappa": 5.0, "feller": 4.0},
            "kappa 20, Feller 4": {"kappa": 20.0, "feller": 4.0},
            "kappa 5, Feller 1.5": {"kappa": 5.0, "feller": 1.5},
            "kappa 1, Feller 0.5": {"kappa": 1.0, "feller": 0.5},
            "kappa 5, Feller 0.5": {"kappa": 5.0, "feller": 0.5},
            "kappa 20, Feller 0.5": {"kappa": 20.0, "feller": 0.5},
            "kappa 5, Feller 4, calendar": {"kappa": 5.0, "feller": 4.0, "gaps": "calendar"},
            "kappa 5, Feller 20, Student-5": {"kappa": 5.0, "feller": 20.0, "kind": "student5"},
            "kappa 5, Feller 20, GARCH": {"kappa": 5.0, "feller": 20.0, "kind": "garch"},
        },
    ),
    *grid(
        ckls,
        {
            "kappa 0, gamma 1": {"kappa": 0.0, "gamma": 1.0},
            "kappa 1, gamma 1": {"kappa": 1.0, "gamma": 1.0},
            "kappa 5, gamma 0.5": {"kappa": 5.0, "gamma": 0.5},
            "kappa 5, gamma 1": {"kappa": 5.0, "gamma": 1.0},
            "kappa 5, gamma 1.5, level 0.05": {"kappa": 5.0, "gamma": 1.5, "theta": 0.05},
            "kappa 20, gamma 1": {"kappa": 20.0, "gamma": 1.0},
            "kappa 20, gamma 1.5": {"kappa": 20.0, "gamma": 1.5},
            "kappa 5, gamma 1, calendar": {"kappa": 5.0, "gamma": 1.0, "gaps": "calendar"},
        },
    ),
    *grid(
        quartic,
        {
            "no drift": {"drift": (0.0, 0.0, 0.0, 0.0), "sigma": 1.0},
            "one well": ONE_WELL,
            "one well, Student-5": ONE_WELL | {"kind": "student5"},
            "hard walls": {"drift": (0.0, -5.0, 0.0, -5.0), "sigma": 1.0},
            "two wells": WELLS,
            "two wells, calendar": WELLS | {"gaps": "calendar"},
            "two wells, GARCH": WELLS | {"kind": "garch"},
        },
    ),
    *grid(
        merton,
        {
            "10 jumps a year": {},
            "rare jumps: 2 a year": {"rate": 2.0, "mean": -0.05, "sd": 0.05},
            "40 small jumps a year": {"rate": 40.0, "mean": 0.0, "sd": 0.03},
            "10 jumps a year, calendar": {"gaps": "calendar"},
            "no jumps": {"rate": 0.0},
            "no jumps, Student-5": {"rate": 0.0, "kind": "student5"},
            "no jumps, GARCH": {"rate": 0.0, "kind": "garch"},
        },
    ),
    *grid(
        inertial,
        {
            "damping 250, kappa_s 12": {"damping": 250.0, "kappa_s": 12.0},
            "damping 1000, kappa_s 12": {"damping": 1000.0, "kappa_s": 12.0},
            "damping 5000, kappa_s 12": {"damping": 5000.0, "kappa_s": 12.0},
            "damping 100, kappa_s 2": {"damping": 100.0, "kappa_s": 2.0},
            "critical: damping 60, kappa_s 15": {"damping": 60.0, "kappa_s": 15.0001},
            "swings: damping 20, kappa_s 80": {"damping": 20.0, "kappa_s": 80.0},
            "damping 250, kappa_s 12, calendar": {"damping": 250.0, "kappa_s": 12.0, "gaps": "calendar"},
        },
    ),
    *grid(
        ou_noise,
        {
            "no pull, noise 0.012": {"kappa": 0.0, "noise": 0.012},
            "kappa 2, noise 0.012": {"kappa": 2.0, "noise": 0.012},
            "kappa 10, no noise": {"kappa": 10.0, "noise": 0.0},
            "kappa 10, noise 0.004": {"kappa": 10.0, "noise": 0.004},
            "kappa 10, noise 0.012": {"kappa": 10.0, "noise": 0.012},
            "kappa 10, noise 0.03": {"kappa": 10.0, "noise": 0.03},
            "kappa 40, noise 0.012": {"kappa": 40.0, "noise": 0.012},
            "kappa 10, noise 0.012, Student-5": {"kappa": 10.0, "noise": 0.012, "kind": "student5"},
            "kappa 10, noise 0.012, calendar": {"kappa": 10.0, "noise": 0.012, "gaps": "calendar"},
        },
    ),
)
