-- latest: what the book says of each series, one row a series, written by the run that estimated it. stale is judged
-- when read: at the moment that is asked about, or now.
create table base.latest (
  series_id integer not null,
  observed_at timestamp not null,
  value double not null,
  lookback integer not null,
  window_end timestamp not null,
  model varchar,
  model_weight double,
  volatility double,
  volatility_lower double,
  volatility_upper double,
  volatility_unit varchar not null,
  drift double,
  half_life_days double,
  half_life_days_lower double,
  half_life_days_upper double,
  half_life_unbounded boolean,
  can_reach_zero boolean,
  challenger varchar,
  note varchar not null,
  run_from integer not null,
  run_to integer
);

create view main.latest as
select s.series, t.unit, l.observed_at, l.value, epoch_us(now()) - epoch_us(l.observed_at) > t.stale_after_days * 86400000000 as stale, l.lookback, l.window_end, l.model, l.model_weight,
  l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, null::double as realised_volatility, l.drift,
  l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero,
  null::bigint as wells, null::double as mean_exit_time_days, null::varchar as backtest_zone, null::bigint as alarms,
  l.note, l.run_from as run_id
from base.latest l
join base.series s on s.series_id = l.series_id
join base.setting t on t.series_id = l.series_id and t.run_to is null
where l.run_to is null;

create macro main.latest_at_run(run) as table
select s.series, t.unit, l.observed_at, l.value, (select epoch_us(r.moment) from base.run r where r.run_id = run) - epoch_us(l.observed_at) > t.stale_after_days * 86400000000 as stale, l.lookback, l.window_end, l.model, l.model_weight,
  l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, null::double as realised_volatility, l.drift,
  l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero,
  null::bigint as wells, null::double as mean_exit_time_days, null::varchar as backtest_zone, null::bigint as alarms,
  l.note, l.run_from as run_id
from base.latest l
join base.series s on s.series_id = l.series_id
join base.setting t on t.series_id = l.series_id and t.run_from <= run and (t.run_to is null or t.run_to > run)
where l.run_from <= run and (l.run_to is null or l.run_to > run);

create macro main.latest_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select s.series, t.unit, l.observed_at, l.value, base.moment_us(moment) - epoch_us(l.observed_at) > t.stale_after_days * 86400000000 as stale, l.lookback, l.window_end, l.model, l.model_weight,
  l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, null::double as realised_volatility, l.drift,
  l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero,
  null::bigint as wells, null::double as mean_exit_time_days, null::varchar as backtest_zone, null::bigint as alarms,
  l.note, l.run_from as run_id
from base.latest l
join base.series s on s.series_id = l.series_id
join base.setting t on t.series_id = l.series_id and t.run_from <= (select k.run_id from k) and (t.run_to is null or t.run_to > (select k.run_id from k))
where l.run_from <= (select k.run_id from k) and (l.run_to is null or l.run_to > (select k.run_id from k));

create view versions.latest as
select s.series, t.unit, l.observed_at, l.value, epoch_us(f.moment) - epoch_us(l.observed_at) > t.stale_after_days * 86400000000 as stale, l.lookback, l.window_end, l.model, l.model_weight,
  l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, null::double as realised_volatility, l.drift,
  l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero,
  null::bigint as wells, null::double as mean_exit_time_days, null::varchar as backtest_zone, null::bigint as alarms,
  l.note, l.run_from, l.run_to,
  f.moment as in_force_from, u.moment as in_force_to
from base.latest l
join base.series s on s.series_id = l.series_id
join base.setting t on t.series_id = l.series_id and t.run_from <= l.run_from and (t.run_to is null or t.run_to > l.run_from)
join base.run f on f.run_id = l.run_from
left join base.run u on u.run_id = l.run_to;

comment on view main.latest is 'what the book says of each series now, by the model in force';
comment on column main.latest.series is 'name of the series';
comment on column main.latest.unit is 'unit of the values';
comment on column main.latest.observed_at is 'time of the latest observation, UTC';
comment on column main.latest.value is 'its value, in the unit of the series';
comment on column main.latest.stale is 'whether it is older than stale_after_days, judged when read';
comment on column main.latest.lookback is 'steps in the window that is spoken of; 0: all';
comment on column main.latest.window_end is 'last observation of that window, UTC';
comment on column main.latest.model is 'model in force';
comment on column main.latest.model_weight is 'its weight among the usable models of the window [1]';
comment on column main.latest.volatility is 'total volatility at the latest value, in volatility_unit';
comment on column main.latest.volatility_lower is 'lower end of its 95 % interval; NULL: no end on this side';
comment on column main.latest.volatility_upper is 'upper end of its 95 % interval; NULL: no end on this side';
comment on column main.latest.volatility_unit is 'unit of volatility: 1/√year is a fraction of the value per square root of a year';
comment on column main.latest.realised_volatility is 'not estimated yet';
comment on column main.latest.drift is 'expected change at the latest value: a fraction of it for positive series, else in units, per year or second';
comment on column main.latest.half_life_days is 'time in which a distance to the mean halves, by the model in force or the heaviest with a pull [calendar days]';
comment on column main.latest.half_life_days_lower is 'lower end of its 95 % interval; NULL: no end on this side [calendar days]';
comment on column main.latest.half_life_days_upper is 'upper end of its 95 % interval; NULL: no end on this side [calendar days]';
comment on column main.latest.half_life_unbounded is 'whether the data leave the half-life without an upper end';
comment on column main.latest.can_reach_zero is 'whether the series can reach zero under the model in force; NULL: not told, or not a series of prices';
comment on column main.latest.wells is 'not estimated yet';
comment on column main.latest.mean_exit_time_days is 'not estimated yet';
comment on column main.latest.backtest_zone is 'not estimated yet';
comment on column main.latest.alarms is 'not raised yet';
comment on column main.latest.note is 'what needs a look, in words; empty: nothing';
comment on column main.latest.run_id is 'run that wrote the row';
comment on view versions.latest is 'every version of latest; stale as it was when the version came';
comment on column versions.latest.series is 'name of the series';
comment on column versions.latest.unit is 'unit of the values';
comment on column versions.latest.observed_at is 'time of the latest observation, UTC';
comment on column versions.latest.value is 'its value, in the unit of the series';
comment on column versions.latest.stale is 'whether it is older than stale_after_days, judged when read';
comment on column versions.latest.lookback is 'steps in the window that is spoken of; 0: all';
comment on column versions.latest.window_end is 'last observation of that window, UTC';
comment on column versions.latest.model is 'model in force';
comment on column versions.latest.model_weight is 'its weight among the usable models of the window [1]';
comment on column versions.latest.volatility is 'total volatility at the latest value, in volatility_unit';
comment on column versions.latest.volatility_lower is 'lower end of its 95 % interval; NULL: no end on this side';
comment on column versions.latest.volatility_upper is 'upper end of its 95 % interval; NULL: no end on this side';
comment on column versions.latest.volatility_unit is 'unit of volatility: 1/√year is a fraction of the value per square root of a year';
comment on column versions.latest.realised_volatility is 'not estimated yet';
comment on column versions.latest.drift is 'expected change at the latest value: a fraction of it for positive series, else in units, per year or second';
comment on column versions.latest.half_life_days is 'time in which a distance to the mean halves, by the model in force or the heaviest with a pull [calendar days]';
comment on column versions.latest.half_life_days_lower is 'lower end of its 95 % interval; NULL: no end on this side [calendar days]';
comment on column versions.latest.half_life_days_upper is 'upper end of its 95 % interval; NULL: no end on this side [calendar days]';
comment on column versions.latest.half_life_unbounded is 'whether the data leave the half-life without an upper end';
comment on column versions.latest.can_reach_zero is 'whether the series can reach zero under the model in force; NULL: not told, or not a series of prices';
comment on column versions.latest.wells is 'not estimated yet';
comment on column versions.latest.mean_exit_time_days is 'not estimated yet';
comment on column versions.latest.backtest_zone is 'not estimated yet';
comment on column versions.latest.alarms is 'not raised yet';
comment on column versions.latest.note is 'what needs a look, in words; empty: nothing';
comment on column versions.latest.run_from is 'run from which the row is in force';
comment on column versions.latest.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.latest.in_force_from is 'moment of run_from';
comment on column versions.latest.in_force_to is 'moment of run_to';
comment on macro table main.latest_at_run is 'the view latest as it was after a run: latest_at_run(41)';
comment on macro table main.latest_as_of is 'the view latest as it was known at a moment: latest_as_of(''2026-01-31'')';
