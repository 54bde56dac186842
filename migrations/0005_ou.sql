-- ou: dX = kappa (theta - X) dt + sigma dW. Printed by `python -m driftbook.store.model_schema ou`.
create table base.ou (
  series_id integer not null,
  lookback integer not null,
  window_start timestamp not null,
  window_end timestamp not null,
  n integer not null,
  kappa double,
  kappa_se double,
  kappa_lower double,
  kappa_upper double,
  theta double,
  theta_se double,
  theta_lower double,
  theta_upper double,
  sigma double,
  sigma_se double,
  sigma_lower double,
  sigma_upper double,
  kappa_median_unbiased double,
  no_reversion_p double,
  kurtosis double,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

create view base.ou_rows as
select s.series, m.lookback, m.window_start, m.window_end, m.n,
  m.kappa,
  m.kappa_se,
  m.kappa_lower,
  m.kappa_upper,
  m.theta,
  m.theta_se,
  m.theta_lower,
  m.theta_upper,
  m.sigma,
  m.sigma_se,
  m.sigma_lower,
  m.sigma_upper,
  m.kappa_median_unbiased,
  m.no_reversion_p,
  CASE WHEN kappa > 0 THEN ln(2) / nullif(kappa_median_unbiased, 0) END as half_life,
  CASE WHEN kappa_upper > 0 THEN ln(2) / kappa_upper END as half_life_lower,
  CASE WHEN kappa_lower > 0 THEN ln(2) / kappa_lower END as half_life_upper,
  CASE WHEN kappa > 0 THEN ln(2) / kappa END as half_life_mle,
  kappa_lower = 0 as half_life_unbounded,
  CASE WHEN kappa > 0 THEN sigma / sqrt(2 * kappa) END as stationary_sd,
  m.kurtosis,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.ou m
join base.series s on s.series_id = m.series_id;

create view main.ou as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ou_rows x where x.run_to is null;

create macro main.ou_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ou_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.ou_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ou_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.ou as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.ou_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.ou is 'dX = kappa (theta - X) dt + sigma dW: estimates in force, one row per fit';
comment on column main.ou.series is 'name of the series';
comment on column main.ou.lookback is 'steps in the window; 0: all';
comment on column main.ou.window_start is 'time of the window''s first observation, UTC';
comment on column main.ou.window_end is 'time of the window''s last observation, UTC';
comment on column main.ou.n is 'steps used';
comment on column main.ou.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column main.ou.kappa_se is 'Standard error of kappa. [1/t]';
comment on column main.ou.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.ou.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.ou.theta is 'Level that the series is pulled to. [x]';
comment on column main.ou.theta_se is 'Standard error of theta. [x]';
comment on column main.ou.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.ou.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.ou.sigma is 'Volatility of the driving noise. [x/√t]';
comment on column main.ou.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column main.ou.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.ou.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.ou.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column main.ou.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column main.ou.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column main.ou.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.ou.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.ou.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column main.ou.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column main.ou.stationary_sd is 'Standard deviation of the stationary law; empty where there is none. [x]';
comment on column main.ou.kurtosis is 'Fourth moment of the residuals over the squared second: 3 for a Gaussian. [1]';
comment on column main.ou.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.ou.status is 'what became of the fit, in a word';
comment on column main.ou.revision is 'revision of the model that computed the row';
comment on column main.ou.run_id is 'run that wrote the row';
comment on view versions.ou is 'dX = kappa (theta - X) dt + sigma dW: every version of every estimate';
comment on column versions.ou.series is 'name of the series';
comment on column versions.ou.lookback is 'steps in the window; 0: all';
comment on column versions.ou.window_start is 'time of the window''s first observation, UTC';
comment on column versions.ou.window_end is 'time of the window''s last observation, UTC';
comment on column versions.ou.n is 'steps used';
comment on column versions.ou.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column versions.ou.kappa_se is 'Standard error of kappa. [1/t]';
comment on column versions.ou.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.ou.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.ou.theta is 'Level that the series is pulled to. [x]';
comment on column versions.ou.theta_se is 'Standard error of theta. [x]';
comment on column versions.ou.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.ou.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.ou.sigma is 'Volatility of the driving noise. [x/√t]';
comment on column versions.ou.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column versions.ou.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.ou.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.ou.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column versions.ou.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column versions.ou.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column versions.ou.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.ou.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.ou.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column versions.ou.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column versions.ou.stationary_sd is 'Standard deviation of the stationary law; empty where there is none. [x]';
comment on column versions.ou.kurtosis is 'Fourth moment of the residuals over the squared second: 3 for a Gaussian. [1]';
comment on column versions.ou.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.ou.status is 'what became of the fit, in a word';
comment on column versions.ou.revision is 'revision of the model that computed the row';
comment on column versions.ou.run_from is 'run from which the row is in force';
comment on column versions.ou.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.ou.in_force_from is 'moment of run_from';
comment on column versions.ou.in_force_to is 'moment of run_to';
comment on macro table main.ou_at_run is 'the view ou as it was after a run: ou_at_run(41)';
comment on macro table main.ou_as_of is 'the view ou as it was known at a moment: ou_as_of(''2026-01-31'')';
