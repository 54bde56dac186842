-- name: insert_forgotten_leaves
-- What is left of the leaves that a forgetting touched.
insert into base.forgotten_leaf (run_id, table_name, series_id, rows_in, rows_closed, sha256, run_from)
select l.run_id, l.table_name, l.series_id::integer, l.rows_in, l.rows_closed, l.sha256, $run
from left_of_leaves l
order by l.run_id, l.table_name, l.series_id

-- name: names_of_series
-- All names that mean or meant a series in files; one that has gone over to another series is that one's.
select s.series
from base.series s
where s.series_id = $1
union
select a.name
from base.alias a
where a.series_id = $1
  and not exists (from base.series s where s.series = a.name)
  and not exists (from base.alias b where b.name = a.name and b.series_id <> a.series_id and b.run_from > a.run_from)

-- name: refused_rows_that_mention
-- Refused rows that are a series' own: they wait for its name, all rows of the file were that series, or a field is its
-- name. And lines of wide files that may hold values of it: those since the series was first heard of.
with spoken as (
  select r.*, i.options, i.options ->> '$.layout' = 'wide' as is_wide,
    coalesce(r.name in (select unnest($names)), false)
      or coalesce(i.options ->> '$.series' in (select unnest($names)), false)
      or (r.name is null and i.options ->> '$.layout' = 'long' and regexp_matches(r.text, $pattern)) as is_its_own
  from base.refused_row r
  join base.intake i on i.intake_id = r.intake_id
), heard as (
  select least(
    (select s.run_from from base.series s where s.series_id = $series_id),
    (select min(p.run_from) from spoken p where p.is_its_own)
  ) as run_from
)
select p.intake_id, p.line, p.cell, p.reason, p.run_from, p.is_its_own, p.text, p.options
from spoken p, heard h
where p.is_its_own or (p.is_wide and p.text <> '' and p.run_from >= h.run_from)
