"""What `latest` makes of cir, ckls, quartic, merton, inertial and ou_noise."""

import math

import duckdb
import numpy as np
import pytest
from desk import POSITIVE, Desk, plan, pulled, wandering
from made_series import days

ENDS = ("", "_lower", "_upper")
STEP = 1 / 252


@pytest.fixture
def desk(book):
    return Desk(book)


def swinging(count):
    """A path that goes on in its direction for a while."""
    x, v, path = 0.0, 0.0, []
    for draw in np.random.default_rng(3).standard_normal(count):
        v = 0.8 * v - 0.15 * x + draw
        x += v
        path.append(100.0 + x)
    return path


def bouncing(count):
    """A walk that is seen with noise of half a step's size."""
    rng = np.random.default_rng(4)
    return (100 + np.cumsum(rng.standard_normal(count)) + rng.standard_normal(count)).tolist()


def fit(desk, model):
    """The latest fit of a model, by column."""
    with duckdb.connect(desk.book, read_only=True) as con:
        found = con.execute(f"from {model} order by window_end desc, lookback limit 1")
        return dict(zip([column[0] for column in found.description], found.fetchone(), strict=True))


def told(desk, model, values, keys=POSITIVE, others=()):
    """What latest says with a model pinned, and the model's own fit."""
    text = plan({"pellets_fob": f'{keys}\nin_force = "{model}"'}, models=(model, *others), lookbacks=(100,))
    desk.run(days("pellets_fob", values), text)
    return desk.latest(), fit(desk, model)


def of_cir(there, x):
    return [there[f"sigma{end}"] / math.sqrt(x) for end in ENDS], there["kappa"] * (there["theta"] - x) / x


def of_ckls(there, x):
    at_x = there["sigma"] * x ** (there["gamma"] - 1)
    scale = at_x / there["local_volatility"]  # the interval is that at the geometric mean, carried over
    ends = [there[f"local_volatility{end}"] * scale for end in ENDS]
    return ends, there["kappa"] * (there["theta"] - x) / x


def of_merton(there, x):
    return [there[f"total_volatility{end}"] for end in ENDS], there["mu"]


def of_quartic(there, x):
    z = (x - there["centre"]) / there["scale"]
    drift = sum(there[f"a{k}"] * z**k for k in range(4))
    return [there[f"sigma{end}"] / x for end in ENDS], drift / x


def of_ou_noise(there, x):
    drift = there["kappa"] * (there["theta"] - math.log(x)) + there["sigma"] ** 2 / 2
    return [there[f"sigma{end}"] for end in ENDS], drift


def of_inertial(there, x):
    u = there["damping"] * STEP
    volatility = there["sigma_s"] * math.sqrt(1 + math.expm1(-u) / u)
    drift = there["kappa_s"] * (there["theta"] - math.log(x)) + there["sigma_s"] ** 2 / 2
    return [volatility, None, None], drift


@pytest.mark.parametrize(("model", "values", "formulas"), [
    ("cir", pulled(130, pull=0.1), of_cir), ("ckls", pulled(130, pull=0.1, seed=4), of_ckls),
    ("merton", [*wandering(80), *wandering(50, level=120.0, seed=9)], of_merton),
    ("quartic", pulled(130, pull=0.07, seed=4), of_quartic), ("ou_noise", bouncing(130), of_ou_noise),
    ("inertial", swinging(130), of_inertial),
])  # fmt: skip
def test_volatility_and_drift_of_a_price_are_total_local_and_relative_by_every_model(desk, model, values, formulas):
    row, there = told(desk, model, values)
    volatility, drift = formulas(there, values[-1])
    assert there["status"] in ("ok", "no_reversion", "at_bound")
    assert (row["model"], row["volatility_unit"]) == (model, "1/√year")
    for end, expected in zip(ENDS, volatility, strict=True):
        if expected is not None:
            assert row[f"volatility{end}"] == pytest.approx(expected, rel=1e-12)
    assert row["drift"] == pytest.approx(drift, rel=1e-9)
    assert row["volatility_lower"] < row["volatility"] < row["volatility_upper"]
    of_steps = np.std(np.diff(np.log(values[-101:]))) / math.sqrt(STEP)  # what any model has to come near to
    assert row["volatility"] == pytest.approx(of_steps, rel=0.6 if model == "ou_noise" else 0.25)


@pytest.mark.parametrize(("model", "values"), [
    ("quartic", pulled(130, level=1.0, pull=0.07, seed=4)), ("ou_noise", [x - 100 for x in bouncing(130)]),
    ("inertial", [x - 100 for x in swinging(130)]),
])  # fmt: skip
def test_of_a_series_of_any_sign_they_are_in_its_unit(desk, model, values):
    row, there = told(desk, model, values, keys='unit = "EUR/MWh"')
    assert row["volatility_unit"] == "EUR/MWh/√year"
    assert there.get("fitted_on", "level") == "level"
    assert row["can_reach_zero"] is None
    if model == "inertial":
        u = there["damping"] * STEP
        assert row["volatility"] == pytest.approx(there["sigma_s"] * math.sqrt(1 + math.expm1(-u) / u), rel=1e-12)
        assert row["drift"] == pytest.approx(there["kappa_s"] * (there["theta"] - values[-1]), rel=1e-12)
    else:
        assert row["volatility"] == there["sigma"]


def test_the_volatility_of_a_smooth_motion_is_that_of_its_changes_over_a_step(desk):
    """Against the sample's own: sigma_s, of long times, would be some three times that."""
    values = [x - 100 for x in swinging(1100)]
    text = plan({"reservoir": 'in_force = "inertial"'}, models=("inertial",), lookbacks=(1000,))
    desk.run(days("reservoir", values), text)
    row, there = desk.latest("reservoir"), fit(desk, "inertial")
    of_steps = math.sqrt(np.mean(np.diff(values[-1001:]) ** 2) / STEP)
    assert row["volatility"] == pytest.approx(of_steps, rel=0.2)
    assert there["sigma_s"] > 2 * of_steps
    assert row["volatility_lower"] < of_steps < row["volatility_upper"]


def test_a_motion_without_inertia_has_the_volatility_of_long_times(desk):
    row, there = told(desk, "inertial", pulled(130, pull=0.2, seed=3), keys="")
    assert (there["status"], there["damping"]) == ("at_bound", None)
    assert [row[f"volatility{end}"] for end in ENDS] == [there[f"sigma_s{end}"] for end in ENDS]


@pytest.mark.parametrize(("model", "shift", "reaches"), [
    ("quartic", 0.0, True), ("merton", 0.0, False), ("inertial", 0.0, False), ("ou_noise", 0.0, False),
    ("cir", 0.0, False), ("ckls", 0.0, None), ("gbm", 5.0, True), ("cir", 5.0, True), ("ou_noise", 5.0, True),
    ("gbm", -5.0, False), ("ckls", -5.0, False), ("inertial", -5.0, False), ("abm", 5.0, True), ("quartic", -5.0, True),
])  # fmt: skip
def test_whether_zero_can_be_reached_minds_logarithms_shifts_and_intervals(desk, model, shift, reaches):
    row, there = told(desk, model, pulled(130, pull=0.1), keys=f"{POSITIVE}\nshift = {shift}")
    if model in ("cir", "ckls") and not shift:
        assert there["can_reach_zero"] is reaches
    assert row["can_reach_zero"] is reaches


def test_numbers_that_are_too_coarse_are_not_told_though_their_model_is_pinned(desk):
    row, there = told(desk, "quartic", pulled(130, pull=0.2, seed=3), keys="", others=("abm",))
    assert there["status"] == "too_coarse"
    assert there["sigma"] is not None
    assert [row[name] for name in ("volatility", "volatility_upper", "drift", "model_weight")] == [None] * 4
    assert row["note"] == "steps too long for the model"
    assert desk.ask("select max(model_weight) from fit where model = 'quartic' and status = 'too_coarse'") == [(None,)]


def test_merton_says_nothing_of_prices_that_often_stay_as_they_were(desk):
    values = [100 + round(x - 100) for x in wandering(130, size=0.4)]
    row, there = told(desk, "merton", values, others=("gbm",))
    assert there["status"] == "discrete"
    assert [row[name] for name in ("volatility", "drift", "model_weight")] == [None] * 3
    assert row["note"] == "too many unchanged values"


def test_a_half_life_is_told_from_the_heaviest_that_has_one_where_the_model_in_force_swings(desk):
    row, _ = told(desk, "inertial", swinging(130), keys="", others=("ou",))
    assert row["model"] == "inertial"
    assert row["half_life_days"] == fit(desk, "ou")["half_life"] * 365


def test_a_pull_that_may_be_a_bounce_is_noted(desk):
    row, there = told(desk, "ou", bouncing(130), keys="", others=("ou_noise",))
    noise = desk.ask("select noise_share from ou_noise order by window_end desc limit 1")
    assert noise[0][0] > 0.1
    assert there["no_reversion_p"] is not None
    assert row["note"] == "noise: the pull may be a bounce"
    desk.run(plan=plan({"pellets_fob": 'in_force = "ou_noise"'}, models=("ou", "ou_noise"), lookbacks=(100,)))
    assert desk.latest()["note"] == "model changed from ou"


def test_the_settings_of_a_series_are_fixed_when_it_is_first_fitted_and_kept(desk):
    from driftbook import store
    from driftbook.store.reproducing import reproduce

    values = pulled(70, pull=0.1)
    text = plan({"peg": POSITIVE, "spark": ""}, models=("quartic",), lookbacks=(60, "all"))
    desk.run(days("peg", values[:50]), text)
    assert desk.ask("from base.quartic_setting where lookback = 60") == []
    desk.run(days("peg", values[50:], 50))
    mean, sd = np.mean(values[:61]), np.std(values[:61])
    fixed = desk.ask("select centre, scale, run_from from base.quartic_setting where lookback = 60")
    assert fixed == [(pytest.approx(mean, rel=1e-14), pytest.approx(sd, rel=1e-12), 2)]
    ((whole, run),) = desk.ask("select centre, run_from from base.quartic_setting where lookback = 0")
    assert (whole, run) == (pytest.approx(np.mean(values[:50]), rel=1e-14), 1)
    desk.run(days("peg", [150.0], 3))
    desk.run(everything=True)
    assert desk.ask("select centre, scale, run_from from base.quartic_setting where lookback = 60") == fixed
    ((at_least, at_most),) = desk.ask("select min(centre), max(centre) from versions.quartic where lookback = 60")
    assert at_least == at_most == fixed[0][0]
    assert [(again.identical, again.same + again.different) for again in reproduce(desk.book, every=True)] == [
        (written, 0) for (written,) in desk.ask(
            "select (select count(*) from base.quartic q where q.run_from = r.run_id) from base.run r order by run_id"
        )
    ]  # fmt: skip
    assert store.verify(desk.book).findings == []
    with duckdb.connect(desk.book) as con:
        con.execute("update base.quartic_setting set scale = scale * 1.0000001 where lookback = 60")
    (finding,) = (one for one in store.verify(desk.book).findings if one.table_name == "quartic_setting")
    assert (finding.series, finding.run_id) == ("peg", 2)
