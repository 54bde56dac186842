-- cir: dX = kappa (theta - X) dt + sigma sqrt(X) dW, kappa theta > 0. Printed by `python -m driftbook.store.model_schema cir`.
create table base.cir (
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
  feller_ratio_lower double,
  feller_ratio_upper double,
  kurtosis double,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

create view base.cir_rows as
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
  CASE WHEN kappa > 0 THEN sigma * sqrt(theta / (2 * kappa)) END as stationary_sd,
  2 * kappa * theta / (sigma * sigma) as feller_ratio,
  m.feller_ratio_lower,
  m.feller_ratio_upper,
  CASE WHEN feller_ratio_upper < 1 THEN true WHEN feller_ratio_lower > 1 THEN false END as can_reach_zero,
  m.kurtosis,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.cir m
join base.series s on s.series_id = m.series_id;

create view main.cir as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.cir_rows x where x.run_to is null;

create macro main.cir_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.cir_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.cir_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.cir_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.cir as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.cir_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.cir is 'dX = kappa (theta - X) dt + sigma sqrt(X) dW, kappa theta > 0: estimates in force, one row per fit';
comment on column main.cir.series is 'name of the series';
comment on column main.cir.lookback is 'steps in the window; 0: all';
comment on column main.cir.window_start is 'time of the window''s first observation, UTC';
comment on column main.cir.window_end is 'time of the window''s last observation, UTC';
comment on column main.cir.n is 'steps used';
comment on column main.cir.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column main.cir.kappa_se is 'Standard error of kappa. [1/t]';
comment on column main.cir.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.cir.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.cir.theta is 'Level that the series is pulled to. [x]';
comment on column main.cir.theta_se is 'Standard error of theta. [x]';
comment on column main.cir.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.cir.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.cir.sigma is 'Volatility of the driving noise: times √x it is that of the series. [√x/√t]';
comment on column main.cir.sigma_se is 'Standard error of sigma. [√x/√t]';
comment on column main.cir.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]';
comment on column main.cir.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]';
comment on column main.cir.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column main.cir.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column main.cir.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column main.cir.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.cir.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.cir.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column main.cir.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column main.cir.stationary_sd is 'Standard deviation of the stationary law; empty where there is none. [x]';
comment on column main.cir.feller_ratio is '2 kappa theta / sigma²: paths reach zero where it is below 1. Biased upwards, as kappa is. [1]';
comment on column main.cir.feller_ratio_lower is 'Lower end of the 95 % interval of feller_ratio. [1]';
comment on column main.cir.feller_ratio_upper is 'Upper end of the 95 % interval of feller_ratio; empty: no end on this side. [1]';
comment on column main.cir.can_reach_zero is 'Whether paths reach zero; empty where the interval of feller_ratio holds 1. [1]';
comment on column main.cir.kurtosis is 'Fourth moment of the residuals of √x over the squared second: about 3 for this model. [1]';
comment on column main.cir.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.cir.status is 'what became of the fit, in a word';
comment on column main.cir.revision is 'revision of the model that computed the row';
comment on column main.cir.run_id is 'run that wrote the row';
comment on view versions.cir is 'dX = kappa (theta - X) dt + sigma sqrt(X) dW, kappa theta > 0: every version of every estimate';
comment on column versions.cir.series is 'name of the series';
comment on column versions.cir.lookback is 'steps in the window; 0: all';
comment on column versions.cir.window_start is 'time of the window''s first observation, UTC';
comment on column versions.cir.window_end is 'time of the window''s last observation, UTC';
comment on column versions.cir.n is 'steps used';
comment on column versions.cir.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column versions.cir.kappa_se is 'Standard error of kappa. [1/t]';
comment on column versions.cir.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.cir.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.cir.theta is 'Level that the series is pulled to. [x]';
comment on column versions.cir.theta_se is 'Standard error of theta. [x]';
comment on column versions.cir.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.cir.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.cir.sigma is 'Volatility of the driving noise: times √x it is that of the series. [√x/√t]';
comment on column versions.cir.sigma_se is 'Standard error of sigma. [√x/√t]';
comment on column versions.cir.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]';
comment on column versions.cir.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]';
comment on column versions.cir.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column versions.cir.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column versions.cir.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column versions.cir.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.cir.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.cir.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column versions.cir.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column versions.cir.stationary_sd is 'Standard deviation of the stationary law; empty where there is none. [x]';
comment on column versions.cir.feller_ratio is '2 kappa theta / sigma²: paths reach zero where it is below 1. Biased upwards, as kappa is. [1]';
comment on column versions.cir.feller_ratio_lower is 'Lower end of the 95 % interval of feller_ratio. [1]';
comment on column versions.cir.feller_ratio_upper is 'Upper end of the 95 % interval of feller_ratio; empty: no end on this side. [1]';
comment on column versions.cir.can_reach_zero is 'Whether paths reach zero; empty where the interval of feller_ratio holds 1. [1]';
comment on column versions.cir.kurtosis is 'Fourth moment of the residuals of √x over the squared second: about 3 for this model. [1]';
comment on column versions.cir.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.cir.status is 'what became of the fit, in a word';
comment on column versions.cir.revision is 'revision of the model that computed the row';
comment on column versions.cir.run_from is 'run from which the row is in force';
comment on column versions.cir.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.cir.in_force_from is 'moment of run_from';
comment on column versions.cir.in_force_to is 'moment of run_to';
comment on macro table main.cir_at_run is 'the view cir as it was after a run: cir_at_run(41)';
comment on macro table main.cir_as_of is 'the view cir as it was known at a moment: cir_as_of(''2026-01-31'')';
