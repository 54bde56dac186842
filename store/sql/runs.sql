-- name: insert_leaves
-- The digests of what a run did, one for each table and series.
insert into base.leaf (run_id, table_name, series_id, migration, rows_in, rows_closed, sha256)
select f.run_id, f.table_name, f.series_id, f.migration, f.rows_in, f.rows_closed, f.sha256
from found_leaves f

-- name: insert_run
-- The row of a run; its digest is filled in once the row can be read back.
insert into base.run
  (run_id, kind, moment, told, started_at, finished_at, plan_sha256, package_version, migration,
   windows_due, windows_fitted, windows_failed, rows_written, digest)
values (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, '')

-- name: leaves_of_run
-- The leaves of one run in the order in which its digest takes them.
select l.run_id, l.table_name, l.series_id, l.migration, l.rows_in, l.rows_closed, l.sha256
from base.leaf l
where l.run_id = ?
order by l.table_name, l.series_id nulls first

-- name: columns_of_base
-- Every base table with its columns.
select c.table_name, list(c.column_name order by c.column_index)
from duckdb_columns() c
join duckdb_tables() t using (table_oid)
where c.database_name = current_database() and t.database_name = current_database() and c.schema_name = 'base'
group by c.table_name
order by c.table_name

-- name: relations_of
-- The private tables and the views of an attached book, with what they mean.
select t.schema_name, t.table_name, t.comment
from duckdb_tables() t
where t.database_name = $book and t.schema_name = 'base'
union all
select v.schema_name, v.view_name, v.comment
from duckdb_views() v
where v.database_name = $book and not v.internal

-- name: tables_of
-- The base tables of an attached book.
select t.table_name from duckdb_tables() t where t.database_name = ? and t.schema_name = 'base'

-- name: rows_written
-- The rows that runs have written before the last one, and those of the last one.
select
  coalesce(sum(r.rows_written) filter (r.run_id < l.last), 0)::bigint,
  coalesce(sum(r.rows_written) filter (r.run_id = l.last), 0)::bigint
from base.run r, (select max(m.run_id) as last from base.run m) l

-- name: only_in_draft
-- Tables and views of the attached draft that a fresh book does not have.
with found as (
  select t.database_name, t.schema_name || '.' || t.table_name as name from duckdb_tables() t where not t.internal
  union all
  select v.database_name, v.schema_name || '.' || v.view_name from duckdb_views() v where not v.internal
)
select d.name
from found d
where d.database_name = 'draft'
  and d.name not in (select f.name from found f where f.database_name = current_database())
order by d.name
