"""Functions of the pull over a step, against forty digits."""

import mpmath as mp
import numpy as np
import pytest

from driftbook.estimators.pull import Pull

PRECISION = 4e-15  # relative; at |z| = 0.1, where series and differences meet, the difference has lost a digit

Z = [1e-300, 1e-12, 1e-5, 0.03, 0.0999, 0.1001, 0.5, 2.0, 30.0, 500.0]
EXACT = {
    "decay": lambda z: mp.exp(-z),
    "phi": lambda z: -mp.expm1(-z) / z,
    "p": lambda z: 2 / (1 + mp.exp(-z)),
    "q": lambda z: -2 * z / mp.expm1(-2 * z),
    "tau": lambda z: mp.tanh(z / 2) / (z / 2),
}
SLOPES = {"phi_slope": "phi", "p_slope": "p", "tau_slope": "tau"}


@pytest.mark.parametrize("name", EXACT)
def test_functions(name):
    with mp.workdps(60):
        for z in [*Z, *(-each for each in Z)]:
            exact = EXACT[name](mp.mpf(z))
            if 1e-300 < abs(exact) < 1e300:
                size = max(1, abs(exact)) if name == "decay" else abs(exact)  # decay is used beside 1
                assert abs(getattr(Pull(np.array([z])), name)[0] - exact) < PRECISION * size, z


@pytest.mark.parametrize("name", [*SLOPES, "log_q_slope"])
def test_slopes(name):
    function = (lambda z: mp.log(EXACT["q"](z))) if name == "log_q_slope" else EXACT[SLOPES.get(name, "")]
    with mp.workdps(60):
        for z in (1e-5, 0.03, 0.0999, 0.1001, 0.5, 2.0, 30.0, -1e-5, -0.0999, -0.1001, -2.0):
            exact = mp.diff(function, mp.mpf(z))
            assert abs(getattr(Pull(np.array([z])), name)[0] - exact) < PRECISION * max(1, abs(exact)), z


def test_at_zero_all_have_their_limits():
    pull = Pull(np.zeros(1))
    for name in EXACT:
        assert getattr(pull, name)[0] == 1.0
    assert pull.phi_slope[0] == -0.5
    assert pull.p_slope[0] == 0.5
    assert pull.tau_slope[0] == 0.0
    assert pull.log_q_slope[0] == 1.0
