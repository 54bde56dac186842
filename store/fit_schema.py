"""The views over all models: `fit`, one row a fit, and `estimate`, one row a parameter.

`python -m driftbook.store.fit_schema` prints the migration that makes them for the registered models; a new model
brings a new migration that replaces them.
"""

from __future__ import annotations

from driftbook.estimators import MODELS, Model
from driftbook.estimators.compare import AIC_SQL, BIC_SQL
from driftbook.store.model_schema import IDENTITY
from driftbook.store.reader_schema import comments, readers, replacing, versions

_FIT = (
    *IDENTITY[:4],
    ("model", "name of the model"),
    IDENTITY[4],
    ("k", "parameters of the model"),
    ("loglik", "log-likelihood of the observations after the first, given the first [1]"),
    ("aic", "2 k - 2 loglik [1]"),
    ("bic", "k ln n - 2 loglik [1]"),
    ("model_weight", "exp(-bic/2), normalised over the usable models of the window; describes fit, no probability [1]"),
    ("models_compared", "usable models of the window"),
    ("status", "what became of the fit, in a word"),
)
_ESTIMATE = (
    IDENTITY[0],
    IDENTITY[1],
    IDENTITY[3],
    ("model", "name of the model"),
    ("parameter", "name of the parameter"),
    ("value", "estimate, in the parameter's unit"),
    ("se", "standard error"),
    ("lower", "lower end of the 95 % interval; NULL with status ok or no_reversion: no end on this side"),
    ("upper", "upper end of the 95 % interval; NULL with status ok or no_reversion: no end on this side"),
    ("status", "what became of the fit, in a word"),
)
_WINDOW = "partition by x.series, x.lookback, x.window_end"
_USABLE = "x.status in ('ok', 'no_reversion', 'at_bound')"


def migration_text() -> str:
    """The migration that makes fit and estimate over all registered models, in place of those over fewer."""
    lines = [
        "-- fit and estimate: views over all models. Printed by `python -m driftbook.store.fit_schema`.",
        "create view base.fit_rows as",
        "\nunion all\n".join(_fit_branch(model) for model in MODELS.values()) + ";",
        "",
        "create view base.estimate_rows as",
        "\nunion all\n".join(_estimate_branch(model, one.name) for model in MODELS.values() for one in model.parameters)
        + ";",
        "",
        *readers("fit", _weighted),
        *_fit_versions(),
        *readers("estimate"),
        *versions("estimate"),
        *_versions_of(),
        *_comments("fit", "all models: one row per fit, with what compares models", _FIT),
        *_comments("estimate", "all models: one row per parameter of a fit", _ESTIMATE),
    ]
    return replacing("\n".join(lines) + "\n")


def _fit_branch(model: Model) -> str:
    k = str(len(model.parameters))
    aic, bic = AIC_SQL.format(k=k, loglik="m.loglik"), BIC_SQL.format(k=k, n="m.n", loglik="m.loglik")
    return (
        f"select m.series, m.lookback, m.window_start, m.window_end, '{model.name}' as model, m.n, {k} as k,\n"
        f"  m.loglik, {aic} as aic, {bic} as bic, m.status, m.run_from, m.run_to from base.{model.name}_rows m"
    )


def _estimate_branch(model: Model, name: str) -> str:
    return (
        f"select m.series, m.lookback, m.window_end, '{model.name}' as model, '{name}' as parameter,\n"
        f"  m.{name} as value, m.{name}_se as se, m.{name}_lower as lower, m.{name}_upper as upper,\n"
        f"  m.status, m.run_from, m.run_to from base.{model.name}_rows m"
    )


def _weighted(name: str, where: str) -> str:
    """Fits with their weights among the usable models of the same window."""
    return (
        "select y.series, y.lookback, y.window_start, y.window_end, y.model, y.n, y.k, y.loglik, y.aic, y.bic,\n"
        "  y.ratio / sum(y.ratio) over (partition by y.series, y.lookback, y.window_end order by y.model\n"
        "    rows between unbounded preceding and unbounded following) as model_weight,\n"
        "  y.models_compared, y.status, y.run_id\n"
        "from (\n"
        f"  select x.* exclude (run_from, run_to), x.run_from as run_id,\n"
        f"    case when {_USABLE} then exp(-0.5 * (x.bic - min(case when {_USABLE} then x.bic end) over ({_WINDOW})))\n"
        "      end as ratio,\n"
        f"    count(case when {_USABLE} then 1 end) over ({_WINDOW}) as models_compared\n"
        f"  from base.{name}_rows x\n"
        f"  where {where}\n"
        ") y"
    )


def _fit_versions() -> list[str]:
    """Every version of every fit; the weight is that among the fits in force when the version came."""
    peers = (
        "base.fit_rows p where p.series = x.series and p.lookback = x.lookback and p.window_end = x.window_end\n"
        "    and p.run_from <= x.run_from and (p.run_to is null or p.run_to > x.run_from or p.run_from = x.run_from)\n"
        "    and p.status in ('ok', 'no_reversion', 'at_bound')"
    )
    return [
        "create view versions.fit as",
        "select x.series, x.lookback, x.window_start, x.window_end, x.model, x.n, x.k, x.loglik, x.aic, x.bic,",
        f"  case when {_USABLE} then 1 / (",
        "    select sum(exp(-0.5 * (p.bic - x.bic)) order by p.model, p.run_from)",
        f"    from {peers}) end as model_weight,",
        f"  (select count(*) from {peers}) as models_compared,",
        "  x.status, x.run_from, x.run_to, f.moment as in_force_from, t.moment as in_force_to",
        "from base.fit_rows x",
        "join base.run f on f.run_id = x.run_from",
        "left join base.run t on t.run_id = x.run_to;",
        "",
    ]


def _versions_of() -> list[str]:
    """Moments are read as `_as_of` reads them, and a bare date means every window that ends on that day."""
    return [
        "create macro main.versions_of(name, model, lookback, window_end) as table",
        "select v.* from versions.estimate v",
        "where v.series = name and v.model = model and v.lookback = lookback",
        "  and v.window_end <= make_timestamp(base.moment_us(window_end))",
        "  and v.window_end >= make_timestamp(base.moment_us(window_end) -",
        r"    case when regexp_full_match(trim(window_end::varchar), '\d{4}-\d{2}-\d{2}') then 86399999999 else 0 end)",
        "order by v.window_end, v.parameter, v.run_from;",
        "",
        "comment on macro table main.versions_of is 'every version of one window''s estimates: "
        "versions_of(''pellets_fob'', ''ou'', 250, ''2026-06-29'')';",
    ]


def _comments(name: str, meaning: str, columns: tuple[tuple[str, str], ...]) -> list[str]:
    return comments(name, in_force=meaning, every_version=f"every version of {name}", columns=columns)


if __name__ == "__main__":
    print(migration_text(), end="")
