-- name: estimate_due
-- Computes the due slices of some series through the registered function. A slice begins where its blocks begin, so
-- windows before the first due one are computed along and left out. A series shorter than its lookback has one window.
create or replace temp table fresh as
with listed as (
  select o.series_id, list(o.observed_at order by o.observed_at) as times, list(o.value order by o.observed_at) as x
  from base.observation o
  where o.run_to is null and o.series_id in (select unnest($series::integer[]))
  group by o.series_id
), sliced as (
  select d.series_id, d.lookback, d.start, d.first, l.times[d.start + 1:d.stop + 1] as times,
    {rolling}(l.x[d.start + 1:d.stop + 1], d.step, d.lookback) as fits
  from due_slice d
  join listed l using (series_id)
), opened as (
  select s.series_id, s.lookback, s.first,
    s.start + unnest(range(len(s.fits))) as k,
    unnest(s.times[:len(s.fits)]) as window_start,
    unnest(s.times[len(s.times) - len(s.fits) + 1:]) as window_end,
    unnest(s.fits) as f
  from sliced s
)
select series_id, lookback, window_start, window_end, f.n, {columns}, f.status
from opened
where k >= first

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

-- name: close_entry
-- All rows in force of one series and lookback end with this run.
update base.{table} b
set run_to = ?
where b.run_to is null and b.series_id = ? and b.lookback = ?
