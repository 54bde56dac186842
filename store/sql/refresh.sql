-- name: settings_since
-- The series whose setting was put in force after a run.
select t.series_id from base.setting t where t.run_to is null and t.run_from > ?

-- name: plan_at
-- The plan that was in force at a run, and whether it is in force now.
select p.text, p.run_to is null from base.plan p where p.run_from <= $run and (p.run_to is null or p.run_to > $run)

-- name: forgettings_since
-- How many runs after a run have forgotten something.
select count(*) from base.run r where r.kind = 'forget' and r.run_id > ?

-- name: changed_since
-- When and where observations were added, corrected or withdrawn after a run.
select o.series_id, epoch_us(o.observed_at) as us
from base.observation o
where o.run_from > $last or o.run_to > $last
group by all
order by all

-- name: observed
-- Observations of some series in any order, with the local day that each falls on if it is asked for.
select o.series_id, epoch_us(o.observed_at) as us, o.value{day}
from base.observation o
where {when} and o.series_id in (select unnest($series::integer[]))

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
