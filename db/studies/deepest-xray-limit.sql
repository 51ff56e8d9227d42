-- Title: The deepest X-ray limit of each target
-- Question: Which X-ray limit is the faintest for each target, as observed and corrected for absorption?
-- Column: target_name |  | Name of the target.
-- Column: catalog_id |  | Id of the catalog.
-- Column: band_name |  | Name of the band.
-- Column: flux_erg_s_cm2 | erg s-1 cm-2 | Limit on the flux of the band, as observed.
-- Column: corrected_flux_erg_s_cm2 | erg s-1 cm-2 | The same without absorption; NULL: blind.
-- Column: confidence | probability | Confidence of the limit.
-- Column: outcome |  | What the catalog says at the position.
-- Column: flag |  | What a reader must be told beside it.

SELECT target_name, catalog_id, band_name, flux_erg_s_cm2, corrected_flux_erg_s_cm2, confidence, outcome, flag
FROM (
    SELECT
        current_limit.*,
        row_number() OVER (PARTITION BY target_name ORDER BY flux_erg_s_cm2, limit_id) AS place
    FROM current_limit
    WHERE waveband LIKE '%X-ray%'
) AS ranked
WHERE place = 1
ORDER BY target_name;
