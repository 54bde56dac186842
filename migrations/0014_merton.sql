-- merton: dX = (mu - jump_rate E[e^J - 1]) X dt + sigma X dW + (e^J - 1) X dN, J normal. Printed by `python -m driftbook.store.model_schema merton`.
create table base.merton (
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
  jump_rate double,
  jump_rate_se double,
  jump_rate_lower double,
  jump_rate_upper double,
  jump_mean double,
  jump_mean_se double,
  jump_mean_lower double,
  jump_mean_upper double,
  jump_sd double,
  jump_sd_se double,
  jump_sd_lower double,
  jump_sd_upper double,
  total_volatility double,
  total_volatility_lower double,
  total_volatility_upper double,
  jump_probability double,
  kurtosis double,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

create view base.merton_rows as
select s.series, m.lookback, m.window_start, m.window_end, m.n,
  m.mu,
  m.mu_se,
  m.mu_lower,
  m.mu_upper,
  m.sigma,
  m.sigma_se,
  m.sigma_lower,
  m.sigma_upper,
  m.jump_rate,
  m.jump_rate_se,
  m.jump_rate_lower,
  m.jump_rate_upper,
  m.jump_mean,
  m.jump_mean_se,
  m.jump_mean_lower,
  m.jump_mean_upper,
  m.jump_sd,
  m.jump_sd_se,
  m.jump_sd_lower,
  m.jump_sd_upper,
  m.total_volatility,
  m.total_volatility_lower,
  m.total_volatility_upper,
  m.jump_probability,
  m.kurtosis,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.merton m
join base.series s on s.series_id = m.series_id;

create view main.merton as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.merton_rows x where x.run_to is null;

create macro main.merton_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.merton_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.merton_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.merton_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.merton as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.merton_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.merton is 'dX = (mu - jump_rate E[e^J - 1]) X dt + sigma X dW + (e^J - 1) X dN, J normal: estimates in force, one row per fit';
comment on column main.merton.series is 'name of the series';
comment on column main.merton.lookback is 'steps in the window; 0: all';
comment on column main.merton.window_start is 'time of the window''s first observation, UTC';
comment on column main.merton.window_end is 'time of the window''s last observation, UTC';
comment on column main.merton.n is 'steps used';
comment on column main.merton.mu is 'Drift: expected relative change per unit of time, jumps included. [1/t]';
comment on column main.merton.mu_se is 'Standard error of mu. [1/t]';
comment on column main.merton.mu_lower is 'Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column main.merton.mu_upper is 'Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column main.merton.sigma is 'Volatility between jumps. [1/√t]';
comment on column main.merton.sigma_se is 'Standard error of sigma. [1/√t]';
comment on column main.merton.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column main.merton.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column main.merton.jump_rate is 'Expected number of jumps per unit of time. [1/t]';
comment on column main.merton.jump_rate_se is 'Standard error of jump_rate. [1/t]';
comment on column main.merton.jump_rate_lower is 'Lower end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]';
comment on column main.merton.jump_rate_upper is 'Upper end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]';
comment on column main.merton.jump_mean is 'Mean of a jump of the logarithm. [1]';
comment on column main.merton.jump_mean_se is 'Standard error of jump_mean. [1]';
comment on column main.merton.jump_mean_lower is 'Lower end of the 95 % interval of jump_mean; empty: no end on this side. [1]';
comment on column main.merton.jump_mean_upper is 'Upper end of the 95 % interval of jump_mean; empty: no end on this side. [1]';
comment on column main.merton.jump_sd is 'Standard deviation of a jump of the logarithm. [1]';
comment on column main.merton.jump_sd_se is 'Standard error of jump_sd. [1]';
comment on column main.merton.jump_sd_lower is 'Lower end of the 95 % interval of jump_sd; empty: no end on this side. [1]';
comment on column main.merton.jump_sd_upper is 'Upper end of the 95 % interval of jump_sd; empty: no end on this side. [1]';
comment on column main.merton.total_volatility is 'Volatility with jumps: √(sigma² + jump_rate (jump_mean² + jump_sd²)). [1/√t]';
comment on column main.merton.total_volatility_lower is 'Lower end of the 95 % interval of total_volatility. [1/√t]';
comment on column main.merton.total_volatility_upper is 'Upper end of the 95 % interval of total_volatility. [1/√t]';
comment on column main.merton.jump_probability is 'Probability that the latest step held a jump, given the fit. [1]';
comment on column main.merton.kurtosis is 'Fourth moment of the increments of the logarithm over the squared second: 3 for a Gaussian. [1]';
comment on column main.merton.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.merton.status is 'what became of the fit, in a word';
comment on column main.merton.revision is 'revision of the model that computed the row';
comment on column main.merton.run_id is 'run that wrote the row';
comment on view versions.merton is 'dX = (mu - jump_rate E[e^J - 1]) X dt + sigma X dW + (e^J - 1) X dN, J normal: every version of every estimate';
comment on column versions.merton.series is 'name of the series';
comment on column versions.merton.lookback is 'steps in the window; 0: all';
comment on column versions.merton.window_start is 'time of the window''s first observation, UTC';
comment on column versions.merton.window_end is 'time of the window''s last observation, UTC';
comment on column versions.merton.n is 'steps used';
comment on column versions.merton.mu is 'Drift: expected relative change per unit of time, jumps included. [1/t]';
comment on column versions.merton.mu_se is 'Standard error of mu. [1/t]';
comment on column versions.merton.mu_lower is 'Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column versions.merton.mu_upper is 'Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]';
comment on column versions.merton.sigma is 'Volatility between jumps. [1/√t]';
comment on column versions.merton.sigma_se is 'Standard error of sigma. [1/√t]';
comment on column versions.merton.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column versions.merton.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]';
comment on column versions.merton.jump_rate is 'Expected number of jumps per unit of time. [1/t]';
comment on column versions.merton.jump_rate_se is 'Standard error of jump_rate. [1/t]';
comment on column versions.merton.jump_rate_lower is 'Lower end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]';
comment on column versions.merton.jump_rate_upper is 'Upper end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]';
comment on column versions.merton.jump_mean is 'Mean of a jump of the logarithm. [1]';
comment on column versions.merton.jump_mean_se is 'Standard error of jump_mean. [1]';
comment on column versions.merton.jump_mean_lower is 'Lower end of the 95 % interval of jump_mean; empty: no end on this side. [1]';
comment on column versions.merton.jump_mean_upper is 'Upper end of the 95 % interval of jump_mean; empty: no end on this side. [1]';
comment on column versions.merton.jump_sd is 'Standard deviation of a jump of the logarithm. [1]';
comment on column versions.merton.jump_sd_se is 'Standard error of jump_sd. [1]';
comment on column versions.merton.jump_sd_lower is 'Lower end of the 95 % interval of jump_sd; empty: no end on this side. [1]';
comment on column versions.merton.jump_sd_upper is 'Upper end of the 95 % interval of jump_sd; empty: no end on this side. [1]';
comment on column versions.merton.total_volatility is 'Volatility with jumps: √(sigma² + jump_rate (jump_mean² + jump_sd²)). [1/√t]';
comment on column versions.merton.total_volatility_lower is 'Lower end of the 95 % interval of total_volatility. [1/√t]';
comment on column versions.merton.total_volatility_upper is 'Upper end of the 95 % interval of total_volatility. [1/√t]';
comment on column versions.merton.jump_probability is 'Probability that the latest step held a jump, given the fit. [1]';
comment on column versions.merton.kurtosis is 'Fourth moment of the increments of the logarithm over the squared second: 3 for a Gaussian. [1]';
comment on column versions.merton.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.merton.status is 'what became of the fit, in a word';
comment on column versions.merton.revision is 'revision of the model that computed the row';
comment on column versions.merton.run_from is 'run from which the row is in force';
comment on column versions.merton.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.merton.in_force_from is 'moment of run_from';
comment on column versions.merton.in_force_to is 'moment of run_to';
comment on macro table main.merton_at_run is 'the view merton as it was after a run: merton_at_run(41)';
comment on macro table main.merton_as_of is 'the view merton as it was known at a moment: merton_as_of(''2026-01-31'')';
