-- name: known_series
-- Every series with the setting in force, in the order in which they were added.
select s.series_id, s.series, t.sign, t.unit, t.clock, t.periods_per_year, t.time_zone, t.same_time,
  t.stale_after_days, t.in_force, t.shift, t.planned
from base.series s
join base.setting t on t.series_id = s.series_id and t.run_to is null
order by s.series_id

-- name: insert_setting
-- One new version of one series' setting.
insert into base.setting
  (series_id, sign, unit, clock, periods_per_year, time_zone, same_time, stale_after_days, in_force, shift, planned,
   run_from)
values (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)

-- name: aliases
-- The names in files that mean a series of another name.
select a.name, a.series_id from base.alias a where a.run_to is null order by a.name

-- name: first_free_series
-- The next series' number; that of a forgotten series, which old digests name, is never given again.
select 1 + greatest(
  (select coalesce(max(s.series_id), 0) from base.series s), (select coalesce(max(l.series_id), 0) from base.leaf l))
