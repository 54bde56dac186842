-- name: series_at
-- Every series with the setting that was in force at a run.
select s.series_id, s.series, t.sign, t.unit, t.clock, t.periods_per_year, t.time_zone, t.same_time,
  t.stale_after_days, t.in_force, t.shift, t.planned
from base.series s
join base.setting t on t.series_id = s.series_id
where t.run_from <= $run and (t.run_to is null or t.run_to > $run)
order by s.series_id

-- name: written_by
-- The windows of one model that a run wrote, with the revision that is installed, as lists of window ends.
select m.series_id, m.lookback, list(epoch_us(m.window_end) order by m.window_end)
from base.{table} m
where m.run_from = $run and m.revision = $revision
group by all
order by all

-- name: compare_again
-- How many rows of a run came out identical, the same, or different.
select count(*) filter (where {identical}),
  count(*) filter (where not ({identical}) and ({same})),
  count(*) filter (where f.window_end is null or not (({identical}) or ({same})))
from base.{table} b
left join fresh f on f.series_id = b.series_id and f.lookback = b.lookback and f.window_end = b.window_end
where b.run_from = $run and b.revision = $revision

-- name: apart
-- How far apart a number came out, as a share of what was stored.
coalesce(abs(f.{column} - b.{column}) / nullif(abs(b.{column}), 0), 'infinity'::double)

-- name: worst_again
-- Where one column came out most differently.
select s.series, b.lookback, b.window_end, b.{column}, f.{column},
  {apart} as apart
from base.{table} b
join base.series s on s.series_id = b.series_id
left join fresh f on f.series_id = b.series_id and f.lookback = b.lookback and f.window_end = b.window_end
where b.run_from = $run and b.revision = $revision and b.{column} is distinct from f.{column}
  and not coalesce({same}, false)
order by apart desc, b.window_end
limit $most
