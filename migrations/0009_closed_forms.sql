-- Closed forms without Python: the numbers of abm, gbm and ou on the windows of one series at equal steps, from window
-- functions alone, so that any DuckDB client can compute what the views hold. Values less the series' first one, since
-- sums of squares of raw levels lose digits.
create macro base.steps_of(name) as table
select o.observed_at, o.value, first_value(o.value) over (order by o.observed_at) as origin,
  o.value - first_value(o.value) over (order by o.observed_at) as x, t.periods_per_year
from base.observation o
join base.series s on s.series_id = o.series_id
join base.setting t on t.series_id = o.series_id and t.run_to is null
where s.series = name and o.run_to is null and t.periods_per_year is not null;

create macro main.abm_closed_form(name, lookback) as table
with steps as (
  select q.observed_at, q.periods_per_year, q.x - lag(q.x) over (order by q.observed_at) as d,
    lag(q.observed_at, lookback) over (order by q.observed_at) as window_start
  from base.steps_of(name) q
), moments as (
  select p.window_start, p.observed_at as window_end, p.periods_per_year, count(p.d) over frame as n,
    avg(p.d) over frame as mean_step, var_pop(p.d) over frame as variance
  from steps p
  where p.d is not null
  window frame as (order by p.observed_at rows between lookback - 1 preceding and current row)
)
select m.window_start, m.window_end, m.n, m.mean_step * m.periods_per_year as mu,
  sqrt(m.variance * m.periods_per_year) as sigma, -0.5 * m.n * (ln(2 * pi() * m.variance) + 1) as loglik
from moments m
where m.n = lookback and m.window_start is not null and m.variance > 0
order by m.window_end;

create macro main.gbm_closed_form(name, lookback) as table
with logs as (
  select q.observed_at, q.periods_per_year, case when q.value > 0 then ln(q.value) end as y
  from base.steps_of(name) q
), steps as (
  select l.observed_at, l.periods_per_year, l.y, l.y - lag(l.y) over (order by l.observed_at) as d,
    lag(l.observed_at, lookback) over (order by l.observed_at) as window_start
  from logs l
), moments as (
  select p.window_start, p.observed_at as window_end, p.periods_per_year, count(p.d) over frame as n,
    avg(p.d) over frame as mean_step, var_pop(p.d) over frame as variance, avg(p.y) over frame as mean_log
  from steps p
  window frame as (order by p.observed_at rows between lookback - 1 preceding and current row)
)
select m.window_start, m.window_end, m.n, (m.mean_step + m.variance / 2) * m.periods_per_year as mu,
  sqrt(m.variance * m.periods_per_year) as sigma,
  -0.5 * m.n * (ln(2 * pi() * m.variance) + 1) - m.n * m.mean_log as loglik
from moments m
where m.n = lookback and m.window_start is not null and m.variance > 0
order by m.window_end;

create macro main.ou_closed_form(name, lookback) as table
with steps as (
  select q.observed_at, q.periods_per_year, q.origin, lag(q.x) over (order by q.observed_at) as level,
    q.x - lag(q.x) over (order by q.observed_at) as d,
    lag(q.observed_at, lookback) over (order by q.observed_at) as window_start
  from base.steps_of(name) q
), moments as (
  select p.window_start, p.observed_at as window_end, p.periods_per_year, p.origin, count(p.d) over frame as n,
    avg(p.level) over frame as mean_level, avg(p.d) over frame as mean_step, regr_sxx(p.d, p.level) over frame as spread,
    regr_syy(p.d, p.level) over frame as total, regr_sxy(p.d, p.level) over frame as joint
  from steps p
  where p.d is not null
  window frame as (order by p.observed_at rows between lookback - 1 preceding and current row)
), slopes as (
  select m.*, m.joint / m.spread as beta, (m.total - m.joint * m.joint / m.spread) / m.n as residual
  from moments m
  where m.n = lookback and m.window_start is not null and m.spread > 0
)
select f.window_start, f.window_end, f.n, -ln(1 + f.beta) * f.periods_per_year as kappa,
  f.origin + f.mean_level - f.mean_step / f.beta as theta,
  sqrt(f.residual * f.periods_per_year * 2 * ln(1 + f.beta) / (f.beta * (2 + f.beta))) as sigma,
  -0.5 * f.n * (ln(2 * pi() * f.residual) + 1) as loglik
from slopes f
where f.beta > -1 and f.beta <> 0 and f.residual > 0
order by f.window_end;

comment on macro table main.abm_closed_form is 'abm on every window of a series, in SQL alone: abm_closed_form(''pellets_fob'', 250)';
comment on macro table main.gbm_closed_form is 'gbm on every window of a series, in SQL alone: gbm_closed_form(''pellets_fob'', 250)';
comment on macro table main.ou_closed_form is 'ou on every window of a series, in SQL alone: ou_closed_form(''pellets_fob'', 250)';
