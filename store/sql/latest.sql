-- name: latest_rows
-- What is said of each series now.
select l.* exclude (run_from, run_to) from base.latest l where l.run_to is null

-- name: find_headlines
-- The last observation of each asked series, with what its numbers are told by.
create or replace temp table headline as
select a.series_id, any_value(a.lookback) as lookback, any_value(t.sign) as sign, any_value(t.shift) as shift,
  any_value(t.periods_per_year) as periods_per_year, any_value(t.clock) as clock,
  max(o.observed_at) as observed_at, arg_max(o.value, o.observed_at) as value
from asked_headline a
join base.observation o on o.series_id = a.series_id and o.run_to is null
join base.setting t on t.series_id = a.series_id and t.run_to is null
group by a.series_id

-- name: local_fits
-- The fits of one model to the latest windows, with what it says at the last value.
with beside as (
  select m.*, h.observed_at, h.value, h.sign, h.shift, {step} as step
  from headline h
  join base.{model} m
    on m.series_id = h.series_id and m.lookback = h.lookback and m.window_end = h.observed_at and m.run_to is null
), there as (
  select *, {x} as x from beside
), scaled as (
  select *, {per_value} as per_value from there
)
select series_id, observed_at, value, lookback, window_start, '{model}', n, loglik, status, {no_reversion_p},
  {volatility}, {drift}, {pull}, {reaches_zero}, {noise_share}
from scaled

-- name: corrected_since
-- When observations were corrected or withdrawn that were in force at a run.
select distinct o.series_id, o.observed_at
from base.observation o
where o.run_to > $last and o.run_from <= $last

-- name: not_positive
-- Values that a series of prices should not have.
select o.series_id, o.observed_at
from base.observation o
join base.setting t on t.series_id = o.series_id and t.run_to is null
where o.run_to is null and t.sign = 'positive' and o.value <= -t.shift

-- name: close_latest
-- What was said of some series ends with this run.
update base.latest l set run_to = $run
where l.run_to is null and l.series_id in (select unnest($series::integer[]))

-- name: latest_in_order
-- latest in the order in which its series were added.
select l.* from {latest} l join base.series s on s.series = l.series order by s.series_id

-- name: run_in_force
-- The last run at or before a moment.
select max(r.run_id), max(r.moment) from run r where r.moment <= $moment
