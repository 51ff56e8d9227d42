-- Title: Radio luminosity limits against period
-- Question: How radio-luminous may each target with a known period be between pulses, at the middle of its distance range? One point for each limit.
-- Column: target_name |  | Name of the target.
-- Column: period_s | s | Period of the pulses.
-- Column: dm_pc_cm3 | pc cm-3 | Dispersion measure.
-- Column: catalog_id |  | Id of the catalog.
-- Column: band_name |  | Name of the band.
-- Column: flux_density_jy | Jy | Limit on the flux density.
-- Column: distance_pc | pc | Middle distance.
-- Column: luminosity_erg_s | erg s-1 | Limit on nu L_nu, or on the band luminosity.
-- Column: pseudo_luminosity_mjy_kpc2 | mJy kpc2 | Flux density limit times the square of the distance.

SELECT
    current_run.target_name,
    target.period_s,
    target.dm_pc_cm3,
    current_limit.catalog_id,
    current_limit.band_name,
    current_limit.flux_density_jy,
    luminosity_limit.distance_pc,
    luminosity_limit.luminosity_erg_s,
    current_limit.flux_density_jy * 1000.0 * luminosity_limit.distance_pc * luminosity_limit.distance_pc / 1.0e6
        AS pseudo_luminosity_mjy_kpc2
FROM current_limit
JOIN current_run ON current_run.target_name = current_limit.target_name
JOIN target ON target.target_id = current_run.target_id
JOIN luminosity_limit ON luminosity_limit.limit_id = current_limit.limit_id AND luminosity_limit.place = 'median'
WHERE current_limit.waveband = 'radio' AND target.period_s IS NOT NULL
ORDER BY target.period_s, current_run.target_name, current_limit.nu_hz, current_limit.catalog_id;
