-- name: catalog_of_book
-- Everything that the book's catalog defines, with its comment.
select 'table' as kind, t.schema_name || '.' || t.table_name as name, t.sql, t.comment
from duckdb_tables() t
where t.database_name = current_database() and not t.internal and not t.temporary
union all
select 'view', v.schema_name || '.' || v.view_name, v.sql, v.comment
from duckdb_views() v
where v.database_name = current_database() and not v.internal and not v.temporary
union all
select 'macro', f.schema_name || '.' || f.function_name, f.parameters::varchar || f.macro_definition, f.comment
from duckdb_functions() f
where f.database_name = current_database() and not f.internal
union all
select 'column', c.schema_name || '.' || c.table_name || '.' || c.column_name, c.data_type, c.comment
from duckdb_columns() c
where c.database_name = current_database() and not c.internal
union all
select 'index', i.schema_name || '.' || i.index_name, coalesce(i.sql, ''), i.comment
from duckdb_indexes() i
where i.database_name = current_database()
union all
select 'sequence', q.schema_name || '.' || q.sequence_name, coalesce(q.sql, ''), q.comment
from duckdb_sequences() q
where q.database_name = current_database() and not q.temporary
union all
select 'type', y.schema_name || '.' || y.type_name, y.logical_type, y.comment
from duckdb_types() y
where y.database_name = current_database() and not y.internal
union all
select 'schema', m.schema_name, coalesce(m.sql, ''), m.comment
from duckdb_schemas() m
where m.database_name = current_database() and not m.internal

-- name: all_leaves
-- Every digest that was stored.
select l.run_id, l.table_name, l.series_id, l.migration, l.rows_in, l.rows_closed, l.sha256 from base.leaf l

-- name: forgotten_leaves
-- What forget left of leaves, the last word last.
select f.run_id, f.table_name, f.series_id, f.rows_in, f.rows_closed, f.sha256
from base.forgotten_leaf f
order by f.run_from

-- name: runs_out_of_order
-- Runs whose number is not one more, or whose moment is not later, than that of the run before.
select q.run_id
from (
  select r.run_id, r.moment, lag(r.run_id, 1, 0) over w as run_before, lag(r.moment) over w as moment_before
  from base.run r
  window w as (order by r.run_id)
) q
where q.run_id <> q.run_before + 1 or q.moment <= q.moment_before
order by q.run_id

-- name: intakes_that_do_not_add_up
-- Every row of an intake is counted once.
select i.intake_id, i.run_from
from base.intake i
where i.rows_read <> i.rows_new + i.rows_revised + i.rows_same + i.rows_refused
order by i.intake_id

-- name: overlapping_versions
-- Rows that begin before the version before them has ended; a row replaced within its own run has no time in force.
select q.series_id, q.run_from, count(*)
from (
  select {series} as series_id, v.run_from,
    coalesce(max(coalesce(v.run_to, 2147483647)) over (
      partition by {subject} order by v.run_from, v.run_to nulls last
      rows between unbounded preceding and 1 preceding), 0) as ends_before
  from base.{table} v
  where v.run_to is null or v.run_to > v.run_from
) q
where q.run_from < q.ends_before
group by all
order by all

-- name: tables_of_migrations
-- The base tables that hold only what the migrations put there.
select t.table_name
from duckdb_tables() t
where t.database_name = current_database() and t.schema_name = 'base' and not list_contains(?, t.table_name)
order by t.table_name
