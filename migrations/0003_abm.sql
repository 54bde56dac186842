-- abm: dX = mu dt + sigma dW. Printed by `python -m driftbook.store.model_schema abm`.
create table base.abm (
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

create view base.abm_rows as
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
from base.abm m
join base.series s on s.series_id = m.series_id;

create view main.abm as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.abm_rows x where x.run_to is null;

create macro main.abm_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.abm_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.abm_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.abm_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.abm as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.abm_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.abm is 'dX = mu dt + sigma dW: estimates in force, one row per fit';
comment on column main.abm.series is 'name of the series';
comment on column main.abm.lookback is 'steps in the window; 0: all';
comment on column main.abm.window_start is 'time of the window''s first observation, UTC';
comment on column main.abm.window_end is 'time of the window''s last observation, UTC';
comment on column main.abm.n is 'steps used';
comment on column main.abm.mu is 'Drift: expected change per unit of time. [x/t]';
comment on column main.abm.mu_se is 'Standard error of mu. [x/t]';
comment on column main.abm.mu_lower is 'Lower end of the 95 % interval of mu; empty: no end on this side. [x/t]';
comment on column main.abm.mu_upper is 'Upper end of the 95 % interval of mu; empty: no end on this side. [x/t]';
comment on column main.abm.sigma is 'Volatility. [x/√t]';
comment on column main.abm.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column main.abm.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.abm.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.abm.kurtosis is 'Fourth moment of the standardised increments over the squared second: 3 for a Gaussian. [1]';
comment on column main.abm.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.abm.status is 'what became of the fit, in a word';
comment on column main.abm.revision is 'revision of the model that computed the row';
comment on column main.abm.run_id is 'run that wrote the row';
comment on view versions.abm is 'dX = mu dt + sigma dW: every version of every estimate';
comment on column versions.abm.series is 'name of the series';
comment on column versions.abm.lookback is 'steps in the window; 0: all';
comment on column versions.abm.window_start is 'time of the window''s first observation, UTC';
comment on column versions.abm.window_end is 'time of the window''s last observation, UTC';
comment on column versions.abm.n is 'steps used';
comment on column versions.abm.mu is 'Drift: expected change per unit of time. [x/t]';
comment on column versions.abm.mu_se is 'Standard error of mu. [x/t]';
comment on column versions.abm.mu_lower is 'Lower end of the 95 % interval of mu; empty: no end on this side. [x/t]';
comment on column versions.abm.mu_upper is 'Upper end of the 95 % interval of mu; empty: no end on this side. [x/t]';
comment on column versions.abm.sigma is 'Volatility. [x/√t]';
comment on column versions.abm.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column versions.abm.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.abm.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.abm.kurtosis is 'Fourth moment of the standardised increments over the squared second: 3 for a Gaussian. [1]';
comment on column versions.abm.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.abm.status is 'what became of the fit, in a word';
comment on column versions.abm.revision is 'revision of the model that computed the row';
comment on column versions.abm.run_from is 'run from which the row is in force';
comment on column versions.abm.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.abm.in_force_from is 'moment of run_from';
comment on column versions.abm.in_force_to is 'moment of run_to';
comment on macro table main.abm_at_run is 'the view abm as it was after a run: abm_at_run(41)';
comment on macro table main.abm_as_of is 'the view abm as it was known at a moment: abm_as_of(''2026-01-31'')';
