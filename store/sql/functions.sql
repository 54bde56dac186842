-- name: window_fit
-- One row for each parameter of one stored series' window, computed with the data and settings as known at a
-- moment. By default the window of latest's lookback that ends at the latest observation, as known now; a bare date
-- as window_end is the end of that day.
create macro memory.main.window_fit(name, model, lookback := null, window_end := null, as_of := null) as table
with k as (
  select case when as_of is null then (select max(r.run_id) from base.run r)
    else base.run_at(base.moment_us(as_of)) end as run_id
), known as (
  select o.observed_at, o.value
  from base.observation o
  join base.series s on s.series_id = o.series_id
  where s.series = name
    and o.run_from <= (select k.run_id from k) and (o.run_to is null or o.run_to > (select k.run_id from k))
    and (window_end is null or epoch_us(o.observed_at) <= base.moment_us(window_end))
), gathered as (
  select list(q.value order by q.observed_at) as x, list(epoch_us(q.observed_at) order by q.observed_at) as us,
    max(q.observed_at) as ends_at
  from known q
), asked as (
  select t.series_id, t.clock, t.periods_per_year, t.shift, t.sign, coalesce(lookback, (
      select l.lookback from base.latest l where l.series_id = t.series_id
        and l.run_from <= (select k.run_id from k) and (l.run_to is null or l.run_to > (select k.run_id from k))),
      0) as steps
  from base.setting t
  join base.series s on s.series_id = t.series_id
  where s.series = name
    and t.run_from <= (select k.run_id from k) and (t.run_to is null or t.run_to > (select k.run_id from k))
), fitted as (
  select g.ends_at, a.steps, unnest(parameters_of_window(
    model::varchar, g.x, g.us, a.clock, a.periods_per_year, a.shift, a.sign, {settings}, a.steps::integer)) as p
  from gathered g, asked a
)
select name as series, f.steps as lookback, f.ends_at as window_end, model as model, f.p.parameter, f.p.value, f.p.se,
  f.p.lower, f.p.upper, f.p.n, f.p.status
from fitted f
