-- ckls: dX = kappa (theta - X) dt + sigma X^gamma dW. Printed by `python -m driftbook.store.model_schema ckls`.
create table base.ckls (
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
  gamma double,
  gamma_se double,
  gamma_lower double,
  gamma_upper double,
  kappa_median_unbiased double,
  no_reversion_p double,
  local_volatility double,
  local_volatility_se double,
  local_volatility_lower double,
  local_volatility_upper double,
  kurtosis double,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

create view base.ckls_rows as
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
  m.gamma,
  m.gamma_se,
  m.gamma_lower,
  m.gamma_upper,
  m.kappa_median_unbiased,
  m.no_reversion_p,
  CASE WHEN kappa > 0 AND gamma <= 1 THEN ln(2) / nullif(kappa_median_unbiased, 0) END as half_life,
  CASE WHEN kappa_upper > 0 AND gamma <= 1 THEN ln(2) / kappa_upper END as half_life_lower,
  CASE WHEN kappa_lower > 0 AND gamma <= 1 THEN ln(2) / kappa_lower END as half_life_upper,
  CASE WHEN kappa > 0 AND gamma <= 1 THEN ln(2) / kappa END as half_life_mle,
  kappa_lower = 0 as half_life_unbounded,
  m.local_volatility,
  m.local_volatility_se,
  m.local_volatility_lower,
  m.local_volatility_upper,
  CASE WHEN gamma_upper < 0.5 THEN true WHEN gamma_lower > 0.5 AND kappa * theta > 0 THEN false END as can_reach_zero,
  m.kurtosis,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.ckls m
join base.series s on s.series_id = m.series_id;

create view main.ckls as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ckls_rows x where x.run_to is null;

create macro main.ckls_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ckls_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.ckls_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ckls_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.ckls as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.ckls_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.ckls is 'dX = kappa (theta - X) dt + sigma X^gamma dW: estimates in force, one row per fit';
comment on column main.ckls.series is 'name of the series';
comment on column main.ckls.lookback is 'steps in the window; 0: all';
comment on column main.ckls.window_start is 'time of the window''s first observation, UTC';
comment on column main.ckls.window_end is 'time of the window''s last observation, UTC';
comment on column main.ckls.n is 'steps used';
comment on column main.ckls.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column main.ckls.kappa_se is 'Standard error of kappa. [1/t]';
comment on column main.ckls.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.ckls.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.ckls.theta is 'Level that the drift pulls to; the stationary mean where gamma is 1 or less. [x]';
comment on column main.ckls.theta_se is 'Standard error of theta. [x]';
comment on column main.ckls.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.ckls.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.ckls.sigma is 'Volatility of the driving noise: times x^gamma it is that of the series. [x^(1-gamma)/√t]';
comment on column main.ckls.sigma_se is 'Standard error of sigma. [x^(1-gamma)/√t]';
comment on column main.ckls.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]';
comment on column main.ckls.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]';
comment on column main.ckls.gamma is 'Power of the level in the volatility; between -1 and 2.5. [1]';
comment on column main.ckls.gamma_se is 'Standard error of gamma. [1]';
comment on column main.ckls.gamma_lower is 'Lower end of the 95 % interval of gamma; empty: no end on this side. [1]';
comment on column main.ckls.gamma_upper is 'Upper end of the 95 % interval of gamma; empty: no end on this side. [1]';
comment on column main.ckls.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column main.ckls.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column main.ckls.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column main.ckls.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.ckls.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.ckls.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column main.ckls.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column main.ckls.local_volatility is 'Volatility at the geometric mean of the window: sigma times its power gamma. [x/√t]';
comment on column main.ckls.local_volatility_se is 'Standard error of local_volatility. [x/√t]';
comment on column main.ckls.local_volatility_lower is 'Lower end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]';
comment on column main.ckls.local_volatility_upper is 'Upper end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]';
comment on column main.ckls.can_reach_zero is 'Whether paths reach zero; empty where the interval of gamma holds a half, or kappa theta is not positive. [1]';
comment on column main.ckls.kurtosis is 'Fourth moment of movements in the coordinate of unit volatility over the squared second. [1]';
comment on column main.ckls.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.ckls.status is 'what became of the fit, in a word';
comment on column main.ckls.revision is 'revision of the model that computed the row';
comment on column main.ckls.run_id is 'run that wrote the row';
comment on view versions.ckls is 'dX = kappa (theta - X) dt + sigma X^gamma dW: every version of every estimate';
comment on column versions.ckls.series is 'name of the series';
comment on column versions.ckls.lookback is 'steps in the window; 0: all';
comment on column versions.ckls.window_start is 'time of the window''s first observation, UTC';
comment on column versions.ckls.window_end is 'time of the window''s last observation, UTC';
comment on column versions.ckls.n is 'steps used';
comment on column versions.ckls.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column versions.ckls.kappa_se is 'Standard error of kappa. [1/t]';
comment on column versions.ckls.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.ckls.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.ckls.theta is 'Level that the drift pulls to; the stationary mean where gamma is 1 or less. [x]';
comment on column versions.ckls.theta_se is 'Standard error of theta. [x]';
comment on column versions.ckls.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.ckls.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.ckls.sigma is 'Volatility of the driving noise: times x^gamma it is that of the series. [x^(1-gamma)/√t]';
comment on column versions.ckls.sigma_se is 'Standard error of sigma. [x^(1-gamma)/√t]';
comment on column versions.ckls.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]';
comment on column versions.ckls.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]';
comment on column versions.ckls.gamma is 'Power of the level in the volatility; between -1 and 2.5. [1]';
comment on column versions.ckls.gamma_se is 'Standard error of gamma. [1]';
comment on column versions.ckls.gamma_lower is 'Lower end of the 95 % interval of gamma; empty: no end on this side. [1]';
comment on column versions.ckls.gamma_upper is 'Upper end of the 95 % interval of gamma; empty: no end on this side. [1]';
comment on column versions.ckls.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column versions.ckls.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column versions.ckls.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column versions.ckls.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.ckls.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.ckls.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column versions.ckls.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column versions.ckls.local_volatility is 'Volatility at the geometric mean of the window: sigma times its power gamma. [x/√t]';
comment on column versions.ckls.local_volatility_se is 'Standard error of local_volatility. [x/√t]';
comment on column versions.ckls.local_volatility_lower is 'Lower end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]';
comment on column versions.ckls.local_volatility_upper is 'Upper end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]';
comment on column versions.ckls.can_reach_zero is 'Whether paths reach zero; empty where the interval of gamma holds a half, or kappa theta is not positive. [1]';
comment on column versions.ckls.kurtosis is 'Fourth moment of movements in the coordinate of unit volatility over the squared second. [1]';
comment on column versions.ckls.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.ckls.status is 'what became of the fit, in a word';
comment on column versions.ckls.revision is 'revision of the model that computed the row';
comment on column versions.ckls.run_from is 'run from which the row is in force';
comment on column versions.ckls.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.ckls.in_force_from is 'moment of run_from';
comment on column versions.ckls.in_force_to is 'moment of run_to';
comment on macro table main.ckls_at_run is 'the view ckls as it was after a run: ckls_at_run(41)';
comment on macro table main.ckls_as_of is 'the view ckls as it was known at a moment: ckls_as_of(''2026-01-31'')';
