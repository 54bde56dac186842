-- name: list_observations
-- The observations of some series, as in force now or at a run, as ordered lists, from the first that a slice needs.
-- steps is one number under the clock `trading`, else the elapsed time between neighbours.
create or replace temp table listed as
with lists as (
  select n.series_id, any_value(n.skipped) as skipped, any_value(n.step) as step, any_value(n.unit) as unit,
    list(o.observed_at order by o.observed_at) as times, list(o.value order by o.observed_at) as x
  from needed n
  join base.observation o
    on o.series_id = n.series_id and {in_force} and o.observed_at >= make_timestamp(n.opens)
  group by n.series_id
)
select series_id, skipped, times, x,
  case when unit is null then [step]
    else [(epoch_us(times[i + 1]) - epoch_us(times[i])) / unit for i in range(1, len(times))] end as steps
from lists

-- name: estimate_due
-- Computes the due slices through the registered function. A slice begins where its blocks begin, and windows before
-- the first due one are passed over. A series shorter than its lookback has one window, which says so.
create or replace temp table fresh as
with sliced as (
  select d.series_id, d.lookback, d.steps, d.first, d.ends is not null as thinned,
    l.times[d.first - l.skipped + 1:d.stop - l.skipped + 1] as times,
    {rolling}(
      case when d.shift = 0 then l.x[d.start - l.skipped + 1:d.stop - l.skipped + 1]
        else [v + d.shift for v in l.x[d.start - l.skipped + 1:d.stop - l.skipped + 1]] end,
      case when len(l.steps) = 1 then l.steps else l.steps[d.start - l.skipped + 1:d.stop - l.skipped] end,
      d.steps, d.first - d.start, d.settings, d.on_logs) as fits
  from due_slice d
  join listed l using (series_id)
), opened as (
  select s.series_id, s.lookback, s.steps, s.thinned,
    s.first + unnest(range(len(s.fits))) as k,
    unnest(s.times[:len(s.fits)]) as window_start,
    unnest(s.times[len(s.times) - len(s.fits) + 1:]) as window_end,
    unnest(s.fits) as f
  from sliced s
), due_end as (
  select d.series_id, d.lookback, unnest(d.ends) as window_end_index from due_slice d
)
select series_id, lookback, window_start, window_end, f.n, {columns}, f.status
from opened o
where not o.thinned or (o.series_id, o.lookback, o.k + o.steps) in (from due_end)

-- name: find_changed
-- What was computed and differs from what is in force, or is not in force at all.
create or replace temp table changed as
select f.*, b.window_end is not null as replaces
from fresh f
left join base.{table} b
  on b.run_to is null and b.series_id = f.series_id and b.lookback = f.lookback and b.window_end = f.window_end
where b.window_end is null or not ({same})

-- name: close_replaced
-- The version before each changed estimate ends with this run.
update base.{table} b
set run_to = $run
from changed c
where c.replaces and b.run_to is null
  and b.series_id = c.series_id and b.lookback = c.lookback and b.window_end = c.window_end

-- name: close_vanished
-- Estimates in a due span that were not computed again: their window is no longer there.
update base.{table} b
set run_to = $run
from (
  select distinct o.series_id, o.lookback, o.window_end
  from base.{table} o
  join due_span d on d.series_id = o.series_id and d.lookback = o.lookback
    and epoch_us(o.window_end) between d.opens and d.closes
  anti join fresh f on f.series_id = o.series_id and f.lookback = o.lookback and f.window_end = o.window_end
  where o.run_to is null
) gone
where b.run_to is null
  and b.series_id = gone.series_id and b.lookback = gone.lookback and b.window_end = gone.window_end

-- name: close_entries
-- All rows in force of some series and lookbacks end with this run.
update base.{table} b
set run_to = $run
from (select unnest($series::integer[]) as series_id, unnest($lookbacks::integer[]) as lookback) gone
where b.run_to is null and b.series_id = gone.series_id and b.lookback = gone.lookback
