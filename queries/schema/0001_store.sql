-- The first store: names, loads, measurements, what was set aside, registry versions, judgements and their evidence.
-- No keys on measurements: identity is kept by the intake (hash of the item, join over the batch's time window).
-- All times are UTC without a zone.
create table characteristics (characteristic_id integer primary key, name varchar not null unique);
create table labels (label_id integer primary key, label varchar not null unique);

create table loads (
    load_id integer primary key, source varchar not null, item varchar not null, size bigint, sha256 varchar,
    modified timestamp, started_at timestamp not null, finished_at timestamp,
    rows_read bigint not null, rows_new bigint not null, rows_known bigint not null, rows_corrected bigint not null,
    rows_rejected bigint not null, rows_empty bigint not null, first_taken timestamp, last_taken timestamp,
    status varchar not null,          -- done | refused | withdrawn
    reason varchar, program varchar not null
);
create table measurements (
    characteristic_id integer not null, taken_at timestamp not null, unit_no ubigint not null, value double not null,
    subgroup_no integer, stream_no integer, lot_no integer, unit_label integer,   -- label_id
    disposition utinyint,                                                          -- 1 accepted, 2 rejected downstream
    load_id integer not null
);
create table corrections (
    load_id integer not null, characteristic_id integer not null, taken_at timestamp not null, unit_no ubigint not null,
    old_value double not null, new_value double not null, old_load_id integer not null, corrected_at timestamp not null
);
create table rejected (
    load_id integer not null, source varchar not null, item varchar not null, record_no bigint, column_name varchar,
    reason varchar not null, raw varchar
);
create table pulls (                  -- one row a source and pull: what the first screen needs to say
    pull_id integer not null, source varchar not null, pulled_at timestamp not null, status varchar not null, -- done | failed | nothing new
    items bigint, rows_read bigint, rows_new bigint, rows_known bigint, rows_corrected bigint, rows_rejected bigint,
    message varchar
);

create table registry_versions (version integer primary key, sha256 varchar not null unique, recorded_at timestamp not null, rows_json varchar not null);
create table changes (
    change_id integer primary key, characteristic varchar not null, changed_at timestamp not null, kind varchar not null,
    note varchar, logged_at timestamp not null, logged_by varchar
);

create table runs (
    run_id integer primary key, slot varchar, as_of timestamp not null, window_from timestamp not null, judged_at timestamp not null,
    max_load_id integer, registry_version integer, plan_sha256 varchar, program varchar not null, seconds double,
    folder varchar, published_at timestamp
);

create table results (                -- one row a run and characteristic, always; the registry's fields are repeated so that a row explains itself
    run_id integer not null, characteristic varchar not null, site varchar, part varchar, operation varchar, machine varchar, feature varchar,
    family varchar, owner varchar, class varchar, unit varchar, lsl double, usl double, target_cpk double,
    measurements bigint, subgroups bigint, first timestamp, last timestamp,
    window_measurements bigint, subgroup_size double,        -- values in the whole window; mean subgroup size of the stretch
    mean double, sigma_within double, sigma_total double, sigma_between double, sigma_stream double, sigma_overall double,
    n_effective double, df_effective double, shape varchar,
    cp double, cpk double, cp_within double, cpk_within double, pp double, ppk double,
    stability varchar not null, stability_p double, stability_q double, signals bigint, expected_signals double,
    instability varchar, since timestamp, stability_note varchar, -- note: code, e.g. layers, negligible, autocorrelated, short
    change_size double, change_sigma double, period_hours double, spread_ratio double, serial double, settled_since timestamp,
    p_step double, p_serial double, p_cycle double, p_spread double, p_isolated double, between_p double, stream_p double, movement_share double,
    capability varchar not null, close_call boolean, index_name varchar, index double, index_low double, index_high double, chance_now double,
    capability_note varchar,                                  -- code: why capability was not judged, or a caution
    outside_observed bigint, outside_high double,             -- values outside the limits; upper 95 % bound of that share (Clopper & Pearson)
    cell varchar not null,
    centering varchar not null, centering_reason varchar, aim double, move double, move_least double, aim_low double, aim_high double,
    cpk_centered double, cpk_centered_low double, chance_centered double, ppm_now double, ppm_centered double,
    parts_per_year double, saving_per_year double, saving_low double, saving_high double, currency varchar, score double, rank integer,
    needed_sigma double,                                      -- total sigma that would reach the target if centred
    adjustable varchar, why_not_adjustable varchar, move_effort varchar, streams integer, streams_means_differ boolean, distinct_values bigint, recording_step double,
    route varchar not null, reason_codes varchar[] not null
);
create table evidence (               -- what the pages draw; one row a run and characteristic with at least one value
    run_id integer not null, characteristic varchar not null,
    chart varchar not null,                                   -- individuals | mean and range | mean and s | three-way
    taken timestamp[], location double[], spread double[], size integer[],
    location_centre double, location_lower double[], location_upper double[],   -- one entry when constant, else one a subgroup
    spread_centre double[], spread_lower double[], spread_upper double[],
    between_centre double, between_upper double,               -- three-way: moving range of the means
    signal_index integer[], signal_rule varchar[],             -- index into the lists above; rule: 1..4 or spread
    bin_start double, bin_width double, bin_count integer[], thinned boolean not null
);
create table ranking (                -- the centering list of a run, and why an item of the run before has left it
    run_id integer not null, rank integer, characteristic varchar not null, status varchar not null, -- new | stays | left
    reason varchar
);
