-- ou_noise: Y = X + noise * epsilon, dX = kappa (theta - X) dt + sigma dW. Printed by `python -m driftbook.store.model_schema ou_noise`.
create table base.ou_noise (
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
  noise double,
  noise_se double,
  noise_lower double,
  noise_upper double,
  noise_share double,
  no_noise_p double,
  kappa_median_unbiased double,
  no_reversion_p double,
  kurtosis double,
  fitted_on varchar,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

create view base.ou_noise_rows as
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
  m.noise,
  m.noise_se,
  m.noise_lower,
  m.noise_upper,
  m.noise_share,
  m.no_noise_p,
  m.kappa_median_unbiased,
  m.no_reversion_p,
  CASE WHEN kappa > 0 THEN ln(2) / nullif(kappa_median_unbiased, 0) END as half_life,
  CASE WHEN kappa_upper > 0 THEN ln(2) / kappa_upper END as half_life_lower,
  CASE WHEN kappa_lower > 0 THEN ln(2) / kappa_lower END as half_life_upper,
  CASE WHEN kappa > 0 THEN ln(2) / kappa END as half_life_mle,
  kappa_lower = 0 as half_life_unbounded,
  CASE WHEN kappa > 0 THEN sigma / sqrt(2 * kappa) END as stationary_sd,
  m.kurtosis,
  m.fitted_on,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.ou_noise m
join base.series s on s.series_id = m.series_id;

create view main.ou_noise as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ou_noise_rows x where x.run_to is null;

create macro main.ou_noise_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ou_noise_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.ou_noise_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.ou_noise_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.ou_noise as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.ou_noise_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.ou_noise is 'Y = X + noise * epsilon, dX = kappa (theta - X) dt + sigma dW: estimates in force, one row per fit';
comment on column main.ou_noise.series is 'name of the series';
comment on column main.ou_noise.lookback is 'steps in the window; 0: all';
comment on column main.ou_noise.window_start is 'time of the window''s first observation, UTC';
comment on column main.ou_noise.window_end is 'time of the window''s last observation, UTC';
comment on column main.ou_noise.n is 'steps used';
comment on column main.ou_noise.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column main.ou_noise.kappa_se is 'Standard error of kappa. [1/t]';
comment on column main.ou_noise.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.ou_noise.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column main.ou_noise.theta is 'Level that the series is pulled to. [x]';
comment on column main.ou_noise.theta_se is 'Standard error of theta. [x]';
comment on column main.ou_noise.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.ou_noise.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.ou_noise.sigma is 'Volatility of the driving noise. [x/√t]';
comment on column main.ou_noise.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column main.ou_noise.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.ou_noise.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.ou_noise.noise is 'Standard deviation of the noise in each observation; 0: none is seen. [x]';
comment on column main.ou_noise.noise_se is 'Standard error of noise. [x]';
comment on column main.ou_noise.noise_lower is 'Lower end of the 95 % interval of noise; empty: no end on this side. [x]';
comment on column main.ou_noise.noise_upper is 'Upper end of the 95 % interval of noise; empty: no end on this side. [x]';
comment on column main.ou_noise.noise_share is 'Share of the noise in the variance of a mean step''s increment, 2 noise² over 2 noise² plus that of X in the stationary law; above 0.1 no_reversion_p of ou is not to be trusted. [1]';
comment on column main.ou_noise.no_noise_p is 'One-sided p-value of no noise, by half a χ² law, which in windows of 250 steps is 4 where it says 5 %. [1]';
comment on column main.ou_noise.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column main.ou_noise.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column main.ou_noise.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column main.ou_noise.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.ou_noise.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column main.ou_noise.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column main.ou_noise.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column main.ou_noise.stationary_sd is 'Standard deviation of the stationary law; empty where there is none. [x]';
comment on column main.ou_noise.kurtosis is 'Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]';
comment on column main.ou_noise.fitted_on is 'level or log: whether the fit is to the value, or to the logarithm of the value plus the series'' shift, which is what x then means in units; log for series of prices. [1]';
comment on column main.ou_noise.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.ou_noise.status is 'what became of the fit, in a word';
comment on column main.ou_noise.revision is 'revision of the model that computed the row';
comment on column main.ou_noise.run_id is 'run that wrote the row';
comment on view versions.ou_noise is 'Y = X + noise * epsilon, dX = kappa (theta - X) dt + sigma dW: every version of every estimate';
comment on column versions.ou_noise.series is 'name of the series';
comment on column versions.ou_noise.lookback is 'steps in the window; 0: all';
comment on column versions.ou_noise.window_start is 'time of the window''s first observation, UTC';
comment on column versions.ou_noise.window_end is 'time of the window''s last observation, UTC';
comment on column versions.ou_noise.n is 'steps used';
comment on column versions.ou_noise.kappa is 'Speed of the pull to theta; the likelihood''s estimate, some 4/T too high on average. [1/t]';
comment on column versions.ou_noise.kappa_se is 'Standard error of kappa. [1/t]';
comment on column versions.ou_noise.kappa_lower is 'Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.ou_noise.kappa_upper is 'Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]';
comment on column versions.ou_noise.theta is 'Level that the series is pulled to. [x]';
comment on column versions.ou_noise.theta_se is 'Standard error of theta. [x]';
comment on column versions.ou_noise.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.ou_noise.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.ou_noise.sigma is 'Volatility of the driving noise. [x/√t]';
comment on column versions.ou_noise.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column versions.ou_noise.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.ou_noise.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.ou_noise.noise is 'Standard deviation of the noise in each observation; 0: none is seen. [x]';
comment on column versions.ou_noise.noise_se is 'Standard error of noise. [x]';
comment on column versions.ou_noise.noise_lower is 'Lower end of the 95 % interval of noise; empty: no end on this side. [x]';
comment on column versions.ou_noise.noise_upper is 'Upper end of the 95 % interval of noise; empty: no end on this side. [x]';
comment on column versions.ou_noise.noise_share is 'Share of the noise in the variance of a mean step''s increment, 2 noise² over 2 noise² plus that of X in the stationary law; above 0.1 no_reversion_p of ou is not to be trusted. [1]';
comment on column versions.ou_noise.no_noise_p is 'One-sided p-value of no noise, by half a χ² law, which in windows of 250 steps is 4 where it says 5 %. [1]';
comment on column versions.ou_noise.kappa_median_unbiased is 'Estimate of kappa that is too high as often as too low. [1/t]';
comment on column versions.ou_noise.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column versions.ou_noise.half_life is 'Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]';
comment on column versions.ou_noise.half_life_lower is 'Lower end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.ou_noise.half_life_upper is 'Upper end of the 95 % interval of half_life; empty: no end on this side. [t]';
comment on column versions.ou_noise.half_life_mle is 'Half-life by kappa itself: too short on average. [t]';
comment on column versions.ou_noise.half_life_unbounded is 'Whether the data leave the half-life without an upper end. [1]';
comment on column versions.ou_noise.stationary_sd is 'Standard deviation of the stationary law; empty where there is none. [x]';
comment on column versions.ou_noise.kurtosis is 'Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]';
comment on column versions.ou_noise.fitted_on is 'level or log: whether the fit is to the value, or to the logarithm of the value plus the series'' shift, which is what x then means in units; log for series of prices. [1]';
comment on column versions.ou_noise.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.ou_noise.status is 'what became of the fit, in a word';
comment on column versions.ou_noise.revision is 'revision of the model that computed the row';
comment on column versions.ou_noise.run_from is 'run from which the row is in force';
comment on column versions.ou_noise.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.ou_noise.in_force_from is 'moment of run_from';
comment on column versions.ou_noise.in_force_to is 'moment of run_to';
comment on macro table main.ou_noise_at_run is 'the view ou_noise as it was after a run: ou_noise_at_run(41)';
comment on macro table main.ou_noise_as_of is 'the view ou_noise as it was known at a moment: ou_noise_as_of(''2026-01-31'')';
