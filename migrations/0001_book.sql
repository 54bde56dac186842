-- The book: series and their settings, intakes, observations with their whole history, plans, runs and digests.
-- Tables that hold the history live in the schema base and are private; readers have the views and macros of
-- main and versions, which use nothing but built-ins of DuckDB 1.2.
create schema base;
create schema versions;

-- Runs: one row for each change of the book. leaf: one digest for each run, table and series.
create table base.run (
  run_id integer not null,
  kind varchar not null,
  moment timestamptz not null,
  told boolean not null,
  started_at timestamptz not null,
  finished_at timestamptz not null,
  plan_sha256 varchar,
  package_version varchar not null,
  migration integer not null,
  windows_due bigint not null,
  windows_fitted bigint not null,
  windows_failed bigint not null,
  rows_written bigint not null,
  digest varchar not null
);
create table base.leaf (
  run_id integer not null,
  table_name varchar not null,
  series_id integer,
  migration integer not null,
  rows_in bigint not null,
  rows_closed bigint not null,
  sha256 varchar not null
);

-- What `forget` left of a leaf: the digest of the rows that are still there, or of none.
create table base.forgotten_leaf (
  run_id integer not null,
  table_name varchar not null,
  series_id integer,
  rows_in bigint not null,
  rows_closed bigint not null,
  sha256 varchar not null,
  run_from integer not null
);

-- Series: a name never changes its number; settings are versioned.
create table base.series (
  series_id integer not null,
  series varchar not null,
  added_at timestamptz not null,
  run_from integer not null
);
create table base.setting (
  series_id integer not null,
  sign varchar not null,
  unit varchar,
  clock varchar not null,
  periods_per_year double,
  time_zone varchar not null,
  same_time varchar not null,
  stale_after_days double not null,
  in_force varchar not null,
  shift double not null,
  planned boolean not null,
  run_from integer not null,
  run_to integer
);

-- Names in files that mean a series: that is how a rename is done.
create table base.alias (
  series_id integer not null,
  name varchar not null,
  run_from integer not null,
  run_to integer
);

create table base.intake (
  intake_id integer not null,
  source varchar not null,
  sha256 varchar not null,
  options varchar not null,
  received_at timestamptz not null,
  rows_read bigint not null,
  rows_new bigint not null,
  rows_revised bigint not null,
  rows_same bigint not null,
  rows_refused bigint not null,
  run_from integer not null
);
-- take tells several values of one time in one run apart, in the order in which they were taken.
create table base.observation (
  series_id integer not null,
  observed_at timestamp not null,
  value double not null,
  open double,
  high double,
  low double,
  volume double,
  intake_id integer not null,
  take integer not null,
  run_from integer not null,
  run_to integer
);
-- fields keeps what an unknown series' row said, as JSON, so that it can be taken up once the name is known.
create table base.refused_row (
  intake_id integer not null,
  line bigint not null,
  cell integer not null,
  text varchar not null,
  reason varchar not null,
  name varchar,
  fields varchar,
  run_from integer not null,
  run_to integer
);

create table base.plan (
  plan_sha256 varchar not null,
  name varchar not null,
  text varchar not null,
  run_from integer not null,
  run_to integer
);
create table base.model_revision (
  model varchar not null,
  revision integer not null,
  run_from integer not null,
  run_to integer
);
