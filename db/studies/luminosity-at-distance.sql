-- Title: Luminosity limits at one distance
-- Question: How luminous may each target be in each band, if it lies at the distance given? Absorption is that of the look.
-- Parameter: distance_kpc = 5.0 | distance in kpc
-- Column: target_name |  | Name of the target.
-- Column: catalog_id |  | Id of the catalog.
-- Column: band_name |  | Name of the band.
-- Column: waveband |  | Part of the spectrum.
-- Column: corrected_flux_erg_s_cm2 | erg s-1 cm-2 | Flux limit without absorption.
-- Column: luminosity_erg_s | erg s-1 | Isotropic luminosity at that distance.
-- Column: flag |  | What a reader must be told beside it.

SELECT
    target_name,
    catalog_id,
    band_name,
    waveband,
    corrected_flux_erg_s_cm2,
    luminosity_erg_s(corrected_flux_erg_s_cm2, 1000.0 * :distance_kpc) AS luminosity_erg_s,
    flag
FROM current_limit
WHERE corrected_flux_erg_s_cm2 IS NOT NULL
ORDER BY target_name, nu_hz, catalog_id, band_name;
