-- name: page_runs
-- The newest runs first: number, kind and moment.
select r.run_id, r.kind, r.moment from run r order by r.run_id desc limit $most

-- name: page_newest
-- The newest run of the book; NULL: none yet.
select max(r.run_id) from run r

-- name: page_plan
-- The text of the plan in force at a run.
select p.text from plan_at_run($run) p

-- name: page_rows
-- Every series with what the book says of it, what it said at the run before, and its last observation.
with last as (
  select o.series, max(o.observed_at) as observed_at, arg_max(o.value, o.observed_at) as value
  from observation_at_run($run) o
  where o.series not in (select e.series from {latest} e) group by o.series
)
select s.series, s.unit, s.clock, s.in_force, coalesce(l.observed_at, t.observed_at) as observed_at,
  coalesce(l.value, t.value) as value, coalesce(l.stale, false) as stale, s.stale_after_days, l.lookback, l.window_end,
  l.model, l.model_weight, l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, l.drift,
  l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero, l.note,
  l.run_id, r.moment as said_at, l.series is not null as estimated, p.series is not null as said_before, p.model as before_model,
  p.volatility as before_volatility, p.volatility_lower as before_volatility_lower,
  p.volatility_upper as before_volatility_upper, p.volatility_unit as before_volatility_unit,
  p.half_life_days as before_half_life, p.half_life_days_lower as before_half_life_lower,
  p.half_life_days_upper as before_half_life_upper, p.half_life_unbounded as before_half_life_unbounded
from series_at_run($run) s
left join {latest} l on l.series = s.series
left join run r on r.run_id = l.run_id
left join latest_at_run($run - 1) p on p.series = s.series
left join last t on t.series = s.series
where {chosen}
order by s.added_at, s.series

-- name: page_years
-- The year before the book's last observation in equal periods, for each series: last, lowest and highest value.
with there as (
  select o.series_id, o.observed_at, o.value from base.observation o
  where o.run_from <= $run and (o.run_to is null or o.run_to > $run)
), edge as (
  select max(t.observed_at) as last from there t
), period as (
  select t.series_id, least($periods - 1, greatest(0, $periods - 1 - floor(
      (epoch(e.last) - epoch(t.observed_at)) * $periods / 31536000)::integer)) as period,
    arg_max(t.value, t.observed_at) as last, min(t.value) as lowest, max(t.value) as highest
  from there t, edge e
  where t.observed_at > e.last - interval 365 day
  group by t.series_id, period
)
select s.series, p.period, p.last, p.lowest, p.highest
from period p join base.series s on s.series_id = p.series_id
order by s.series_id, p.period

-- name: page_latest_csv
-- The view latest, in the order in which series were added.
select l.* from {latest} l join base.series s on s.series = l.series order by s.series_id

-- name: page_values
-- A series' last observations in time order, whether each belongs to the window, and the run that last wrote it.
with back as (
  select o.observed_at, o.value, o.run_id from observation_at_run($run) o
  where o.series = $series order by o.observed_at desc limit $most
)
select b.observed_at, b.value,
  coalesce(b.observed_at between $opens::timestamp and $closes::timestamp, false) as in_window, b.run_id
from back b order by b.observed_at

-- name: page_window
-- The bounds of the window that latest speaks of, and how its fit ended.
select f.window_start, f.window_end, f.n, f.status
from fit_at_run($run) f
where f.series = $series and f.lookback = $lookback
order by f.window_end desc, f.model is not distinct from $model desc
limit 1

-- name: page_crossings
-- How often the steps of a window went from one side of a level to the other, and when last.
with step as (
  select o.observed_at, o.value >= $level as above, lag(o.value >= $level) over (order by o.observed_at) as before
  from observation_at_run($run) o
  where o.series = $series and o.observed_at between $opens and $closes
)
select count(*) filter (where s.above and not s.before), count(*) filter (where s.before and not s.above),
  max(s.observed_at) filter (where s.above <> s.before)
from step s

-- name: page_corrections
-- Observations of a series that were corrected or withdrawn up to a run.
select b.observed_at, b.value as before, a.value as after, b.run_to as run_id, r.moment
from versions.observation b
join run r on r.run_id = b.run_to
left join versions.observation a
  on a.series = b.series and a.observed_at = b.observed_at and a.run_from = b.run_to
where b.series = $series and b.run_to <= $run and b.run_from < b.run_to
order by b.run_to, b.observed_at

-- name: page_statements
-- What a model said of each window of a series, in every version up to a run: volatility, drift and half-life there.
with said as (
  select v.* from versions.{model} v
  where v.series = $series and v.lookback = $lookback and v.run_from <= $run
    and (v.run_to is null or v.run_to > v.run_from)
), beside as (
  select m.*, o.value, s.sign, s.shift, {step} as step, case s.clock when 'seconds' then 1 / 86400.0 else 365.0 end as days
  from said m
  join series_at_run($run) s on s.series = m.series
  left join versions.observation o
    on o.series = m.series and o.observed_at = m.window_end
    and o.run_from <= m.run_from and (o.run_to is null or o.run_to > m.run_from)
), there as (
  select b.*, {x} as x from beside b
), scaled as (
  select *, {per_value} as per_value from there
)
select '{model}' as model, window_end, {volatility}, {drift}, {pull}, status, run_from,
  case when run_to <= $run then run_to end as run_to
from scaled order by window_end, run_from

-- name: page_models
-- The weight of each model on each window of a series.
select f.window_end, f.model, f.model_weight, f.status, f.n
from fit_at_run($run) f
where f.series = $series and f.lookback = $lookback
order by f.window_end, f.model

-- name: page_intakes
-- The newest intakes that brought what is known of a series, and how many there were.
select i.intake_id, i.run_id, i.source, i.sha256, i.received_at, i.rows_read, i.rows_refused,
  count(*) as observations, count(*) over () as intakes
from observation_at_run($run) o
join intake i on i.intake_id = o.intake_id
where o.series = $series
group by all
order by i.intake_id desc
limit $most

-- name: page_refused
-- Refused rows of intakes that brought this series, and those that name it.
select r.intake_id, r.line, r.text, r.reason
from refused_row_at_run($run) r
where contains(r.text, $series)
order by r.intake_id desc, r.line
limit $most

-- name: page_run
-- A run with its digest.
select r.run_id, r.kind, r.moment, r.told, r.package_version, r.digest from run r where r.run_id = $run
