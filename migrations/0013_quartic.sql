-- quartic: dX = (a0 + a1 z + a2 z² + a3 z³) dt + sigma dW, z = (X - centre)/scale. Printed by `python -m driftbook.store.model_schema quartic`.
create table base.quartic (
  series_id integer not null,
  lookback integer not null,
  window_start timestamp not null,
  window_end timestamp not null,
  n integer not null,
  centre double,
  scale double,
  a0 double,
  a0_se double,
  a0_lower double,
  a0_upper double,
  a1 double,
  a1_se double,
  a1_lower double,
  a1_upper double,
  a2 double,
  a2_se double,
  a2_lower double,
  a2_upper double,
  a3 double,
  a3_se double,
  a3_lower double,
  a3_upper double,
  sigma double,
  sigma_se double,
  sigma_lower double,
  sigma_upper double,
  bottom_lower double,
  bottom_lower_se double,
  bottom_lower_lower double,
  bottom_lower_upper double,
  barrier double,
  barrier_se double,
  barrier_lower double,
  barrier_upper double,
  bottom_upper double,
  bottom_upper_se double,
  bottom_upper_lower double,
  bottom_upper_upper double,
  steepest double,
  kurtosis double,
  loglik double,
  status varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);

-- centre and scale of each series and lookback, from the first window that was fitted; they never change.
create table base.quartic_setting (
  series_id integer not null,
  lookback integer not null,
  centre double not null,
  scale double not null,
  run_from integer not null
);

create view base.quartic_rows as
select s.series, m.lookback, m.window_start, m.window_end, m.n,
  m.centre,
  m.scale,
  m.a0,
  m.a0_se,
  m.a0_lower,
  m.a0_upper,
  m.a1,
  m.a1_se,
  m.a1_lower,
  m.a1_upper,
  m.a2,
  m.a2_se,
  m.a2_lower,
  m.a2_upper,
  m.a3,
  m.a3_se,
  m.a3_lower,
  m.a3_upper,
  m.sigma,
  m.sigma_se,
  m.sigma_lower,
  m.sigma_upper,
  m.bottom_lower,
  m.bottom_lower_se,
  m.bottom_lower_lower,
  m.bottom_lower_upper,
  m.barrier,
  m.barrier_se,
  m.barrier_lower,
  m.barrier_upper,
  m.bottom_upper,
  m.bottom_upper_se,
  m.bottom_upper_lower,
  m.bottom_upper_upper,
  m.steepest,
  m.kurtosis,
  m.loglik,
  m.status, m.revision, m.run_from, m.run_to
from base.quartic m
join base.series s on s.series_id = m.series_id;

create view main.quartic as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.quartic_rows x where x.run_to is null;

create macro main.quartic_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.quartic_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.quartic_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.quartic_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.quartic as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.quartic_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

comment on view main.quartic is 'dX = (a0 + a1 z + a2 z² + a3 z³) dt + sigma dW, z = (X - centre)/scale: estimates in force, one row per fit';
comment on column main.quartic.series is 'name of the series';
comment on column main.quartic.lookback is 'steps in the window; 0: all';
comment on column main.quartic.window_start is 'time of the window''s first observation, UTC';
comment on column main.quartic.window_end is 'time of the window''s last observation, UTC';
comment on column main.quartic.n is 'steps used';
comment on column main.quartic.centre is 'Where z = 0; a setting of the series and lookback. [x]';
comment on column main.quartic.scale is 'Length of z = 1; a setting of the series and lookback. [x]';
comment on column main.quartic.a0 is 'Drift at the centre. [x/t]';
comment on column main.quartic.a0_se is 'Standard error of a0. [x/t]';
comment on column main.quartic.a0_lower is 'Lower end of the 95 % interval of a0; empty: no end on this side. [x/t]';
comment on column main.quartic.a0_upper is 'Upper end of the 95 % interval of a0; empty: no end on this side. [x/t]';
comment on column main.quartic.a1 is 'Coefficient of z in the drift, z = (x - centre)/scale. [x/t]';
comment on column main.quartic.a1_se is 'Standard error of a1. [x/t]';
comment on column main.quartic.a1_lower is 'Lower end of the 95 % interval of a1; empty: no end on this side. [x/t]';
comment on column main.quartic.a1_upper is 'Upper end of the 95 % interval of a1; empty: no end on this side. [x/t]';
comment on column main.quartic.a2 is 'Coefficient of z² in the drift. [x/t]';
comment on column main.quartic.a2_se is 'Standard error of a2. [x/t]';
comment on column main.quartic.a2_lower is 'Lower end of the 95 % interval of a2; empty: no end on this side. [x/t]';
comment on column main.quartic.a2_upper is 'Upper end of the 95 % interval of a2; empty: no end on this side. [x/t]';
comment on column main.quartic.a3 is 'Coefficient of z³ in the drift: not negative, the drift does not confine. [x/t]';
comment on column main.quartic.a3_se is 'Standard error of a3. [x/t]';
comment on column main.quartic.a3_lower is 'Lower end of the 95 % interval of a3; empty: no end on this side. [x/t]';
comment on column main.quartic.a3_upper is 'Upper end of the 95 % interval of a3; empty: no end on this side. [x/t]';
comment on column main.quartic.sigma is 'Volatility. [x/√t]';
comment on column main.quartic.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column main.quartic.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.quartic.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column main.quartic.bottom_lower is 'Lower resting point: the bottom of the lower of two wells; empty where there are no two. [x]';
comment on column main.quartic.bottom_lower_se is 'Standard error of bottom_lower. [x]';
comment on column main.quartic.bottom_lower_lower is 'Lower end of the 95 % interval of bottom_lower; empty: no end on this side. [x]';
comment on column main.quartic.bottom_lower_upper is 'Upper end of the 95 % interval of bottom_lower; empty: no end on this side. [x]';
comment on column main.quartic.barrier is 'Top of the barrier between two wells; empty where there are no two. [x]';
comment on column main.quartic.barrier_se is 'Standard error of barrier. [x]';
comment on column main.quartic.barrier_lower is 'Lower end of the 95 % interval of barrier; empty: no end on this side. [x]';
comment on column main.quartic.barrier_upper is 'Upper end of the 95 % interval of barrier; empty: no end on this side. [x]';
comment on column main.quartic.bottom_upper is 'Upper resting point: the bottom of the upper of two wells; empty where there are no two. [x]';
comment on column main.quartic.bottom_upper_se is 'Standard error of bottom_upper. [x]';
comment on column main.quartic.bottom_upper_lower is 'Lower end of the 95 % interval of bottom_upper; empty: no end on this side. [x]';
comment on column main.quartic.bottom_upper_upper is 'Upper end of the 95 % interval of bottom_upper; empty: no end on this side. [x]';
comment on column main.quartic.steepest is 'Largest |slope of the drift| times the longest step, over the window''s range. [1]';
comment on column main.quartic.kurtosis is 'Fourth moment of movements over their squared second: 3 for a Gaussian. [1]';
comment on column main.quartic.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column main.quartic.status is 'what became of the fit, in a word';
comment on column main.quartic.revision is 'revision of the model that computed the row';
comment on column main.quartic.run_id is 'run that wrote the row';
comment on view versions.quartic is 'dX = (a0 + a1 z + a2 z² + a3 z³) dt + sigma dW, z = (X - centre)/scale: every version of every estimate';
comment on column versions.quartic.series is 'name of the series';
comment on column versions.quartic.lookback is 'steps in the window; 0: all';
comment on column versions.quartic.window_start is 'time of the window''s first observation, UTC';
comment on column versions.quartic.window_end is 'time of the window''s last observation, UTC';
comment on column versions.quartic.n is 'steps used';
comment on column versions.quartic.centre is 'Where z = 0; a setting of the series and lookback. [x]';
comment on column versions.quartic.scale is 'Length of z = 1; a setting of the series and lookback. [x]';
comment on column versions.quartic.a0 is 'Drift at the centre. [x/t]';
comment on column versions.quartic.a0_se is 'Standard error of a0. [x/t]';
comment on column versions.quartic.a0_lower is 'Lower end of the 95 % interval of a0; empty: no end on this side. [x/t]';
comment on column versions.quartic.a0_upper is 'Upper end of the 95 % interval of a0; empty: no end on this side. [x/t]';
comment on column versions.quartic.a1 is 'Coefficient of z in the drift, z = (x - centre)/scale. [x/t]';
comment on column versions.quartic.a1_se is 'Standard error of a1. [x/t]';
comment on column versions.quartic.a1_lower is 'Lower end of the 95 % interval of a1; empty: no end on this side. [x/t]';
comment on column versions.quartic.a1_upper is 'Upper end of the 95 % interval of a1; empty: no end on this side. [x/t]';
comment on column versions.quartic.a2 is 'Coefficient of z² in the drift. [x/t]';
comment on column versions.quartic.a2_se is 'Standard error of a2. [x/t]';
comment on column versions.quartic.a2_lower is 'Lower end of the 95 % interval of a2; empty: no end on this side. [x/t]';
comment on column versions.quartic.a2_upper is 'Upper end of the 95 % interval of a2; empty: no end on this side. [x/t]';
comment on column versions.quartic.a3 is 'Coefficient of z³ in the drift: not negative, the drift does not confine. [x/t]';
comment on column versions.quartic.a3_se is 'Standard error of a3. [x/t]';
comment on column versions.quartic.a3_lower is 'Lower end of the 95 % interval of a3; empty: no end on this side. [x/t]';
comment on column versions.quartic.a3_upper is 'Upper end of the 95 % interval of a3; empty: no end on this side. [x/t]';
comment on column versions.quartic.sigma is 'Volatility. [x/√t]';
comment on column versions.quartic.sigma_se is 'Standard error of sigma. [x/√t]';
comment on column versions.quartic.sigma_lower is 'Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.quartic.sigma_upper is 'Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]';
comment on column versions.quartic.bottom_lower is 'Lower resting point: the bottom of the lower of two wells; empty where there are no two. [x]';
comment on column versions.quartic.bottom_lower_se is 'Standard error of bottom_lower. [x]';
comment on column versions.quartic.bottom_lower_lower is 'Lower end of the 95 % interval of bottom_lower; empty: no end on this side. [x]';
comment on column versions.quartic.bottom_lower_upper is 'Upper end of the 95 % interval of bottom_lower; empty: no end on this side. [x]';
comment on column versions.quartic.barrier is 'Top of the barrier between two wells; empty where there are no two. [x]';
comment on column versions.quartic.barrier_se is 'Standard error of barrier. [x]';
comment on column versions.quartic.barrier_lower is 'Lower end of the 95 % interval of barrier; empty: no end on this side. [x]';
comment on column versions.quartic.barrier_upper is 'Upper end of the 95 % interval of barrier; empty: no end on this side. [x]';
comment on column versions.quartic.bottom_upper is 'Upper resting point: the bottom of the upper of two wells; empty where there are no two. [x]';
comment on column versions.quartic.bottom_upper_se is 'Standard error of bottom_upper. [x]';
comment on column versions.quartic.bottom_upper_lower is 'Lower end of the 95 % interval of bottom_upper; empty: no end on this side. [x]';
comment on column versions.quartic.bottom_upper_upper is 'Upper end of the 95 % interval of bottom_upper; empty: no end on this side. [x]';
comment on column versions.quartic.steepest is 'Largest |slope of the drift| times the longest step, over the window''s range. [1]';
comment on column versions.quartic.kurtosis is 'Fourth moment of movements over their squared second: 3 for a Gaussian. [1]';
comment on column versions.quartic.loglik is 'Log-likelihood of the observations after the first, given the first. [1]';
comment on column versions.quartic.status is 'what became of the fit, in a word';
comment on column versions.quartic.revision is 'revision of the model that computed the row';
comment on column versions.quartic.run_from is 'run from which the row is in force';
comment on column versions.quartic.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.quartic.in_force_from is 'moment of run_from';
comment on column versions.quartic.in_force_to is 'moment of run_to';
comment on macro table main.quartic_at_run is 'the view quartic as it was after a run: quartic_at_run(41)';
comment on macro table main.quartic_as_of is 'the view quartic as it was known at a moment: quartic_as_of(''2026-01-31'')';
