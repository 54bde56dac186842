-- name: settings_since
-- The series whose setting was put in force after a run.
select t.series_id from base.setting t where t.run_to is null and t.run_from > ?

-- name: plan_at
-- The plan that was in force at a run.
select p.text from base.plan p where p.run_from <= $run and (p.run_to is null or p.run_to > $run)

-- name: changed_since
-- When and where observations were added, corrected or withdrawn after a run.
select o.series_id, epoch_us(o.observed_at) as us
from base.observation o
where o.run_from > $last or o.run_to > $last
group by all
order by all

-- name: times_in_force
-- The times of the observations in force of some series, with the local day that each falls on.
select o.series_id, epoch_us(o.observed_at) as us,
  {local_day} as day
from base.observation o
join base.setting t on t.series_id = o.series_id and t.run_to is null
where o.run_to is null and o.series_id in (select unnest($series::integer[]))
order by o.series_id, o.observed_at
