-- Title: Sources of one catalog near any target
-- Question: Which stored sources of a catalog lie within a radius of any target? Only what was asked for is in the store.
-- Parameter: catalog = ? | id of the catalog, such as 2mass-psc
-- Parameter: radius_arcmin = 1.0 | radius in arcmin
-- Column: target_name |  | Name of the target.
-- Column: separation_arcsec | arcsec | Separation from the target.
-- Column: source_key |  | The catalog's own identifier.
-- Column: ra_deg | deg | ICRS right ascension.
-- Column: dec_deg | deg | ICRS declination.
-- Column: search_id |  | The latest search that found it.

SELECT
    target_name,
    separation_arcsec,
    source_key,
    ra_deg,
    dec_deg,
    search_id
FROM (
    SELECT
        target.name AS target_name,
        separation_arcsec(target.ra_deg, target.dec_deg, row.ra_deg, row.dec_deg) AS separation_arcsec,
        row.source_key,
        row.ra_deg,
        row.dec_deg,
        row.search_id,
        row_number() OVER (
            PARTITION BY target.name, search.table_name, row.source_key ORDER BY row.search_id DESC, row.ordinal
        ) AS place
    FROM catalog
    JOIN search ON search.catalog_key = catalog.catalog_key
    JOIN row ON row.search_id = search.search_id
    -- the difference in declination sorts most out before the exact separation is worked out
    JOIN target ON abs(row.dec_deg - target.dec_deg) <= :radius_arcmin / 60.0
    WHERE catalog.catalog_id = :catalog
        AND target.version = (SELECT max(latest.version) FROM target AS latest WHERE latest.name = target.name)
        AND in_cone(row.ra_deg, row.dec_deg, target.ra_deg, target.dec_deg, 60.0 * :radius_arcmin) = 1
) AS found
WHERE place = 1
ORDER BY target_name, separation_arcsec, source_key;
