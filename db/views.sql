-- The views: what is current, in plain names. Made with the schema; told column by column in README.md.
-- History stays in the tables. "Current" is always worked out here, never written down.

-- The latest look at each name that came to conclusions.
CREATE VIEW current_run AS
SELECT
    target.name AS target_name,
    run.run_id,
    run.target_id,
    run.answered_at,
    run.version,
    run.assumptions_digest,
    run.offline,
    run.expected_chance
FROM run
JOIN target ON target.target_id = run.target_id
WHERE run.run_id IN (
    SELECT max(answered.run_id)
    FROM run AS answered
    JOIN target AS named ON named.target_id = answered.target_id
    WHERE answered.answered_at IS NOT NULL
    GROUP BY named.name
);

-- The latest whole reply of each table of each catalog about each name, failed attempts left out.
CREATE VIEW current_search AS
SELECT
    target_name,
    catalog_id,
    release,
    table_name,
    search_id,
    target_id,
    asked_at,
    ra_deg,
    dec_deg,
    radius_arcsec,
    n_rows,
    request,
    sha256,
    client
FROM (
    SELECT
        target.name AS target_name,
        catalog.catalog_id,
        catalog.release,
        search.*,
        row_number() OVER (
            PARTITION BY target.name, catalog.catalog_id, catalog.release, search.table_name
            ORDER BY search.search_id DESC
        ) AS place
    FROM search
    JOIN target ON target.target_id = search.target_id
    JOIN catalog ON catalog.catalog_key = search.catalog_key
    WHERE search.status = 'whole'
) AS ranked
WHERE place = 1;

CREATE VIEW current_finding AS
SELECT
    current_run.target_name,
    finding.catalog_id,
    finding.release,
    finding.title,
    finding.waveband,
    finding.outcome,
    finding.why,
    finding.coverage_fraction,
    finding.n_rows,
    finding.n_compatible,
    finding.density_per_deg2,
    finding.expected_chance,
    finding.age_s,
    finding.finding_id,
    finding.run_id
FROM finding
JOIN current_run ON current_run.run_id = finding.run_id;

CREATE VIEW current_candidate AS
SELECT
    current_finding.target_name,
    current_finding.catalog_id,
    current_finding.outcome,
    match.source_key,
    match.ra_deg,
    match.dec_deg,
    match.separation_arcsec,
    match.normalised_separation,
    match.tail,
    match.chance,
    match.odds,
    match.search_id,
    match.ordinal,
    match.finding_id
FROM match
JOIN current_finding ON current_finding.finding_id = match.finding_id;

CREATE VIEW current_limit AS
SELECT
    current_finding.target_name,
    current_finding.catalog_id,
    band.name AS band_name,
    band.waveband,
    current_finding.outcome,
    flux_limit.value,
    band.unit,
    band.system,
    flux_limit.kind,
    flux_limit.confidence,
    flux_limit.n_sigma,
    flux_limit.method,
    flux_limit.flag,
    flux_limit.verified_depth,
    band.nu_hz,
    flux_limit.flux_density_jy,
    flux_limit.flux_erg_s_cm2,
    flux_limit.transmitted,
    flux_limit.corrected_flux_erg_s_cm2,
    flux_limit.note,
    flux_limit.physical_note,
    current_run.assumptions_digest,
    flux_limit.limit_id,
    flux_limit.finding_id
FROM flux_limit
JOIN current_finding ON current_finding.finding_id = flux_limit.finding_id
JOIN current_run ON current_run.run_id = current_finding.run_id
JOIN band ON band.band_id = flux_limit.band_id;

CREATE VIEW current_luminosity_limit AS
SELECT
    current_limit.target_name,
    current_limit.catalog_id,
    current_limit.band_name,
    current_limit.waveband,
    luminosity_limit.place,
    luminosity_limit.distance_pc,
    luminosity_limit.luminosity_erg_s,
    current_limit.confidence,
    current_limit.flag,
    current_limit.assumptions_digest,
    luminosity_limit.limit_id
FROM luminosity_limit
JOIN current_limit ON current_limit.limit_id = luminosity_limit.limit_id;

CREATE VIEW current_standing AS
SELECT
    current_run.target_name,
    standing.class_id,
    standing.title,
    standing.word,
    standing.reason,
    standing.survival,
    standing.survival_low,
    standing.survival_high,
    standing.would_overturn,
    current_run.assumptions_digest,
    standing.standing_id,
    standing.run_id
FROM standing
JOIN current_run ON current_run.run_id = standing.run_id;

-- The rows of current searches: what the latest whole reply about each name holds, one line per source.
CREATE VIEW current_row AS
SELECT
    current_search.target_name,
    current_search.catalog_id,
    current_search.release,
    current_search.table_name,
    current_search.asked_at,
    row.source_key,
    row.ra_deg,
    row.dec_deg,
    row.sigma_major_arcsec,
    row.sigma_minor_arcsec,
    row.angle_deg,
    row.epoch_yr,
    row.hpx29,
    row.search_id,
    row.ordinal
FROM current_search
JOIN row ON row.search_id = current_search.search_id;

-- Every answer ever given about each name, the latest first: place 1 is current, place 2 the one before.
CREATE VIEW standing_history AS
SELECT
    ranked.target_name,
    ranked.place,
    ranked.answered_at,
    standing.class_id,
    standing.title,
    standing.word,
    standing.survival,
    standing.reason,
    standing.would_overturn,
    standing.standing_id,
    standing.run_id
FROM (
    SELECT
        target.name AS target_name,
        run.run_id,
        run.answered_at,
        row_number() OVER (PARTITION BY target.name ORDER BY run.run_id DESC) AS place
    FROM run
    JOIN target ON target.target_id = run.target_id
    WHERE run.answered_at IS NOT NULL
) AS ranked
JOIN standing ON standing.run_id = ranked.run_id;
