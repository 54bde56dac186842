-- dictionary: filled again, from the comments of the catalog and the list of functions.
-- Printed by `python -m driftbook.store.dictionary_schema`.
delete from base.dictionary_entry;

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
  ('fit_cir', null, null, 'cir on a list of values: fit_cir(x, dt)', 'select fit_cir(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_cir_at', null, null, 'cir on a list of values at times, Act/365: fit_cir_at(t, x)', 'select fit_cir_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_cir', null, null, 'cir on every window of a list: rolling_cir(x, dt, lookback)', 'select len(rolling_cir(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_cir_at', null, null, 'cir on every window of a list of values at times: rolling_cir_at(t, x, lookback)', 'select len(rolling_cir_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_cir', null, null, 'log-likelihood of cir at given parameters: loglik_cir(x, dt, kappa, theta, sigma)', 'select loglik_cir(x, 1 / 252, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_ckls', null, null, 'ckls on a list of values: fit_ckls(x, dt)', 'select fit_ckls(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_ckls_at', null, null, 'ckls on a list of values at times, Act/365: fit_ckls_at(t, x)', 'select fit_ckls_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_ckls', null, null, 'ckls on every window of a list: rolling_ckls(x, dt, lookback)', 'select len(rolling_ckls(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_ckls_at', null, null, 'ckls on every window of a list of values at times: rolling_ckls_at(t, x, lookback)', 'select len(rolling_ckls_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_ckls', null, null, 'log-likelihood of ckls at given parameters: loglik_ckls(x, dt, kappa, theta, sigma, gamma)', 'select loglik_ckls(x, 1 / 252, 1, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_quartic', null, null, 'quartic on a list of values: fit_quartic(x, dt)', 'select fit_quartic(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_quartic_at', null, null, 'quartic on a list of values at times, Act/365: fit_quartic_at(t, x)', 'select fit_quartic_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_quartic', null, null, 'quartic on every window of a list: rolling_quartic(x, dt, lookback)', 'select len(rolling_quartic(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_quartic_at', null, null, 'quartic on every window of a list of values at times: rolling_quartic_at(t, x, lookback)', 'select len(rolling_quartic_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_quartic', null, null, 'log-likelihood of quartic at given parameters: loglik_quartic(x, dt, centre, scale, a0, a1, a2, a3, sigma)', 'select loglik_quartic(x, 1 / 252, 1, 1, 1, 1, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_merton', null, null, 'merton on a list of values: fit_merton(x, dt)', 'select fit_merton(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_merton_at', null, null, 'merton on a list of values at times, Act/365: fit_merton_at(t, x)', 'select fit_merton_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_merton', null, null, 'merton on every window of a list: rolling_merton(x, dt, lookback)', 'select len(rolling_merton(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_merton_at', null, null, 'merton on every window of a list of values at times: rolling_merton_at(t, x, lookback)', 'select len(rolling_merton_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_merton', null, null, 'log-likelihood of merton at given parameters: loglik_merton(x, dt, mu, sigma, jump_rate, jump_mean, jump_sd)', 'select loglik_merton(x, 1 / 252, 1, 1, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_inertial', null, null, 'inertial on a list of values: fit_inertial(x, dt)', 'select fit_inertial(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_inertial_at', null, null, 'inertial on a list of values at times, Act/365: fit_inertial_at(t, x)', 'select fit_inertial_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_inertial', null, null, 'inertial on every window of a list: rolling_inertial(x, dt, lookback)', 'select len(rolling_inertial(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_inertial_at', null, null, 'inertial on every window of a list of values at times: rolling_inertial_at(t, x, lookback)', 'select len(rolling_inertial_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_inertial', null, null, 'log-likelihood of inertial at given parameters: loglik_inertial(x, dt, damping, omega, theta, eta)', 'select loglik_inertial(x, 1 / 252, 1, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_ou_noise', null, null, 'ou_noise on a list of values: fit_ou_noise(x, dt)', 'select fit_ou_noise(x, 1 / 252) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('fit_ou_noise_at', null, null, 'ou_noise on a list of values at times, Act/365: fit_ou_noise_at(t, x)', 'select fit_ou_noise_at(t, x) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_ou_noise', null, null, 'ou_noise on every window of a list: rolling_ou_noise(x, dt, lookback)', 'select len(rolling_ou_noise(x, 1 / 252, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('rolling_ou_noise_at', null, null, 'ou_noise on every window of a list of values at times: rolling_ou_noise_at(t, x, lookback)', 'select len(rolling_ou_noise_at(t, x, 250)) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('loglik_ou_noise', null, null, 'log-likelihood of ou_noise at given parameters: loglik_ou_noise(x, dt, kappa, theta, sigma, noise)', 'select loglik_ou_noise(x, 1 / 252, 1, 1, 1, 1) from (select list(value order by observed_at) as x, list(observed_at order by observed_at) as t from observation group by series)'),
  ('realised_variance', null, null, 'sum of squared returns', 'select realised_variance(x) from (select list(value order by observed_at) as x from observation group by series)'),
  ('bipower_variation', null, null, 'variance without what single jumps add', 'select bipower_variation(x) from (select list(value order by observed_at) as x from observation group by series)'),
  ('window_fit', null, null, 'estimates of one stored window, computed now from the data as known then; by default the latest window', 'select w.* from (select min(series) as name from ou) s, window_fit(s.name, ''ou'') w');
