-- name: demo_now
-- The latest estimates, volatility in units of the series and half-life in calendar days.
select o.series, s.unit, o.sigma, o.sigma_lower, o.sigma_upper,
  o.half_life * 365, o.half_life_lower * 365, o.half_life_upper * 365, o.window_end::date
from ou o
join series s on s.series = o.series
where o.window_end = (select max(l.window_end) from ou l where l.series = o.series)
order by o.run_id, o.series

-- name: demo_before
-- The same for pellets as it was known before the correction.
select o.series, s.unit, o.sigma, o.sigma_lower, o.sigma_upper,
  o.half_life * 365, o.half_life_lower * 365, o.half_life_upper * 365, o.window_end::date
from ou_as_of('2026-06-30T05:30Z') o
join series s on s.series = o.series
where o.series = 'pellets_fob'
order by o.window_end desc
limit 1
