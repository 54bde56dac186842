-- fit and estimate: views over all models. Printed by `python -m driftbook.store.fit_schema`.
create or replace view base.fit_rows as
select m.series, m.lookback, m.window_start, m.window_end, 'abm' as model, m.n, 2 as k,
  m.loglik, 2 * 2 - 2 * m.loglik as aic, 2 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.abm_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'gbm' as model, m.n, 2 as k,
  m.loglik, 2 * 2 - 2 * m.loglik as aic, 2 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.gbm_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'ou' as model, m.n, 3 as k,
  m.loglik, 2 * 3 - 2 * m.loglik as aic, 3 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.ou_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'exp_ou' as model, m.n, 3 as k,
  m.loglik, 2 * 3 - 2 * m.loglik as aic, 3 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.exp_ou_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'cir' as model, m.n, 3 as k,
  m.loglik, 2 * 3 - 2 * m.loglik as aic, 3 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.cir_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'ckls' as model, m.n, 4 as k,
  m.loglik, 2 * 4 - 2 * m.loglik as aic, 4 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.ckls_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'quartic' as model, m.n, 5 as k,
  m.loglik, 2 * 5 - 2 * m.loglik as aic, 5 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.quartic_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'merton' as model, m.n, 5 as k,
  m.loglik, 2 * 5 - 2 * m.loglik as aic, 5 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.merton_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'inertial' as model, m.n, 4 as k,
  m.loglik, 2 * 4 - 2 * m.loglik as aic, 4 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.inertial_rows m
union all
select m.series, m.lookback, m.window_start, m.window_end, 'ou_noise' as model, m.n, 4 as k,
  m.loglik, 2 * 4 - 2 * m.loglik as aic, 4 * ln(m.n) - 2 * m.loglik as bic, m.status, m.run_from, m.run_to from base.ou_noise_rows m;

create or replace view base.estimate_rows as
select m.series, m.lookback, m.window_end, 'abm' as model, 'mu' as parameter,
  m.mu as value, m.mu_se as se, m.mu_lower as lower, m.mu_upper as upper,
  m.status, m.run_from, m.run_to from base.abm_rows m
union all
select m.series, m.lookback, m.window_end, 'abm' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.abm_rows m
union all
select m.series, m.lookback, m.window_end, 'gbm' as model, 'mu' as parameter,
  m.mu as value, m.mu_se as se, m.mu_lower as lower, m.mu_upper as upper,
  m.status, m.run_from, m.run_to from base.gbm_rows m
union all
select m.series, m.lookback, m.window_end, 'gbm' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.gbm_rows m
union all
select m.series, m.lookback, m.window_end, 'ou' as model, 'kappa' as parameter,
  m.kappa as value, m.kappa_se as se, m.kappa_lower as lower, m.kappa_upper as upper,
  m.status, m.run_from, m.run_to from base.ou_rows m
union all
select m.series, m.lookback, m.window_end, 'ou' as model, 'theta' as parameter,
  m.theta as value, m.theta_se as se, m.theta_lower as lower, m.theta_upper as upper,
  m.status, m.run_from, m.run_to from base.ou_rows m
union all
select m.series, m.lookback, m.window_end, 'ou' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.ou_rows m
union all
select m.series, m.lookback, m.window_end, 'exp_ou' as model, 'kappa' as parameter,
  m.kappa as value, m.kappa_se as se, m.kappa_lower as lower, m.kappa_upper as upper,
  m.status, m.run_from, m.run_to from base.exp_ou_rows m
union all
select m.series, m.lookback, m.window_end, 'exp_ou' as model, 'theta' as parameter,
  m.theta as value, m.theta_se as se, m.theta_lower as lower, m.theta_upper as upper,
  m.status, m.run_from, m.run_to from base.exp_ou_rows m
union all
select m.series, m.lookback, m.window_end, 'exp_ou' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.exp_ou_rows m
union all
select m.series, m.lookback, m.window_end, 'cir' as model, 'kappa' as parameter,
  m.kappa as value, m.kappa_se as se, m.kappa_lower as lower, m.kappa_upper as upper,
  m.status, m.run_from, m.run_to from base.cir_rows m
union all
select m.series, m.lookback, m.window_end, 'cir' as model, 'theta' as parameter,
  m.theta as value, m.theta_se as se, m.theta_lower as lower, m.theta_upper as upper,
  m.status, m.run_from, m.run_to from base.cir_rows m
union all
select m.series, m.lookback, m.window_end, 'cir' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.cir_rows m
union all
select m.series, m.lookback, m.window_end, 'ckls' as model, 'kappa' as parameter,
  m.kappa as value, m.kappa_se as se, m.kappa_lower as lower, m.kappa_upper as upper,
  m.status, m.run_from, m.run_to from base.ckls_rows m
union all
select m.series, m.lookback, m.window_end, 'ckls' as model, 'theta' as parameter,
  m.theta as value, m.theta_se as se, m.theta_lower as lower, m.theta_upper as upper,
  m.status, m.run_from, m.run_to from base.ckls_rows m
union all
select m.series, m.lookback, m.window_end, 'ckls' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.ckls_rows m
union all
select m.series, m.lookback, m.window_end, 'ckls' as model, 'gamma' as parameter,
  m.gamma as value, m.gamma_se as se, m.gamma_lower as lower, m.gamma_upper as upper,
  m.status, m.run_from, m.run_to from base.ckls_rows m
union all
select m.series, m.lookback, m.window_end, 'quartic' as model, 'a0' as parameter,
  m.a0 as value, m.a0_se as se, m.a0_lower as lower, m.a0_upper as upper,
  m.status, m.run_from, m.run_to from base.quartic_rows m
union all
select m.series, m.lookback, m.window_end, 'quartic' as model, 'a1' as parameter,
  m.a1 as value, m.a1_se as se, m.a1_lower as lower, m.a1_upper as upper,
  m.status, m.run_from, m.run_to from base.quartic_rows m
union all
select m.series, m.lookback, m.window_end, 'quartic' as model, 'a2' as parameter,
  m.a2 as value, m.a2_se as se, m.a2_lower as lower, m.a2_upper as upper,
  m.status, m.run_from, m.run_to from base.quartic_rows m
union all
select m.series, m.lookback, m.window_end, 'quartic' as model, 'a3' as parameter,
  m.a3 as value, m.a3_se as se, m.a3_lower as lower, m.a3_upper as upper,
  m.status, m.run_from, m.run_to from base.quartic_rows m
union all
select m.series, m.lookback, m.window_end, 'quartic' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.quartic_rows m
union all
select m.series, m.lookback, m.window_end, 'merton' as model, 'mu' as parameter,
  m.mu as value, m.mu_se as se, m.mu_lower as lower, m.mu_upper as upper,
  m.status, m.run_from, m.run_to from base.merton_rows m
union all
select m.series, m.lookback, m.window_end, 'merton' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.merton_rows m
union all
select m.series, m.lookback, m.window_end, 'merton' as model, 'jump_rate' as parameter,
  m.jump_rate as value, m.jump_rate_se as se, m.jump_rate_lower as lower, m.jump_rate_upper as upper,
  m.status, m.run_from, m.run_to from base.merton_rows m
union all
select m.series, m.lookback, m.window_end, 'merton' as model, 'jump_mean' as parameter,
  m.jump_mean as value, m.jump_mean_se as se, m.jump_mean_lower as lower, m.jump_mean_upper as upper,
  m.status, m.run_from, m.run_to from base.merton_rows m
union all
select m.series, m.lookback, m.window_end, 'merton' as model, 'jump_sd' as parameter,
  m.jump_sd as value, m.jump_sd_se as se, m.jump_sd_lower as lower, m.jump_sd_upper as upper,
  m.status, m.run_from, m.run_to from base.merton_rows m
union all
select m.series, m.lookback, m.window_end, 'inertial' as model, 'damping' as parameter,
  m.damping as value, m.damping_se as se, m.damping_lower as lower, m.damping_upper as upper,
  m.status, m.run_from, m.run_to from base.inertial_rows m
union all
select m.series, m.lookback, m.window_end, 'inertial' as model, 'omega' as parameter,
  m.omega as value, m.omega_se as se, m.omega_lower as lower, m.omega_upper as upper,
  m.status, m.run_from, m.run_to from base.inertial_rows m
union all
select m.series, m.lookback, m.window_end, 'inertial' as model, 'theta' as parameter,
  m.theta as value, m.theta_se as se, m.theta_lower as lower, m.theta_upper as upper,
  m.status, m.run_from, m.run_to from base.inertial_rows m
union all
select m.series, m.lookback, m.window_end, 'inertial' as model, 'eta' as parameter,
  m.eta as value, m.eta_se as se, m.eta_lower as lower, m.eta_upper as upper,
  m.status, m.run_from, m.run_to from base.inertial_rows m
union all
select m.series, m.lookback, m.window_end, 'ou_noise' as model, 'kappa' as parameter,
  m.kappa as value, m.kappa_se as se, m.kappa_lower as lower, m.kappa_upper as upper,
  m.status, m.run_from, m.run_to from base.ou_noise_rows m
union all
select m.series, m.lookback, m.window_end, 'ou_noise' as model, 'theta' as parameter,
  m.theta as value, m.theta_se as se, m.theta_lower as lower, m.theta_upper as upper,
  m.status, m.run_from, m.run_to from base.ou_noise_rows m
union all
select m.series, m.lookback, m.window_end, 'ou_noise' as model, 'sigma' as parameter,
  m.sigma as value, m.sigma_se as se, m.sigma_lower as lower, m.sigma_upper as upper,
  m.status, m.run_from, m.run_to from base.ou_noise_rows m
union all
select m.series, m.lookback, m.window_end, 'ou_noise' as model, 'noise' as parameter,
  m.noise as value, m.noise_se as se, m.noise_lower as lower, m.noise_upper as upper,
  m.status, m.run_from, m.run_to from base.ou_noise_rows m;

create or replace view main.fit as
select y.series, y.lookback, y.window_start, y.window_end, y.model, y.n, y.k, y.loglik, y.aic, y.bic,
  y.ratio / sum(y.ratio) over (partition by y.series, y.lookback, y.window_end order by y.model
    rows between unbounded preceding and unbounded following) as model_weight,
  y.models_compared, y.status, y.run_id
from (
  select x.* exclude (run_from, run_to), x.run_from as run_id,
    case when x.status in ('ok', 'no_reversion', 'at_bound') then exp(-0.5 * (x.bic - min(case when x.status in ('ok', 'no_reversion', 'at_bound') then x.bic end) over (partition by x.series, x.lookback, x.window_end)))
      end as ratio,
    count(case when x.status in ('ok', 'no_reversion', 'at_bound') then 1 end) over (partition by x.series, x.lookback, x.window_end) as models_compared
  from base.fit_rows x
  where x.run_to is null
) y;

create or replace macro main.fit_at_run(run) as table
select y.series, y.lookback, y.window_start, y.window_end, y.model, y.n, y.k, y.loglik, y.aic, y.bic,
  y.ratio / sum(y.ratio) over (partition by y.series, y.lookback, y.window_end order by y.model
    rows between unbounded preceding and unbounded following) as model_weight,
  y.models_compared, y.status, y.run_id
from (
  select x.* exclude (run_from, run_to), x.run_from as run_id,
    case when x.status in ('ok', 'no_reversion', 'at_bound') then exp(-0.5 * (x.bic - min(case when x.status in ('ok', 'no_reversion', 'at_bound') then x.bic end) over (partition by x.series, x.lookback, x.window_end)))
      end as ratio,
    count(case when x.status in ('ok', 'no_reversion', 'at_bound') then 1 end) over (partition by x.series, x.lookback, x.window_end) as models_compared
  from base.fit_rows x
  where x.run_from <= run and (x.run_to is null or x.run_to > run)
) y;

create or replace macro main.fit_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select y.series, y.lookback, y.window_start, y.window_end, y.model, y.n, y.k, y.loglik, y.aic, y.bic,
  y.ratio / sum(y.ratio) over (partition by y.series, y.lookback, y.window_end order by y.model
    rows between unbounded preceding and unbounded following) as model_weight,
  y.models_compared, y.status, y.run_id
from (
  select x.* exclude (run_from, run_to), x.run_from as run_id,
    case when x.status in ('ok', 'no_reversion', 'at_bound') then exp(-0.5 * (x.bic - min(case when x.status in ('ok', 'no_reversion', 'at_bound') then x.bic end) over (partition by x.series, x.lookback, x.window_end)))
      end as ratio,
    count(case when x.status in ('ok', 'no_reversion', 'at_bound') then 1 end) over (partition by x.series, x.lookback, x.window_end) as models_compared
  from base.fit_rows x
  where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k))
) y;

create or replace view versions.fit as
select x.series, x.lookback, x.window_start, x.window_end, x.model, x.n, x.k, x.loglik, x.aic, x.bic,
  case when x.status in ('ok', 'no_reversion', 'at_bound') then 1 / (
    select sum(exp(-0.5 * (p.bic - x.bic)) order by p.model, p.run_from)
    from base.fit_rows p where p.series = x.series and p.lookback = x.lookback and p.window_end = x.window_end
    and p.run_from <= x.run_from and (p.run_to is null or p.run_to > x.run_from or p.run_from = x.run_from)
    and p.status in ('ok', 'no_reversion', 'at_bound')) end as model_weight,
  (select count(*) from base.fit_rows p where p.series = x.series and p.lookback = x.lookback and p.window_end = x.window_end
    and p.run_from <= x.run_from and (p.run_to is null or p.run_to > x.run_from or p.run_from = x.run_from)
    and p.status in ('ok', 'no_reversion', 'at_bound')) as models_compared,
  x.status, x.run_from, x.run_to, f.moment as in_force_from, t.moment as in_force_to
from base.fit_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

create or replace view main.estimate as
select x.* exclude (run_from, run_to), x.run_from as run_id from base.estimate_rows x where x.run_to is null;

create or replace macro main.estimate_at_run(run) as table
select x.* exclude (run_from, run_to), x.run_from as run_id from base.estimate_rows x where x.run_from <= run and (x.run_to is null or x.run_to > run);

create or replace macro main.estimate_as_of(moment) as table
with k as (select base.run_at(base.moment_us(moment)) as run_id)
select x.* exclude (run_from, run_to), x.run_from as run_id from base.estimate_rows x where x.run_from <= (select k.run_id from k) and (x.run_to is null or x.run_to > (select k.run_id from k));

create or replace view versions.estimate as
select x.*, f.moment as in_force_from, t.moment as in_force_to
from base.estimate_rows x
join base.run f on f.run_id = x.run_from
left join base.run t on t.run_id = x.run_to;

create or replace macro main.versions_of(name, model, lookback, window_end) as table
select v.* from versions.estimate v
where v.series = name and v.model = model and v.lookback = lookback
  and v.window_end <= make_timestamp(base.moment_us(window_end))
  and v.window_end >= make_timestamp(base.moment_us(window_end) -
    case when regexp_full_match(trim(window_end::varchar), '\d{4}-\d{2}-\d{2}') then 86399999999 else 0 end)
order by v.window_end, v.parameter, v.run_from;

comment on macro table main.versions_of is 'every version of one window''s estimates: versions_of(''pellets_fob'', ''ou'', 250, ''2026-06-29'')';
comment on view main.fit is 'all models: one row per fit, with what compares models';
comment on column main.fit.series is 'name of the series';
comment on column main.fit.lookback is 'steps in the window; 0: all';
comment on column main.fit.window_start is 'time of the window''s first observation, UTC';
comment on column main.fit.window_end is 'time of the window''s last observation, UTC';
comment on column main.fit.model is 'name of the model';
comment on column main.fit.n is 'steps used';
comment on column main.fit.k is 'parameters of the model';
comment on column main.fit.loglik is 'log-likelihood of the observations after the first, given the first [1]';
comment on column main.fit.aic is '2 k - 2 loglik [1]';
comment on column main.fit.bic is 'k ln n - 2 loglik [1]';
comment on column main.fit.model_weight is 'exp(-bic/2), normalised over the usable models of the window; describes fit, no probability [1]';
comment on column main.fit.models_compared is 'usable models of the window';
comment on column main.fit.status is 'what became of the fit, in a word';
comment on column main.fit.run_id is 'run that wrote the row';
comment on view versions.fit is 'every version of fit';
comment on column versions.fit.series is 'name of the series';
comment on column versions.fit.lookback is 'steps in the window; 0: all';
comment on column versions.fit.window_start is 'time of the window''s first observation, UTC';
comment on column versions.fit.window_end is 'time of the window''s last observation, UTC';
comment on column versions.fit.model is 'name of the model';
comment on column versions.fit.n is 'steps used';
comment on column versions.fit.k is 'parameters of the model';
comment on column versions.fit.loglik is 'log-likelihood of the observations after the first, given the first [1]';
comment on column versions.fit.aic is '2 k - 2 loglik [1]';
comment on column versions.fit.bic is 'k ln n - 2 loglik [1]';
comment on column versions.fit.model_weight is 'exp(-bic/2), normalised over the usable models of the window; describes fit, no probability [1]';
comment on column versions.fit.models_compared is 'usable models of the window';
comment on column versions.fit.status is 'what became of the fit, in a word';
comment on column versions.fit.run_from is 'run from which the row is in force';
comment on column versions.fit.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.fit.in_force_from is 'moment of run_from';
comment on column versions.fit.in_force_to is 'moment of run_to';
comment on macro table main.fit_at_run is 'the view fit as it was after a run: fit_at_run(41)';
comment on macro table main.fit_as_of is 'the view fit as it was known at a moment: fit_as_of(''2026-01-31'')';
comment on view main.estimate is 'all models: one row per parameter of a fit';
comment on column main.estimate.series is 'name of the series';
comment on column main.estimate.lookback is 'steps in the window; 0: all';
comment on column main.estimate.window_end is 'time of the window''s last observation, UTC';
comment on column main.estimate.model is 'name of the model';
comment on column main.estimate.parameter is 'name of the parameter';
comment on column main.estimate.value is 'estimate, in the parameter''s unit';
comment on column main.estimate.se is 'standard error';
comment on column main.estimate.lower is 'lower end of the 95 % interval; NULL with status ok or no_reversion: no end on this side';
comment on column main.estimate.upper is 'upper end of the 95 % interval; NULL with status ok or no_reversion: no end on this side';
comment on column main.estimate.status is 'what became of the fit, in a word';
comment on column main.estimate.run_id is 'run that wrote the row';
comment on view versions.estimate is 'every version of estimate';
comment on column versions.estimate.series is 'name of the series';
comment on column versions.estimate.lookback is 'steps in the window; 0: all';
comment on column versions.estimate.window_end is 'time of the window''s last observation, UTC';
comment on column versions.estimate.model is 'name of the model';
comment on column versions.estimate.parameter is 'name of the parameter';
comment on column versions.estimate.value is 'estimate, in the parameter''s unit';
comment on column versions.estimate.se is 'standard error';
comment on column versions.estimate.lower is 'lower end of the 95 % interval; NULL with status ok or no_reversion: no end on this side';
comment on column versions.estimate.upper is 'upper end of the 95 % interval; NULL with status ok or no_reversion: no end on this side';
comment on column versions.estimate.status is 'what became of the fit, in a word';
comment on column versions.estimate.run_from is 'run from which the row is in force';
comment on column versions.estimate.run_to is 'run from which it is no longer in force; NULL: still in force';
comment on column versions.estimate.in_force_from is 'moment of run_from';
comment on column versions.estimate.in_force_to is 'moment of run_to';
comment on macro table main.estimate_at_run is 'the view estimate as it was after a run: estimate_at_run(41)';
comment on macro table main.estimate_as_of is 'the view estimate as it was known at a moment: estimate_as_of(''2026-01-31'')';
