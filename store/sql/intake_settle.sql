-- name: intake_contested
-- The times that the intake speaks of more than once. The rows are in order, so that neighbours tell.
create temp table intake_contested as
select distinct series_id, observed_at
from (
  select series_id, observed_at,
    lag(series_id) over () = series_id and lag(observed_at) over () = observed_at as is_again
  from intake_ordered
)
where is_again

-- name: intake_in_force
-- The observations in force at the times of the intake.
create temp table intake_in_force as
select o.series_id, o.observed_at, o.value, o.open, o.high, o.low, o.volume
from base.observation o
semi join intake_ordered i on i.series_id = o.series_id and i.observed_at = o.observed_at
where o.run_to is null

-- name: intake_past
-- The times of the intake at which there is history: closed versions, or takes of this very run.
create temp table intake_past as
select o.series_id, o.observed_at, coalesce(max(o.take) filter (o.run_from = $run_id) + 1, 0) as next_take
from base.observation o
semi join intake_ordered i on i.series_id = o.series_id and i.observed_at = o.observed_at
where o.run_to is not null or o.run_from = $run_id
group by o.series_id, o.observed_at

-- name: intake_insert_fresh
-- A value at a time that the book has never known, told once: the bulk of most intakes.
insert into base.observation
select i.series_id, i.observed_at, i.value, i.open, i.high, i.low, i.volume, $intake_id, 0, $run_id, null
from intake_ordered i
anti join intake_contested c on c.series_id = i.series_id and c.observed_at = i.observed_at
anti join intake_in_force e on e.series_id = i.series_id and e.observed_at = i.observed_at
anti join intake_past p on p.series_id = i.series_id and p.observed_at = i.observed_at
where i.value is not null

-- name: intake_count_unchanged
-- A value told once that is in force as it is told: the bulk of a file that comes again with a few rows more.
select count(*)
from intake_ordered i
anti join intake_contested c on c.series_id = i.series_id and c.observed_at = i.observed_at
join intake_in_force e on e.series_id = i.series_id and e.observed_at = i.observed_at
where (i.value, i.open, i.high, i.low, i.volume) is not distinct from (e.value, e.open, e.high, e.low, e.volume)

-- name: intake_undecided
-- All other rows, with what is in force at their times: `said` is what the row says, `stood` what stood before the
-- intake; both are NULL where there is no value. was_known: the time has or had an observation.
create temp table intake_undecided as
select i.row_key, i.series_id, i.observed_at, k.same_time,
  case when i.value is not null then
    {'value': i.value, 'open': i.open, 'high': i.high, 'low': i.low, 'volume': i.volume}
  end as said,
  case when e.value is not null then
    {'value': e.value, 'open': e.open, 'high': e.high, 'low': e.low, 'volume': e.volume}
  end as stood,
  e.value is not null or p.next_take is not null as was_known,
  coalesce(p.next_take, 0) as next_take
from intake_ordered i
join (select distinct series_id, same_time from intake_known) k on k.series_id = i.series_id
left join intake_contested c on c.series_id = i.series_id and c.observed_at = i.observed_at
left join intake_in_force e on e.series_id = i.series_id and e.observed_at = i.observed_at
left join intake_past p on p.series_id = i.series_id and p.observed_at = i.observed_at
where c.series_id is not null
  or (i.value is null and e.value is null)
  or (e.value is null and p.next_take is not null)
  or (e.value is not null and (i.value, i.open, i.high, i.low, i.volume)
    is distinct from (e.value, e.open, e.high, e.low, e.volume))

-- name: intake_middle
-- The median of a column; the mean of the two middle values where their number is even, which can't overflow.
create or replace temp macro intake_middle(numbers) as
  case
    when len(numbers) % 2 = 1 then list_sort(numbers)[(len(numbers) + 1) // 2]
    else list_sort(numbers)[len(numbers) // 2] / 2 + list_sort(numbers)[len(numbers) // 2 + 1] / 2
  end

-- name: intake_median
-- One row for each time of which a series with same_time = 'median' is told different values.
create temp table intake_median as
select series_id, observed_at, min(row_key) as row_key, {
    'value': intake_middle(list(said.value)),
    'open': intake_middle(list(said.open) filter (said.open is not null)),
    'high': intake_middle(list(said.high) filter (said.high is not null)),
    'low': intake_middle(list(said.low) filter (said.low is not null)),
    'volume': intake_middle(list(said.volume) filter (said.volume is not null))
  } as said
from intake_undecided
where same_time = 'median' and said is not null
group by series_id, observed_at
having count(distinct said) > 1

-- name: intake_step
-- What becomes of each undecided row, in the order of arrival at its time: each meets what the row before it left.
create temp table intake_step as
with told as (
  select u.row_key, u.series_id, u.observed_at, u.same_time, u.stood, u.was_known, u.next_take,
    case when m.row_key is null then u.said else m.said end as said,
    m.row_key is not null as has_median,
    m.row_key is not null and m.row_key != u.row_key as is_in_median
  from intake_undecided u
  left join intake_median m on m.series_id = u.series_id and m.observed_at = u.observed_at
), met as (
  select row_key, series_id, observed_at, said, stood, next_take, is_in_median,
    same_time = 'refuse' and count(distinct said) over here + bool_or(said is null) over here::int > 1 as is_refused,
    case when has_median or row_number() over arrival = 1 then stood else lag(said) over arrival end as before,
    was_known or (not has_median and count(said) over earlier > 0) as is_known
  from told
  window here as (partition by series_id, observed_at),
    arrival as (partition by series_id, observed_at order by row_key),
    earlier as (partition by series_id, observed_at order by row_key rows between unbounded preceding and 1 preceding)
), decided as (
  select row_key, series_id, observed_at, said, stood, next_take,
    case
      when is_refused then 'several_values'
      when is_in_median then 'same'
      when said is null and before is not null then 'withdrawn'
      when said is null and is_known then 'same'
      when said is null then 'no_value'
      when said is not distinct from before then 'same'
      when is_known then 'revised'
      else 'new'
    end as outcome
  from met
)
select row_key, series_id, observed_at, said, stood is not null as stood, outcome,
  next_take + count(*) filter (outcome in ('new', 'revised'))
    over (partition by series_id, observed_at order by row_key rows between unbounded preceding and current row)
    - 1 as take,
  row_key = max(row_key) filter (outcome in ('new', 'revised', 'withdrawn'))
    over (partition by series_id, observed_at) as is_last
from decided

-- name: intake_close_replaced
-- Closes the observations that are replaced or withdrawn.
update base.observation o
set run_to = $run_id
from (
  select distinct series_id, observed_at
  from intake_step
  where stood and outcome in ('revised', 'withdrawn')
) s
where o.run_to is null and o.series_id = s.series_id and o.observed_at = s.observed_at

-- name: intake_insert_steps
-- The new versions; one that a later row of the intake replaces is kept, closed in the run that brought it.
insert into base.observation
select series_id, observed_at, said.value, said.open, said.high, said.low, said.volume,
  $intake_id, take, $run_id, case when not is_last then $run_id end
from intake_step
where outcome in ('new', 'revised')
order by series_id, observed_at, take

-- name: intake_withdrawn_share
-- The series of which more than a tenth is withdrawn at once; the worst of them.
with gone as (
  select series_id, count(*) as withdrawn
  from intake_step
  where stood and outcome = 'withdrawn' and is_last
  group by series_id
), standing as (
  select series_id, count(*) as in_force
  from base.observation
  where run_to is null and series_id in (select series_id from gone)
  group by series_id
)
select s.series, g.withdrawn, t.in_force
from gone g
join standing t on t.series_id = g.series_id
join base.series s on s.series_id = g.series_id
where g.withdrawn > 0.1 * t.in_force
order by g.withdrawn / t.in_force desc, s.series
limit 1

-- name: intake_step_counts
-- How the undecided rows came out.
select
  count(*) filter (outcome = 'new'),
  count(*) filter (outcome in ('revised', 'withdrawn')),
  count(*) filter (outcome = 'same'),
  count(*) filter (outcome in ('several_values', 'no_value'))
from intake_step

-- name: intake_refuse_steps
-- The rows that the settlement refuses join those that could not be read.
insert into intake_refusal
select row_key, outcome, null, null
from intake_step
where outcome in ('several_values', 'no_value')

-- name: intake_insert_intake
-- The intake itself.
insert into base.intake
  (intake_id, source, sha256, options, received_at, rows_read, rows_new, rows_revised, rows_same, rows_refused,
    run_from)
values
  ($intake_id, $source, $sha256, $options, $received_at, $read, $new, $revised, $same, $refused, $run_id)

-- name: intake_newest
-- The newest intake from a source.
select intake_id, sha256, options
from base.intake
where source = ?
order by intake_id desc
limit 1

-- name: intake_newest_of_each
-- The newest intake from each source.
select source, max(intake_id), max_by(sha256, intake_id), max_by(options, intake_id)
from base.intake
group by source

-- name: intake_first_refused
-- The first refused rows of an intake, to show.
select line, text, reason, cell
from base.refused_row
where intake_id = ? and run_from = ?
order by line, cell
limit 20

-- name: intake_late_intakes
-- The intakes that have rows waiting for one of the names, oldest first.
select r.intake_id, i.options
from base.refused_row r
join base.intake i on i.intake_id = r.intake_id
where r.reason = 'unknown_series' and r.run_to is null and r.name in (select unnest($names))
group by r.intake_id, i.options
order by r.intake_id

-- name: intake_waiting_names
-- The names that rows of one intake wait for, in order of first appearance.
select name
from base.refused_row
where intake_id = ? and reason = 'unknown_series' and run_to is null
group by name
order by min((line, cell))

-- name: intake_close_late
-- The rows of one intake that were taken up, or that are refused anew for another reason.
update base.refused_row
set run_to = $run_id
where intake_id = $intake_id and reason = 'unknown_series' and run_to is null and name in (select unnest($names))
