-- dictionary: what every view, column, macro and function means, with an example that runs.
-- Printed by `python -m driftbook.store.dictionary_schema`.
create table base.dictionary_entry (
  name varchar not null,
  column_name varchar,
  unit varchar,
  meaning varchar not null,
  example varchar
);

create view main.dictionary as
select d.name, d.column_name, d.unit, d.meaning, d.example from base.dictionary_entry d;

comment on view main.dictionary is 'what every view, column, macro and function means';
comment on column main.dictionary.name is 'view, macro or function';
comment on column main.dictionary.column_name is 'column of a view; NULL: the entry is about the whole';
comment on column main.dictionary.unit is 'unit in words; x: unit of the series, t: year or second, 1: a pure number';
comment on column main.dictionary.meaning is 'what it says';
comment on column main.dictionary.example is 'a query that runs; functions need a connection of driftbook';

insert into base.dictionary_entry
select c.table_name, c.column_name, nullif(regexp_extract(c.comment, '\[([^\]]*)\]$', 1), ''),
  regexp_replace(c.comment, ' ?\[[^\]]*\]$', ''), null
from duckdb_columns() c
where c.database_name = current_database() and c.schema_name = 'main' and c.comment is not null;

insert into base.dictionary_entry
select v.view_name, null, null, v.comment, 'from ' || v.view_name || ' limit 3'
from duckdb_views() v
where v.database_name = current_database() and v.schema_name = 'main' and v.comment is not null;

insert into base.dictionary_entry
select 'versions.' || v.view_name, null, null, v.comment, 'from versions.' || v.view_name || ' limit 3'
from duckdb_views() v
where v.database_name = current_database() and v.schema_name = 'versions' and v.comment is not null;

insert into base.dictionary_entry
select f.function_name, null, null, regexp_replace(f.comment, ': [a-z_]+\(.*\)$', ''),
  'from ' || regexp_extract(f.comment, ': ([a-z_]+\(.*\))$', 1)
from duckdb_functions() f
where f.database_name = current_database() and f.schema_name = 'main' and f.comment is not null;

insert into base.dictionary_entry values
  ('fit_abm', null, null, 'abm on a list of values: fit_abm(x, dt)', 'select fit_abm(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_abm_at', null, null, 'abm on a list of values at times, Act/365: fit_abm_at(t, x)', 'select fit_abm_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_abm', null, null, 'abm on every window of a list: rolling_abm(x, dt, lookback)', 'select len(rolling_abm(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_abm_at', null, null, 'abm on every window of a list of values at times: rolling_abm_at(t, x, lookback)', 'select len(rolling_abm_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_abm', null, null, 'log-likelihood of abm at given parameters: loglik_abm(x, dt, mu, sigma)', 'select loglik_abm(x, 1 / 252, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_gbm', null, null, 'gbm on a list of values: fit_gbm(x, dt)', 'select fit_gbm(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_gbm_at', null, null, 'gbm on a list of values at times, Act/365: fit_gbm_at(t, x)', 'select fit_gbm_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_gbm', null, null, 'gbm on every window of a list: rolling_gbm(x, dt, lookback)', 'select len(rolling_gbm(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_gbm_at', null, null, 'gbm on every window of a list of values at times: rolling_gbm_at(t, x, lookback)', 'select len(rolling_gbm_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_gbm', null, null, 'log-likelihood of gbm at given parameters: loglik_gbm(x, dt, mu, sigma)', 'select loglik_gbm(x, 1 / 252, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_ou', null, null, 'ou on a list of values: fit_ou(x, dt)', 'select fit_ou(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_ou_at', null, null, 'ou on a list of values at times, Act/365: fit_ou_at(t, x)', 'select fit_ou_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_ou', null, null, 'ou on every window of a list: rolling_ou(x, dt, lookback)', 'select len(rolling_ou(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_ou_at', null, null, 'ou on every window of a list of values at times: rolling_ou_at(t, x, lookback)', 'select len(rolling_ou_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_ou', null, null, 'log-likelihood of ou at given parameters: loglik_ou(x, dt, kappa, theta, sigma)', 'select loglik_ou(x, 1 / 252, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_exp_ou', null, null, 'exp_ou on a list of values: fit_exp_ou(x, dt)', 'select fit_exp_ou(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_exp_ou_at', null, null, 'exp_ou on a list of values at times, Act/365: fit_exp_ou_at(t, x)', 'select fit_exp_ou_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_exp_ou', null, null, 'exp_ou on every window of a list: rolling_exp_ou(x, dt, lookback)', 'select len(rolling_exp_ou(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_exp_ou_at', null, null, 'exp_ou on every window of a list of values at times: rolling_exp_ou_at(t, x, lookback)', 'select len(rolling_exp_ou_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_exp_ou', null, null, 'log-likelihood of exp_ou at given parameters: loglik_exp_ou(x, dt, kappa, theta, sigma)', 'select loglik_exp_ou(x, 1 / 252, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('realised_variance', null, null, 'sum of squared returns', 'select realised_variance(x) from (select list(value order by observed_at) as x from observation group by series)'),
  ('bipower_variation', null, null, 'variance without what single jumps add', 'select bipower_variation(x) from (select list(value order by observed_at) as x from observation group by series)'),
  ('window_fit', null, null, 'estimates of one stored window, computed now from the data as known then; by default the latest window', 'select w.* from (select min(series) as name from ou) s, window_fit(s.name, ''ou'') w');
