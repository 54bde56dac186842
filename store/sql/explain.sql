-- name: headline_of
-- The model in force and the lookback that latest speaks of, or spoke of last; without a model in force, the heaviest
-- fit's.
select coalesce(l.model, (
    select f.model from fit f
    where f.series = l.series and f.lookback = l.lookback and f.window_end = l.window_end
    order by f.model_weight desc nulls last, f.model limit 1)), l.lookback
from versions.latest l where l.series = $series
order by l.run_from desc limit 1

-- name: runs_of
-- The runs that wrote estimates of a series, model and lookback.
select distinct e.run_from
from versions.fit e
where e.series = $series and e.model = $model and e.lookback = $lookback
order by e.run_from

-- name: statement_at
-- The latest window of a series as it was said after a run.
select m.window_start, m.window_end, m.n, m.status, r.moment, {numbers}
from {model}_at_run($run) m
join run r on r.run_id = $run
where m.series = $series and m.lookback = $lookback
order by m.window_end desc
limit 1

-- name: corrections_between
-- Observations that were in force after the first run and said otherwise after the last.
select b.observed_at, b.value, a.value, b.run_to
from versions.observation b
left join versions.observation a
  on a.series = b.series and a.observed_at = b.observed_at
  and a.run_from <= $last and (a.run_to is null or a.run_to > $last)
where b.series = $series and b.run_from <= $first and b.run_to > $first and b.run_to <= $last
  and b.observed_at between $opens and $closes
order by b.observed_at

-- name: steps_between
-- How many observations left the earlier window, though they are still known, and how many came into the later one.
select count(*) filter (where k.was_in and not k.is_in and k.is_known), count(*) filter (where k.is_in and not k.was_in)
from (
  select o.observed_at,
    bool_or(o.run_from <= $first and (o.run_to is null or o.run_to > $first)
      and o.observed_at between $one_start and $one_end) as was_in,
    bool_or(o.run_from <= $last and (o.run_to is null or o.run_to > $last)) as is_known,
    bool_or(o.run_from <= $last and (o.run_to is null or o.run_to > $last)
      and o.observed_at between $other_start and $other_end) as is_in
  from versions.observation o
  where o.series = $series
  group by o.observed_at
) k

-- name: causes_between
-- What else changed between two runs: the plan, the series' settings.
select 'plan ' || p.name || ' changed in run ' || p.run_from
from versions.plan p where p.run_from > $first and p.run_from <= $last
union all
select 'settings changed in run ' || s.run_from
from versions.series s where s.series = $series and s.run_from > $first and s.run_from <= $last
