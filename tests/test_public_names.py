"""The names that users, dashboards and cron jobs rely on."""

import subprocess
import sys
from importlib import import_module

import duckdb
import pytest

from driftbook import estimators, store
from driftbook.estimators import MODELS
from driftbook.store import migrate

VIEWS = {
    "series": "series, sign, unit, clock, periods_per_year, time_zone, stale_after_days, planned, added_at",
    "observation": "series, observed_at, value, open, high, low, volume, intake_id",
    "intake": "intake_id, run_id, source, sha256, received_at, rows_read, rows_new, rows_revised, rows_same, "
    "rows_refused",
    "refused_row": "intake_id, line, text, reason",
    "run": "run_id, kind, moment, told, started_at, finished_at, plan_sha256, package_version, windows_due, "
    "windows_fitted, windows_failed, rows_written, digest",
    "plan": "plan_sha256, name, text, run_id",
    "fit": "series, lookback, window_start, window_end, model, n, k, loglik, aic, bic, model_weight, models_compared, "
    "status, run_id",
    "estimate": "series, lookback, window_end, model, parameter, value, se, lower, upper, status, run_id",
    "latest": "series, unit, observed_at, value, stale, lookback, window_end, model, model_weight, volatility, "
    "volatility_lower, volatility_upper, volatility_unit, realised_volatility, drift, half_life_days, "
    "half_life_days_lower, half_life_days_upper, half_life_unbounded, can_reach_zero, wells, mean_exit_time_days, "
    "backtest_zone, alarms, note, run_id",
    "dictionary": "name, column_name, unit, meaning, example",
    "ou": "series, lookback, window_start, window_end, n, kappa, kappa_se, kappa_lower, kappa_upper, theta, theta_se, "
    "theta_lower, theta_upper, sigma, sigma_se, sigma_lower, sigma_upper, kappa_median_unbiased, no_reversion_p, "
    "half_life, half_life_lower, half_life_upper, half_life_mle, half_life_unbounded, stationary_sd, kurtosis, "
    "loglik, status, revision, run_id",
}
FIRST, LAST = "series, lookback, window_start, window_end, n", "kurtosis, loglik, status, revision, run_id"
OF_MODELS = {
    "cir": ("", "kappa theta sigma", "feller_ratio, can_reach_zero"),
    "ckls": ("", "kappa theta sigma gamma", "local_volatility, can_reach_zero"),
    "quartic": ("centre, scale", "a0 a1 a2 a3 sigma", ""),
    "merton": ("", "mu sigma jump_rate jump_mean jump_sd", "total_volatility, jump_probability"),
    "inertial": ("", "damping omega theta eta", "period, damping_ratio"),
    "ou_noise": ("", "kappa theta sigma noise", "noise_share"),
}
VERSIONED = ("series", "observation", "refused_row", "plan", "latest", "fit", "estimate", *MODELS)
COMMANDS = {
    "refresh": "--plan --inbox --workers --all --dry-run --at --strict --yes --wait --quiet --json",
    "latest": "--as-of --full --quiet --json",
    "explain": "--model --lookback --from --to --quiet --json",
    "reproduce": "--run --all --quiet --json",
    "forget": "--before --yes --quiet --json",
    "sql": "--format --output --guard-formulas --timeout --rows --quiet --json",
    "verify": "--quiet --json",
    "page": "--port --output --quiet --json",
    "demo": "--quiet --json",
    "new": "--quiet --json",
    "ingest": "--series --add-series --wide --columns --dates --decimal --zone --blank --dry-run --at --strict --yes "
    "--wait --quiet --json",
}


@pytest.fixture(scope="module")
def empty():
    with duckdb.connect() as con:
        migrate.apply_pending(con)
        yield con


@pytest.mark.parametrize("view", VIEWS)
def test_a_view_has_the_columns_that_were_promised_in_their_order(empty, view):
    promised = VIEWS[view].split(", ")
    there = [name for name in empty.sql(f"from main.{view}").columns if name in promised]
    assert there == promised


@pytest.mark.parametrize("model", OF_MODELS)
def test_a_model_has_its_parameters_with_their_intervals_and_what_follows_from_them(empty, model):
    settings, parameters, derived = OF_MODELS[model]
    columns = [f"{name}{end}" for name in parameters.split() for end in ("", "_se", "_lower", "_upper")]
    promised = [
        name for part in (FIRST, settings, ", ".join(columns), derived, LAST) if part for name in part.split(", ")
    ]
    assert [name for name in empty.sql(f"from main.{model}").columns if name in promised] == promised
    assert ("fitted_on" in empty.sql(f"from main.{model}").columns) == (model in ("inertial", "ou_noise"))


@pytest.mark.parametrize("view", VERSIONED)
def test_a_versioned_view_can_be_asked_as_of_a_moment_at_a_run_and_in_all_versions(empty, view):
    columns = empty.sql(f"from main.{view}").columns
    assert empty.sql(f"from {view}_as_of('2026-01-31')").columns == columns
    assert empty.sql(f"from {view}_as_of(moment := date '2026-01-31')").columns == columns
    assert empty.sql(f"from {view}_at_run(3)").columns == columns
    extra = ["run_from", "run_to", "in_force_from", "in_force_to"]
    assert empty.sql(f"from versions.{view}").columns == [name for name in columns if name != "run_id"] + extra


def test_every_view_macro_and_column_that_readers_see_carries_a_comment(empty):
    public = "schema_name in ('main', 'versions') and not internal"
    silent = empty.execute(
        f"select view_name from duckdb_views() where {public} and comment is null union all "
        f"select table_name || '.' || column_name from duckdb_columns() where {public} and comment is null union all "
        f"select function_name from duckdb_functions() where {public} and comment is null"
    ).fetchall()
    assert silent == []


@pytest.mark.parametrize("command", COMMANDS)
def test_a_command_has_the_options_that_were_promised_and_an_example(command):
    shown = subprocess.run(
        [sys.executable, "-c", "from driftbook.store.cli import main; main()", command, "--help"],
        capture_output=True,
        text=True,
        env={"COLUMNS": "200", "PATH": ""},
    )
    assert shown.returncode == 0
    missing = [option for option in COMMANDS[command].split() if option not in shown.stdout]
    assert missing == []
    assert f"Example: driftbook {command}" in shown.stdout


@pytest.mark.parametrize("module", [store, store.charts, estimators], ids=lambda module: module.__name__)
def test_all_public_names_exist_and_say_what_they_are(module):
    public = [getattr(module, name) for name in module.__all__]
    assert [thing for thing in public if callable(thing) and not thing.__doc__] == []


def test_help_and_sql_load_neither_polars_nor_scipy_nor_the_plan():
    script = (
        "import sys; from driftbook.store.cli.app import run; from driftbook.store import create; "
        "from pathlib import Path; import tempfile; book = Path(tempfile.mkdtemp()) / 'desk.duckdb'; create(book); "
        "assert run(['--help']) == 0; assert run(['sql', str(book), 'select 1']) == 0; "
        "print([name for name in ('polars', 'scipy', 'driftbook.store.plan') if name in sys.modules])"
    )
    shown = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert shown.stdout.splitlines()[-1] == "[]"


def test_every_module_imports_on_its_own():
    for name in ("driftbook.store.writer", "driftbook.store.proof", "driftbook.store.cli", "driftbook.estimators"):
        import_module(name)
