-- name: headline_of
-- The model in force and the lookback that latest speaks of; without a model in force, the heaviest fit's.
select coalesce(l.model, (
    select f.model from fit f
    where f.series = l.series and f.lookback = l.lookback and f.window_end = l.window_end
    order by f.model_weight desc nulls last, f.model limit 1)), l.lookback
from latest l where l.series = $series

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
-- How many observations are in one window and before, or after, the other.
select count(*) filter (where o.observed_at >= $one_start and o.observed_at < $other_start
    and o.run_from <= $first and (o.run_to is null or o.run_to > $first)),
  count(*) filter (where o.observed_at > $one_end and o.observed_at <= $other_end
    and o.run_from <= $last and (o.run_to is null or o.run_to > $last))
from versions.observation o
where o.series = $series

-- name: causes_between
-- What else changed between two runs: the plan, the series' settings.
select 'plan ' || p.name || ' changed in run ' || p.run_from
from versions.plan p where p.run_from > $first and p.run_from <= $last
union all
select 'settings changed in run ' || s.run_from
from versions.series s where s.series = $series and s.run_from > $first and s.run_from <= $last
