base.abm
  CREATE TABLE base.abm(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, mu DOUBLE, mu_se DOUBLE, mu_lower DOUBLE, mu_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.abm_rows
  CREATE VIEW base.abm_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.mu, m.mu_se, m.mu_lower, m.mu_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.abm AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.alias
  CREATE TABLE base.alias(series_id INTEGER NOT NULL, "name" VARCHAR NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.cir
  CREATE TABLE base.cir(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, kappa DOUBLE, kappa_se DOUBLE, kappa_lower DOUBLE, kappa_upper DOUBLE, theta DOUBLE, theta_se DOUBLE, theta_lower DOUBLE, theta_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, kappa_median_unbiased DOUBLE, no_reversion_p DOUBLE, feller_ratio_lower DOUBLE, feller_ratio_upper DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.cir_rows
  CREATE VIEW base.cir_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.kappa, m.kappa_se, m.kappa_lower, m.kappa_upper, m.theta, m.theta_se, m.theta_lower, m.theta_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.kappa_median_unbiased, m.no_reversion_p, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / "nullif"(kappa_median_unbiased, 0))) ELSE NULL END AS half_life, CASE  WHEN ((kappa_upper > 0)) THEN ((ln(2) / kappa_upper)) ELSE NULL END AS half_life_lower, CASE  WHEN ((kappa_lower > 0)) THEN ((ln(2) / kappa_lower)) ELSE NULL END AS half_life_upper, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / kappa)) ELSE NULL END AS half_life_mle, (kappa_lower = 0) AS half_life_unbounded, CASE  WHEN ((kappa > 0)) THEN ((sigma * sqrt((theta / (2 * kappa))))) ELSE NULL END AS stationary_sd, (((2 * kappa) * theta) / (sigma * sigma)) AS feller_ratio, m.feller_ratio_lower, m.feller_ratio_upper, CASE  WHEN ((feller_ratio_upper < 1)) THEN (true) WHEN ((feller_ratio_lower > 1)) THEN (false) ELSE NULL END AS can_reach_zero, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.cir AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.ckls
  CREATE TABLE base.ckls(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, kappa DOUBLE, kappa_se DOUBLE, kappa_lower DOUBLE, kappa_upper DOUBLE, theta DOUBLE, theta_se DOUBLE, theta_lower DOUBLE, theta_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, gamma DOUBLE, gamma_se DOUBLE, gamma_lower DOUBLE, gamma_upper DOUBLE, kappa_median_unbiased DOUBLE, no_reversion_p DOUBLE, local_volatility DOUBLE, local_volatility_se DOUBLE, local_volatility_lower DOUBLE, local_volatility_upper DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.ckls_rows
  CREATE VIEW base.ckls_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.kappa, m.kappa_se, m.kappa_lower, m.kappa_upper, m.theta, m.theta_se, m.theta_lower, m.theta_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.gamma, m.gamma_se, m.gamma_lower, m.gamma_upper, m.kappa_median_unbiased, m.no_reversion_p, CASE  WHEN (((kappa > 0) AND (gamma <= 1))) THEN ((ln(2) / "nullif"(kappa_median_unbiased, 0))) ELSE NULL END AS half_life, CASE  WHEN (((kappa_upper > 0) AND (gamma <= 1))) THEN ((ln(2) / kappa_upper)) ELSE NULL END AS half_life_lower, CASE  WHEN (((kappa_lower > 0) AND (gamma <= 1))) THEN ((ln(2) / kappa_lower)) ELSE NULL END AS half_life_upper, CASE  WHEN (((kappa > 0) AND (gamma <= 1))) THEN ((ln(2) / kappa)) ELSE NULL END AS half_life_mle, (kappa_lower = 0) AS half_life_unbounded, m.local_volatility, m.local_volatility_se, m.local_volatility_lower, m.local_volatility_upper, CASE  WHEN ((gamma_upper < 0.5)) THEN (true) WHEN (((gamma_lower > 0.5) AND ((kappa * theta) > 0))) THEN (false) ELSE NULL END AS can_reach_zero, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.ckls AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.dictionary_entry
  CREATE TABLE base.dictionary_entry("name" VARCHAR NOT NULL, column_name VARCHAR, unit VARCHAR, meaning VARCHAR NOT NULL, example VARCHAR);
base.estimate_rows
  CREATE VIEW base.estimate_rows AS (SELECT m.series, m.lookback, m.window_end, 'abm' AS model, 'mu' AS parameter, m.mu AS "value", m.mu_se AS se, m.mu_lower AS lower, m.mu_upper AS upper, m.status, m.run_from, m.run_to FROM base.abm_rows AS m) UNION ALL (((((((SELECT m.series, m.lookback, m.window_end, 'abm' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.abm_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'gbm' AS model, 'mu' AS parameter, m.mu AS "value", m.mu_se AS se, m.mu_lower AS lower, m.mu_upper AS upper, m.status, m.run_from, m.run_to FROM base.gbm_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'gbm' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.gbm_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'ou' AS model, 'kappa' AS parameter, m.kappa AS "value", m.kappa_se AS se, m.kappa_lower AS lower, m.kappa_upper AS upper, m.status, m.run_from, m.run_to FROM base.ou_rows AS m))) UNION ALL (((SELECT m.series, m.lookback, m.window_end, 'ou' AS model, 'theta' AS parameter, m.theta AS "value", m.theta_se AS se, m.theta_lower AS lower, m.theta_upper AS upper, m.status, m.run_from, m.run_to FROM base.ou_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'ou' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.ou_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'exp_ou' AS model, 'kappa' AS parameter, m.kappa AS "value", m.kappa_se AS se, m.kappa_lower AS lower, m.kappa_upper AS upper, m.status, m.run_from, m.run_to FROM base.exp_ou_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'exp_ou' AS model, 'theta' AS parameter, m.theta AS "value", m.theta_se AS se, m.theta_lower AS lower, m.theta_upper AS upper, m.status, m.run_from, m.run_to FROM base.exp_ou_rows AS m)))) UNION ALL ((((SELECT m.series, m.lookback, m.window_end, 'exp_ou' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.exp_ou_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'cir' AS model, 'kappa' AS parameter, m.kappa AS "value", m.kappa_se AS se, m.kappa_lower AS lower, m.kappa_upper AS upper, m.status, m.run_from, m.run_to FROM base.cir_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'cir' AS model, 'theta' AS parameter, m.theta AS "value", m.theta_se AS se, m.theta_lower AS lower, m.theta_upper AS upper, m.status, m.run_from, m.run_to FROM base.cir_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'cir' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.cir_rows AS m))) UNION ALL (((SELECT m.series, m.lookback, m.window_end, 'ckls' AS model, 'kappa' AS parameter, m.kappa AS "value", m.kappa_se AS se, m.kappa_lower AS lower, m.kappa_upper AS upper, m.status, m.run_from, m.run_to FROM base.ckls_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'ckls' AS model, 'theta' AS parameter, m.theta AS "value", m.theta_se AS se, m.theta_lower AS lower, m.theta_upper AS upper, m.status, m.run_from, m.run_to FROM base.ckls_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'ckls' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.ckls_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'ckls' AS model, 'gamma' AS parameter, m.gamma AS "value", m.gamma_se AS se, m.gamma_lower AS lower, m.gamma_upper AS upper, m.status, m.run_from, m.run_to FROM base.ckls_rows AS m))))) UNION ALL (((((SELECT m.series, m.lookback, m.window_end, 'quartic' AS model, 'a0' AS parameter, m.a0 AS "value", m.a0_se AS se, m.a0_lower AS lower, m.a0_upper AS upper, m.status, m.run_from, m.run_to FROM base.quartic_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'quartic' AS model, 'a1' AS parameter, m.a1 AS "value", m.a1_se AS se, m.a1_lower AS lower, m.a1_upper AS upper, m.status, m.run_from, m.run_to FROM base.quartic_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'quartic' AS model, 'a2' AS parameter, m.a2 AS "value", m.a2_se AS se, m.a2_lower AS lower, m.a2_upper AS upper, m.status, m.run_from, m.run_to FROM base.quartic_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'quartic' AS model, 'a3' AS parameter, m.a3 AS "value", m.a3_se AS se, m.a3_lower AS lower, m.a3_upper AS upper, m.status, m.run_from, m.run_to FROM base.quartic_rows AS m))) UNION ALL (((SELECT m.series, m.lookback, m.window_end, 'quartic' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.quartic_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'merton' AS model, 'mu' AS parameter, m.mu AS "value", m.mu_se AS se, m.mu_lower AS lower, m.mu_upper AS upper, m.status, m.run_from, m.run_to FROM base.merton_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'merton' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.merton_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'merton' AS model, 'jump_rate' AS parameter, m.jump_rate AS "value", m.jump_rate_se AS se, m.jump_rate_lower AS lower, m.jump_rate_upper AS upper, m.status, m.run_from, m.run_to FROM base.merton_rows AS m)))) UNION ALL ((((SELECT m.series, m.lookback, m.window_end, 'merton' AS model, 'jump_mean' AS parameter, m.jump_mean AS "value", m.jump_mean_se AS se, m.jump_mean_lower AS lower, m.jump_mean_upper AS upper, m.status, m.run_from, m.run_to FROM base.merton_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'merton' AS model, 'jump_sd' AS parameter, m.jump_sd AS "value", m.jump_sd_se AS se, m.jump_sd_lower AS lower, m.jump_sd_upper AS upper, m.status, m.run_from, m.run_to FROM base.merton_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'inertial' AS model, 'damping' AS parameter, m.damping AS "value", m.damping_se AS se, m.damping_lower AS lower, m.damping_upper AS upper, m.status, m.run_from, m.run_to FROM base.inertial_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'inertial' AS model, 'omega' AS parameter, m.omega AS "value", m.omega_se AS se, m.omega_lower AS lower, m.omega_upper AS upper, m.status, m.run_from, m.run_to FROM base.inertial_rows AS m))) UNION ALL (((SELECT m.series, m.lookback, m.window_end, 'inertial' AS model, 'theta' AS parameter, m.theta AS "value", m.theta_se AS se, m.theta_lower AS lower, m.theta_upper AS upper, m.status, m.run_from, m.run_to FROM base.inertial_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'inertial' AS model, 'eta' AS parameter, m.eta AS "value", m.eta_se AS se, m.eta_lower AS lower, m.eta_upper AS upper, m.status, m.run_from, m.run_to FROM base.inertial_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'ou_noise' AS model, 'kappa' AS parameter, m.kappa AS "value", m.kappa_se AS se, m.kappa_lower AS lower, m.kappa_upper AS upper, m.status, m.run_from, m.run_to FROM base.ou_noise_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'ou_noise' AS model, 'theta' AS parameter, m.theta AS "value", m.theta_se AS se, m.theta_lower AS lower, m.theta_upper AS upper, m.status, m.run_from, m.run_to FROM base.ou_noise_rows AS m)))))) UNION ALL ((SELECT m.series, m.lookback, m.window_end, 'ou_noise' AS model, 'sigma' AS parameter, m.sigma AS "value", m.sigma_se AS se, m.sigma_lower AS lower, m.sigma_upper AS upper, m.status, m.run_from, m.run_to FROM base.ou_noise_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_end, 'ou_noise' AS model, 'noise' AS parameter, m.noise AS "value", m.noise_se AS se, m.noise_lower AS lower, m.noise_upper AS upper, m.status, m.run_from, m.run_to FROM base.ou_noise_rows AS m)));
base.exp_ou
  CREATE TABLE base.exp_ou(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, kappa DOUBLE, kappa_se DOUBLE, kappa_lower DOUBLE, kappa_upper DOUBLE, theta DOUBLE, theta_se DOUBLE, theta_lower DOUBLE, theta_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, kappa_median_unbiased DOUBLE, no_reversion_p DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.exp_ou_rows
  CREATE VIEW base.exp_ou_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.kappa, m.kappa_se, m.kappa_lower, m.kappa_upper, m.theta, m.theta_se, m.theta_lower, m.theta_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.kappa_median_unbiased, m.no_reversion_p, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / "nullif"(kappa_median_unbiased, 0))) ELSE NULL END AS half_life, CASE  WHEN ((kappa_upper > 0)) THEN ((ln(2) / kappa_upper)) ELSE NULL END AS half_life_lower, CASE  WHEN ((kappa_lower > 0)) THEN ((ln(2) / kappa_lower)) ELSE NULL END AS half_life_upper, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / kappa)) ELSE NULL END AS half_life_mle, (kappa_lower = 0) AS half_life_unbounded, CASE  WHEN ((kappa > 0)) THEN ((sigma / sqrt((2 * kappa)))) ELSE NULL END AS stationary_sd, CASE  WHEN (((kappa > 0) AND (theta < 700))) THEN (exp(theta)) ELSE NULL END AS long_run_median, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.exp_ou AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.fit_rows
  CREATE VIEW base.fit_rows AS (SELECT m.series, m.lookback, m.window_start, m.window_end, 'abm' AS model, m.n, 2 AS k, m.loglik, ((2 * 2) - (2 * m.loglik)) AS aic, ((2 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.abm_rows AS m) UNION ALL (((((SELECT m.series, m.lookback, m.window_start, m.window_end, 'gbm' AS model, m.n, 2 AS k, m.loglik, ((2 * 2) - (2 * m.loglik)) AS aic, ((2 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.gbm_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_start, m.window_end, 'ou' AS model, m.n, 3 AS k, m.loglik, ((2 * 3) - (2 * m.loglik)) AS aic, ((3 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.ou_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_start, m.window_end, 'exp_ou' AS model, m.n, 3 AS k, m.loglik, ((2 * 3) - (2 * m.loglik)) AS aic, ((3 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.exp_ou_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_start, m.window_end, 'cir' AS model, m.n, 3 AS k, m.loglik, ((2 * 3) - (2 * m.loglik)) AS aic, ((3 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.cir_rows AS m))) UNION ALL (((SELECT m.series, m.lookback, m.window_start, m.window_end, 'ckls' AS model, m.n, 4 AS k, m.loglik, ((2 * 4) - (2 * m.loglik)) AS aic, ((4 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.ckls_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_start, m.window_end, 'quartic' AS model, m.n, 5 AS k, m.loglik, ((2 * 5) - (2 * m.loglik)) AS aic, ((5 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.quartic_rows AS m)) UNION ALL ((SELECT m.series, m.lookback, m.window_start, m.window_end, 'merton' AS model, m.n, 5 AS k, m.loglik, ((2 * 5) - (2 * m.loglik)) AS aic, ((5 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.merton_rows AS m) UNION ALL (SELECT m.series, m.lookback, m.window_start, m.window_end, 'inertial' AS model, m.n, 4 AS k, m.loglik, ((2 * 4) - (2 * m.loglik)) AS aic, ((4 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.inertial_rows AS m)))) UNION ALL (SELECT m.series, m.lookback, m.window_start, m.window_end, 'ou_noise' AS model, m.n, 4 AS k, m.loglik, ((2 * 4) - (2 * m.loglik)) AS aic, ((4 * ln(m.n)) - (2 * m.loglik)) AS bic, m.status, m.run_from, m.run_to FROM base.ou_noise_rows AS m));
base.forgotten_leaf
  CREATE TABLE base.forgotten_leaf(run_id INTEGER NOT NULL, table_name VARCHAR NOT NULL, series_id INTEGER, rows_in BIGINT NOT NULL, rows_closed BIGINT NOT NULL, sha256 VARCHAR NOT NULL, run_from INTEGER NOT NULL);
base.gbm
  CREATE TABLE base.gbm(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, mu DOUBLE, mu_se DOUBLE, mu_lower DOUBLE, mu_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.gbm_rows
  CREATE VIEW base.gbm_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.mu, m.mu_se, m.mu_lower, m.mu_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.gbm AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.inertial
  CREATE TABLE base.inertial(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, damping DOUBLE, damping_se DOUBLE, damping_lower DOUBLE, damping_upper DOUBLE, omega DOUBLE, omega_se DOUBLE, omega_lower DOUBLE, omega_upper DOUBLE, theta DOUBLE, theta_se DOUBLE, theta_lower DOUBLE, theta_upper DOUBLE, eta DOUBLE, eta_se DOUBLE, eta_lower DOUBLE, eta_upper DOUBLE, kappa_s DOUBLE, kappa_s_se DOUBLE, kappa_s_lower DOUBLE, kappa_s_upper DOUBLE, sigma_s DOUBLE, sigma_s_se DOUBLE, sigma_s_lower DOUBLE, sigma_s_upper DOUBLE, no_reversion_p DOUBLE, kurtosis DOUBLE, fitted_on VARCHAR, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.inertial_rows
  CREATE VIEW base.inertial_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.damping, m.damping_se, m.damping_lower, m.damping_upper, m.omega, m.omega_se, m.omega_lower, m.omega_upper, m.theta, m.theta_se, m.theta_lower, m.theta_upper, m.eta, m.eta_se, m.eta_lower, m.eta_upper, m.kappa_s, m.kappa_s_se, m.kappa_s_lower, m.kappa_s_upper, m.sigma_s, m.sigma_s_se, m.sigma_s_lower, m.sigma_s_upper, m.no_reversion_p, CASE  WHEN ((damping < (2 * omega))) THEN (((2 * pi()) / sqrt(((omega * omega) - ((damping * damping) / 4))))) ELSE NULL END AS period, CASE  WHEN ((omega > 0)) THEN ((damping / (2 * omega))) ELSE NULL END AS damping_ratio, m.kurtosis, m.fitted_on, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.inertial AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.intake
  CREATE TABLE base.intake(intake_id INTEGER NOT NULL, "source" VARCHAR NOT NULL, sha256 VARCHAR NOT NULL, "options" VARCHAR NOT NULL, received_at TIMESTAMP WITH TIME ZONE NOT NULL, rows_read BIGINT NOT NULL, rows_new BIGINT NOT NULL, rows_revised BIGINT NOT NULL, rows_same BIGINT NOT NULL, rows_refused BIGINT NOT NULL, run_from INTEGER NOT NULL);
base.latest
  CREATE TABLE base.latest(series_id INTEGER NOT NULL, observed_at TIMESTAMP NOT NULL, "value" DOUBLE NOT NULL, lookback INTEGER NOT NULL, window_end TIMESTAMP NOT NULL, model VARCHAR, model_weight DOUBLE, volatility DOUBLE, volatility_lower DOUBLE, volatility_upper DOUBLE, volatility_unit VARCHAR NOT NULL, drift DOUBLE, half_life_days DOUBLE, half_life_days_lower DOUBLE, half_life_days_upper DOUBLE, half_life_unbounded BOOLEAN, can_reach_zero BOOLEAN, challenger VARCHAR, note VARCHAR NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.leaf
  CREATE TABLE base.leaf(run_id INTEGER NOT NULL, table_name VARCHAR NOT NULL, series_id INTEGER, migration INTEGER NOT NULL, rows_in BIGINT NOT NULL, rows_closed BIGINT NOT NULL, sha256 VARCHAR NOT NULL);
base.merton
  CREATE TABLE base.merton(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, mu DOUBLE, mu_se DOUBLE, mu_lower DOUBLE, mu_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, jump_rate DOUBLE, jump_rate_se DOUBLE, jump_rate_lower DOUBLE, jump_rate_upper DOUBLE, jump_mean DOUBLE, jump_mean_se DOUBLE, jump_mean_lower DOUBLE, jump_mean_upper DOUBLE, jump_sd DOUBLE, jump_sd_se DOUBLE, jump_sd_lower DOUBLE, jump_sd_upper DOUBLE, total_volatility DOUBLE, total_volatility_lower DOUBLE, total_volatility_upper DOUBLE, jump_probability DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.merton_rows
  CREATE VIEW base.merton_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.mu, m.mu_se, m.mu_lower, m.mu_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.jump_rate, m.jump_rate_se, m.jump_rate_lower, m.jump_rate_upper, m.jump_mean, m.jump_mean_se, m.jump_mean_lower, m.jump_mean_upper, m.jump_sd, m.jump_sd_se, m.jump_sd_lower, m.jump_sd_upper, m.total_volatility, m.total_volatility_lower, m.total_volatility_upper, m.jump_probability, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.merton AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.migration
  CREATE TABLE base.migration(number INTEGER NOT NULL, "name" VARCHAR NOT NULL, sha256 VARCHAR NOT NULL);
base.model_revision
  CREATE TABLE base.model_revision(model VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.moment_us
  macro (word) CASE  WHEN (regexp_full_match("trim"(CAST(word AS VARCHAR)), '\d{4}-\d{2}-\d{2}')) THEN ((epoch_us((CAST("trim"(CAST(word AS VARCHAR)) AS DATE) + to_days(CAST(trunc(CAST(1 AS DOUBLE)) AS INTEGER)))) - 1)) WHEN (regexp_matches("trim"(CAST(word AS VARCHAR)), '\d{2}:\d{2}.*([Zz]|[+-]\d{2}(:?\d{2})?)$')) THEN (epoch_us(CAST(regexp_replace(upper("trim"(CAST(word AS VARCHAR))), '([ T]\d{2}:\d{2})([Z+-])', '\1:00\2') AS TIMESTAMPTZ))) ELSE epoch_us(CAST("trim"(CAST(word AS VARCHAR)) AS TIMESTAMP_US)) END
base.observation
  CREATE TABLE base.observation(series_id INTEGER NOT NULL, observed_at TIMESTAMP NOT NULL, "value" DOUBLE NOT NULL, open DOUBLE, high DOUBLE, low DOUBLE, volume DOUBLE, intake_id INTEGER NOT NULL, take INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.observation_rows
  CREATE VIEW base.observation_rows AS SELECT s.series, o.observed_at, o."value", o.open, o.high, o.low, o.volume, o.intake_id, o.run_from, o.run_to FROM base.observation AS o INNER JOIN base.series AS s ON ((s.series_id = o.series_id));
base.ou
  CREATE TABLE base.ou(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, kappa DOUBLE, kappa_se DOUBLE, kappa_lower DOUBLE, kappa_upper DOUBLE, theta DOUBLE, theta_se DOUBLE, theta_lower DOUBLE, theta_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, kappa_median_unbiased DOUBLE, no_reversion_p DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.ou_noise
  CREATE TABLE base.ou_noise(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, kappa DOUBLE, kappa_se DOUBLE, kappa_lower DOUBLE, kappa_upper DOUBLE, theta DOUBLE, theta_se DOUBLE, theta_lower DOUBLE, theta_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, noise DOUBLE, noise_se DOUBLE, noise_lower DOUBLE, noise_upper DOUBLE, noise_share DOUBLE, no_noise_p DOUBLE, kappa_median_unbiased DOUBLE, no_reversion_p DOUBLE, kurtosis DOUBLE, fitted_on VARCHAR, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.ou_noise_rows
  CREATE VIEW base.ou_noise_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.kappa, m.kappa_se, m.kappa_lower, m.kappa_upper, m.theta, m.theta_se, m.theta_lower, m.theta_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.noise, m.noise_se, m.noise_lower, m.noise_upper, m.noise_share, m.no_noise_p, m.kappa_median_unbiased, m.no_reversion_p, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / "nullif"(kappa_median_unbiased, 0))) ELSE NULL END AS half_life, CASE  WHEN ((kappa_upper > 0)) THEN ((ln(2) / kappa_upper)) ELSE NULL END AS half_life_lower, CASE  WHEN ((kappa_lower > 0)) THEN ((ln(2) / kappa_lower)) ELSE NULL END AS half_life_upper, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / kappa)) ELSE NULL END AS half_life_mle, (kappa_lower = 0) AS half_life_unbounded, CASE  WHEN ((kappa > 0)) THEN ((sigma / sqrt((2 * kappa)))) ELSE NULL END AS stationary_sd, m.kurtosis, m.fitted_on, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.ou_noise AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.ou_rows
  CREATE VIEW base.ou_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.kappa, m.kappa_se, m.kappa_lower, m.kappa_upper, m.theta, m.theta_se, m.theta_lower, m.theta_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.kappa_median_unbiased, m.no_reversion_p, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / "nullif"(kappa_median_unbiased, 0))) ELSE NULL END AS half_life, CASE  WHEN ((kappa_upper > 0)) THEN ((ln(2) / kappa_upper)) ELSE NULL END AS half_life_lower, CASE  WHEN ((kappa_lower > 0)) THEN ((ln(2) / kappa_lower)) ELSE NULL END AS half_life_upper, CASE  WHEN ((kappa > 0)) THEN ((ln(2) / kappa)) ELSE NULL END AS half_life_mle, (kappa_lower = 0) AS half_life_unbounded, CASE  WHEN ((kappa > 0)) THEN ((sigma / sqrt((2 * kappa)))) ELSE NULL END AS stationary_sd, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.ou AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.plan
  CREATE TABLE base.plan(plan_sha256 VARCHAR NOT NULL, "name" VARCHAR NOT NULL, "text" VARCHAR NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.plan_rows
  CREATE VIEW base.plan_rows AS SELECT p.plan_sha256, p."name", p."text", p.run_from, p.run_to FROM base.plan AS p;
base.quartic
  CREATE TABLE base.quartic(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, window_start TIMESTAMP NOT NULL, window_end TIMESTAMP NOT NULL, n INTEGER NOT NULL, centre DOUBLE, scale DOUBLE, a0 DOUBLE, a0_se DOUBLE, a0_lower DOUBLE, a0_upper DOUBLE, a1 DOUBLE, a1_se DOUBLE, a1_lower DOUBLE, a1_upper DOUBLE, a2 DOUBLE, a2_se DOUBLE, a2_lower DOUBLE, a2_upper DOUBLE, a3 DOUBLE, a3_se DOUBLE, a3_lower DOUBLE, a3_upper DOUBLE, sigma DOUBLE, sigma_se DOUBLE, sigma_lower DOUBLE, sigma_upper DOUBLE, bottom_lower DOUBLE, bottom_lower_se DOUBLE, bottom_lower_lower DOUBLE, bottom_lower_upper DOUBLE, barrier DOUBLE, barrier_se DOUBLE, barrier_lower DOUBLE, barrier_upper DOUBLE, bottom_upper DOUBLE, bottom_upper_se DOUBLE, bottom_upper_lower DOUBLE, bottom_upper_upper DOUBLE, steepest DOUBLE, kurtosis DOUBLE, loglik DOUBLE, status VARCHAR NOT NULL, revision INTEGER NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.quartic_rows
  CREATE VIEW base.quartic_rows AS SELECT s.series, m.lookback, m.window_start, m.window_end, m.n, m.centre, m.scale, m.a0, m.a0_se, m.a0_lower, m.a0_upper, m.a1, m.a1_se, m.a1_lower, m.a1_upper, m.a2, m.a2_se, m.a2_lower, m.a2_upper, m.a3, m.a3_se, m.a3_lower, m.a3_upper, m.sigma, m.sigma_se, m.sigma_lower, m.sigma_upper, m.bottom_lower, m.bottom_lower_se, m.bottom_lower_lower, m.bottom_lower_upper, m.barrier, m.barrier_se, m.barrier_lower, m.barrier_upper, m.bottom_upper, m.bottom_upper_se, m.bottom_upper_lower, m.bottom_upper_upper, m.steepest, m.kurtosis, m.loglik, m.status, m.revision, m.run_from, m.run_to FROM base.quartic AS m INNER JOIN base.series AS s ON ((s.series_id = m.series_id));
base.quartic_setting
  CREATE TABLE base.quartic_setting(series_id INTEGER NOT NULL, lookback INTEGER NOT NULL, centre DOUBLE NOT NULL, scale DOUBLE NOT NULL, run_from INTEGER NOT NULL);
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
  CREATE VIEW base.series_rows AS SELECT s.series, t.sign, t.unit, t.clock, t.periods_per_year, t.time_zone, t.same_time, t.stale_after_days, t.in_force, t.shift, t.planned, s.added_at, t.run_from, t.run_to FROM base.setting AS t INNER JOIN base.series AS s ON ((s.series_id = t.series_id));
base.setting
  CREATE TABLE base.setting(series_id INTEGER NOT NULL, sign VARCHAR NOT NULL, unit VARCHAR, clock VARCHAR NOT NULL, periods_per_year DOUBLE, time_zone VARCHAR NOT NULL, same_time VARCHAR NOT NULL, stale_after_days DOUBLE NOT NULL, in_force VARCHAR NOT NULL, shift DOUBLE NOT NULL, planned BOOLEAN NOT NULL, run_from INTEGER NOT NULL, run_to INTEGER);
base.steps_of
  macro (name) SELECT o.observed_at, o."value", first_value(o."value") OVER (ORDER BY o.observed_at) AS origin, (o."value" - first_value(o."value") OVER (ORDER BY o.observed_at)) AS x, t.periods_per_year FROM base.observation AS o INNER JOIN base.series AS s ON ((s.series_id = o.series_id)) INNER JOIN base.setting AS t ON (((t.series_id = o.series_id) AND (t.run_to IS NULL))) WHERE ((s.series = "name") AND (o.run_to IS NULL) AND (t.periods_per_year IS NOT NULL))
main.abm
  CREATE VIEW abm AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.abm_rows AS x WHERE (x.run_to IS NULL);
  -- dX = mu dt + sigma dW: estimates in force, one row per fit
main.abm.kurtosis
  DOUBLE
  -- Fourth moment of the standardised increments over the squared second: 3 for a Gaussian. [1]
main.abm.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.abm.lookback
  INTEGER
  -- steps in the window; 0: all
main.abm.mu
  DOUBLE
  -- Drift: expected change per unit of time. [x/t]
main.abm.mu_lower
  DOUBLE
  -- Lower end of the 95 % interval of mu; empty: no end on this side. [x/t]
main.abm.mu_se
  DOUBLE
  -- Standard error of mu. [x/t]
main.abm.mu_upper
  DOUBLE
  -- Upper end of the 95 % interval of mu; empty: no end on this side. [x/t]
main.abm.n
  INTEGER
  -- steps used
main.abm.revision
  INTEGER
  -- revision of the model that computed the row
main.abm.run_id
  INTEGER
  -- run that wrote the row
main.abm.series
  VARCHAR
  -- name of the series
main.abm.sigma
  DOUBLE
  -- Volatility. [x/√t]
main.abm.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.abm.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
main.abm.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.abm.status
  VARCHAR
  -- what became of the fit, in a word
main.abm.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.abm.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.abm_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.abm_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view abm as it was known at a moment: abm_as_of('2026-01-31')
main.abm_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.abm_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view abm as it was after a run: abm_at_run(41)
main.abm_closed_form
  macro (name, lookback) WITH steps AS (SELECT q.observed_at, q.periods_per_year, (q.x - lag(q.x) OVER (ORDER BY q.observed_at)) AS d, lag(q.observed_at, lookback) OVER (ORDER BY q.observed_at) AS window_start FROM base.steps_of("name") AS q), moments AS (SELECT p.window_start, p.observed_at AS window_end, p.periods_per_year, count(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS n, avg(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS mean_step, var_pop(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS variance FROM steps AS p WHERE (p.d IS NOT NULL)) SELECT m.window_start, m.window_end, m.n, (m.mean_step * m.periods_per_year) AS mu, sqrt((m.variance * m.periods_per_year)) AS sigma, ((-0.5 * m.n) * (ln(((2 * pi()) * m.variance)) + 1)) AS loglik FROM moments AS m WHERE ((m.n = lookback) AND (m.window_start IS NOT NULL) AND (m.variance > 0)) ORDER BY m.window_end
  -- abm on every window of a series, in SQL alone: abm_closed_form('pellets_fob', 250)
main.cir
  CREATE VIEW cir AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.cir_rows AS x WHERE (x.run_to IS NULL);
  -- dX = kappa (theta - X) dt + sigma sqrt(X) dW, kappa theta > 0: estimates in force, one row per fit
main.cir.can_reach_zero
  BOOLEAN
  -- Whether paths reach zero; empty where the interval of feller_ratio holds 1. [1]
main.cir.feller_ratio
  DOUBLE
  -- 2 kappa theta / sigma²: paths reach zero where it is below 1. Biased upwards, as kappa is. [1]
main.cir.feller_ratio_lower
  DOUBLE
  -- Lower end of the 95 % interval of feller_ratio. [1]
main.cir.feller_ratio_upper
  DOUBLE
  -- Upper end of the 95 % interval of feller_ratio; empty: no end on this side. [1]
main.cir.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
main.cir.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
main.cir.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
main.cir.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
main.cir.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
main.cir.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
main.cir.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.cir.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
main.cir.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
main.cir.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.cir.kurtosis
  DOUBLE
  -- Fourth moment of the residuals of √x over the squared second: about 3 for this model. [1]
main.cir.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.cir.lookback
  INTEGER
  -- steps in the window; 0: all
main.cir.n
  INTEGER
  -- steps used
main.cir.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
main.cir.revision
  INTEGER
  -- revision of the model that computed the row
main.cir.run_id
  INTEGER
  -- run that wrote the row
main.cir.series
  VARCHAR
  -- name of the series
main.cir.sigma
  DOUBLE
  -- Volatility of the driving noise: times √x it is that of the series. [√x/√t]
main.cir.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]
main.cir.sigma_se
  DOUBLE
  -- Standard error of sigma. [√x/√t]
main.cir.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]
main.cir.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none. [x]
main.cir.status
  VARCHAR
  -- what became of the fit, in a word
main.cir.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
main.cir.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
main.cir.theta_se
  DOUBLE
  -- Standard error of theta. [x]
main.cir.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
main.cir.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.cir.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.cir_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.cir_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view cir as it was known at a moment: cir_as_of('2026-01-31')
main.cir_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.cir_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view cir as it was after a run: cir_at_run(41)
main.ckls
  CREATE VIEW ckls AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ckls_rows AS x WHERE (x.run_to IS NULL);
  -- dX = kappa (theta - X) dt + sigma X^gamma dW: estimates in force, one row per fit
main.ckls.can_reach_zero
  BOOLEAN
  -- Whether paths reach zero; empty where the interval of gamma holds a half, or kappa theta is not positive. [1]
main.ckls.gamma
  DOUBLE
  -- Power of the level in the volatility; between -1 and 2.5. [1]
main.ckls.gamma_lower
  DOUBLE
  -- Lower end of the 95 % interval of gamma; empty: no end on this side. [1]
main.ckls.gamma_se
  DOUBLE
  -- Standard error of gamma. [1]
main.ckls.gamma_upper
  DOUBLE
  -- Upper end of the 95 % interval of gamma; empty: no end on this side. [1]
main.ckls.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
main.ckls.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
main.ckls.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
main.ckls.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
main.ckls.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
main.ckls.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
main.ckls.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.ckls.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
main.ckls.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
main.ckls.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.ckls.kurtosis
  DOUBLE
  -- Fourth moment of movements in the coordinate of unit volatility over the squared second. [1]
main.ckls.local_volatility
  DOUBLE
  -- Volatility at the geometric mean of the window: sigma times its power gamma. [x/√t]
main.ckls.local_volatility_lower
  DOUBLE
  -- Lower end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]
main.ckls.local_volatility_se
  DOUBLE
  -- Standard error of local_volatility. [x/√t]
main.ckls.local_volatility_upper
  DOUBLE
  -- Upper end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]
main.ckls.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.ckls.lookback
  INTEGER
  -- steps in the window; 0: all
main.ckls.n
  INTEGER
  -- steps used
main.ckls.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
main.ckls.revision
  INTEGER
  -- revision of the model that computed the row
main.ckls.run_id
  INTEGER
  -- run that wrote the row
main.ckls.series
  VARCHAR
  -- name of the series
main.ckls.sigma
  DOUBLE
  -- Volatility of the driving noise: times x^gamma it is that of the series. [x^(1-gamma)/√t]
main.ckls.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]
main.ckls.sigma_se
  DOUBLE
  -- Standard error of sigma. [x^(1-gamma)/√t]
main.ckls.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]
main.ckls.status
  VARCHAR
  -- what became of the fit, in a word
main.ckls.theta
  DOUBLE
  -- Level that the drift pulls to; the stationary mean where gamma is 1 or less. [x]
main.ckls.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
main.ckls.theta_se
  DOUBLE
  -- Standard error of theta. [x]
main.ckls.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
main.ckls.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.ckls.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.ckls_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ckls_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view ckls as it was known at a moment: ckls_as_of('2026-01-31')
main.ckls_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ckls_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view ckls as it was after a run: ckls_at_run(41)
main.dictionary
  CREATE VIEW "dictionary" AS SELECT d."name", d.column_name, d.unit, d.meaning, d.example FROM base.dictionary_entry AS d;
  -- what every view, column, macro and function means
main.dictionary.column_name
  VARCHAR
  -- column of a view; NULL: the entry is about the whole
main.dictionary.example
  VARCHAR
  -- a query that runs; functions need a connection of driftbook
main.dictionary.meaning
  VARCHAR
  -- what it says
main.dictionary.name
  VARCHAR
  -- view, macro or function
main.dictionary.unit
  VARCHAR
  -- unit in words; x: unit of the series, t: year or second, 1: a pure number
main.estimate
  CREATE VIEW estimate AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.estimate_rows AS x WHERE (x.run_to IS NULL);
  -- all models: one row per parameter of a fit
main.estimate.lookback
  INTEGER
  -- steps in the window; 0: all
main.estimate.lower
  DOUBLE
  -- lower end of the 95 % interval; NULL with status ok or no_reversion: no end on this side
main.estimate.model
  VARCHAR
  -- name of the model
main.estimate.parameter
  VARCHAR
  -- name of the parameter
main.estimate.run_id
  INTEGER
  -- run that wrote the row
main.estimate.se
  DOUBLE
  -- standard error
main.estimate.series
  VARCHAR
  -- name of the series
main.estimate.status
  VARCHAR
  -- what became of the fit, in a word
main.estimate.upper
  DOUBLE
  -- upper end of the 95 % interval; NULL with status ok or no_reversion: no end on this side
main.estimate.value
  DOUBLE
  -- estimate, in the parameter's unit
main.estimate.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.estimate_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.estimate_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view estimate as it was known at a moment: estimate_as_of('2026-01-31')
main.estimate_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.estimate_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view estimate as it was after a run: estimate_at_run(41)
main.exp_ou
  CREATE VIEW exp_ou AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.exp_ou_rows AS x WHERE (x.run_to IS NULL);
  -- d ln X = kappa (theta - ln X) dt + sigma dW: estimates in force, one row per fit
main.exp_ou.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
main.exp_ou.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
main.exp_ou.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
main.exp_ou.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
main.exp_ou.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
main.exp_ou.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
main.exp_ou.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.exp_ou.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
main.exp_ou.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
main.exp_ou.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.exp_ou.kurtosis
  DOUBLE
  -- Fourth moment of the residuals over the squared second: 3 for a Gaussian. [1]
main.exp_ou.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.exp_ou.long_run_median
  DOUBLE
  -- Level that the value is pulled to: its median in the long run, of the value plus the series' shift. [x]
main.exp_ou.lookback
  INTEGER
  -- steps in the window; 0: all
main.exp_ou.n
  INTEGER
  -- steps used
main.exp_ou.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
main.exp_ou.revision
  INTEGER
  -- revision of the model that computed the row
main.exp_ou.run_id
  INTEGER
  -- run that wrote the row
main.exp_ou.series
  VARCHAR
  -- name of the series
main.exp_ou.sigma
  DOUBLE
  -- Volatility, as a share of the value. [1/√t]
main.exp_ou.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
main.exp_ou.sigma_se
  DOUBLE
  -- Standard error of sigma. [1/√t]
main.exp_ou.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
main.exp_ou.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none, of the logarithm. [1]
main.exp_ou.status
  VARCHAR
  -- what became of the fit, in a word
main.exp_ou.theta
  DOUBLE
  -- Logarithm of the median in the long run. [1]
main.exp_ou.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [1]
main.exp_ou.theta_se
  DOUBLE
  -- Standard error of theta. [1]
main.exp_ou.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [1]
main.exp_ou.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.exp_ou.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.exp_ou_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.exp_ou_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view exp_ou as it was known at a moment: exp_ou_as_of('2026-01-31')
main.exp_ou_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.exp_ou_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view exp_ou as it was after a run: exp_ou_at_run(41)
main.fit
  CREATE VIEW fit AS SELECT y.series, y.lookback, y.window_start, y.window_end, y.model, y.n, y.k, y.loglik, y.aic, y.bic, (y.ratio / sum(y.ratio) OVER (PARTITION BY y.series, y.lookback, y.window_end ORDER BY y.model ROWS BETWEEN UNBOUNDED PRECEDING AND UNBOUNDED FOLLOWING)) AS model_weight, y.models_compared, y.status, y.run_id FROM (SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id, CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (exp((-0.5 * (x.bic - min(CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (x.bic) ELSE NULL END) OVER (PARTITION BY x.series, x.lookback, x.window_end))))) ELSE NULL END AS ratio, count(CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (1) ELSE NULL END) OVER (PARTITION BY x.series, x.lookback, x.window_end) AS models_compared FROM base.fit_rows AS x WHERE (x.run_to IS NULL)) AS y;
  -- all models: one row per fit, with what compares models
main.fit.aic
  DOUBLE
  -- 2 k - 2 loglik [1]
main.fit.bic
  DOUBLE
  -- k ln n - 2 loglik [1]
main.fit.k
  INTEGER
  -- parameters of the model
main.fit.loglik
  DOUBLE
  -- log-likelihood of the observations after the first, given the first [1]
main.fit.lookback
  INTEGER
  -- steps in the window; 0: all
main.fit.model
  VARCHAR
  -- name of the model
main.fit.model_weight
  DOUBLE
  -- exp(-bic/2), normalised over the usable models of the window; describes fit, no probability [1]
main.fit.models_compared
  BIGINT
  -- usable models of the window
main.fit.n
  INTEGER
  -- steps used
main.fit.run_id
  INTEGER
  -- run that wrote the row
main.fit.series
  VARCHAR
  -- name of the series
main.fit.status
  VARCHAR
  -- what became of the fit, in a word
main.fit.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.fit.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.fit_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT y.series, y.lookback, y.window_start, y.window_end, y.model, y.n, y.k, y.loglik, y.aic, y.bic, (y.ratio / sum(y.ratio) OVER (PARTITION BY y.series, y.lookback, y.window_end ORDER BY y.model ROWS BETWEEN UNBOUNDED PRECEDING AND UNBOUNDED FOLLOWING)) AS model_weight, y.models_compared, y.status, y.run_id FROM (SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id, CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (exp((-0.5 * (x.bic - min(CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (x.bic) ELSE NULL END) OVER (PARTITION BY x.series, x.lookback, x.window_end))))) ELSE NULL END AS ratio, count(CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (1) ELSE NULL END) OVER (PARTITION BY x.series, x.lookback, x.window_end) AS models_compared FROM base.fit_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))) AS y
  -- the view fit as it was known at a moment: fit_as_of('2026-01-31')
main.fit_at_run
  macro (run) SELECT y.series, y.lookback, y.window_start, y.window_end, y.model, y.n, y.k, y.loglik, y.aic, y.bic, (y.ratio / sum(y.ratio) OVER (PARTITION BY y.series, y.lookback, y.window_end ORDER BY y.model ROWS BETWEEN UNBOUNDED PRECEDING AND UNBOUNDED FOLLOWING)) AS model_weight, y.models_compared, y.status, y.run_id FROM (SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id, CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (exp((-0.5 * (x.bic - min(CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (x.bic) ELSE NULL END) OVER (PARTITION BY x.series, x.lookback, x.window_end))))) ELSE NULL END AS ratio, count(CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN (1) ELSE NULL END) OVER (PARTITION BY x.series, x.lookback, x.window_end) AS models_compared FROM base.fit_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))) AS y
  -- the view fit as it was after a run: fit_at_run(41)
main.gbm
  CREATE VIEW gbm AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.gbm_rows AS x WHERE (x.run_to IS NULL);
  -- dX = mu X dt + sigma X dW: estimates in force, one row per fit
main.gbm.kurtosis
  DOUBLE
  -- Fourth moment of the standardised log-increments over the squared second: 3 for a Gaussian. [1]
main.gbm.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.gbm.lookback
  INTEGER
  -- steps in the window; 0: all
main.gbm.mu
  DOUBLE
  -- Drift: expected change per unit of time, as a share of the value. [1/t]
main.gbm.mu_lower
  DOUBLE
  -- Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]
main.gbm.mu_se
  DOUBLE
  -- Standard error of mu. [1/t]
main.gbm.mu_upper
  DOUBLE
  -- Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]
main.gbm.n
  INTEGER
  -- steps used
main.gbm.revision
  INTEGER
  -- revision of the model that computed the row
main.gbm.run_id
  INTEGER
  -- run that wrote the row
main.gbm.series
  VARCHAR
  -- name of the series
main.gbm.sigma
  DOUBLE
  -- Volatility, as a share of the value. [1/√t]
main.gbm.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
main.gbm.sigma_se
  DOUBLE
  -- Standard error of sigma. [1/√t]
main.gbm.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
main.gbm.status
  VARCHAR
  -- what became of the fit, in a word
main.gbm.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.gbm.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.gbm_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.gbm_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view gbm as it was known at a moment: gbm_as_of('2026-01-31')
main.gbm_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.gbm_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view gbm as it was after a run: gbm_at_run(41)
main.gbm_closed_form
  macro (name, lookback) WITH logs AS (SELECT q.observed_at, q.periods_per_year, CASE  WHEN ((q."value" > 0)) THEN (ln(q."value")) ELSE NULL END AS y FROM base.steps_of("name") AS q), steps AS (SELECT l.observed_at, l.periods_per_year, l.y, (l.y - lag(l.y) OVER (ORDER BY l.observed_at)) AS d, lag(l.observed_at, lookback) OVER (ORDER BY l.observed_at) AS window_start FROM logs AS l), moments AS (SELECT p.window_start, p.observed_at AS window_end, p.periods_per_year, count(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS n, avg(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS mean_step, var_pop(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS variance, avg(p.y) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS mean_log FROM steps AS p) SELECT m.window_start, m.window_end, m.n, ((m.mean_step + (m.variance / 2)) * m.periods_per_year) AS mu, sqrt((m.variance * m.periods_per_year)) AS sigma, (((-0.5 * m.n) * (ln(((2 * pi()) * m.variance)) + 1)) - (m.n * m.mean_log)) AS loglik FROM moments AS m WHERE ((m.n = lookback) AND (m.window_start IS NOT NULL) AND (m.variance > 0)) ORDER BY m.window_end
  -- gbm on every window of a series, in SQL alone: gbm_closed_form('pellets_fob', 250)
main.inertial
  CREATE VIEW inertial AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.inertial_rows AS x WHERE (x.run_to IS NULL);
  -- dX = V dt, dV = -damping V dt - omega^2 (X - theta) dt + eta dW: estimates in force, one row per fit
main.inertial.damping
  DOUBLE
  -- Rate at which the velocity is lost. [1/t]
main.inertial.damping_lower
  DOUBLE
  -- Lower end of the 95 % interval of damping; empty: no end on this side. [1/t]
main.inertial.damping_ratio
  DOUBLE
  -- Damping over the least that keeps it from swinging, 2 omega: below 1 it swings. [1]
main.inertial.damping_se
  DOUBLE
  -- Standard error of damping. [1/t]
main.inertial.damping_upper
  DOUBLE
  -- Upper end of the 95 % interval of damping; empty: no end on this side. [1/t]
main.inertial.eta
  DOUBLE
  -- Volatility of the noise that drives the velocity. [x/t√t]
main.inertial.eta_lower
  DOUBLE
  -- Lower end of the 95 % interval of eta; empty: no end on this side. [x/t√t]
main.inertial.eta_se
  DOUBLE
  -- Standard error of eta. [x/t√t]
main.inertial.eta_upper
  DOUBLE
  -- Upper end of the 95 % interval of eta; empty: no end on this side. [x/t√t]
main.inertial.fitted_on
  VARCHAR
  -- level or log: whether the fit is to the value, or to the logarithm of the value plus the series' shift, which is what x then means in units; log for series of prices. [1]
main.inertial.kappa_s
  DOUBLE
  -- omega²/damping: speed of the pull, as of an Ornstein–Uhlenbeck process. [1/t]
main.inertial.kappa_s_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]
main.inertial.kappa_s_se
  DOUBLE
  -- Standard error of kappa_s. [1/t]
main.inertial.kappa_s_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]
main.inertial.kurtosis
  DOUBLE
  -- Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]
main.inertial.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.inertial.lookback
  INTEGER
  -- steps in the window; 0: all
main.inertial.n
  INTEGER
  -- steps used
main.inertial.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
main.inertial.omega
  DOUBLE
  -- Frequency of the swing without damping, in radians; its square is the force's slope. [1/t]
main.inertial.omega_lower
  DOUBLE
  -- Lower end of the 95 % interval of omega; empty: no end on this side. [1/t]
main.inertial.omega_se
  DOUBLE
  -- Standard error of omega. [1/t]
main.inertial.omega_upper
  DOUBLE
  -- Upper end of the 95 % interval of omega; empty: no end on this side. [1/t]
main.inertial.period
  DOUBLE
  -- Length of a swing; empty where damping keeps it from swinging. [t]
main.inertial.revision
  INTEGER
  -- revision of the model that computed the row
main.inertial.run_id
  INTEGER
  -- run that wrote the row
main.inertial.series
  VARCHAR
  -- name of the series
main.inertial.sigma_s
  DOUBLE
  -- eta/damping: volatility over times long against 1/damping. [x/√t]
main.inertial.sigma_s_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]
main.inertial.sigma_s_se
  DOUBLE
  -- Standard error of sigma_s. [x/√t]
main.inertial.sigma_s_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]
main.inertial.status
  VARCHAR
  -- what became of the fit, in a word
main.inertial.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
main.inertial.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
main.inertial.theta_se
  DOUBLE
  -- Standard error of theta. [x]
main.inertial.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
main.inertial.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.inertial.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.inertial_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.inertial_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view inertial as it was known at a moment: inertial_as_of('2026-01-31')
main.inertial_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.inertial_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view inertial as it was after a run: inertial_at_run(41)
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
main.latest
  CREATE VIEW latest AS SELECT s.series, t.unit, l.observed_at, l."value", ((epoch_us(now()) - epoch_us(l.observed_at)) > (t.stale_after_days * 86400000000)) AS stale, l.lookback, l.window_end, l.model, l.model_weight, l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, CAST(NULL AS DOUBLE) AS realised_volatility, l.drift, l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero, CAST(NULL AS BIGINT) AS wells, CAST(NULL AS DOUBLE) AS mean_exit_time_days, CAST(NULL AS VARCHAR) AS backtest_zone, CAST(NULL AS BIGINT) AS alarms, l.note, l.run_from AS run_id FROM base.latest AS l INNER JOIN base.series AS s ON ((s.series_id = l.series_id)) INNER JOIN base.setting AS t ON (((t.series_id = l.series_id) AND (t.run_to IS NULL))) WHERE (l.run_to IS NULL);
  -- what the book says of each series now, by the model in force
main.latest.alarms
  BIGINT
  -- not raised yet
main.latest.backtest_zone
  VARCHAR
  -- not estimated yet
main.latest.can_reach_zero
  BOOLEAN
  -- whether the series can reach zero under the model in force; NULL: not told, or not a series of prices
main.latest.drift
  DOUBLE
  -- expected change at the latest value: a fraction of it for positive series, else in units, per year or second
main.latest.half_life_days
  DOUBLE
  -- time in which a distance to the mean halves, by the model in force or the heaviest with a pull [calendar days]
main.latest.half_life_days_lower
  DOUBLE
  -- lower end of its 95 % interval; NULL: no end on this side [calendar days]
main.latest.half_life_days_upper
  DOUBLE
  -- upper end of its 95 % interval; NULL: no end on this side [calendar days]
main.latest.half_life_unbounded
  BOOLEAN
  -- whether the data leave the half-life without an upper end
main.latest.lookback
  INTEGER
  -- steps in the window that is spoken of; 0: all
main.latest.mean_exit_time_days
  DOUBLE
  -- not estimated yet
main.latest.model
  VARCHAR
  -- model in force
main.latest.model_weight
  DOUBLE
  -- its weight among the usable models of the window [1]
main.latest.note
  VARCHAR
  -- what needs a look, in words; empty: nothing
main.latest.observed_at
  TIMESTAMP
  -- time of the latest observation, UTC
main.latest.realised_volatility
  DOUBLE
  -- not estimated yet
main.latest.run_id
  INTEGER
  -- run that wrote the row
main.latest.series
  VARCHAR
  -- name of the series
main.latest.stale
  BOOLEAN
  -- whether it is older than stale_after_days, judged when read
main.latest.unit
  VARCHAR
  -- unit of the values
main.latest.value
  DOUBLE
  -- its value, in the unit of the series
main.latest.volatility
  DOUBLE
  -- total volatility at the latest value, in volatility_unit
main.latest.volatility_lower
  DOUBLE
  -- lower end of its 95 % interval; NULL: no end on this side
main.latest.volatility_unit
  VARCHAR
  -- unit of volatility: 1/√year is a fraction of the value per square root of a year
main.latest.volatility_upper
  DOUBLE
  -- upper end of its 95 % interval; NULL: no end on this side
main.latest.wells
  BIGINT
  -- not estimated yet
main.latest.window_end
  TIMESTAMP
  -- last observation of that window, UTC
main.latest_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT s.series, t.unit, l.observed_at, l."value", ((base.moment_us(moment) - epoch_us(l.observed_at)) > (t.stale_after_days * 86400000000)) AS stale, l.lookback, l.window_end, l.model, l.model_weight, l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, CAST(NULL AS DOUBLE) AS realised_volatility, l.drift, l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero, CAST(NULL AS BIGINT) AS wells, CAST(NULL AS DOUBLE) AS mean_exit_time_days, CAST(NULL AS VARCHAR) AS backtest_zone, CAST(NULL AS BIGINT) AS alarms, l.note, l.run_from AS run_id FROM base.latest AS l INNER JOIN base.series AS s ON ((s.series_id = l.series_id)) INNER JOIN base.setting AS t ON (((t.series_id = l.series_id) AND (t.run_from <= (SELECT k.run_id FROM k)) AND ((t.run_to IS NULL) OR (t.run_to > (SELECT k.run_id FROM k))))) WHERE ((l.run_from <= (SELECT k.run_id FROM k)) AND ((l.run_to IS NULL) OR (l.run_to > (SELECT k.run_id FROM k))))
  -- the view latest as it was known at a moment: latest_as_of('2026-01-31')
main.latest_at_run
  macro (run) SELECT s.series, t.unit, l.observed_at, l."value", (((SELECT epoch_us(r.moment) FROM base.run AS r WHERE (r.run_id = run)) - epoch_us(l.observed_at)) > (t.stale_after_days * 86400000000)) AS stale, l.lookback, l.window_end, l.model, l.model_weight, l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, CAST(NULL AS DOUBLE) AS realised_volatility, l.drift, l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero, CAST(NULL AS BIGINT) AS wells, CAST(NULL AS DOUBLE) AS mean_exit_time_days, CAST(NULL AS VARCHAR) AS backtest_zone, CAST(NULL AS BIGINT) AS alarms, l.note, l.run_from AS run_id FROM base.latest AS l INNER JOIN base.series AS s ON ((s.series_id = l.series_id)) INNER JOIN base.setting AS t ON (((t.series_id = l.series_id) AND (t.run_from <= run) AND ((t.run_to IS NULL) OR (t.run_to > run)))) WHERE ((l.run_from <= run) AND ((l.run_to IS NULL) OR (l.run_to > run)))
  -- the view latest as it was after a run: latest_at_run(41)
main.merton
  CREATE VIEW merton AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.merton_rows AS x WHERE (x.run_to IS NULL);
  -- dX = (mu - jump_rate E[e^J - 1]) X dt + sigma X dW + (e^J - 1) X dN, J normal: estimates in force, one row per fit
main.merton.jump_mean
  DOUBLE
  -- Mean of a jump of the logarithm. [1]
main.merton.jump_mean_lower
  DOUBLE
  -- Lower end of the 95 % interval of jump_mean; empty: no end on this side. [1]
main.merton.jump_mean_se
  DOUBLE
  -- Standard error of jump_mean. [1]
main.merton.jump_mean_upper
  DOUBLE
  -- Upper end of the 95 % interval of jump_mean; empty: no end on this side. [1]
main.merton.jump_probability
  DOUBLE
  -- Probability that the latest step held a jump, given the fit. [1]
main.merton.jump_rate
  DOUBLE
  -- Expected number of jumps per unit of time. [1/t]
main.merton.jump_rate_lower
  DOUBLE
  -- Lower end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]
main.merton.jump_rate_se
  DOUBLE
  -- Standard error of jump_rate. [1/t]
main.merton.jump_rate_upper
  DOUBLE
  -- Upper end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]
main.merton.jump_sd
  DOUBLE
  -- Standard deviation of a jump of the logarithm. [1]
main.merton.jump_sd_lower
  DOUBLE
  -- Lower end of the 95 % interval of jump_sd; empty: no end on this side. [1]
main.merton.jump_sd_se
  DOUBLE
  -- Standard error of jump_sd. [1]
main.merton.jump_sd_upper
  DOUBLE
  -- Upper end of the 95 % interval of jump_sd; empty: no end on this side. [1]
main.merton.kurtosis
  DOUBLE
  -- Fourth moment of the increments of the logarithm over the squared second: 3 for a Gaussian. [1]
main.merton.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.merton.lookback
  INTEGER
  -- steps in the window; 0: all
main.merton.mu
  DOUBLE
  -- Drift: expected relative change per unit of time, jumps included. [1/t]
main.merton.mu_lower
  DOUBLE
  -- Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]
main.merton.mu_se
  DOUBLE
  -- Standard error of mu. [1/t]
main.merton.mu_upper
  DOUBLE
  -- Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]
main.merton.n
  INTEGER
  -- steps used
main.merton.revision
  INTEGER
  -- revision of the model that computed the row
main.merton.run_id
  INTEGER
  -- run that wrote the row
main.merton.series
  VARCHAR
  -- name of the series
main.merton.sigma
  DOUBLE
  -- Volatility between jumps. [1/√t]
main.merton.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
main.merton.sigma_se
  DOUBLE
  -- Standard error of sigma. [1/√t]
main.merton.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
main.merton.status
  VARCHAR
  -- what became of the fit, in a word
main.merton.total_volatility
  DOUBLE
  -- Volatility with jumps: √(sigma² + jump_rate (jump_mean² + jump_sd²)). [1/√t]
main.merton.total_volatility_lower
  DOUBLE
  -- Lower end of the 95 % interval of total_volatility. [1/√t]
main.merton.total_volatility_upper
  DOUBLE
  -- Upper end of the 95 % interval of total_volatility. [1/√t]
main.merton.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.merton.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.merton_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.merton_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view merton as it was known at a moment: merton_as_of('2026-01-31')
main.merton_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.merton_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view merton as it was after a run: merton_at_run(41)
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
main.ou_closed_form
  macro (name, lookback) WITH steps AS (SELECT q.observed_at, q.periods_per_year, q.origin, lag(q.x) OVER (ORDER BY q.observed_at) AS "level", (q.x - lag(q.x) OVER (ORDER BY q.observed_at)) AS d, lag(q.observed_at, lookback) OVER (ORDER BY q.observed_at) AS window_start FROM base.steps_of("name") AS q), moments AS (SELECT p.window_start, p.observed_at AS window_end, p.periods_per_year, p.origin, count(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS n, avg(p."level") OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS mean_level, avg(p.d) OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS mean_step, regr_sxx(p.d, p."level") OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS spread, regr_syy(p.d, p."level") OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS total, regr_sxy(p.d, p."level") OVER (ORDER BY p.observed_at ROWS BETWEEN (lookback - 1) PRECEDING AND CURRENT ROW) AS joint FROM steps AS p WHERE (p.d IS NOT NULL)), slopes AS (SELECT m.*, (m.joint / m.spread) AS beta, ((m.total - ((m.joint * m.joint) / m.spread)) / m.n) AS residual FROM moments AS m WHERE ((m.n = lookback) AND (m.window_start IS NOT NULL) AND (m.spread > 0))) SELECT f.window_start, f.window_end, f.n, ((-(ln((1 + f.beta)))) * f.periods_per_year) AS kappa, ((f.origin + f.mean_level) - (f.mean_step / f.beta)) AS theta, sqrt(((((f.residual * f.periods_per_year) * 2) * ln((1 + f.beta))) / (f.beta * (2 + f.beta)))) AS sigma, ((-0.5 * f.n) * (ln(((2 * pi()) * f.residual)) + 1)) AS loglik FROM slopes AS f WHERE ((f.beta > -1) AND (f.beta != 0) AND (f.residual > 0)) ORDER BY f.window_end
  -- ou on every window of a series, in SQL alone: ou_closed_form('pellets_fob', 250)
main.ou_noise
  CREATE VIEW ou_noise AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ou_noise_rows AS x WHERE (x.run_to IS NULL);
  -- Y = X + noise * epsilon, dX = kappa (theta - X) dt + sigma dW: estimates in force, one row per fit
main.ou_noise.fitted_on
  VARCHAR
  -- level or log: whether the fit is to the value, or to the logarithm of the value plus the series' shift, which is what x then means in units; log for series of prices. [1]
main.ou_noise.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
main.ou_noise.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
main.ou_noise.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
main.ou_noise.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
main.ou_noise.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
main.ou_noise.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
main.ou_noise.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.ou_noise.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
main.ou_noise.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
main.ou_noise.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
main.ou_noise.kurtosis
  DOUBLE
  -- Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]
main.ou_noise.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.ou_noise.lookback
  INTEGER
  -- steps in the window; 0: all
main.ou_noise.n
  INTEGER
  -- steps used
main.ou_noise.no_noise_p
  DOUBLE
  -- One-sided p-value of no noise, by half a χ² law, which in windows of 250 steps is 4 where it says 5 %. [1]
main.ou_noise.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
main.ou_noise.noise
  DOUBLE
  -- Standard deviation of the noise in each observation; 0: none is seen. [x]
main.ou_noise.noise_lower
  DOUBLE
  -- Lower end of the 95 % interval of noise; empty: no end on this side. [x]
main.ou_noise.noise_se
  DOUBLE
  -- Standard error of noise. [x]
main.ou_noise.noise_share
  DOUBLE
  -- Share of the noise in the variance of a mean step's increment, 2 noise² over 2 noise² plus that of X in the stationary law; above 0.1 no_reversion_p of ou is not to be trusted. [1]
main.ou_noise.noise_upper
  DOUBLE
  -- Upper end of the 95 % interval of noise; empty: no end on this side. [x]
main.ou_noise.revision
  INTEGER
  -- revision of the model that computed the row
main.ou_noise.run_id
  INTEGER
  -- run that wrote the row
main.ou_noise.series
  VARCHAR
  -- name of the series
main.ou_noise.sigma
  DOUBLE
  -- Volatility of the driving noise. [x/√t]
main.ou_noise.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.ou_noise.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
main.ou_noise.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.ou_noise.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none. [x]
main.ou_noise.status
  VARCHAR
  -- what became of the fit, in a word
main.ou_noise.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
main.ou_noise.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
main.ou_noise.theta_se
  DOUBLE
  -- Standard error of theta. [x]
main.ou_noise.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
main.ou_noise.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.ou_noise.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.ou_noise_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ou_noise_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view ou_noise as it was known at a moment: ou_noise_as_of('2026-01-31')
main.ou_noise_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.ou_noise_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view ou_noise as it was after a run: ou_noise_at_run(41)
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
main.quartic
  CREATE VIEW quartic AS SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.quartic_rows AS x WHERE (x.run_to IS NULL);
  -- dX = (a0 + a1 z + a2 z² + a3 z³) dt + sigma dW, z = (X - centre)/scale: estimates in force, one row per fit
main.quartic.a0
  DOUBLE
  -- Drift at the centre. [x/t]
main.quartic.a0_lower
  DOUBLE
  -- Lower end of the 95 % interval of a0; empty: no end on this side. [x/t]
main.quartic.a0_se
  DOUBLE
  -- Standard error of a0. [x/t]
main.quartic.a0_upper
  DOUBLE
  -- Upper end of the 95 % interval of a0; empty: no end on this side. [x/t]
main.quartic.a1
  DOUBLE
  -- Coefficient of z in the drift, z = (x - centre)/scale. [x/t]
main.quartic.a1_lower
  DOUBLE
  -- Lower end of the 95 % interval of a1; empty: no end on this side. [x/t]
main.quartic.a1_se
  DOUBLE
  -- Standard error of a1. [x/t]
main.quartic.a1_upper
  DOUBLE
  -- Upper end of the 95 % interval of a1; empty: no end on this side. [x/t]
main.quartic.a2
  DOUBLE
  -- Coefficient of z² in the drift. [x/t]
main.quartic.a2_lower
  DOUBLE
  -- Lower end of the 95 % interval of a2; empty: no end on this side. [x/t]
main.quartic.a2_se
  DOUBLE
  -- Standard error of a2. [x/t]
main.quartic.a2_upper
  DOUBLE
  -- Upper end of the 95 % interval of a2; empty: no end on this side. [x/t]
main.quartic.a3
  DOUBLE
  -- Coefficient of z³ in the drift: not negative, the drift does not confine. [x/t]
main.quartic.a3_lower
  DOUBLE
  -- Lower end of the 95 % interval of a3; empty: no end on this side. [x/t]
main.quartic.a3_se
  DOUBLE
  -- Standard error of a3. [x/t]
main.quartic.a3_upper
  DOUBLE
  -- Upper end of the 95 % interval of a3; empty: no end on this side. [x/t]
main.quartic.barrier
  DOUBLE
  -- Top of the barrier between two wells; empty where there are no two. [x]
main.quartic.barrier_lower
  DOUBLE
  -- Lower end of the 95 % interval of barrier; empty: no end on this side. [x]
main.quartic.barrier_se
  DOUBLE
  -- Standard error of barrier. [x]
main.quartic.barrier_upper
  DOUBLE
  -- Upper end of the 95 % interval of barrier; empty: no end on this side. [x]
main.quartic.bottom_lower
  DOUBLE
  -- Lower resting point: the bottom of the lower of two wells; empty where there are no two. [x]
main.quartic.bottom_lower_lower
  DOUBLE
  -- Lower end of the 95 % interval of bottom_lower; empty: no end on this side. [x]
main.quartic.bottom_lower_se
  DOUBLE
  -- Standard error of bottom_lower. [x]
main.quartic.bottom_lower_upper
  DOUBLE
  -- Upper end of the 95 % interval of bottom_lower; empty: no end on this side. [x]
main.quartic.bottom_upper
  DOUBLE
  -- Upper resting point: the bottom of the upper of two wells; empty where there are no two. [x]
main.quartic.bottom_upper_lower
  DOUBLE
  -- Lower end of the 95 % interval of bottom_upper; empty: no end on this side. [x]
main.quartic.bottom_upper_se
  DOUBLE
  -- Standard error of bottom_upper. [x]
main.quartic.bottom_upper_upper
  DOUBLE
  -- Upper end of the 95 % interval of bottom_upper; empty: no end on this side. [x]
main.quartic.centre
  DOUBLE
  -- Where z = 0; a setting of the series and lookback. [x]
main.quartic.kurtosis
  DOUBLE
  -- Fourth moment of movements over their squared second: 3 for a Gaussian. [1]
main.quartic.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
main.quartic.lookback
  INTEGER
  -- steps in the window; 0: all
main.quartic.n
  INTEGER
  -- steps used
main.quartic.revision
  INTEGER
  -- revision of the model that computed the row
main.quartic.run_id
  INTEGER
  -- run that wrote the row
main.quartic.scale
  DOUBLE
  -- Length of z = 1; a setting of the series and lookback. [x]
main.quartic.series
  VARCHAR
  -- name of the series
main.quartic.sigma
  DOUBLE
  -- Volatility. [x/√t]
main.quartic.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.quartic.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
main.quartic.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
main.quartic.status
  VARCHAR
  -- what became of the fit, in a word
main.quartic.steepest
  DOUBLE
  -- Largest |slope of the drift| times the longest step, over the window's range. [1]
main.quartic.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
main.quartic.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
main.quartic_as_of
  macro (moment) WITH k AS (SELECT base.run_at(base.moment_us(moment)) AS run_id) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.quartic_rows AS x WHERE ((x.run_from <= (SELECT k.run_id FROM k)) AND ((x.run_to IS NULL) OR (x.run_to > (SELECT k.run_id FROM k))))
  -- the view quartic as it was known at a moment: quartic_as_of('2026-01-31')
main.quartic_at_run
  macro (run) SELECT x.* EXCLUDE (run_from, run_to), x.run_from AS run_id FROM base.quartic_rows AS x WHERE ((x.run_from <= run) AND ((x.run_to IS NULL) OR (x.run_to > run)))
  -- the view quartic as it was after a run: quartic_at_run(41)
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
  -- how time between observations is counted: trading, act365 or seconds
main.series.in_force
  VARCHAR
  -- best, or the model that is always in force
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
main.series.shift
  DOUBLE
  -- what models for X > 0 add to the values, in the unit of the series
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
main.versions_of
  macro (name, model, lookback, window_end) SELECT v.* FROM versions.estimate AS v WHERE ((v.series = "name") AND (v.model = model) AND (v.lookback = lookback) AND (v.window_end <= make_timestamp(base.moment_us(window_end))) AND (v.window_end >= make_timestamp((base.moment_us(window_end) - CASE  WHEN (regexp_full_match("trim"(CAST(window_end AS VARCHAR)), '\d{4}-\d{2}-\d{2}')) THEN (86399999999) ELSE 0 END)))) ORDER BY v.window_end, v.parameter, v.run_from
  -- every version of one window's estimates: versions_of('pellets_fob', 'ou', 250, '2026-06-29')
versions.abm
  CREATE VIEW versions.abm AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.abm_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = mu dt + sigma dW: every version of every estimate
versions.abm.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.abm.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.abm.kurtosis
  DOUBLE
  -- Fourth moment of the standardised increments over the squared second: 3 for a Gaussian. [1]
versions.abm.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.abm.lookback
  INTEGER
  -- steps in the window; 0: all
versions.abm.mu
  DOUBLE
  -- Drift: expected change per unit of time. [x/t]
versions.abm.mu_lower
  DOUBLE
  -- Lower end of the 95 % interval of mu; empty: no end on this side. [x/t]
versions.abm.mu_se
  DOUBLE
  -- Standard error of mu. [x/t]
versions.abm.mu_upper
  DOUBLE
  -- Upper end of the 95 % interval of mu; empty: no end on this side. [x/t]
versions.abm.n
  INTEGER
  -- steps used
versions.abm.revision
  INTEGER
  -- revision of the model that computed the row
versions.abm.run_from
  INTEGER
  -- run from which the row is in force
versions.abm.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.abm.series
  VARCHAR
  -- name of the series
versions.abm.sigma
  DOUBLE
  -- Volatility. [x/√t]
versions.abm.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.abm.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
versions.abm.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.abm.status
  VARCHAR
  -- what became of the fit, in a word
versions.abm.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.abm.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.cir
  CREATE VIEW versions.cir AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.cir_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = kappa (theta - X) dt + sigma sqrt(X) dW, kappa theta > 0: every version of every estimate
versions.cir.can_reach_zero
  BOOLEAN
  -- Whether paths reach zero; empty where the interval of feller_ratio holds 1. [1]
versions.cir.feller_ratio
  DOUBLE
  -- 2 kappa theta / sigma²: paths reach zero where it is below 1. Biased upwards, as kappa is. [1]
versions.cir.feller_ratio_lower
  DOUBLE
  -- Lower end of the 95 % interval of feller_ratio. [1]
versions.cir.feller_ratio_upper
  DOUBLE
  -- Upper end of the 95 % interval of feller_ratio; empty: no end on this side. [1]
versions.cir.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
versions.cir.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.cir.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
versions.cir.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
versions.cir.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.cir.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.cir.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.cir.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
versions.cir.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.cir.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
versions.cir.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
versions.cir.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.cir.kurtosis
  DOUBLE
  -- Fourth moment of the residuals of √x over the squared second: about 3 for this model. [1]
versions.cir.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.cir.lookback
  INTEGER
  -- steps in the window; 0: all
versions.cir.n
  INTEGER
  -- steps used
versions.cir.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
versions.cir.revision
  INTEGER
  -- revision of the model that computed the row
versions.cir.run_from
  INTEGER
  -- run from which the row is in force
versions.cir.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.cir.series
  VARCHAR
  -- name of the series
versions.cir.sigma
  DOUBLE
  -- Volatility of the driving noise: times √x it is that of the series. [√x/√t]
versions.cir.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]
versions.cir.sigma_se
  DOUBLE
  -- Standard error of sigma. [√x/√t]
versions.cir.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [√x/√t]
versions.cir.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none. [x]
versions.cir.status
  VARCHAR
  -- what became of the fit, in a word
versions.cir.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
versions.cir.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
versions.cir.theta_se
  DOUBLE
  -- Standard error of theta. [x]
versions.cir.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
versions.cir.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.cir.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.ckls
  CREATE VIEW versions.ckls AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.ckls_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = kappa (theta - X) dt + sigma X^gamma dW: every version of every estimate
versions.ckls.can_reach_zero
  BOOLEAN
  -- Whether paths reach zero; empty where the interval of gamma holds a half, or kappa theta is not positive. [1]
versions.ckls.gamma
  DOUBLE
  -- Power of the level in the volatility; between -1 and 2.5. [1]
versions.ckls.gamma_lower
  DOUBLE
  -- Lower end of the 95 % interval of gamma; empty: no end on this side. [1]
versions.ckls.gamma_se
  DOUBLE
  -- Standard error of gamma. [1]
versions.ckls.gamma_upper
  DOUBLE
  -- Upper end of the 95 % interval of gamma; empty: no end on this side. [1]
versions.ckls.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
versions.ckls.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.ckls.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
versions.ckls.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
versions.ckls.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.ckls.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.ckls.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.ckls.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
versions.ckls.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.ckls.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
versions.ckls.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
versions.ckls.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.ckls.kurtosis
  DOUBLE
  -- Fourth moment of movements in the coordinate of unit volatility over the squared second. [1]
versions.ckls.local_volatility
  DOUBLE
  -- Volatility at the geometric mean of the window: sigma times its power gamma. [x/√t]
versions.ckls.local_volatility_lower
  DOUBLE
  -- Lower end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]
versions.ckls.local_volatility_se
  DOUBLE
  -- Standard error of local_volatility. [x/√t]
versions.ckls.local_volatility_upper
  DOUBLE
  -- Upper end of the 95 % interval of local_volatility; empty: no end on this side. [x/√t]
versions.ckls.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.ckls.lookback
  INTEGER
  -- steps in the window; 0: all
versions.ckls.n
  INTEGER
  -- steps used
versions.ckls.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
versions.ckls.revision
  INTEGER
  -- revision of the model that computed the row
versions.ckls.run_from
  INTEGER
  -- run from which the row is in force
versions.ckls.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.ckls.series
  VARCHAR
  -- name of the series
versions.ckls.sigma
  DOUBLE
  -- Volatility of the driving noise: times x^gamma it is that of the series. [x^(1-gamma)/√t]
versions.ckls.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]
versions.ckls.sigma_se
  DOUBLE
  -- Standard error of sigma. [x^(1-gamma)/√t]
versions.ckls.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x^(1-gamma)/√t]
versions.ckls.status
  VARCHAR
  -- what became of the fit, in a word
versions.ckls.theta
  DOUBLE
  -- Level that the drift pulls to; the stationary mean where gamma is 1 or less. [x]
versions.ckls.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
versions.ckls.theta_se
  DOUBLE
  -- Standard error of theta. [x]
versions.ckls.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
versions.ckls.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.ckls.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.estimate
  CREATE VIEW versions.estimate AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.estimate_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- every version of estimate
versions.estimate.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.estimate.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.estimate.lookback
  INTEGER
  -- steps in the window; 0: all
versions.estimate.lower
  DOUBLE
  -- lower end of the 95 % interval; NULL with status ok or no_reversion: no end on this side
versions.estimate.model
  VARCHAR
  -- name of the model
versions.estimate.parameter
  VARCHAR
  -- name of the parameter
versions.estimate.run_from
  INTEGER
  -- run from which the row is in force
versions.estimate.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.estimate.se
  DOUBLE
  -- standard error
versions.estimate.series
  VARCHAR
  -- name of the series
versions.estimate.status
  VARCHAR
  -- what became of the fit, in a word
versions.estimate.upper
  DOUBLE
  -- upper end of the 95 % interval; NULL with status ok or no_reversion: no end on this side
versions.estimate.value
  DOUBLE
  -- estimate, in the parameter's unit
versions.estimate.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.exp_ou
  CREATE VIEW versions.exp_ou AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.exp_ou_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- d ln X = kappa (theta - ln X) dt + sigma dW: every version of every estimate
versions.exp_ou.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
versions.exp_ou.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.exp_ou.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
versions.exp_ou.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
versions.exp_ou.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.exp_ou.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.exp_ou.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.exp_ou.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
versions.exp_ou.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.exp_ou.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
versions.exp_ou.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
versions.exp_ou.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.exp_ou.kurtosis
  DOUBLE
  -- Fourth moment of the residuals over the squared second: 3 for a Gaussian. [1]
versions.exp_ou.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.exp_ou.long_run_median
  DOUBLE
  -- Level that the value is pulled to: its median in the long run, of the value plus the series' shift. [x]
versions.exp_ou.lookback
  INTEGER
  -- steps in the window; 0: all
versions.exp_ou.n
  INTEGER
  -- steps used
versions.exp_ou.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
versions.exp_ou.revision
  INTEGER
  -- revision of the model that computed the row
versions.exp_ou.run_from
  INTEGER
  -- run from which the row is in force
versions.exp_ou.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.exp_ou.series
  VARCHAR
  -- name of the series
versions.exp_ou.sigma
  DOUBLE
  -- Volatility, as a share of the value. [1/√t]
versions.exp_ou.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
versions.exp_ou.sigma_se
  DOUBLE
  -- Standard error of sigma. [1/√t]
versions.exp_ou.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
versions.exp_ou.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none, of the logarithm. [1]
versions.exp_ou.status
  VARCHAR
  -- what became of the fit, in a word
versions.exp_ou.theta
  DOUBLE
  -- Logarithm of the median in the long run. [1]
versions.exp_ou.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [1]
versions.exp_ou.theta_se
  DOUBLE
  -- Standard error of theta. [1]
versions.exp_ou.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [1]
versions.exp_ou.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.exp_ou.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.fit
  CREATE VIEW versions.fit AS SELECT x.series, x.lookback, x.window_start, x.window_end, x.model, x.n, x.k, x.loglik, x.aic, x.bic, CASE  WHEN ((x.status IN ('ok', 'no_reversion', 'at_bound'))) THEN ((1 / (SELECT sum(exp((-0.5 * (p.bic - x.bic))) ORDER BY p.model, p.run_from) FROM base.fit_rows AS p WHERE ((p.series = x.series) AND (p.lookback = x.lookback) AND (p.window_end = x.window_end) AND (p.run_from <= x.run_from) AND ((p.run_to IS NULL) OR (p.run_to > x.run_from) OR (p.run_from = x.run_from)) AND (p.status IN ('ok', 'no_reversion', 'at_bound')))))) ELSE NULL END AS model_weight, (SELECT count_star() FROM base.fit_rows AS p WHERE ((p.series = x.series) AND (p.lookback = x.lookback) AND (p.window_end = x.window_end) AND (p.run_from <= x.run_from) AND ((p.run_to IS NULL) OR (p.run_to > x.run_from) OR (p.run_from = x.run_from)) AND (p.status IN ('ok', 'no_reversion', 'at_bound')))) AS models_compared, x.status, x.run_from, x.run_to, f.moment AS in_force_from, t.moment AS in_force_to FROM base.fit_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- every version of fit
versions.fit.aic
  DOUBLE
  -- 2 k - 2 loglik [1]
versions.fit.bic
  DOUBLE
  -- k ln n - 2 loglik [1]
versions.fit.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.fit.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.fit.k
  INTEGER
  -- parameters of the model
versions.fit.loglik
  DOUBLE
  -- log-likelihood of the observations after the first, given the first [1]
versions.fit.lookback
  INTEGER
  -- steps in the window; 0: all
versions.fit.model
  VARCHAR
  -- name of the model
versions.fit.model_weight
  DOUBLE
  -- exp(-bic/2), normalised over the usable models of the window; describes fit, no probability [1]
versions.fit.models_compared
  BIGINT
  -- usable models of the window
versions.fit.n
  INTEGER
  -- steps used
versions.fit.run_from
  INTEGER
  -- run from which the row is in force
versions.fit.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.fit.series
  VARCHAR
  -- name of the series
versions.fit.status
  VARCHAR
  -- what became of the fit, in a word
versions.fit.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.fit.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.gbm
  CREATE VIEW versions.gbm AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.gbm_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = mu X dt + sigma X dW: every version of every estimate
versions.gbm.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.gbm.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.gbm.kurtosis
  DOUBLE
  -- Fourth moment of the standardised log-increments over the squared second: 3 for a Gaussian. [1]
versions.gbm.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.gbm.lookback
  INTEGER
  -- steps in the window; 0: all
versions.gbm.mu
  DOUBLE
  -- Drift: expected change per unit of time, as a share of the value. [1/t]
versions.gbm.mu_lower
  DOUBLE
  -- Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]
versions.gbm.mu_se
  DOUBLE
  -- Standard error of mu. [1/t]
versions.gbm.mu_upper
  DOUBLE
  -- Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]
versions.gbm.n
  INTEGER
  -- steps used
versions.gbm.revision
  INTEGER
  -- revision of the model that computed the row
versions.gbm.run_from
  INTEGER
  -- run from which the row is in force
versions.gbm.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.gbm.series
  VARCHAR
  -- name of the series
versions.gbm.sigma
  DOUBLE
  -- Volatility, as a share of the value. [1/√t]
versions.gbm.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
versions.gbm.sigma_se
  DOUBLE
  -- Standard error of sigma. [1/√t]
versions.gbm.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
versions.gbm.status
  VARCHAR
  -- what became of the fit, in a word
versions.gbm.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.gbm.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.inertial
  CREATE VIEW versions.inertial AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.inertial_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = V dt, dV = -damping V dt - omega^2 (X - theta) dt + eta dW: every version of every estimate
versions.inertial.damping
  DOUBLE
  -- Rate at which the velocity is lost. [1/t]
versions.inertial.damping_lower
  DOUBLE
  -- Lower end of the 95 % interval of damping; empty: no end on this side. [1/t]
versions.inertial.damping_ratio
  DOUBLE
  -- Damping over the least that keeps it from swinging, 2 omega: below 1 it swings. [1]
versions.inertial.damping_se
  DOUBLE
  -- Standard error of damping. [1/t]
versions.inertial.damping_upper
  DOUBLE
  -- Upper end of the 95 % interval of damping; empty: no end on this side. [1/t]
versions.inertial.eta
  DOUBLE
  -- Volatility of the noise that drives the velocity. [x/t√t]
versions.inertial.eta_lower
  DOUBLE
  -- Lower end of the 95 % interval of eta; empty: no end on this side. [x/t√t]
versions.inertial.eta_se
  DOUBLE
  -- Standard error of eta. [x/t√t]
versions.inertial.eta_upper
  DOUBLE
  -- Upper end of the 95 % interval of eta; empty: no end on this side. [x/t√t]
versions.inertial.fitted_on
  VARCHAR
  -- level or log: whether the fit is to the value, or to the logarithm of the value plus the series' shift, which is what x then means in units; log for series of prices. [1]
versions.inertial.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.inertial.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.inertial.kappa_s
  DOUBLE
  -- omega²/damping: speed of the pull, as of an Ornstein–Uhlenbeck process. [1/t]
versions.inertial.kappa_s_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]
versions.inertial.kappa_s_se
  DOUBLE
  -- Standard error of kappa_s. [1/t]
versions.inertial.kappa_s_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa_s; empty: no end on this side. [1/t]
versions.inertial.kurtosis
  DOUBLE
  -- Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]
versions.inertial.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.inertial.lookback
  INTEGER
  -- steps in the window; 0: all
versions.inertial.n
  INTEGER
  -- steps used
versions.inertial.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
versions.inertial.omega
  DOUBLE
  -- Frequency of the swing without damping, in radians; its square is the force's slope. [1/t]
versions.inertial.omega_lower
  DOUBLE
  -- Lower end of the 95 % interval of omega; empty: no end on this side. [1/t]
versions.inertial.omega_se
  DOUBLE
  -- Standard error of omega. [1/t]
versions.inertial.omega_upper
  DOUBLE
  -- Upper end of the 95 % interval of omega; empty: no end on this side. [1/t]
versions.inertial.period
  DOUBLE
  -- Length of a swing; empty where damping keeps it from swinging. [t]
versions.inertial.revision
  INTEGER
  -- revision of the model that computed the row
versions.inertial.run_from
  INTEGER
  -- run from which the row is in force
versions.inertial.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.inertial.series
  VARCHAR
  -- name of the series
versions.inertial.sigma_s
  DOUBLE
  -- eta/damping: volatility over times long against 1/damping. [x/√t]
versions.inertial.sigma_s_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]
versions.inertial.sigma_s_se
  DOUBLE
  -- Standard error of sigma_s. [x/√t]
versions.inertial.sigma_s_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma_s; empty: no end on this side. [x/√t]
versions.inertial.status
  VARCHAR
  -- what became of the fit, in a word
versions.inertial.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
versions.inertial.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
versions.inertial.theta_se
  DOUBLE
  -- Standard error of theta. [x]
versions.inertial.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
versions.inertial.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.inertial.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
versions.latest
  CREATE VIEW versions.latest AS SELECT s.series, t.unit, l.observed_at, l."value", ((epoch_us(f.moment) - epoch_us(l.observed_at)) > (t.stale_after_days * 86400000000)) AS stale, l.lookback, l.window_end, l.model, l.model_weight, l.volatility, l.volatility_lower, l.volatility_upper, l.volatility_unit, CAST(NULL AS DOUBLE) AS realised_volatility, l.drift, l.half_life_days, l.half_life_days_lower, l.half_life_days_upper, l.half_life_unbounded, l.can_reach_zero, CAST(NULL AS BIGINT) AS wells, CAST(NULL AS DOUBLE) AS mean_exit_time_days, CAST(NULL AS VARCHAR) AS backtest_zone, CAST(NULL AS BIGINT) AS alarms, l.note, l.run_from, l.run_to, f.moment AS in_force_from, u.moment AS in_force_to FROM base.latest AS l INNER JOIN base.series AS s ON ((s.series_id = l.series_id)) INNER JOIN base.setting AS t ON (((t.series_id = l.series_id) AND (t.run_from <= l.run_from) AND ((t.run_to IS NULL) OR (t.run_to > l.run_from)))) INNER JOIN base.run AS f ON ((f.run_id = l.run_from)) LEFT JOIN base.run AS u ON ((u.run_id = l.run_to));
  -- every version of latest; stale as it was when the version came
versions.latest.alarms
  BIGINT
  -- not raised yet
versions.latest.backtest_zone
  VARCHAR
  -- not estimated yet
versions.latest.can_reach_zero
  BOOLEAN
  -- whether the series can reach zero under the model in force; NULL: not told, or not a series of prices
versions.latest.drift
  DOUBLE
  -- expected change at the latest value: a fraction of it for positive series, else in units, per year or second
versions.latest.half_life_days
  DOUBLE
  -- time in which a distance to the mean halves, by the model in force or the heaviest with a pull [calendar days]
versions.latest.half_life_days_lower
  DOUBLE
  -- lower end of its 95 % interval; NULL: no end on this side [calendar days]
versions.latest.half_life_days_upper
  DOUBLE
  -- upper end of its 95 % interval; NULL: no end on this side [calendar days]
versions.latest.half_life_unbounded
  BOOLEAN
  -- whether the data leave the half-life without an upper end
versions.latest.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.latest.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.latest.lookback
  INTEGER
  -- steps in the window that is spoken of; 0: all
versions.latest.mean_exit_time_days
  DOUBLE
  -- not estimated yet
versions.latest.model
  VARCHAR
  -- model in force
versions.latest.model_weight
  DOUBLE
  -- its weight among the usable models of the window [1]
versions.latest.note
  VARCHAR
  -- what needs a look, in words; empty: nothing
versions.latest.observed_at
  TIMESTAMP
  -- time of the latest observation, UTC
versions.latest.realised_volatility
  DOUBLE
  -- not estimated yet
versions.latest.run_from
  INTEGER
  -- run from which the row is in force
versions.latest.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.latest.series
  VARCHAR
  -- name of the series
versions.latest.stale
  BOOLEAN
  -- whether it is older than stale_after_days, judged when read
versions.latest.unit
  VARCHAR
  -- unit of the values
versions.latest.value
  DOUBLE
  -- its value, in the unit of the series
versions.latest.volatility
  DOUBLE
  -- total volatility at the latest value, in volatility_unit
versions.latest.volatility_lower
  DOUBLE
  -- lower end of its 95 % interval; NULL: no end on this side
versions.latest.volatility_unit
  VARCHAR
  -- unit of volatility: 1/√year is a fraction of the value per square root of a year
versions.latest.volatility_upper
  DOUBLE
  -- upper end of its 95 % interval; NULL: no end on this side
versions.latest.wells
  BIGINT
  -- not estimated yet
versions.latest.window_end
  TIMESTAMP
  -- last observation of that window, UTC
versions.merton
  CREATE VIEW versions.merton AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.merton_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = (mu - jump_rate E[e^J - 1]) X dt + sigma X dW + (e^J - 1) X dN, J normal: every version of every estimate
versions.merton.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.merton.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.merton.jump_mean
  DOUBLE
  -- Mean of a jump of the logarithm. [1]
versions.merton.jump_mean_lower
  DOUBLE
  -- Lower end of the 95 % interval of jump_mean; empty: no end on this side. [1]
versions.merton.jump_mean_se
  DOUBLE
  -- Standard error of jump_mean. [1]
versions.merton.jump_mean_upper
  DOUBLE
  -- Upper end of the 95 % interval of jump_mean; empty: no end on this side. [1]
versions.merton.jump_probability
  DOUBLE
  -- Probability that the latest step held a jump, given the fit. [1]
versions.merton.jump_rate
  DOUBLE
  -- Expected number of jumps per unit of time. [1/t]
versions.merton.jump_rate_lower
  DOUBLE
  -- Lower end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]
versions.merton.jump_rate_se
  DOUBLE
  -- Standard error of jump_rate. [1/t]
versions.merton.jump_rate_upper
  DOUBLE
  -- Upper end of the 95 % interval of jump_rate; empty: no end on this side. [1/t]
versions.merton.jump_sd
  DOUBLE
  -- Standard deviation of a jump of the logarithm. [1]
versions.merton.jump_sd_lower
  DOUBLE
  -- Lower end of the 95 % interval of jump_sd; empty: no end on this side. [1]
versions.merton.jump_sd_se
  DOUBLE
  -- Standard error of jump_sd. [1]
versions.merton.jump_sd_upper
  DOUBLE
  -- Upper end of the 95 % interval of jump_sd; empty: no end on this side. [1]
versions.merton.kurtosis
  DOUBLE
  -- Fourth moment of the increments of the logarithm over the squared second: 3 for a Gaussian. [1]
versions.merton.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.merton.lookback
  INTEGER
  -- steps in the window; 0: all
versions.merton.mu
  DOUBLE
  -- Drift: expected relative change per unit of time, jumps included. [1/t]
versions.merton.mu_lower
  DOUBLE
  -- Lower end of the 95 % interval of mu; empty: no end on this side. [1/t]
versions.merton.mu_se
  DOUBLE
  -- Standard error of mu. [1/t]
versions.merton.mu_upper
  DOUBLE
  -- Upper end of the 95 % interval of mu; empty: no end on this side. [1/t]
versions.merton.n
  INTEGER
  -- steps used
versions.merton.revision
  INTEGER
  -- revision of the model that computed the row
versions.merton.run_from
  INTEGER
  -- run from which the row is in force
versions.merton.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.merton.series
  VARCHAR
  -- name of the series
versions.merton.sigma
  DOUBLE
  -- Volatility between jumps. [1/√t]
versions.merton.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
versions.merton.sigma_se
  DOUBLE
  -- Standard error of sigma. [1/√t]
versions.merton.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [1/√t]
versions.merton.status
  VARCHAR
  -- what became of the fit, in a word
versions.merton.total_volatility
  DOUBLE
  -- Volatility with jumps: √(sigma² + jump_rate (jump_mean² + jump_sd²)). [1/√t]
versions.merton.total_volatility_lower
  DOUBLE
  -- Lower end of the 95 % interval of total_volatility. [1/√t]
versions.merton.total_volatility_upper
  DOUBLE
  -- Upper end of the 95 % interval of total_volatility. [1/√t]
versions.merton.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.merton.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
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
versions.ou_noise
  CREATE VIEW versions.ou_noise AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.ou_noise_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- Y = X + noise * epsilon, dX = kappa (theta - X) dt + sigma dW: every version of every estimate
versions.ou_noise.fitted_on
  VARCHAR
  -- level or log: whether the fit is to the value, or to the logarithm of the value plus the series' shift, which is what x then means in units; log for series of prices. [1]
versions.ou_noise.half_life
  DOUBLE
  -- Time in which a distance to theta halves, by kappa_median_unbiased; empty without evidence of a pull. [t]
versions.ou_noise.half_life_lower
  DOUBLE
  -- Lower end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.ou_noise.half_life_mle
  DOUBLE
  -- Half-life by kappa itself: too short on average. [t]
versions.ou_noise.half_life_unbounded
  BOOLEAN
  -- Whether the data leave the half-life without an upper end. [1]
versions.ou_noise.half_life_upper
  DOUBLE
  -- Upper end of the 95 % interval of half_life; empty: no end on this side. [t]
versions.ou_noise.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.ou_noise.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.ou_noise.kappa
  DOUBLE
  -- Speed of the pull to theta; the likelihood's estimate, some 4/T too high on average. [1/t]
versions.ou_noise.kappa_lower
  DOUBLE
  -- Lower end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.ou_noise.kappa_median_unbiased
  DOUBLE
  -- Estimate of kappa that is too high as often as too low. [1/t]
versions.ou_noise.kappa_se
  DOUBLE
  -- Standard error of kappa. [1/t]
versions.ou_noise.kappa_upper
  DOUBLE
  -- Upper end of the 95 % interval of kappa; empty: no end on this side. [1/t]
versions.ou_noise.kurtosis
  DOUBLE
  -- Fourth moment of the standardised innovations over the squared second: 3 for a Gaussian. [1]
versions.ou_noise.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.ou_noise.lookback
  INTEGER
  -- steps in the window; 0: all
versions.ou_noise.n
  INTEGER
  -- steps used
versions.ou_noise.no_noise_p
  DOUBLE
  -- One-sided p-value of no noise, by half a χ² law, which in windows of 250 steps is 4 where it says 5 %. [1]
versions.ou_noise.no_reversion_p
  DOUBLE
  -- One-sided p-value of no pull; below 0.05 speaks for a pull. [1]
versions.ou_noise.noise
  DOUBLE
  -- Standard deviation of the noise in each observation; 0: none is seen. [x]
versions.ou_noise.noise_lower
  DOUBLE
  -- Lower end of the 95 % interval of noise; empty: no end on this side. [x]
versions.ou_noise.noise_se
  DOUBLE
  -- Standard error of noise. [x]
versions.ou_noise.noise_share
  DOUBLE
  -- Share of the noise in the variance of a mean step's increment, 2 noise² over 2 noise² plus that of X in the stationary law; above 0.1 no_reversion_p of ou is not to be trusted. [1]
versions.ou_noise.noise_upper
  DOUBLE
  -- Upper end of the 95 % interval of noise; empty: no end on this side. [x]
versions.ou_noise.revision
  INTEGER
  -- revision of the model that computed the row
versions.ou_noise.run_from
  INTEGER
  -- run from which the row is in force
versions.ou_noise.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.ou_noise.series
  VARCHAR
  -- name of the series
versions.ou_noise.sigma
  DOUBLE
  -- Volatility of the driving noise. [x/√t]
versions.ou_noise.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.ou_noise.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
versions.ou_noise.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.ou_noise.stationary_sd
  DOUBLE
  -- Standard deviation of the stationary law; empty where there is none. [x]
versions.ou_noise.status
  VARCHAR
  -- what became of the fit, in a word
versions.ou_noise.theta
  DOUBLE
  -- Level that the series is pulled to. [x]
versions.ou_noise.theta_lower
  DOUBLE
  -- Lower end of the 95 % interval of theta; empty: no end on this side. [x]
versions.ou_noise.theta_se
  DOUBLE
  -- Standard error of theta. [x]
versions.ou_noise.theta_upper
  DOUBLE
  -- Upper end of the 95 % interval of theta; empty: no end on this side. [x]
versions.ou_noise.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.ou_noise.window_start
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
versions.quartic
  CREATE VIEW versions.quartic AS SELECT x.*, f.moment AS in_force_from, t.moment AS in_force_to FROM base.quartic_rows AS x INNER JOIN base.run AS f ON ((f.run_id = x.run_from)) LEFT JOIN base.run AS t ON ((t.run_id = x.run_to));
  -- dX = (a0 + a1 z + a2 z² + a3 z³) dt + sigma dW, z = (X - centre)/scale: every version of every estimate
versions.quartic.a0
  DOUBLE
  -- Drift at the centre. [x/t]
versions.quartic.a0_lower
  DOUBLE
  -- Lower end of the 95 % interval of a0; empty: no end on this side. [x/t]
versions.quartic.a0_se
  DOUBLE
  -- Standard error of a0. [x/t]
versions.quartic.a0_upper
  DOUBLE
  -- Upper end of the 95 % interval of a0; empty: no end on this side. [x/t]
versions.quartic.a1
  DOUBLE
  -- Coefficient of z in the drift, z = (x - centre)/scale. [x/t]
versions.quartic.a1_lower
  DOUBLE
  -- Lower end of the 95 % interval of a1; empty: no end on this side. [x/t]
versions.quartic.a1_se
  DOUBLE
  -- Standard error of a1. [x/t]
versions.quartic.a1_upper
  DOUBLE
  -- Upper end of the 95 % interval of a1; empty: no end on this side. [x/t]
versions.quartic.a2
  DOUBLE
  -- Coefficient of z² in the drift. [x/t]
versions.quartic.a2_lower
  DOUBLE
  -- Lower end of the 95 % interval of a2; empty: no end on this side. [x/t]
versions.quartic.a2_se
  DOUBLE
  -- Standard error of a2. [x/t]
versions.quartic.a2_upper
  DOUBLE
  -- Upper end of the 95 % interval of a2; empty: no end on this side. [x/t]
versions.quartic.a3
  DOUBLE
  -- Coefficient of z³ in the drift: not negative, the drift does not confine. [x/t]
versions.quartic.a3_lower
  DOUBLE
  -- Lower end of the 95 % interval of a3; empty: no end on this side. [x/t]
versions.quartic.a3_se
  DOUBLE
  -- Standard error of a3. [x/t]
versions.quartic.a3_upper
  DOUBLE
  -- Upper end of the 95 % interval of a3; empty: no end on this side. [x/t]
versions.quartic.barrier
  DOUBLE
  -- Top of the barrier between two wells; empty where there are no two. [x]
versions.quartic.barrier_lower
  DOUBLE
  -- Lower end of the 95 % interval of barrier; empty: no end on this side. [x]
versions.quartic.barrier_se
  DOUBLE
  -- Standard error of barrier. [x]
versions.quartic.barrier_upper
  DOUBLE
  -- Upper end of the 95 % interval of barrier; empty: no end on this side. [x]
versions.quartic.bottom_lower
  DOUBLE
  -- Lower resting point: the bottom of the lower of two wells; empty where there are no two. [x]
versions.quartic.bottom_lower_lower
  DOUBLE
  -- Lower end of the 95 % interval of bottom_lower; empty: no end on this side. [x]
versions.quartic.bottom_lower_se
  DOUBLE
  -- Standard error of bottom_lower. [x]
versions.quartic.bottom_lower_upper
  DOUBLE
  -- Upper end of the 95 % interval of bottom_lower; empty: no end on this side. [x]
versions.quartic.bottom_upper
  DOUBLE
  -- Upper resting point: the bottom of the upper of two wells; empty where there are no two. [x]
versions.quartic.bottom_upper_lower
  DOUBLE
  -- Lower end of the 95 % interval of bottom_upper; empty: no end on this side. [x]
versions.quartic.bottom_upper_se
  DOUBLE
  -- Standard error of bottom_upper. [x]
versions.quartic.bottom_upper_upper
  DOUBLE
  -- Upper end of the 95 % interval of bottom_upper; empty: no end on this side. [x]
versions.quartic.centre
  DOUBLE
  -- Where z = 0; a setting of the series and lookback. [x]
versions.quartic.in_force_from
  TIMESTAMP WITH TIME ZONE
  -- moment of run_from
versions.quartic.in_force_to
  TIMESTAMP WITH TIME ZONE
  -- moment of run_to
versions.quartic.kurtosis
  DOUBLE
  -- Fourth moment of movements over their squared second: 3 for a Gaussian. [1]
versions.quartic.loglik
  DOUBLE
  -- Log-likelihood of the observations after the first, given the first. [1]
versions.quartic.lookback
  INTEGER
  -- steps in the window; 0: all
versions.quartic.n
  INTEGER
  -- steps used
versions.quartic.revision
  INTEGER
  -- revision of the model that computed the row
versions.quartic.run_from
  INTEGER
  -- run from which the row is in force
versions.quartic.run_to
  INTEGER
  -- run from which it is no longer in force; NULL: still in force
versions.quartic.scale
  DOUBLE
  -- Length of z = 1; a setting of the series and lookback. [x]
versions.quartic.series
  VARCHAR
  -- name of the series
versions.quartic.sigma
  DOUBLE
  -- Volatility. [x/√t]
versions.quartic.sigma_lower
  DOUBLE
  -- Lower end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.quartic.sigma_se
  DOUBLE
  -- Standard error of sigma. [x/√t]
versions.quartic.sigma_upper
  DOUBLE
  -- Upper end of the 95 % interval of sigma; empty: no end on this side. [x/√t]
versions.quartic.status
  VARCHAR
  -- what became of the fit, in a word
versions.quartic.steepest
  DOUBLE
  -- Largest |slope of the drift| times the longest step, over the window's range. [1]
versions.quartic.window_end
  TIMESTAMP
  -- time of the window's last observation, UTC
versions.quartic.window_start
  TIMESTAMP
  -- time of the window's first observation, UTC
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
  -- how time between observations is counted: trading, act365 or seconds
versions.series.in_force
  VARCHAR
  -- best, or the model that is always in force
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
versions.series.shift
  DOUBLE
  -- what models for X > 0 add to the values, in the unit of the series
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
