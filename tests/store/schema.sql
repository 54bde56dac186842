base.intake
  CREATE TABLE base.intake(intake_id INTEGER NOT NULL, "source" VARCHAR NOT NULL, sha256 VARCHAR NOT NULL, "options" VARCHAR NOT NULL, received_at TIMESTAMP WITH TIME ZONE NOT NULL, rows_read BIGINT NOT NULL, rows_new BIGINT NOT NULL, rows_revised BIGINT NOT NULL, rows_same BIGINT NOT NULL, rows_refused BIGINT NOT NULL, run_from INTEGER NOT NULL);
base.leaf
  CREATE TABLE base.leaf(run_id INTEGER NOT NULL, table_name VARCHAR NOT NULL, series_id INTEGER, migration INTEGER NOT NULL, rows_in BIGINT NOT NULL, rows_closed BIGINT NOT NULL, sha256 VARCHAR NOT NULL);
base.migration
  CREATE TABLE base.migration(number INTEGER NOT NULL, "name" VARCHAR NOT NULL, sha256 VARCHAR NOT NULL);
base.model_revision
  CREATE TABLE base.model_revision(model VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.moment_us
  macro (word) CASE  WHEN (regexp_full_match("trim"(CAST(word AS VARCHAR)), '\d{4}-\d{2}-\d{2}')) THEN ((epoch_us((CAST("trim"(CAST(word AS VARCHAR)) AS DATE) + to_days(CAST(trunc(CAST(1 AS DOUBLE)) AS INTEGER)))) - 1)) WHEN (regexp_matches("trim"(CAST(word AS VARCHAR)), '\d{2}:\d{2}.*([Zz]|[+-]\d{2}(:?\d{2})?)$')) THEN (epoch_us(CAST("trim"(CAST(word AS VARCHAR)) AS TIMESTAMPTZ))) ELSE epoch_us(CAST("trim"(CAST(word AS VARCHAR)) AS TIMESTAMP_US)) END
base.observation
  CREATE TABLE base.observation(series_id INTEGER NOT NULL, observed_at TIMESTAMP NOT NULL, "value" DOUBLE NOT NULL, open DOUBLE, high DOUBLE, low DOUBLE, volume DOUBLE, intake_id INTEGER NOT NULL, take INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.observation_rows
  CREATE VIEW base.observation_rows AS SELECT s.series, o.observed_at, o."value", o.open, o.high, o.low, o.volume, o.intake_id, o.run_from, o.run_to FROM base.observation AS o INNER JOIN base.series AS s ON ((s.series_id = o.series_id));
base.ou
  CREATE TABLE base.ou(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, kappa DOUBLE, kappa_se DOUBLE, kappa_lower DOUBLE, kappa_upper DOUBLE, theta DOUBLE, theta_se DOUBLE, theta_lower DOUBLE, theta_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, kappa_median_unbiased DOUBLE, no_reversion_p DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.ou_rows
  CREATE VIEW base.ou_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.kappa, m.kappa_se, m.kappa_lower, m.kappa_upper, m.theta, m.theta_se, m.theta_lower, m.theta_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.kappa_median_unbiased, m.no_reversion_p, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / "nullif"(kappa_median_unbiased, 0))) ELSE NULL END AS half_life, CASE  WHEN ((kappa_upper > 0)) THEN ((ln(2) / kappa_upper)) ELSE NULL END AS half_life_lower, CASE  WHEN ((kappa_lower > 0)) THEN ((ln(2) / kappa_lower)) ELSE NULL END AS half_life_upper, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / kappa)) ELSE NULL END AS half_life_mle, (kappa_lower = 0) AS half_life_unbounded, CASE  WHEN ((kappa > 0)) THEN ((sigma / sqrt((2 * kappa)))) ELSE NULL END AS stationary_sd, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.ou AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.plan
  CREATE TABLE base.plan(plan_sha256 VARCHAR NOT NULL, "name" VARCHAR NOT NULL, "text" VARCHAR NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.plan_rows
  CREATE VIEW base.plan_rows AS SELECT p.plan_sha256, p."name", p."text", p.run_from, p.run_to FROM base.plan AS p;
base.refused_row
  CREATE TABLE base.refused_row(intake_id INTEGER NOT NULL, line BIGINT NOT NULL, cell INTEGER NOT NULL, "text" VARCHAR NOT NULL, reason VARCHAR NOT NULL, "name" VARCHAR, fields VARCHAR, run_from INTEGER NOT NULL, run_to INTEGER);
base.refused_row_rows
  CREATE VIEW base.refused_row_rows AS SELECT r.intake_id, r.line, r."text", r.reason, r.run_from, r.run_to FROM base.refused_row AS r;
base.run
  CREATE TABLE base.run(run_id INTEGER NOT NULL, kind VARCHAR NOT NULL, moment TIMESTAMP WITH TIME ZONE NOT NULL, told BOOLEAN NOT NULL, started_at TIMESTAMP WITH TIME ZONE NOT NULL, finished_at TIMESTAMP WITH TIME ZONE NOT NULL, plan_sha256 VARCHAR, package_version VARCHAR NOT NULL, migration INTEGER NOT NULL, windows_due BIGINT NOT NULL, windows_fitted BIGINT NOT NULL, windows_failed BIGINT NOT NULL, rows_written BIGINT NOT NULL, digest VARCHAR NOT NULL);
base.run_at
  macro (us) (SELECT max(r.run_id) FROM base.run AS r WHERE (epoch_us(r.moment) <= us))
base.series
  CREATE TABLE base.series(series_id INTEGER NOT NULL, series VARCHAR NOT NULL, added_at TIMESTAMP WITH TIME ZONE NOT NULL, run_from INTEGER NOT NULL);
base.series_rows
  CREATE VIEW base.series_rows AS SELECT s.series, t.sign, t.unit, t.clock, t.periods_per_year, t.time_zone, t.same_time, t.stale_after_days, t.planned, s.added_at, t.run_from, t.run_to FROM base.setting AS t INNER JOIN base.series AS s ON ((s.series_id = t.series_id));
base.setting
  CREATE TABLE base.setting(series_id INTEGER NOT NULL, sign VARCHAR NOT NULL, unit VARCHAR, clock VARCHAR NOT NULL, periods_per_year DOUBLE, time_zone VARCHAR NOT NULL, same_time VARCHAR NOT NULL, stale_after_days DOUBLE NOT NULL, planned BOOLEAN NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
main.intake
  CREATE VIEW intake AS SELECT i.intake_id, i.run_from AS run_id, i."source", i.sha256, i.received_at, i.rows_read, i.rows_new, i.rows_revised, i.rows_same, i.rows_refused FROM base.intake AS i;
  -- batches of incoming rows; every row is counted once: read = new + revised + same + refused
main.intake.intake_id
  INTEGER
  -- number of the intake
main.intake.received_at
  TIMESTAMP WITH TIME ZONE
  -- when it was taken in
main.intake.rows_new
  BIGINT
  -- rows that were new observations
main.intake.rows_read
  BIGINT
  -- rows it held
main.intake.rows_refused
  BIGINT
  -- rows that were not taken; see refused_row
main.intake.rows_revised
  BIGINT
  -- rows that corrected or withdrew an observation
main.intake.rows_same
  BIGINT
  -- rows that said what was known
main.intake.run_id
  INTEGER
  -- run that took it in
main.intake.sha256
  VARCHAR
  -- SHA-256 of its bytes
main.intake.source
  VARCHAR
  -- name of the file or frame
main.observation
  CREATE VIEW observation AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.observation_rows AS x WHERE (x.run_to IS NULL);
  -- the value in force of every observation
main.observation.high
  DOUBLE
  -- highest value of the period
main.observation.intake_id
  INTEGER
  -- intake that brought the value
main.observation.low
  DOUBLE
  -- lowest value of the period
main.observation.observed_at
  TIMESTAMP
  -- time of the observation, UTC
main.observation.open
  DOUBLE
  -- first value of the period, in the unit of the series
main.observation.run_id
  INTEGER
  -- run that wrote the row
main.observation.series
  VARCHAR
  -- name of the series
main.observation.value
  DOUBLE
  -- value, in the unit of the series
main.observation.volume
  DOUBLE
  -- volume of the period
main.observation_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.observation_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view observation as it was known at a moment: observation_as_of('2026-01-31')
main.observation_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.observation_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view observation as it was after a run: observation_at_run(41)
main.ou
  CREATE VIEW ou AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ou_rows AS x WHERE (x.run_to IS NULL);
  -- dX = kappa (theta - X) dt + sigma dW: estimates in force, one row per fit
main.ou.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
main.ou.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
main.ou.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
main.ou.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
main.ou.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
main.ou.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
main.ou.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.ou.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
main.ou.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
main.ou.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.ou.kurtosis
  DOUBLE
  -- Fourth moment of the residuals over the squared second: 3 for a Gaussian. [1]
main.ou.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.ou.lookback
  INTEGER
  -- steps in the window; 0: all
main.ou.n
  INTEGER
  -- steps used
main.ou.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
main.ou.revision
  INTEGER
  -- revision of the model that computed the row
main.ou.run_id
  INTEGER
  -- run that wrote the row
main.ou.series
  VARCHAR
  -- name of the series
main.ou.sigma
  DOUBLE
  -- Volatility of the driving noise. [x/√t]
main.ou.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.ou.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
main.ou.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.ou.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none. [x]
main.ou.status
  VARCHAR
  -- what became of the fit, in a word
main.ou.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
main.ou.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
main.ou.theta_se
  DOUBLE
  -- Standard error of theta. [x]
main.ou.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
main.ou.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.ou.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.ou_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ou_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view ou as it was known at a moment: ou_as_of('2026-01-31')
main.ou_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ou_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view ou as it was after a run: ou_at_run(41)
main.plan
  CREATE VIEW plan AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.plan_rows AS x WHERE (x.run_to IS NULL);
  -- the plan in force
main.plan.name
  VARCHAR
  -- name of the plan
main.plan.plan_sha256
  VARCHAR
  -- SHA-256 of the text
main.plan.run_id
  INTEGER
  -- run that wrote the row
main.plan.text
  VARCHAR
  -- the plan file as it was given
main.plan_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.plan_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view plan as it was known at a moment: plan_as_of('2026-01-31')
main.plan_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.plan_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view plan as it was after a run: plan_at_run(41)
main.refused_row
  CREATE VIEW refused_row AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.refused_row_rows AS x WHERE (x.run_to IS NULL);
  -- incoming rows that were not taken
main.refused_row.intake_id
  INTEGER
  -- intake that the row came with
main.refused_row.line
  BIGINT
  -- line of the source, the first is 1
main.refused_row.reason
  VARCHAR
  -- why it was refused, in a word
main.refused_row.run_id
  INTEGER
  -- run that wrote the row
main.refused_row.text
  VARCHAR
  -- the row as it stood there
main.refused_row_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.refused_row_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view refused_row as it was known at a moment: refused_row_as_of('2026-01-31')
main.refused_row_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.refused_row_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view refused_row as it was after a run: refused_row_at_run(41)
main.run
  CREATE VIEW run AS SELECT r.run_id, r.kind, r.moment, r.told, r.started_at, r.finished_at, r.plan_sha256, r.package_version, r.windows_due, r.windows_fitted, r.windows_failed, r.rows_written, r.digest FROM base.run AS r;
  -- changes of the book, one row each
main.run.digest
  VARCHAR
  -- SHA-256 over the digest before it, this row and its leaves
main.run.finished_at
  TIMESTAMP WITH TIME ZONE
  -- when the work ended
main.run.kind
  VARCHAR
  -- ingest, refresh, break or forget
main.run.moment
  TIMESTAMP WITH TIME ZONE
  -- when the run came into force
main.run.package_version
  VARCHAR
  -- version of driftbook that did it
main.run.plan_sha256
  VARCHAR
  -- plan in force after the run
main.run.rows_written
  BIGINT
  -- rows that came in, all tables
main.run.run_id
  INTEGER
  -- number of the run
main.run.started_at
  TIMESTAMP WITH TIME ZONE
  -- when the work began
main.run.told
  BOOLEAN
  -- whether the moment was told instead of taken from the clock
main.run.windows_due
  BIGINT
  -- windows computed
main.run.windows_failed
  BIGINT
  -- windows for which none could be given; their status says why
main.run.windows_fitted
  BIGINT
  -- windows for which there are numbers
main.series
  CREATE VIEW series AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.series_rows AS x WHERE (x.run_to IS NULL);
  -- the series of the book with their settings in force
main.series.added_at
  TIMESTAMP WITH TIME ZONE
  -- when the series was added
main.series.clock
  VARCHAR
  -- how time between observations is counted: trading
main.series.periods_per_year
  DOUBLE
  -- steps in a year under the clock trading
main.series.planned
  BOOLEAN
  -- whether the plan names the series
main.series.run_id
  INTEGER
  -- run that wrote the row
main.series.same_time
  VARCHAR
  -- what is done with several values at one time in one intake
main.series.series
  VARCHAR
  -- name of the series
main.series.sign
  VARCHAR
  -- positive: prices that models for X > 0 may be fitted to; any: others
main.series.stale_after_days
  DOUBLE
  -- days without an observation after which the series is stale
main.series.time_zone
  VARCHAR
  -- zone of times that come without one
main.series.unit
  VARCHAR
  -- unit of the values
main.series_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.series_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view series as it was known at a moment: series_as_of('2026-01-31')
main.series_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.series_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view series as it was after a run: series_at_run(41)
versions.observation
  CREATE VIEW versions.observation AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.observation_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- every version of observation
versions.observation.high
  DOUBLE
  -- highest value of the period
versions.observation.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.observation.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.observation.intake_id
  INTEGER
  -- intake that brought the value
versions.observation.low
  DOUBLE
  -- lowest value of the period
versions.observation.observed_at
  TIMESTAMP
  -- time of the observation, UTC
versions.observation.open
  DOUBLE
  -- first value of the period, in the unit of the series
versions.observation.run_from
  INTEGER
  -- run from which the row is in force
versions.observation.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.observation.series
  VARCHAR
  -- name of the series
versions.observation.value
  DOUBLE
  -- value, in the unit of the series
versions.observation.volume
  DOUBLE
  -- volume of the period
versions.ou
  CREATE VIEW versions.ou AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.ou_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = kappa (theta - X) dt + sigma dW: every version of every estimate
versions.ou.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
versions.ou.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.ou.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
versions.ou.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
versions.ou.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.ou.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.ou.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.ou.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
versions.ou.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.ou.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
versions.ou.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
versions.ou.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.ou.kurtosis
  DOUBLE
  -- Fourth moment of the residuals over the squared second: 3 for a Gaussian. [1]
versions.ou.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.ou.lookback
  INTEGER
  -- steps in the window; 0: all
versions.ou.n
  INTEGER
  -- steps used
versions.ou.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
versions.ou.revision
  INTEGER
  -- revision of the model that computed the row
versions.ou.run_from
  INTEGER
  -- run from which the row is in force
versions.ou.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.ou.series
  VARCHAR
  -- name of the series
versions.ou.sigma
  DOUBLE
  -- Volatility of the driving noise. [x/√t]
versions.ou.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.ou.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
versions.ou.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.ou.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none. [x]
versions.ou.status
  VARCHAR
  -- what became of the fit, in a word
versions.ou.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
versions.ou.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
versions.ou.theta_se
  DOUBLE
  -- Standard error of theta. [x]
versions.ou.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
versions.ou.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.ou.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.plan
  CREATE VIEW versions.plan AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.plan_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- every version of plan
versions.plan.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.plan.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.plan.name
  VARCHAR
  -- name of the plan
versions.plan.plan_sha256
  VARCHAR
  -- SHA-256 of the text
versions.plan.run_from
  INTEGER
  -- run from which the row is in force
versions.plan.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.plan.text
  VARCHAR
  -- the plan file as it was given
versions.refused_row
  CREATE VIEW versions.refused_row AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.refused_row_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- every version of refused_row
versions.refused_row.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.refused_row.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.refused_row.intake_id
  INTEGER
  -- intake that the row came with
versions.refused_row.line
  BIGINT
  -- line of the source, the first is 1
versions.refused_row.reason
  VARCHAR
  -- why it was refused, in a word
versions.refused_row.run_from
  INTEGER
  -- run from which the row is in force
versions.refused_row.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.refused_row.text
  VARCHAR
  -- the row as it stood there
versions.series
  CREATE VIEW versions.series AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.series_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- every version of series
versions.series.added_at
  TIMESTAMP WITH TIME ZONE
  -- when the series was added
versions.series.clock
  VARCHAR
  -- how time between observations is counted: trading
versions.series.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.series.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.series.periods_per_year
  DOUBLE
  -- steps in a year under the clock trading
versions.series.planned
  BOOLEAN
  -- whether the plan names the series
versions.series.run_from
  INTEGER
  -- run from which the row is in force
versions.series.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.series.same_time
  VARCHAR
  -- what is done with several values at one time in one intake
versions.series.series
  VARCHAR
  -- name of the series
versions.series.sign
  VARCHAR
  -- positive: prices that models for X > 0 may be fitted to; any: others
versions.series.stale_after_days
  DOUBLE
  -- days without an observation after which the series is stale
versions.series.time_zone
  VARCHAR
  -- zone of times that come without one
versions.series.unit
  VARCHAR
  -- unit of the values
