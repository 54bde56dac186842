-- What readers see of the book itself: what is in force now (main), at a run or a moment (macros), and every version
-- (versions). A moment without a zone is UTC; a bare date is the end of that UTC day.

create macro base.moment_us(word) as case
  when regexp_full_match(trim(word::varchar), '\d{4}-\d{2}-\d{2}')
    then epoch_us(trim(word::varchar)::date + interval 1 day) - 1
  when regexp_matches(trim(word::varchar), '\d{2}:\d{2}.*([Zz]|[+-]\d{2}(:?\d{2})?)$')
    -- DuckDB 1.2 wants seconds before a zone, and no version takes a small z
    then epoch_us(regexp_replace(upper(trim(word::varchar)), '([ T]\d{2}:\d{2})([Z+-])', '\1:00\2')::timestamptz)
  else epoch_us(trim(word::varchar)::timestamp) end;

-- The last run at or before a moment in microseconds; NULL before the first.
create macro base.run_at(us) as (
  select max(r.run_id) from base.run r where epoch_us(r.moment) <= us
);

create view base.series_rows as
select s.series, t.sign, t.unit, t.clock, t.periods_per_year, t.time_zone, t.same_time, t.stale_after_days, t.in_force,
  t.shift, t.planned, s.added_at, t.run_from, t.run_to
from base.setting t
join base.series s on s.series_id = t.series_id;

create view base.observation_rows as
select s.series, o.observed_at, o.value, o.open, o.high, o.low, o.volume, o.intake_id, o.run_from, o.run_to
from base.observation o
join base.series s on s.series_id = o.series_id;

create view base.refused_row_rows as
select r.intake_id, r.line, r.text, r.reason, r.run_from, r.run_to
from base.refused_row r;

create view base.plan_rows as
select p.plan_sha256, p.name, p.text, p.run_from, p.run_to
from base.plan p;

create view main.series as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.series_rows x where x.run_to is null;

create macro main.series_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.series_rows x
where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.series_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.series_rows x
where x.run_from <= (select k.run_id from k)
  and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.series as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.series_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

create view main.observation as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.observation_rows x where x.run_to is null;

create macro main.observation_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.observation_rows x
where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.observation_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.observation_rows x
where x.run_from <= (select k.run_id from k)
  and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.observation as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.observation_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

create view main.refused_row as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.refused_row_rows x where x.run_to is null;

create macro main.refused_row_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.refused_row_rows x
where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.refused_row_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.refused_row_rows x
where x.run_from <= (select k.run_id from k)
  and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.refused_row as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.refused_row_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

create view main.plan as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.plan_rows x where x.run_to is null;

create macro main.plan_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.plan_rows x
where x.run_from <= run and (x.run_to is null or x.run_to > run);

create macro main.plan_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.plan_rows x
where x.run_from <= (select k.run_id from k)
  and (x.run_to is null or x.run_to > (select k.run_id from k));

create view versions.plan as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.plan_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

create view main.intake as
select i.intake_id, i.run_from as run_id, i.source, i.sha256, i.received_at, i.rows_read, i.rows_new, i.rows_revised,
  i.rows_same, i.rows_refused
from base.intake i;

create view main.run as
select r.run_id, r.kind, r.moment, r.told, r.started_at, r.finished_at, r.plan_sha256, r.package_version,
  r.windows_due, r.windows_fitted, r.windows_failed, r.rows_written, r.digest
from base.run r;

comment on view main.series is 'the series of the book with their settings in force';
comment on column main.series.series is 'name of the series';
comment on column main.series.sign is 'positive: prices that models for X > 0 may be fitted to; any: others';
comment on column main.series.unit is 'unit of the values';
comment on column main.series.clock is 'how time between observations is counted: trading, act365 or seconds';
comment on column main.series.periods_per_year is 'steps in a year under the clock trading';
comment on column main.series.time_zone is 'zone of times that come without one';
comment on column main.series.same_time is 'what is done with several values at one time in one intake';
comment on column main.series.stale_after_days is 'days without an observation after which the series is stale';
comment on column main.series.in_force is 'best, or the model that is always in force';
comment on column main.series.shift is 'what models for X > 0 add to the values, in the unit of the series';
comment on column main.series.planned is 'whether the plan names the series';
comment on column main.series.added_at is 'when the series was added';
comment on column main.series.run_id is 'run that wrote the row';
comment on view versions.series is 'every version of series';
comment on column versions.series.series is 'name of the series';
comment on column versions.series.sign is 'positive: prices that models for X > 0 may be fitted to; any: others';
comment on column versions.series.unit is 'unit of the values';
comment on column versions.series.clock is 'how time between observations is counted: trading, act365 or seconds';
comment on column versions.series.periods_per_year is 'steps in a year under the clock trading';
comment on column versions.series.time_zone is 'zone of times that come without one';
comment on column versions.series.same_time is 'what is done with several values at one time in one intake';
comment on column versions.series.stale_after_days is 'days without an observation after which the series is stale';
comment on column versions.series.in_force is 'best, or the model that is always in force';
comment on column versions.series.shift is 'what models for X > 0 add to the values, in the unit of the series';
comment on column versions.series.planned is 'whether the plan names the series';
comment on column versions.series.added_at is 'when the series was added';
comment on column versions.series.run_from is 'run from which the row is in force';
comment on column versions.series.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.series.in_force_from is 'moment of run_from';
comment on column versions.series.in_force_to is 'moment of run_to';
comment on macro table main.series_at_run is 'the view series as it was after a run: series_at_run(41)';
comment on macro table main.series_as_of is 'the view series as it was known at a moment: series_as_of(''2026-01-31'')';
comment on view main.observation is 'the value in force of every observation';
comment on column main.observation.series is 'name of the series';
comment on column main.observation.observed_at is 'time of the observation, UTC';
comment on column main.observation.value is 'value, in the unit of the series';
comment on column main.observation.open is 'first value of the period, in the unit of the series';
comment on column main.observation.high is 'highest value of the period';
comment on column main.observation.low is 'lowest value of the period';
comment on column main.observation.volume is 'volume of the period';
comment on column main.observation.intake_id is 'intake that brought the value';
comment on column main.observation.run_id is 'run that wrote the row';
comment on view versions.observation is 'every version of observation';
comment on column versions.observation.series is 'name of the series';
comment on column versions.observation.observed_at is 'time of the observation, UTC';
comment on column versions.observation.value is 'value, in the unit of the series';
comment on column versions.observation.open is 'first value of the period, in the unit of the series';
comment on column versions.observation.high is 'highest value of the period';
comment on column versions.observation.low is 'lowest value of the period';
comment on column versions.observation.volume is 'volume of the period';
comment on column versions.observation.intake_id is 'intake that brought the value';
comment on column versions.observation.run_from is 'run from which the row is in force';
comment on column versions.observation.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.observation.in_force_from is 'moment of run_from';
comment on column versions.observation.in_force_to is 'moment of run_to';
comment on macro table main.observation_at_run is 'the view observation as it was after a run: observation_at_run(41)';
comment on macro table main.observation_as_of is 'the view observation as it was known at a moment: observation_as_of(''2026-01-31'')';
comment on view main.refused_row is 'incoming rows that were not taken';
comment on column main.refused_row.intake_id is 'intake that the row came with';
comment on column main.refused_row.line is 'line of the source, the first is 1';
comment on column main.refused_row.text is 'the row as it stood there';
comment on column main.refused_row.reason is 'why it was refused, in a word';
comment on column main.refused_row.run_id is 'run that wrote the row';
comment on view versions.refused_row is 'every version of refused_row';
comment on column versions.refused_row.intake_id is 'intake that the row came with';
comment on column versions.refused_row.line is 'line of the source, the first is 1';
comment on column versions.refused_row.text is 'the row as it stood there';
comment on column versions.refused_row.reason is 'why it was refused, in a word';
comment on column versions.refused_row.run_from is 'run from which the row is in force';
comment on column versions.refused_row.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.refused_row.in_force_from is 'moment of run_from';
comment on column versions.refused_row.in_force_to is 'moment of run_to';
comment on macro table main.refused_row_at_run is 'the view refused_row as it was after a run: refused_row_at_run(41)';
comment on macro table main.refused_row_as_of is 'the view refused_row as it was known at a moment: refused_row_as_of(''2026-01-31'')';
comment on view main.plan is 'the plan in force';
comment on column main.plan.plan_sha256 is 'SHA-256 of the text';
comment on column main.plan.name is 'name of the plan';
comment on column main.plan.text is 'the plan file as it was given';
comment on column main.plan.run_id is 'run that wrote the row';
comment on view versions.plan is 'every version of plan';
comment on column versions.plan.plan_sha256 is 'SHA-256 of the text';
comment on column versions.plan.name is 'name of the plan';
comment on column versions.plan.text is 'the plan file as it was given';
comment on column versions.plan.run_from is 'run from which the row is in force';
comment on column versions.plan.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.plan.in_force_from is 'moment of run_from';
comment on column versions.plan.in_force_to is 'moment of run_to';
comment on macro table main.plan_at_run is 'the view plan as it was after a run: plan_at_run(41)';
comment on macro table main.plan_as_of is 'the view plan as it was known at a moment: plan_as_of(''2026-01-31'')';
comment on view main.intake is 'batches of incoming rows; every row is counted once: read = new + revised + same + refused';
comment on column main.intake.intake_id is 'number of the intake';
comment on column main.intake.run_id is 'run that took it in';
comment on column main.intake.source is 'name of the file or frame';
comment on column main.intake.sha256 is 'SHA-256 of its bytes';
comment on column main.intake.received_at is 'when it was taken in';
comment on column main.intake.rows_read is 'rows it held';
comment on column main.intake.rows_new is 'rows that were new observations';
comment on column main.intake.rows_revised is 'rows that corrected or withdrew an observation';
comment on column main.intake.rows_same is 'rows that said what was known';
comment on column main.intake.rows_refused is 'rows that were not taken; see refused_row';
comment on view main.run is 'changes of the book, one row each';
comment on column main.run.run_id is 'number of the run';
comment on column main.run.kind is 'ingest, refresh, break or forget';
comment on column main.run.moment is 'when the run came into force';
comment on column main.run.told is 'whether the moment was told instead of taken from the clock';
comment on column main.run.started_at is 'when the work began';
comment on column main.run.finished_at is 'when the work ended';
comment on column main.run.plan_sha256 is 'plan in force after the run';
comment on column main.run.package_version is 'version of driftbook that did it';
comment on column main.run.windows_due is 'windows computed';
comment on column main.run.windows_fitted is 'windows for which there are numbers';
comment on column main.run.windows_failed is 'windows for which none could be given; their status says why';
comment on column main.run.rows_written is 'rows that came in, all tables';
comment on column main.run.digest is 'SHA-256 over the digest before it, this row and its leaves';
