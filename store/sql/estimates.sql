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
