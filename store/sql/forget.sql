-- name: insert_forgotten_leaves
-- What is left of the leaves that a forgetting touched.
insert into base.forgotten_leaf (run_id, table_name, series_id, rows_in, rows_closed, sha256, run_from)
select l.run_id, l.table_name, l.series_id::integer, l.rows_in, l.rows_closed, l.sha256, $run
from left_of_leaves l
order by l.run_id, l.table_name, l.series_id
