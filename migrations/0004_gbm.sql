-- gbm: dX = mu X dt + sigma X dW. Printed by `python -m driftbook.store.model_schema gbm`.
create table base.gbm (
  series_id integer not null,
  lookback integer not null,
  window_start timestamp not null,
  window_end timestamp not null,
  n integer not null,
  mu double,
  mu_se double,
  mu_lower double,
  mu_upper double,
  sigma double,
  sigma_se double,
  sigma_lower double,
  sigma_upper double,
  kurtosis double,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

create view base.gbm_rows as
select s.series, m.lookback, m.window_start, m.window_end, m.n,
  m.mu,
  m.mu_se,
  m.mu_lower,
  m.mu_upper,
  m.sigma,
  m.sigma_se,
  m.sigma_lower,
  m.sigma_upper,
  m.kurtosis,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.gbm m
join base.series s on s.series_id = m.series_id;

create view main.gbm as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.gbm_rows x where x.run_to is null;

create macro main.gbm_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.gbm_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.gbm_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.gbm_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.gbm as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.gbm_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.gbm is 'dX = mu X dt + sigma X dW: estimates in force, one row per fit';
comment on column main.gbm.series is 'name of the series';
comment on column main.gbm.lookback is 'steps in the window; 0: all';
comment on column main.gbm.window_start is 'time of the window''s first observation, UTC';
comment on column main.gbm.window_end is 'time of the window''s last observation, UTC';
comment on column main.gbm.n is 'steps used';
comment on column main.gbm.mu is 'Drift: expected change per unit of time, as a share of the value. [1/t]';
comment on column main.gbm.mu_se is 'Standard error of mu. [1/t]';
comment on column main.gbm.mu_lower is 'Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column main.gbm.mu_upper is 'Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column main.gbm.sigma is 'Volatility, as a share of the value. [1/√t]';
comment on column main.gbm.sigma_se is 'Standard error of sigma. [1/√t]';
comment on column main.gbm.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column main.gbm.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column main.gbm.kurtosis is 'Fourth moment of the standardised log-increments over the squared second: 3 for a Gaussian. [1]';
comment on column main.gbm.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.gbm.status is 'what became of the fit, in a word';
comment on column main.gbm.revision is 'revision of the model that computed the row';
comment on column main.gbm.run_id is 'run that wrote the row';
comment on view versions.gbm is 'dX = mu X dt + sigma X dW: every version of every estimate';
comment on column versions.gbm.series is 'name of the series';
comment on column versions.gbm.lookback is 'steps in the window; 0: all';
comment on column versions.gbm.window_start is 'time of the window''s first observation, UTC';
comment on column versions.gbm.window_end is 'time of the window''s last observation, UTC';
comment on column versions.gbm.n is 'steps used';
comment on column versions.gbm.mu is 'Drift: expected change per unit of time, as a share of the value. [1/t]';
comment on column versions.gbm.mu_se is 'Standard error of mu. [1/t]';
comment on column versions.gbm.mu_lower is 'Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column versions.gbm.mu_upper is 'Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column versions.gbm.sigma is 'Volatility, as a share of the value. [1/√t]';
comment on column versions.gbm.sigma_se is 'Standard error of sigma. [1/√t]';
comment on column versions.gbm.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column versions.gbm.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column versions.gbm.kurtosis is 'Fourth moment of the standardised log-increments over the squared second: 3 for a Gaussian. [1]';
comment on column versions.gbm.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.gbm.status is 'what became of the fit, in a word';
comment on column versions.gbm.revision is 'revision of the model that computed the row';
comment on column versions.gbm.run_from is 'run from which the row is in force';
comment on column versions.gbm.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.gbm.in_force_from is 'moment of run_from';
comment on column versions.gbm.in_force_to is 'moment of run_to';
comment on macro table main.gbm_at_run is 'the view gbm as it was after a run: gbm_at_run(41)';
comment on macro table main.gbm_as_of is 'the view gbm as it was known at a moment: gbm_as_of(''2026-01-31'')';
