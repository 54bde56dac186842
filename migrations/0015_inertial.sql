-- inertial: dX = V dt, dV = -damping V dt - omega^2 (X - theta) dt + eta dW. Printed by `python -m driftbook.store.model_schema inertial`.
create table base.inertial (
  series_id integer not null,
  lookback integer not null,
  window_start timestamp not null,
  window_end timestamp not null,
  n integer not null,
  damping double,
  damping_se double,
  damping_lower double,
  damping_upper double,
  omega double,
  omega_se double,
  omega_lower double,
  omega_upper double,
  theta double,
  theta_se double,
  theta_lower double,
  theta_upper double,
  eta double,
  eta_se double,
  eta_lower double,
  eta_upper double,
  kappa_s double,
  kappa_s_se double,
  kappa_s_lower double,
  kappa_s_upper double,
  sigma_s double,
  sigma_s_se double,
  sigma_s_lower double,
  sigma_s_upper double,
  no_reversion_p double,
  kurtosis double,
  fitted_on varchar,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

create view base.inertial_rows as
select s.series, m.lookback, m.window_start, m.window_end, m.n,
  m.damping,
  m.damping_se,
  m.damping_lower,
  m.damping_upper,
  m.omega,
  m.omega_se,
  m.omega_lower,
  m.omega_upper,
  m.theta,
  m.theta_se,
  m.theta_lower,
  m.theta_upper,
  m.eta,
  m.eta_se,
  m.eta_lower,
  m.eta_upper,
  m.kappa_s,
  m.kappa_s_se,
  m.kappa_s_lower,
  m.kappa_s_upper,
  m.sigma_s,
  m.sigma_s_se,
  m.sigma_s_lower,
  m.sigma_s_upper,
  m.no_reversion_p,
  CASE WHEN damping < 2 * omega THEN 2 * pi() / sqrt(omega * omega - damping * damping / 4) END as period,
  CASE WHEN omega > 0 THEN damping / (2 * omega) END as damping_ratio,
  m.kurtosis,
  m.fitted_on,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.inertial m
join base.series s on s.series_id = m.series_id;

create view main.inertial as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.inertial_rows x where x.run_to is null;

create macro main.inertial_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.inertial_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.inertial_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.inertial_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.inertial as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.inertial_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.inertial is 'dX = V dt, dV = -damping V dt - omega^2 (X - theta) dt + eta dW: estimates in force, one row per fit';
comment on column main.inertial.series is 'name of the series';
comment on column main.inertial.lookback is 'steps in the window; 0: all';
comment on column main.inertial.window_start is 'time of the window''s first observation, UTC';
comment on column main.inertial.window_end is 'time of the window''s last observation, UTC';
comment on column main.inertial.n is 'steps used';
comment on column main.inertial.damping is 'Rate at which the velocity is lost. [1/t]';
comment on column main.inertial.damping_se is 'Standard error of damping. [1/t]';
comment on column main.inertial.damping_lower is 'Lower end of the 95 % interval of damping; empty: no end on this side. [1/t]';
comment on column main.inertial.damping_upper is 'Upper end of the 95 % interval of damping; empty: no end on this side. [1/t]';
comment on column main.inertial.omega is 'Frequency of the swing without damping, in radians; its square is the force''s slope. [1/t]';
comment on column main.inertial.omega_se is 'Standard error of omega. [1/t]';
comment on column main.inertial.omega_lower is 'Lower end of the 95 % interval of omega; empty: no end on this side. [1/t]';
comment on column main.inertial.omega_upper is 'Upper end of the 95 % interval of omega; empty: no end on this side. [1/t]';
comment on column main.inertial.theta is 'Level that the series is pulled to. [x]';
comment on column main.inertial.theta_se is 'Standard error of theta. [x]';
comment on column main.inertial.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.inertial.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column main.inertial.eta is 'Volatility of the noise that drives the velocity. [x/t√t]';
comment on column main.inertial.eta_se is 'Standard error of eta. [x/t√t]';
comment on column main.inertial.eta_lower is 'Lower end of the 95 % interval of eta; empty: no end on this side. [x/t√t]';
comment on column main.inertial.eta_upper is 'Upper end of the 95 % interval of eta; empty: no end on this side. [x/t√t]';
comment on column main.inertial.kappa_s is 'omega²/damping: speed of the pull, as of an Ornstein–Uhlenbeck process. [1/t]';
comment on column main.inertial.kappa_s_se is 'Standard error of kappa_s. [1/t]';
comment on column main.inertial.kappa_s_lower is 'Lower end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]';
comment on column main.inertial.kappa_s_upper is 'Upper end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]';
comment on column main.inertial.sigma_s is 'eta/damping: volatility over times long against 1/damping. [x/√t]';
comment on column main.inertial.sigma_s_se is 'Standard error of sigma_s. [x/√t]';
comment on column main.inertial.sigma_s_lower is 'Lower end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]';
comment on column main.inertial.sigma_s_upper is 'Upper end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]';
comment on column main.inertial.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column main.inertial.period is 'Length of a swing; empty where damping keeps it from swinging. [t]';
comment on column main.inertial.damping_ratio is 'Damping over the least that keeps it from swinging, 2 omega: below 1 it swings. [1]';
comment on column main.inertial.kurtosis is 'Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]';
comment on column main.inertial.fitted_on is 'level or log: whether the fit is to the value, or to the logarithm of the value plus the series'' shift, which is what x then means in units; log for series of prices. [1]';
comment on column main.inertial.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.inertial.status is 'what became of the fit, in a word';
comment on column main.inertial.revision is 'revision of the model that computed the row';
comment on column main.inertial.run_id is 'run that wrote the row';
comment on view versions.inertial is 'dX = V dt, dV = -damping V dt - omega^2 (X - theta) dt + eta dW: every version of every estimate';
comment on column versions.inertial.series is 'name of the series';
comment on column versions.inertial.lookback is 'steps in the window; 0: all';
comment on column versions.inertial.window_start is 'time of the window''s first observation, UTC';
comment on column versions.inertial.window_end is 'time of the window''s last observation, UTC';
comment on column versions.inertial.n is 'steps used';
comment on column versions.inertial.damping is 'Rate at which the velocity is lost. [1/t]';
comment on column versions.inertial.damping_se is 'Standard error of damping. [1/t]';
comment on column versions.inertial.damping_lower is 'Lower end of the 95 % interval of damping; empty: no end on this side. [1/t]';
comment on column versions.inertial.damping_upper is 'Upper end of the 95 % interval of damping; empty: no end on this side. [1/t]';
comment on column versions.inertial.omega is 'Frequency of the swing without damping, in radians; its square is the force''s slope. [1/t]';
comment on column versions.inertial.omega_se is 'Standard error of omega. [1/t]';
comment on column versions.inertial.omega_lower is 'Lower end of the 95 % interval of omega; empty: no end on this side. [1/t]';
comment on column versions.inertial.omega_upper is 'Upper end of the 95 % interval of omega; empty: no end on this side. [1/t]';
comment on column versions.inertial.theta is 'Level that the series is pulled to. [x]';
comment on column versions.inertial.theta_se is 'Standard error of theta. [x]';
comment on column versions.inertial.theta_lower is 'Lower end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.inertial.theta_upper is 'Upper end of the 95 % interval of theta; empty: no end on this side. [x]';
comment on column versions.inertial.eta is 'Volatility of the noise that drives the velocity. [x/t√t]';
comment on column versions.inertial.eta_se is 'Standard error of eta. [x/t√t]';
comment on column versions.inertial.eta_lower is 'Lower end of the 95 % interval of eta; empty: no end on this side. [x/t√t]';
comment on column versions.inertial.eta_upper is 'Upper end of the 95 % interval of eta; empty: no end on this side. [x/t√t]';
comment on column versions.inertial.kappa_s is 'omega²/damping: speed of the pull, as of an Ornstein–Uhlenbeck process. [1/t]';
comment on column versions.inertial.kappa_s_se is 'Standard error of kappa_s. [1/t]';
comment on column versions.inertial.kappa_s_lower is 'Lower end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]';
comment on column versions.inertial.kappa_s_upper is 'Upper end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]';
comment on column versions.inertial.sigma_s is 'eta/damping: volatility over times long against 1/damping. [x/√t]';
comment on column versions.inertial.sigma_s_se is 'Standard error of sigma_s. [x/√t]';
comment on column versions.inertial.sigma_s_lower is 'Lower end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]';
comment on column versions.inertial.sigma_s_upper is 'Upper end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]';
comment on column versions.inertial.no_reversion_p is 'One-sided p-value of no pull; below 0.05 speaks for a pull. [1]';
comment on column versions.inertial.period is 'Length of a swing; empty where damping keeps it from swinging. [t]';
comment on column versions.inertial.damping_ratio is 'Damping over the least that keeps it from swinging, 2 omega: below 1 it swings. [1]';
comment on column versions.inertial.kurtosis is 'Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]';
comment on column versions.inertial.fitted_on is 'level or log: whether the fit is to the value, or to the logarithm of the value plus the series'' shift, which is what x then means in units; log for series of prices. [1]';
comment on column versions.inertial.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.inertial.status is 'what became of the fit, in a word';
comment on column versions.inertial.revision is 'revision of the model that computed the row';
comment on column versions.inertial.run_from is 'run from which the row is in force';
comment on column versions.inertial.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.inertial.in_force_from is 'moment of run_from';
comment on column versions.inertial.in_force_to is 'moment of run_to';
comment on macro table main.inertial_at_run is 'the view inertial as it was after a run: inertial_at_run(41)';
comment on macro table main.inertial_as_of is 'the view inertial as it was known at a moment: inertial_as_of(''2026-01-31'')';
