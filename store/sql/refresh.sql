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

-- name: values_in_force
-- The values in force of some series, in time order.
select o.series_id, o.value
from base.observation o
where o.run_to is null and o.series_id in (select unnest($series::integer[]))
order by o.series_id, o.observed_at

-- name: weekday_series_on_elapsed_time
-- Planned series under act365 whose last 250 observations all fall on weekdays.
select s.series
from base.setting t
join base.series s on s.series_id = t.series_id
where t.run_to is null and t.planned and t.clock = 'act365' and (
  select count(*) = 250 and max(isodow(q.observed_at)) <= 5
  from (
    select timezone(t.time_zone, timezone('UTC', o.observed_at)) as observed_at
    from base.observation o
    where o.series_id = t.series_id and o.run_to is null
    order by o.observed_at desc
    limit 250
  ) q)
order by s.series_id
