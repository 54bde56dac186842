-- name: settings_since
-- The series whose setting was put in force after a run.
select t.series_id from base.setting t where t.run_to is null and t.run_from > ?

-- name: changed_since
-- When and where observations were added, corrected or withdrawn after a run.
select o.series_id, epoch_us(o.observed_at) as us
from base.observation o
where o.run_from > $last or o.run_to > $last
group by all
order by all

-- name: times_in_force
-- The times of the observations in force of some series.
select o.series_id, epoch_us(o.observed_at) as us
from base.observation o
where o.run_to is null and o.series_id in (select unnest($series::integer[]))
order by o.series_id, o.observed_at
